"""What a scenario file says: the world it draws from, or the circuits that it names."""

from __future__ import annotations

from pathlib import Path
from typing import Literal, Self, get_args

from pydantic import Field, model_validator

from pdclass.settings import Settings, read_settings
from pdclass.sim.disturbers import Family
from pdclass.sim.disturbers import Path as CouplingPath
from pdclass.sim.draw import Count, Positive, Range, Weights
from pdclass.sim.drawn_background import BackgroundRanges
from pdclass.sim.drawn_cable import CableRanges, FarEndKind
from pdclass.sim.drawn_chain import ChainRanges
from pdclass.sim.drawn_disturbance import DisturberRanges
from pdclass.sim.drawn_near_end import NearEndRanges
from pdclass.sim.drawn_source import Kind, SourceRanges
from pdclass.sim.phase import ActivityRanges, Pattern

Label = Literal["cable", "local", "switchgear", "interference"]
#: Ways of a discharge to the strap that its label leaves open.
Way = Literal["cable", "neighbour", "stress-cone", "box", "bus", "equipment"]


class CaptureRanges(Settings):
    """What one capture is like.

    Attributes
    ----------
    duration_ms : length of the record [ms].
    pulses : planted pulses in a record of a drawn circuit.
    noise_v : MAD/0.6745 of the background at the digitiser, carriers included [V].
    full_scale_db : of the digitiser over that noise [dB].
    offset_counts : offset of the digitiser [counts], either sign.
    segments, gap_ms : stretches of the record, and what is lost between them [ms].
    """

    duration_ms: float = Field(default=3.0, gt=0.2, le=2000)
    pulses: Count = (25, 30)
    noise_v: Positive = (20e-6, 500e-6)
    full_scale_db: Range = (38.0, 70.0)
    offset_counts: float = Field(default=4.0, ge=0)
    segments: int = Field(default=1, ge=1, le=64)
    gap_ms: float = Field(default=5.0, gt=0)


class Mix(Settings):
    """Which sources a drawn circuit has, and how its planted pulses are shared among the classes.

    Attributes
    ----------
    cable, local, switchgear, interference : share of the planted pulses; their sum counts as one.
    sources : of each class on one circuit.
    cable_ways : a place on this cable, or on a neighbour's cable whose pulses arrive over the busbar.
    far_end_share : of the places on a cable that are its far end, 0 to 1.
    near_share : of the places drawn evenly in the logarithm of the distance rather than evenly, 0 to 1.
    local_ways : from core to screen through the stress cone or within 10 m of cable, or from core to cable box.
    local_at_termination : share of the former at the termination itself, 0 to 1.
    switchgear_ways : from a busbar, or from equipment on its dropper, to earth.
    own_panel : share of switchgear sources in the panel of this cable, 0 to 1; the rest evenly in the others.
    """

    cable: float = Field(default=0.25, ge=0)
    local: float = Field(default=0.25, ge=0)
    switchgear: float = Field(default=0.25, ge=0)
    interference: float = Field(default=0.25, ge=0)
    sources: Count = (1, 3)
    cable_ways: Weights = Field(default={"cable": 0.9, "neighbour": 0.1})
    far_end_share: float = Field(default=0.2, ge=0, le=1)
    near_share: float = Field(default=0.2, ge=0, le=1)
    local_ways: Weights = Field(default={"stress-cone": 0.75, "box": 0.25})
    local_at_termination: float = Field(default=0.5, ge=0, le=1)
    switchgear_ways: Weights = Field(default={"bus": 0.5, "equipment": 0.5})
    own_panel: float = Field(default=0.4, ge=0, le=1)

    @model_validator(mode="after")
    def _something_is_planted(self) -> Self:
        if self.cable + self.local + self.switchgear + self.interference <= 0:
            raise ValueError("at least one share is above zero")
        for field in ("cable_ways", "local_ways", "switchgear_ways"):
            odd = sorted(set(getattr(self, field)) - set(get_args(Way)))
            if odd:
                raise ValueError(f"{field} knows {', '.join(get_args(Way))}, not {odd[0]}")
        return self


class SourceEntry(Settings):
    """One source of an explicit circuit; what it does not say is drawn."""

    label: Label
    distance_m: float | None = Field(default=None, ge=0)
    pulses_per_cycle: float = Field(gt=0, le=1000)
    snr_db: Range
    pattern: Pattern | None = None
    kind: Kind | None = None
    way: Way | None = None
    family: Family | None = None
    path: CouplingPath | None = None


class CircuitEntry(Settings):
    """One circuit that a scenario names; what it does not say is drawn."""

    name: str
    site: str | None = None
    sensor: str
    conductor: Literal["L1", "L2", "L3", "three-core"] | None = None
    length_m: float = Field(gt=20)
    far_end: FarEndKind | None = None
    sources: tuple[SourceEntry, ...] = ()

    @model_validator(mode="after")
    def _sources_lie_on_the_cable(self) -> Self:
        for source in self.sources:
            reach = {"cable": (10.0, self.length_m), "local": (0.0, 10.0)}.get(source.label)
            place = source.distance_m
            if reach is not None and place is not None and not reach[0] <= place <= reach[1]:
                raise ValueError(f"{source.label}: distance_m lies between {reach[0]:g} and {reach[1]:g} m")
        return self


class Scenario(Settings):
    """A synthetic world: either `circuits` drawn ones, or the ones that it names.

    Attributes
    ----------
    name : begins the names of captures and circuits.
    circuits : number of drawn circuits; without effect where circuits are named.
    captures_per_circuit : visits of one sensor to one circuit, each a capture and a session.
    snr_db : peak over noise, drawn evenly from here for every pulse of every class [dB].
    """

    name: str = Field(pattern=r"^[a-z0-9][a-z0-9-]*$")
    circuits: int = Field(default=24, ge=1)
    captures_per_circuit: int = Field(default=1, ge=1)
    snr_db: Range = (8.0, 58.0)
    capture: CaptureRanges = CaptureRanges()
    chain: ChainRanges = ChainRanges()
    mix: Mix = Mix()
    source: SourceRanges = SourceRanges()
    activity: ActivityRanges = ActivityRanges()
    cable: CableRanges = CableRanges()
    near_end: NearEndRanges = NearEndRanges()
    background: BackgroundRanges = BackgroundRanges()
    interference: DisturberRanges = DisturberRanges()
    circuit: tuple[CircuitEntry, ...] = ()


def read_scenario(path: Path) -> Scenario:
    """The scenario of a TOML file; a measured curve is looked for beside it.

    Raises
    ------
    InputError
        If the file cannot be read, or holds an unknown key or a value out of bounds.
    """
    scenario = read_settings(path, Scenario)
    if scenario.cable.curve is None:
        return scenario
    cable = scenario.cable.model_copy(update={"curve": str(path.parent / scenario.cable.curve)})
    return scenario.model_copy(update={"cable": cable})
