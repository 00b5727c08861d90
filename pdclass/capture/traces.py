"""One record of one sensor from NPZ, HDF5 or an oscilloscope's CSV: the fields of the SigMF reader without prefix."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.capture.arrays import bytes_digest, read_arrays
from pdclass.capture.delimited import read_columns, read_header
from pdclass.capture.fields import shown
from pdclass.capture.fill import FillIns
from pdclass.capture.foreign import time_rate_hz
from pdclass.capture.guard import open_plain
from pdclass.capture.maps import RATE_SLACK, WAVE_UNITS, Map
from pdclass.capture.recording import check_counts
from pdclass.capture.sigmf import PLAIN_FIELDS, read_fields
from pdclass.capture.waves import WAVE_LIMIT_V
from pdclass.errors import InputError, complaint
from pdclass.pulses import Capture

#: Fields of `captures[]`: arrays of one length, the first entry being that of the first sample.
START_FIELDS = ("sample_start", "global_index", "datetime", "phase_deg")
_DATATYPES = {"int8": "ri8", "int16": "ri16_le", "float32": "rf32_le"}
#: Volts that are counts times the stated size of one lie this near to a whole number.
_COUNT_SLACK = 0.05


def read_array_capture(path: Path, fill: FillIns) -> Capture:
    """A capture from an NPZ or HDF5 file: the array `counts` and a field for each one of SigMF, without its prefix.

    `counts` is int8, int16 or float32, of one dimension. Scalars are arrays of one value. `sample_start`,
    `global_index`, `datetime` and `phase_deg` are arrays with an entry for each stretch of the record.

    Raises
    ------
    InputError
        If the file cannot be read, or a field is missing, out of bounds or contradictory.
    MissingPartError
        If it is HDF5 and the extra is not installed.
    """
    arrays = read_arrays(path, ["counts"], [*PLAIN_FIELDS, *START_FIELDS])
    counts = arrays.pop("counts")
    if counts.ndim != 1 or counts.dtype.name not in _DATATYPES:
        expected = "one dimension of int8, int16 or float32"
        found, advice = f"shape {counts.shape} of {counts.dtype}", "write the samples of one sensor as they came"
        raise InputError(complaint(path, "counts", expected=expected, found=found, advice=advice))
    starts = _starts(path, {name: arrays.pop(name) for name in START_FIELDS if name in arrays})
    said = {name: _plain(path, name, values) for name, values in arrays.items()}
    return _capture(path, counts, said, starts, fill)


def read_trace(path: Path, fill: FillIns) -> Capture:
    """A capture from an oscilloscope's CSV trace, read as the map among the fill-ins says.

    The rate is the stated one, else that of the time column. Where the map states `volts_per_count` the samples are
    turned back into counts; else they stay float32, a count being one unit of the map.

    Raises
    ------
    InputError
        If there is no map or one of rows, a column is missing, the time column contradicts the rate by more than
        0.1 % or has gaps, a sample is above 1 kV or no multiple of the stated count, or a field is missing.
    """
    # a file that is not there is said before a map that is not
    open_plain(path).close()
    given = fill.map
    if given is None:
        advice = 'say with --map what its columns are (kind = "trace")'
        raise InputError(complaint(path, "map", expected="a map for CSV", found="none", advice=advice))
    if given.kind != "trace":
        advice = "bring rows of pulses in with `pdclass import`"
        raise InputError(complaint(path, "kind of the map", expected="'trace'", found=shown(given.kind), advice=advice))
    time, volts = _trace_columns(path, given)
    counts, scale_v = _counts(path, volts, given)
    fixed = given.fixed.model_dump(exclude_none=True)
    rate_hz = _rate(path, given, time, fill)
    start = {"sample_start": 0, "datetime": fixed.pop("start_utc", None), "phase_deg": fixed.pop("phase_deg", None)}
    said = {name: value for name, value in fixed.items() if name in PLAIN_FIELDS}
    said |= {"volts_per_count": scale_v} | ({} if rate_hz is None else {"sample_rate": rate_hz})
    if counts.dtype.kind == "f":
        said.pop("adc_bits", None)
    if "band_hz" in said:
        said["band_hz"] = list(said["band_hz"])
    return _capture(path, counts, said, [start], fill)


def _capture(
    path: Path, counts: NDArray[Any], said: Mapping[str, Any], starts: list[dict[str, Any]], fill: FillIns
) -> Capture:
    capture, layout = read_fields(path, _DATATYPES[counts.dtype.name], said, starts, counts.size, fill)
    if layout.samples is not None and layout.samples != counts.size:
        advice = "write the file again"
        found = f"{counts.size} samples"
        raise InputError(complaint(path, "sample_count", expected=layout.samples, found=found, advice=advice))
    try:
        check_counts(path, counts, layout)
    except InputError as error:
        raise InputError(str(error).replace("pdclass:", "")) from None
    counts.flags.writeable = False
    return replace(capture, counts=counts, digest=bytes_digest(path))


def _starts(path: Path, columns: Mapping[str, NDArray[Any]]) -> list[dict[str, Any]]:
    lengths = {name: values.size for name, values in columns.items()}
    if len(set(lengths.values())) > 1 or any(size > 100_000 for size in lengths.values()):
        found = ", ".join(f"{name} {size}" for name, size in lengths.items())
        advice = "write one entry for each stretch of the record in each of them"
        raise InputError(complaint(path, "starts", expected="equally many values", found=found, advice=advice))
    columns = columns or {"sample_start": np.zeros(1, np.int64)}
    if "sample_start" not in columns and next(iter(lengths.values())) > 1:
        advice = "write the first sample of each stretch"
        raise InputError(complaint(path, "sample_start", expected="an array", found="nothing", advice=advice))
    rows = zip(*(values.reshape(-1).tolist() for values in columns.values()), strict=True)
    return [{"sample_start": 0} | _known(dict(zip(columns, row, strict=True))) for row in rows]


def _known(row: Mapping[str, Any]) -> dict[str, Any]:
    """Without NaN and empty text, which stand for unknown in an array."""
    return {name: value for name, value in row.items() if value not in {"", None} and value == value}  # noqa: PLR0124


def _plain(path: Path, name: str, values: NDArray[Any]) -> Any:
    """A field as plain content: one value, or a list where the field is one."""
    if name in ("band_hz", "response"):
        return values.tolist()
    if values.size != 1:
        advice = "write one value"
        raise InputError(complaint(path, name, expected="one value", found=f"shape {values.shape}", advice=advice))
    value = values.reshape(-1).tolist()[0]
    return value.decode("utf-8", "replace") if isinstance(value, bytes) else value


def _trace_columns(path: Path, given: Map) -> tuple[NDArray[Any] | None, NDArray[np.float64]]:
    opened = read_header(path, skip_lines=given.skip_lines)
    names = {
        field: opened.names[opened.place(source, of=f"columns.{field}")]
        for field, source in (("time", given.columns.time), ("volts", given.columns.volts))
        if source is not None
    }
    columns = read_columns(opened, list(dict.fromkeys(names.values())), [])
    volts = columns[names["volts"]]
    if len(volts) < 2 or np.isnan(volts).any():
        row = int(np.argmax(np.isnan(volts))) if len(volts) else 0
        found = f"nothing in row {row}" if len(volts) > 1 else f"{len(volts)} samples"
        advice = "cut the record there, or write the missing sample"
        raise opened.wrong(names["volts"], "a sample in every row", found, advice)
    return columns[names["time"]] if "time" in names else None, volts


def _rate(path: Path, given: Map, time: NDArray[Any] | None, fill: FillIns) -> float | None:
    found = time_rate_hz(str(path), given, time)
    stated = given.fixed.rate_hz or (None if found is not None else fill.rate_hz)
    if found is None or stated is None:
        return stated or found
    if abs(found / stated - 1) > RATE_SLACK:
        expected = f"steps of {1e9 / stated:.6g} ns, within 0.1 % of fixed.rate_hz"
        advice = "correct fixed.rate_hz or units.time in the map"
        raise InputError(complaint(path, "time", expected=expected, found=f"{1e9 / found:.6g} ns", advice=advice))
    return stated


def _counts(path: Path, values: NDArray[np.float64], given: Map) -> tuple[NDArray[Any], float]:
    """Samples as counts, and the size of one [V]."""
    stated, unit_v = given.fixed.volts_per_count, WAVE_UNITS[given.units.wave]
    scale_v = unit_v if unit_v is not None else float(stated or 1.0)
    largest = float(np.abs(values).max()) * scale_v
    if not largest <= WAVE_LIMIT_V:
        found, advice = f"{largest:.4g} V", "correct units.wave in the map"
        raise InputError(complaint(path, "volts", expected="at most 1 kV", found=found, advice=advice))
    if stated is None:
        return values.astype(np.float32), scale_v
    counts = values if unit_v is None else values * (unit_v / stated)
    whole = np.rint(counts)
    if np.abs(counts - whole).max() > _COUNT_SLACK or np.abs(whole).max() > np.iinfo(np.int16).max:
        row = int(np.argmax(np.abs(counts - whole)))
        expected = f"whole multiples of {stated:g} V, at most 32767 of them"
        advice = "correct fixed.volts_per_count, or leave it out"
        found = f"{counts[row]:.4g} of them in row {row}"
        raise InputError(complaint(path, "volts", expected=expected, found=found, advice=advice))
    return whole.astype(np.int16), float(stated)
