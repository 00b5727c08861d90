"""What a scenario file says: every range from which the synthetic world is drawn."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal, Self

from pydantic import AfterValidator, Field, model_validator

from pdclass.settings import Settings, read_settings
from pdclass.sim.phase import Pattern

Label = Literal["cable", "local", "switchgear", "interference"]
Insulation = Literal["XLPE", "EPR"]
FarEndKind = Literal["open", "transformer", "cable"]
CouplingPath = Literal["radiated", "screen", "feeder", "far-end", "box"]
_RATES_HZ = (40e6, 62.5e6, 100e6, 125e6, 200e6, 250e6)


def _rising(pair: tuple[float, float]) -> tuple[float, float]:
    if pair[0] > pair[1]:
        raise ValueError("the lower bound stands first")
    return pair


def _known_rates(rates: tuple[float, ...]) -> tuple[float, ...]:
    if not set(rates) <= set(_RATES_HZ):
        raise ValueError(f"a rate is one of {', '.join(f'{rate:g}' for rate in _RATES_HZ)}")
    return rates


Range = Annotated[tuple[float, float], AfterValidator(_rising)]
Positive = Annotated[tuple[Annotated[float, Field(gt=0)], float], AfterValidator(_rising)]
Count = Annotated[tuple[Annotated[int, Field(ge=0)], int], AfterValidator(_rising)]


class CaptureRanges(Settings):
    """What one capture is like: length [ms], pulses in it, rates [Hz], bits, corners of the sensor [Hz]."""

    duration_ms: float = Field(default=3.0, gt=0.2, le=2000)
    pulses: Count = (25, 30)
    rates_hz: Annotated[tuple[float, ...], AfterValidator(_known_rates)] = (62.5e6, 100e6, 125e6, 200e6, 250e6)
    bits: tuple[Annotated[int, Field(ge=8, le=16)], ...] = (8, 10, 12, 14, 16)
    mains_hz: tuple[Annotated[float, Field(gt=10, lt=100)], ...] = (50.0, 60.0)
    low_corner_hz: Positive = (30e3, 300e3)
    high_corner_hz: Positive = (8e6, 80e6)
    transfer_ohm: Positive = (1.0, 15.0)
    noise_v: Positive = (20e-6, 500e-6)
    full_scale_db: Range = (38.0, 70.0)
    segments: int = Field(default=1, ge=1, le=64)
    gap_ms: float = Field(default=5.0, gt=0)


class Mix(Settings):
    """Share of the planted pulses of each class; any positive numbers, their sum counts as one."""

    cable: float = Field(default=0.25, ge=0)
    local: float = Field(default=0.25, ge=0)
    switchgear: float = Field(default=0.25, ge=0)
    interference: float = Field(default=0.25, ge=0)
    sources: Annotated[tuple[Annotated[int, Field(ge=1)], int], AfterValidator(_rising)] = (1, 3)

    @model_validator(mode="after")
    def _something_is_planted(self) -> Self:
        if self.cable + self.local + self.switchgear + self.interference <= 0:
            raise ValueError("at least one share is above zero")
        return self


class CableRanges(Settings):
    """Dimensions and materials of the cables."""

    length_m: Positive = (80.0, 4000.0)
    insulations: tuple[Insulation, ...] = ("XLPE", "XLPE", "EPR")
    areas_mm2: tuple[Literal[50, 70, 95, 120, 150, 185, 240, 300, 400, 500, 630], ...] = (
        50,
        70,
        95,
        120,
        150,
        185,
        240,
        300,
        400,
        500,
        630,
    )
    insulation_mm: tuple[float, ...] = (3.4, 4.5, 5.5, 8.0)
    semicon_mm: Positive = (0.3, 1.0)
    semicon_s_per_m: Positive = (3e-3, 10.0)
    semicon_permittivity: Positive = (10.0, 300.0)
    cole_cole_share: float = Field(default=0.5, ge=0, le=1)
    excess: Range = (0.0, 2.0)
    far_ends: tuple[FarEndKind, ...] = ("open", "transformer", "transformer", "cable")


class NearEndRanges(Settings):
    """Elements of terminations, straps and switchgear, drawn evenly in their logarithm."""

    panels: Annotated[tuple[Annotated[int, Field(ge=2)], int], AfterValidator(_rising)] = (2, 3)
    feeders: Count = (0, 4)
    tail_h: Positive = (0.3e-6, 3e-6)
    section_h: Positive = (0.3e-6, 1.5e-6)
    dropper_h: Positive = (0.2e-6, 2e-6)
    busbar_f: Positive = (20e-12, 120e-12)
    equipment_f: Positive = (30e-12, 500e-12)
    termination_f: Positive = (20e-12, 150e-12)
    box_f: Positive = (5e-12, 30e-12)
    screen_f: Positive = (10e-12, 100e-12)
    strap_h: Positive = (0.2e-6, 2e-6)
    soil_ohm: Positive = (20.0, 80.0)
    feeder_ohm: Positive = (12.0, 45.0)
    feeder_h: Positive = (0.5e-6, 4e-6)
    loss_ohm: Positive = (0.3, 40.0)


class InterferenceRanges(Settings):
    """Carriers, coloured noise and converters; amplitudes in units of the white noise's deviation."""

    carriers: Count = (0, 6)
    carrier_amplitude: Positive = (0.1, 3.0)
    carriers_hz: tuple[float, ...] = ()
    low_noise: Range = (0.0, 1.5)
    low_noise_hz: Positive = (0.3e6, 5e6)
    switching_hz: Positive = (2e3, 20e3)
    ring_hz: Positive = (0.3e6, 15e6)
    ring_q: Positive = (1.5, 20.0)


class SourceEntry(Settings):
    """One source of an explicit circuit."""

    label: Label
    distance_m: float | None = Field(default=None, ge=0)
    pulses_per_cycle: float = Field(gt=0, le=1000)
    snr_db: Range
    pattern: Pattern = "uniform"
    path: CouplingPath = "radiated"


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
    snr_db: Range = (8.0, 46.0)
    capture: CaptureRanges = CaptureRanges()
    mix: Mix = Mix()
    cable: CableRanges = CableRanges()
    near_end: NearEndRanges = NearEndRanges()
    interference: InterferenceRanges = InterferenceRanges()
    circuit: tuple[CircuitEntry, ...] = ()


def read_scenario(path: Path) -> Scenario:
    """The scenario of a TOML file.

    Raises
    ------
    InputError
        If the file cannot be read, or holds an unknown key or a value out of bounds.
    """
    return read_settings(path, Scenario)
