"""The scalar columns of a pulse table: their types, their bounds, and which row breaks them."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Any

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from pdclass.capture.fields import CONDUCTORS, TEXT_LIMIT, is_name, shown
from pdclass.capture.fill import OPTIONS
from pdclass.errors import InputError, complaint
from pdclass.pulses import BASES, LABELS

#: Columns of names that are one of a list.
CHOICES: Mapping[str, tuple[str, ...]] = {"label": LABELS, "basis": BASES, "conductor": CONDUCTORS}
#: Lower and upper bounds of numbers, both allowed.
BOUNDS: Mapping[str, tuple[float, float]] = {
    "phase_deg": (0.0, 360.0),
    "noise_v": (0.0, np.inf),
    "onset_std_ns": (0.0, np.inf),
    "duration_us": (0.0, np.inf),
    "distance_m": (0.0, np.inf),
    "onset_sample": (0, np.inf),
    "window_mates": (0, np.inf),
}
_WITHOUT_NULLS = ("pulse_id", "circuit", "session", "chain")


def column_values(
    where: str,
    name: str,
    found: Any,
    kind: Any,
    parts: list[Any],
    notes: list[str],
    fill: str | None = None,
    own_classes: Collection[str] = (),
) -> Any:
    """The values of one column as an array of the contract's type; text as objects with None for null.

    `fill` stands in for nulls of a text column; `own_classes` are labels beside ours.

    Raises
    ------
    InputError
        If the column has another type than `kind`, a needed value is null, or a value is out of bounds.
    """
    _check_type(where, name, found, kind)
    valid = np.concatenate([np.zeros(0, bool), *[part.is_valid().to_numpy(zero_copy_only=False) for part in parts]])
    if name in _WITHOUT_NULLS and not valid.all() and fill is None:
        raise _wrong(where, name, int(np.argmin(valid)), "a value", "nothing", _supply(name))
    if pa.types.is_string(kind):
        return _texts(where, name, parts, fill, own_classes)
    if pa.types.is_timestamp(kind):
        return _times(where, name, parts)
    if not valid.all() and not pa.types.is_floating(kind):
        notes.append(f"{where}: {name}: {int((~valid).sum())} nulls read as 0")
    return _numbers(where, name, kind, parts)


def _check_type(where: str, name: str, found: Any, kind: Any) -> None:
    inner = found.value_type if pa.types.is_dictionary(found) else found
    if pa.types.is_string(kind):
        fits = pa.types.is_string(inner) or pa.types.is_large_string(inner) or pa.types.is_null(inner)
    elif pa.types.is_timestamp(kind):
        fits = (pa.types.is_timestamp(inner) and inner.tz == "UTC") or pa.types.is_null(inner)
    elif pa.types.is_floating(kind):
        fits = pa.types.is_floating(inner) or pa.types.is_integer(inner) or pa.types.is_null(inner)
    elif pa.types.is_integer(kind):
        fits = pa.types.is_integer(inner)
    else:
        fits = inner == kind
    if not fits:
        raise InputError(complaint(where, name, expected=kind, found=found, advice="write the column in that type"))


def _supply(name: str) -> str:
    option = f", give {OPTIONS[name]}" if name in OPTIONS else ""
    return f"write it{option}, or leave the row out"


def _texts(where: str, name: str, parts: list[Any], fill: str | None, own_classes: Collection[str]) -> NDArray[Any]:
    values: list[str | None] = []
    for part in parts:
        # distinct texts are checked and held once: a small file may repeat a large one very often
        coded = part if pa.types.is_dictionary(part.type) else part.dictionary_encode()
        words = _words(where, name, coded.dictionary, len(values))
        codes = coded.indices.to_pylist()
        values += [fill if code is None else words[code] or fill for code in codes]
    array = np.empty(len(values), object)
    array[:] = values
    _check_words(where, name, array, own_classes)
    return array


def _words(where: str, name: str, dictionary: Any, row: int) -> list[str | None]:
    longest = 4 * TEXT_LIMIT
    if pa.types.is_null(dictionary.type):
        return [None] * len(dictionary)
    sizes = [size for size in pc.binary_length(dictionary).to_pylist() if size is not None]
    if sizes and max(sizes) > longest:
        advice = "shorten the text"
        raise _wrong(where, name, row, f"at most {longest} bytes", f"{max(sizes)} bytes", advice, "from ")
    words: list[str | None] = dictionary.to_pylist()
    return [word or None for word in words]


def _check_words(where: str, name: str, values: NDArray[Any], own_classes: Collection[str]) -> None:
    known: dict[str | None, bool] = {}
    choices = (*LABELS, *own_classes) if name == "label" else CHOICES.get(name)
    expected = f"one line of text, 1 to {TEXT_LIMIT} characters"
    expected = expected if choices is None else "null or one of " + ", ".join(choices)
    for row, word in enumerate(values):
        if word is None and name not in _WITHOUT_NULLS:
            continue
        if word not in known:
            known[word] = word is not None and (is_name(word) if choices is None else word in choices)
        if not known[word]:
            raise _wrong(where, name, row, expected, shown(word), "correct it, or leave it empty")


def _times(where: str, name: str, parts: list[Any]) -> Any:
    kind = pa.timestamp("ns", "UTC")
    try:
        cast = [part.cast(kind) for part in parts]
    except pa.ArrowInvalid as error:
        found = shown(str(error))
        expected = "times that fit into nanoseconds (years 1678 to 2262)"
        raise InputError(complaint(where, name, expected=expected, found=found, advice="correct them")) from None
    places = [part.cast(pa.int64()).fill_null(np.iinfo(np.int64).min).to_numpy() for part in cast]
    return pd.DatetimeIndex(np.concatenate([np.zeros(0, np.int64), *places]).view("M8[ns]")).tz_localize("UTC")


def _numbers(where: str, name: str, kind: Any, parts: list[Any]) -> NDArray[Any]:
    # integers are compared as integers: 2**63 and 2**63 - 1 are the same float
    wide = pa.float64() if pa.types.is_floating(kind) else pa.int64()
    missing = {"float": np.nan, "double": np.nan, "bool": False}.get(str(kind), 0)
    held = kind if pa.types.is_boolean(kind) else wide
    try:
        columns = [part.cast(held).fill_null(missing).to_numpy(zero_copy_only=False) for part in parts]
    except pa.ArrowInvalid as error:
        raise InputError(
            complaint(where, name, expected=kind, found=shown(str(error)), advice="correct the values")
        ) from None
    dtype = kind.to_pandas_dtype()
    values = np.concatenate([np.zeros(0, held.to_pandas_dtype()), *columns])
    _check_bounds(where, name, values, dtype)
    typed: NDArray[Any] = values.astype(dtype)
    if name == "phase_deg":
        # a full turn is none; also one that only rounding to float32 completes
        typed[typed >= np.float32(360.0)] = 0.0
    return typed


def _check_bounds(where: str, name: str, values: NDArray[Any], dtype: Any) -> None:
    if np.dtype(dtype).kind == "b":
        return
    limits = np.finfo(dtype) if np.dtype(dtype).kind == "f" else np.iinfo(dtype)
    low, high = BOUNDS.get(name, (-np.inf, np.inf))
    low, high = max(low, limits.min), min(high, limits.max)
    broken = (values < low) | (values > high)
    if broken.any():
        row = int(np.argmax(broken))
        raise _wrong(where, name, row, f"{low:g} to {high:g}", values[row], "correct it, or leave it empty")


def _wrong(
    where: str, name: str, row: int, expected: object, found: object, advice: str, prefix: str = ""
) -> InputError:
    field = f"{name}, {prefix}row {row}"
    return InputError(complaint(where, field, expected=expected, found=found, advice=advice))
