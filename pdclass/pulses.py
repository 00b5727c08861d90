"""The in-memory types of the pipeline: Chain, Capture, PulseSet; real and simulated pulses share them."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
WaveArray = NDArray[np.float32]
IntArray = NDArray[np.int64]

LABELS = ("cable", "local", "switchgear", "interference")
UNDECIDED = "undecided"
BASES = ("dissected", "isolated", "located", "cross-checked", "expert", "simulated")

#: Words that tables of counts use beside the labels.
_TAKEN = frozenset(
    {UNDECIDED, "pulses", "echo", "echoes", "none", "nothing planted", "unlabelled", "unfamiliar", "outside"}
)
#: A class of the user's own: letters, digits, spaces, `_` and `-`, so that it can name a column and stand in a list.
_OWN_CLASS = re.compile(r"[^\W_][\w -]{0,38}[^\W_]")

WINDOW_S = 20e-6
ONSET_SHARE = 0.25
PHASE_HOLD_S = 1.0

#: Columns of the pulse table (without the wave) and their pandas types, in the order on disk.
TABLE_COLUMNS: Mapping[str, str] = {
    "capture": "str",
    "capture_digest": "str",
    "circuit": "str",
    "site": "str",
    "sensor": "str",
    "conductor": "str",
    "session": "str",
    "chain": "int16",
    "onset_sample": "int64",
    "onset_s": "float64",
    "onset_std_ns": "float32",
    "time_utc": "datetime64[ns, UTC]",
    "phase_deg": "float32",
    "noise_v": "float32",
    "peak_v": "float32",
    "snr_db": "float32",
    "duration_us": "float32",
    "clipped": "bool",
    "window_mates": "int16",
    "echo_of": "str",
    "maybe_echo_of": "str",
    "label": "str",
    "basis": "str",
    "labelled_by": "str",
}
#: Further columns of simulated pulses.
SIMULATED_COLUMNS: Mapping[str, str] = {"family": "str", "distance_m": "float64", "charge_pc": "float64"}


@dataclass(frozen=True)
class Chain:
    """Everything between cable and numbers; None means unknown, and what is then lost is said.

    Attributes
    ----------
    rate_hz : samples a second [Hz], > 0.
    volts_per_count : size of one count [V].
    adc_bits : resolution of the digitiser [bit].
    transfer_ohm : mid-band transfer impedance of the sensor [V/A].
    band_hz : lower and upper -3 dB corner [Hz].
    response : rows of (frequency [Hz], ohm, phase [deg]), sensor to counts.
    mains_hz : mains frequency [Hz].
    """

    rate_hz: float
    volts_per_count: float | None = None
    adc_bits: int | None = None
    transfer_ohm: float | None = None
    band_hz: tuple[float, float] | None = None
    response: tuple[tuple[float, float, float], ...] | None = None
    mains_hz: float | None = None


@dataclass(frozen=True)
class Annotation:
    """What somebody, or the simulator, says about one place of a capture."""

    onset_sample: int
    sample_count: int
    label: str | None = None
    basis: str | None = None
    labelled_by: str | None = None
    comment: str | None = None
    family: str | None = None
    distance_m: float | None = None
    charge_pc: float | None = None


@dataclass(frozen=True)
class Capture:
    """A stretch of recorded signal from one sensor.

    Attributes
    ----------
    chain : how the signal became numbers.
    counts : (samples,) int8, int16 or float32, read-only, memory-mapped where the file allows.
    segments : (segments, 2) int64; the first sample of each segment in `counts` and its global index.
        No pulse, filter or window crosses from one segment into the next.
    phase_marks : (marks, 2) float64; sample and unwrapped phase [deg] of the reference voltage, or None.
    digest : sha256 of the sample file's bytes, 64 hex digits.
    """

    chain: Chain
    counts: NDArray[Any]
    circuit: str
    sensor: str
    session: str
    digest: str
    name: str
    site: str | None = None
    conductor: str | None = None
    start_utc: pd.Timestamp | None = None
    segments: IntArray = field(default_factory=lambda: np.zeros((1, 2), np.int64))
    phase_marks: FloatArray | None = None
    phase_reference: str | None = None
    annotations: tuple[Annotation, ...] = ()

    def segment_bounds(self) -> list[tuple[int, int]]:
        """First sample and one past the last sample of every segment, in order."""
        starts = [int(start) for start in self.segments[:, 0]]
        return list(zip(starts, [*starts[1:], int(self.counts.size)], strict=True))

    @property
    def duration_s(self) -> float:
        """Recorded time [s], gaps not counted."""
        return float(self.counts.size) / self.chain.rate_hz


@dataclass(frozen=True)
class PulseSet:
    """Pulses of one rate and one window length.

    Attributes
    ----------
    waves : (pulses, samples) float32 [V]; samples outside the record are NaN; the onset is a quarter in.
    chains : the chains that the `chain` column counts into.
    table : one row a pulse, indexed by `pulse_id`, with the columns of `TABLE_COLUMNS`.
    own_classes : labels beside `LABELS` that the table may hold, each with the one of `LABELS` that it is a kind of,
        or "" for none.
    """

    waves: WaveArray
    chains: tuple[Chain, ...]
    table: pd.DataFrame
    own_classes: Mapping[str, str] = field(default_factory=dict)

    @property
    def rate_hz(self) -> float:
        """Samples a second, the same for every pulse of the set [Hz]."""
        return self.chains[0].rate_hz

    def take(self, places: NDArray[Any]) -> PulseSet:
        """The pulses at the given places (integer positions or a boolean mask)."""
        return PulseSet(self.waves[places], self.chains, self.table.iloc[places], self.own_classes)


def is_own_class(name: str) -> bool:
    """Whether a text can name a class of the user's own: 2 to 40 letters, digits, spaces, `_`, `-`, no word of ours."""
    return _OWN_CLASS.fullmatch(name) is not None and name not in {*LABELS, *_TAKEN}


def window_samples(rate_hz: float) -> int:
    """Samples in one window of 20 us at the given rate."""
    return round(WINDOW_S * rate_hz)


def onset_in_window(samples: int) -> int:
    """Place of the onset in a window of so many samples."""
    return round(ONSET_SHARE * samples)


def global_index(capture: Capture, sample: IntArray) -> IntArray:
    """Index on the digitiser's clock (gaps counted) of samples of the file."""
    place = np.searchsorted(capture.segments[:, 0], sample, side="right") - 1
    return np.asarray(sample - capture.segments[place, 0] + capture.segments[place, 1], np.int64)


def phase_deg(capture: Capture, sample: IntArray) -> WaveArray:
    """Phase of the reference voltage at samples of the file [deg, 0 to 360].

    Between marks the phase is interpolated, outside them the mains frequency extrapolates. More than a second from
    the nearest mark, and without marks or mains frequency, it is NaN: turns could have been lost.
    """
    marks = capture.phase_marks
    if marks is None or len(marks) == 0:
        return np.full(len(sample), np.nan, np.float32)
    where = global_index(capture, sample).astype(np.float64)
    known = global_index(capture, marks[:, 0].astype(np.int64)).astype(np.float64)
    beyond = np.where(where < known[0], where - known[0], np.maximum(where - known[-1], 0.0))
    turns_per_sample = np.nan if capture.chain.mains_hz is None else capture.chain.mains_hz / capture.chain.rate_hz
    phase = np.interp(where, known, marks[:, 1])
    phase = np.where(beyond != 0, phase + 360.0 * beyond * turns_per_sample, phase)
    place = np.clip(np.searchsorted(known, where), 1, max(len(known) - 1, 1))
    nearest = np.minimum(np.abs(where - known[place - 1]), np.abs(where - known[min(1, len(known) - 1) * place]))
    phase = np.where(nearest > PHASE_HOLD_S * capture.chain.rate_hz, np.nan, phase)
    wrapped = np.mod(phase, 360.0).astype(np.float32)
    return np.where(wrapped >= np.float32(360.0), np.float32(0.0), wrapped)


def typed_table(rows: Mapping[str, Any] | pd.DataFrame, pulse_ids: Any, *, simulated: bool = False) -> pd.DataFrame:
    """A table with every column of the contract in order and type; absent columns are null (clipped: False)."""
    index = pd.Index(pulse_ids, name="pulse_id", dtype="str")
    wanted = {**TABLE_COLUMNS, **(SIMULATED_COLUMNS if simulated else {})}
    texts = [name for name, kind in wanted.items() if kind == "str"]
    # one frame of all texts: pandas looks into every object column that it is given alone
    block = np.empty((len(index), len(texts)), object)
    for place, name in enumerate(texts):
        block[:, place] = _text(rows.get(name))
    written = pd.DataFrame(block, index=index, columns=texts, dtype="object")
    columns = {
        name: written[name] if kind == "str" else _numbers(rows.get(name), kind, len(index))
        for name, kind in wanted.items()
    }
    return pd.DataFrame(columns, index=index)


def with_texts(table: pd.DataFrame, **columns: Any) -> pd.DataFrame:
    """The table with columns of text replaced, given as (pulses,) of str; whatever is no text becomes None."""
    held = {}
    for name, values in columns.items():
        words = [word if isinstance(word, str) else None for word in values]
        held[name] = pd.Series(words, index=table.index, dtype="object")
    return table.assign(**held)


def _text(given: Any) -> Any:
    """One text or None for every row, or a text or None a row."""
    if given is None or isinstance(given, str):
        return given
    column = np.array(given, object)
    column[pd.isna(column)] = None
    return column


def _numbers(given: Any, kind: str, count: int) -> Any:
    """A column of numbers or times; a single value stands for every row, None for no value."""
    if kind.startswith("datetime"):
        times = np.full(count, "NaT", "M8[ns]") if given is None else given
        return pd.DatetimeIndex(times, tz="UTC").as_unit("ns")
    column = np.empty(count, kind)
    column[:] = {"bool": False, "int16": 0, "int64": 0}.get(kind, np.nan) if given is None else given
    return column
