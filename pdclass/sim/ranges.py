"""What a scenario file says: the world it draws from, or the circuits that it names."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from pdclass.settings import read_settings
from pdclass.sim.disturbers import Family
from pdclass.sim.disturbers import Path as CouplingPath
from pdclass.sim.draw import Pair, Ranges, Share, Weights, Whole, known_names, within
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
_WAYS: Mapping[Label, tuple[Way, ...]] = MappingProxyType(
    {"cable": ("cable", "neighbour"), "local": ("stress-cone", "box"), "switchgear": ("bus", "equipment")}
)
#: The way of each class that has a distance.
_PLACES: Mapping[Label, Way] = MappingProxyType({"cable": "cable", "local": "stress-cone"})
#: Peak over noise [dB]; lower ones would leave nothing to annotate.
Heights = Annotated[Pair, within(0.5, 150.0, "dB")]


class CaptureRanges(Ranges):
    """What one capture is like.

    Attributes
    ----------
    duration_ms : length of the record [ms].
    pulses : planted pulses in a record of a drawn circuit.
    noise_v : MAD/0.6745 of the background at the digitiser, carriers included [V].
    full_scale_db : of the digitiser over that noise [dB].
    clipped_db : pulses are at most so much higher than the full scale [dB]: whoever records chooses a range in which
        few of them clip.
    offset_counts : offset of the digitiser [counts], either sign.
    segments, gap_ms : stretches of the record, and what is lost between them [ms].
    """

    duration_ms: float = Field(default=3.0, gt=0.2, le=2000)
    pulses: Annotated[Whole, within(0, 100_000)] = (25, 30)
    noise_v: Annotated[Pair, within(1e-9, 10.0, "V")] = (20e-6, 500e-6)
    full_scale_db: Annotated[Pair, within(6.0, 150.0, "dB")] = (38.0, 70.0)
    clipped_db: float = Field(default=3.0, ge=0, le=60)
    offset_counts: float = Field(default=4.0, ge=0, le=100)
    segments: int = Field(default=1, ge=1, le=64)
    gap_ms: float = Field(default=5.0, gt=0, le=1e6)


class Mix(Ranges):
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

    cable: float = Field(default=0.25, ge=0, le=1e6)
    local: float = Field(default=0.25, ge=0, le=1e6)
    switchgear: float = Field(default=0.25, ge=0, le=1e6)
    interference: float = Field(default=0.25, ge=0, le=1e6)
    sources: Annotated[Whole, within(0, 50)] = (1, 3)
    cable_ways: Annotated[Weights, known_names(*_WAYS["cable"])] = Field(default={"cable": 0.9, "neighbour": 0.1})
    far_end_share: Share = 0.2
    near_share: Share = 0.2
    local_ways: Annotated[Weights, known_names(*_WAYS["local"])] = Field(default={"stress-cone": 0.75, "box": 0.25})
    local_at_termination: Share = 0.5
    switchgear_ways: Annotated[Weights, known_names(*_WAYS["switchgear"])] = Field(
        default={"bus": 0.5, "equipment": 0.5}
    )
    own_panel: Share = 0.4

    @model_validator(mode="after")
    def _something_is_planted(self) -> Self:
        if self.cable + self.local + self.switchgear + self.interference <= 0:
            raise ValueError("at least one share is above zero")
        return self


class SourceEntry(Ranges):
    """One source of an explicit circuit; what it does not say is drawn as in the mix.

    Attributes
    ----------
    label : its class.
    distance_m : along the cable: 10 m to its length for `cable`, 0 to 10 m for `local` [m].
    pulses_per_cycle : of the mains, on average; what switches or commutates has no more than its edges.
    snr_db : peak over noise, drawn evenly, whatever the digitiser's full scale [dB].
    pattern, kind : of a discharge: when in the cycle it comes, and what discharges.
    way : by which it reaches the strap where the label leaves several.
    family, path : of interference: what sends, and by which path it comes.
    """

    label: Label
    distance_m: float | None = Field(default=None, ge=0)
    pulses_per_cycle: float = Field(gt=0, le=1000)
    snr_db: Heights
    pattern: Pattern | None = None
    kind: Kind | None = None
    way: Way | None = None
    family: Family | None = None
    path: CouplingPath | None = None

    @model_validator(mode="after")
    def _belongs_to_its_label(self) -> Self:
        ways = _WAYS.get(self.label, ())
        if self.way is not None and self.way not in ways:
            raise ValueError(f"way: that of {self.label} is {' or '.join(ways) or 'given by path'}, not {self.way}")
        if self.distance_m is not None and (self.label not in _PLACES or self.way not in {None, _PLACES[self.label]}):
            raise ValueError(f"distance_m: says nothing of {self.way or self.label}; leave it out")
        of_others = ("pattern", "kind") if self.label == "interference" else ("family", "path")
        odd = [name for name in of_others if getattr(self, name) is not None]
        if odd:
            raise ValueError(f"{odd[0]}: says nothing of {self.label}; leave it out")
        return self


class CircuitEntry(Ranges):
    """One circuit that a scenario names; what it does not say is drawn.

    Attributes
    ----------
    name, site, sensor : as they stand in the captures; circuits of one site are one group.
    conductor : the core that the sensor belongs to.
    length_m : of its cable [m].
    far_end : what stands at its other end.
    sources : what sends pulses; none for a circuit with background alone.
    """

    name: str = Field(min_length=1)
    site: str | None = None
    sensor: str = Field(min_length=1)
    conductor: Literal["L1", "L2", "L3", "three-core"] | None = None
    length_m: float = Field(gt=20, le=12e3)
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


class Scenario(Ranges):
    """A synthetic world: either `circuits` drawn ones, or the ones that it names.

    Attributes
    ----------
    name : begins the names of captures and circuits.
    circuits : number of drawn circuits; without effect where circuits are named.
    captures_per_circuit : visits of one sensor to one circuit, each a capture and a session.
    snr_db : peak over noise, drawn evenly from here for every pulse of every class [dB].
    capture, chain, mix, source, activity, cable, near_end, background, interference : what the parts are drawn from.
    circuit : named circuits; empty: drawn ones.
    """

    name: str = Field(pattern=r"^[a-z0-9][a-z0-9-]*$")
    circuits: int = Field(default=24, ge=1, le=1_000_000)
    captures_per_circuit: int = Field(default=1, ge=1, le=1_000_000)
    snr_db: Heights = (8.0, 58.0)
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
