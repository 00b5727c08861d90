"""Maps: what the columns, units and labels of somebody else's file mean, stated in TOML and checked before use."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from pdclass.capture.fields import CONDUCTORS, is_name
from pdclass.errors import InputError, complaint
from pdclass.pulses import BASES, LABELS, is_own_class
from pdclass.settings import Settings, read_settings

#: Seconds in a unit of time.
TIME_UNITS: Mapping[str, float] = MappingProxyType({"s": 1.0, "ms": 1e-3, "us": 1e-6, "ns": 1e-9})
#: Volts in a unit of the wave; a count is worth `volts_per_count`.
WAVE_UNITS: Mapping[str, float | None] = MappingProxyType({"V": 1.0, "mV": 1e-3, "uV": 1e-6, "count": None})
#: A time axis may disagree with the stated rate by this share.
RATE_SLACK = 1e-3
#: Columns of words and of numbers, one value a pulse, that a map of rows may name.
TEXTS = ("circuit", "site", "sensor", "session", "conductor", "label", "basis", "labelled_by")
NUMBERS = ("rate_hz", "onset_sample", "onset_ns", "phase_deg")
_EITHER = ("onset_sample", "onset_ns")

_Positive = Annotated[float, Field(gt=0)]


class MappedColumns(Settings):
    """Names of the file's columns; `wave` and `time` of rows may be a range of them, as `s0000:s1999`."""

    wave: str | None = None
    time: str | None = None
    volts: str | None = None
    circuit: str | None = None
    site: str | None = None
    sensor: str | None = None
    session: str | None = None
    conductor: str | None = None
    label: str | None = None
    basis: str | None = None
    labelled_by: str | None = None
    rate_hz: str | None = None
    onset_sample: str | None = None
    onset_ns: str | None = None
    phase_deg: str | None = None


class Units(Settings):
    """Units of the time axis and of the wave (of a trace: of its volts)."""

    time: Literal["s", "ms", "us", "ns"] | None = None
    wave: Literal["V", "mV", "uV", "count"] = "V"


class Fixed(Settings):
    """What is the same for the whole file.

    `onset_sample` counts from 0 at the first sample of a row, `onset_ns` is the time since then [ns]. `start_utc`
    and `phase_deg` of a trace are those of its first sample.
    """

    rate_hz: _Positive | None = None
    volts_per_count: _Positive | None = None
    adc_bits: Annotated[int, Field(ge=4, le=24)] | None = None
    transfer_ohm: _Positive | None = None
    band_hz: tuple[float, float] | None = None
    mains_hz: Annotated[float, Field(ge=10, le=100)] | None = None
    circuit: str | None = None
    site: str | None = None
    sensor: str | None = None
    session: str | None = None
    conductor: Literal["L1", "L2", "L3", "three-core"] | None = None
    label: str | None = None
    basis: Literal["dissected", "isolated", "located", "cross-checked", "expert", "simulated"] | None = None
    labelled_by: str | None = None
    onset_sample: Annotated[int, Field(ge=0)] | None = None
    onset_ns: Annotated[float, Field(ge=0)] | None = None
    phase_deg: Annotated[float, Field(ge=0, le=360)] | None = None
    start_utc: str | None = None

    @model_validator(mode="after")
    def _texts_are_names(self) -> Self:
        for name in ("circuit", "site", "sensor", "session", "label", "labelled_by"):
            text = getattr(self, name)
            if text is not None and not is_name(text):
                raise ValueError(f"{name} must be one line of text, 1 to 200 characters")
        return self


class Map(Settings):
    """What a foreign file's columns, units and labels mean.

    Attributes
    ----------
    kind : rows of pulses, or one trace of an oscilloscope.
    skip_lines : lines of a CSV file before the one that names its columns.
    labels : the file's labels, each with the one it stands for; "" = unlabelled. Without it the file has ours.
    classes : own classes, each with the one of our labels that it is a kind of, or "" for none.
    """

    kind: Literal["pulse-per-row", "trace"]
    skip_lines: Annotated[int, Field(ge=0, le=1000)] = 0
    columns: MappedColumns
    units: Units = Units()
    fixed: Fixed = Fixed()
    labels: dict[str, str] = Field(default_factory=dict)
    classes: dict[str, str] = Field(default_factory=dict)

    @model_validator(mode="after")
    def _agrees_with_itself(self) -> Self:
        given = {name for name, value in self.columns if value is not None}
        fixed = {name for name, value in self.fixed if value is not None}
        if self.kind == "trace":
            _check_trace(given, fixed)
        else:
            _check_rows(given, fixed)
        _check_both(self, given, fixed)
        _check_classes(self)
        return self

    def label_of(self, word: str | None) -> str | None:
        """The label that a word of the file stands for, None for unlabelled.

        Raises
        ------
        KeyError
            If the word is not listed.
        """
        if word is None or (word == "" and "" not in self.labels):
            return None
        if self.labels:
            return self.labels[word] or None
        known = {*LABELS, *self.classes}
        if word not in known:
            raise KeyError(word)
        return word

    def own_classes(self) -> dict[str, str]:
        """The own classes that the labels may be, each with what it is a kind of."""
        kept = {name for name in self.labels.values() if name and name not in LABELS}
        return {name: self.classes.get(name, "") for name in sorted(kept | set(self.classes))}


def read_map(path: Path) -> Map:
    """The map in a TOML file.

    Raises
    ------
    InputError
        If it is no such map: an unknown key, unit or class, or something missing or said twice.
    """
    return read_settings(path, Map)


def parse_classes(text: str) -> dict[str, str]:
    """Own classes from an option, as `crane drive=interference,void`.

    Raises
    ------
    InputError
        If a name cannot be a class or what it is a kind of is none of our labels.
    """
    pairs = [part.partition("=") for part in text.split(",")]
    classes = {name.strip(): kind.strip() for name, _, kind in pairs}
    try:
        _check_named(classes)
    except ValueError as error:
        raise InputError(f"--classes: {error}; correct the option") from None
    return classes


def together(where: str, *several: Mapping[str, str]) -> dict[str, str]:
    """Own classes of several sources as one.

    Raises
    ------
    InputError
        If a class is a kind of two different things.
    """
    whole: dict[str, str] = {}
    for classes in several:
        for name, kind in classes.items():
            former = whole.setdefault(name, kind)
            if former != kind:
                expected, found = f"a kind of {former or 'nothing'} as elsewhere", f"a kind of {kind or 'nothing'}"
                advice = "say the same everywhere"
                raise InputError(complaint(where, f"class '{name}'", expected=expected, found=found, advice=advice))
    return whole


def nearest(word: str, known: Iterable[str]) -> str:
    """Words of advice that name the known one nearest to a word, if any is near."""
    near = difflib.get_close_matches(word, list(known), n=1, cutoff=0.6)
    return f"; the nearest known one is '{near[0]}'" if near else ""


def _check_trace(given: set[str], fixed: set[str]) -> None:
    if "volts" not in given:
        raise ValueError("a trace needs columns.volts")
    odd = sorted(given - {"time", "volts"})
    if odd:
        raise ValueError(f"columns.{odd[0]} is for rows of pulses; a trace has the columns time and volts")
    wrong = sorted(fixed & {*_EITHER, "label", "basis", "labelled_by"})
    if wrong:
        raise ValueError(f"fixed.{wrong[0]} is for rows of pulses; a trace is searched for its pulses")


def _check_rows(given: set[str], fixed: set[str]) -> None:
    if "wave" not in given:
        raise ValueError("rows of pulses need columns.wave, as 's0000:s1999' or the name of one array")
    if "volts" in given:
        raise ValueError("columns.volts is for a trace; rows of pulses have columns.wave")
    if "start_utc" in fixed:
        raise ValueError("fixed.start_utc is for a trace")
    for name in ("circuit", "session"):
        if name not in given | fixed:
            raise ValueError(f"{name} is needed, in columns or fixed: pulses are grouped by it")
    if len((given | fixed) & set(_EITHER)) > 1:
        raise ValueError("onset_sample and onset_ns say the same; give one of them")


def _check_both(whole: Map, given: set[str], fixed: set[str]) -> None:
    both = sorted(given & fixed - {"rate_hz"})
    if both:
        raise ValueError(f"{both[0]} stands in columns and in fixed; give one of them")
    if "time" in given and whole.units.time is None:
        raise ValueError(f"units.time is needed for columns.time, one of {', '.join(TIME_UNITS)}")
    if not {"rate_hz", "time"} & (given | fixed):
        raise ValueError("the rate is needed: fixed.rate_hz, columns.rate_hz or columns.time")
    if whole.units.wave == "count" and whole.fixed.volts_per_count is None:
        raise ValueError("waves in counts need fixed.volts_per_count")
    if "basis" in given | fixed and "label" not in given | fixed:
        raise ValueError("basis says how a label came to be known; give label too")
    if whole.fixed.label is not None:
        try:
            whole.label_of(whole.fixed.label)
        except KeyError:
            raise ValueError(f"fixed.label '{whole.fixed.label}' is not listed in labels or classes") from None


def _check_classes(whole: Map) -> None:
    _check_named(whole.classes)
    for word, name in whole.labels.items():
        if name in {"", *LABELS} or name in whole.classes:
            continue
        # a name that only stands on the right may be a slip of the pen; mapped to itself it is meant
        if whole.labels.get(name) != name:
            near = nearest(name, (*LABELS, *whole.classes))
            raise ValueError(
                f"labels '{word}' stands for '{name}', which is no label of ours ({', '.join(LABELS)}); "
                f"map it to itself or list it in classes to keep it as a class of your own{near}"
            )
        _check_named({name: ""})


def _check_named(classes: Mapping[str, str]) -> None:
    for name, kind in classes.items():
        if not is_own_class(name):
            raise ValueError(
                f"class '{name[:60]}' must be 2 to 40 letters, digits, spaces, '_' or '-', and no label of ours"
            )
        if kind not in {"", *LABELS}:
            raise ValueError(f"class '{name}' must be a kind of one of {', '.join(LABELS)}, or of nothing (\"\")")


#: Words that a column of names of one kind may hold.
CHOICES: Mapping[str, tuple[str, ...]] = MappingProxyType({"basis": BASES, "conductor": CONDUCTORS})
