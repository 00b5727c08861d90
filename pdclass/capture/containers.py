"""The columns of a file of pulses, one a row, whatever its kind: CSV, NPZ, HDF5 or Parquet."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from pdclass.capture.arrays import HDF5_ENDINGS, NPZ_ENDINGS, read_arrays
from pdclass.capture.delimited import read_columns, read_header
from pdclass.capture.footer import read_footer
from pdclass.capture.guard import open_plain
from pdclass.capture.maps import NUMBERS, TEXTS, Map, nearest
from pdclass.errors import InputError, complaint

ENDINGS = (".csv", *NPZ_ENDINGS, *HDF5_ENDINGS, ".parquet")
ROW_LIMIT = 2_000_000
BYTES_LIMIT = 4 << 30
_BATCH_ROWS = 1024

Columns = dict[str, NDArray[Any]]


def columns_of(path: Path, given: Map) -> Columns:
    """Every column that a map names, by the map's word for it.

    Waves and times of rows are blocks (rows, samples), a time axis of NPZ and HDF5 may be (samples,); words are
    objects with None for nothing, other numbers float64 with NaN for nothing.

    Raises
    ------
    InputError
        If the file is of no kind that is read, is damaged or too large, or lacks a column.
    MissingPartError
        If it is HDF5 and the extra is not installed.
    """
    named = {name: value for name, value in given.columns if value is not None}
    if path.suffix == ".csv":
        return _csv_columns(path, named, given.skip_lines)
    if path.suffix == ".parquet":
        return _parquet_columns(path, named)
    if path.suffix in (*NPZ_ENDINGS, *HDF5_ENDINGS):
        arrays = read_arrays(path, sorted(set(named.values())))
        return {
            name: arrays[source] if name in ("wave", "time") else _typed(str(path), name, arrays[source])
            for name, source in named.items()
        }
    found, advice = f"{path.suffix!r}", "convert the file, or check its name"
    raise InputError(complaint(path, "ending", expected="one of " + ", ".join(ENDINGS), found=found, advice=advice))


def _csv_columns(path: Path, named: Mapping[str, str], skip_lines: int) -> Columns:
    opened = read_header(path, skip_lines=skip_lines)
    spans = {name: opened.span(named[name], of=f"columns.{name}") for name in ("wave", "time") if name in named}
    single = {
        name: opened.names[opened.place(source, of=f"columns.{name}")]
        for name, source in named.items()
        if name not in spans
    }
    texts = [source for name, source in single.items() if name in TEXTS]
    numbers = [source for name, source in single.items() if name in NUMBERS]
    numbers += [source for span in spans.values() for source in span]
    shared = sorted(set(texts) & set(numbers))
    if shared:
        raise opened.wrong(f"column '{shared[0]}'", "one use", "both a number and words", "correct the map")
    columns = read_columns(opened, list(dict.fromkeys(numbers)), list(dict.fromkeys(texts)))
    blocks = {name: np.column_stack([columns[source] for source in span]) for name, span in spans.items()}
    return blocks | {name: columns[source] for name, source in single.items()}


def _parquet_columns(path: Path, named: Mapping[str, str]) -> Columns:
    try:
        with open_plain(path) as source:
            declared = read_footer(source)
            file = pq.ParquetFile(source, arrow_extensions_enabled=False, page_checksum_verification=True)
            names = list(file.schema_arrow.names)
            spans = {name: _span(str(path), name, value, names) for name, value in named.items()}
            for used in {source for span in spans.values() for source in span}:
                size = max(declared.uncompressed_bytes.get(used, 0), 8 * declared.values.get(used, 0))
                if size > BYTES_LIMIT or declared.rows > ROW_LIMIT:
                    expected = f"at most {ROW_LIMIT} rows and {BYTES_LIMIT} bytes a column"
                    found = f"{declared.rows} rows, {size} bytes"
                    raise InputError(complaint(path, used, expected=expected, found=found, advice="split the table"))
            return {name: _parquet_column(str(path), name, file, span) for name, span in spans.items()}
    except (pa.ArrowException, OSError, EOFError) as error:
        reason = " ".join(str(error).split())[:200]
        raise InputError(f"{path}: damaged Parquet file ({reason}); copy or write the table again") from None
    except (ValueError, LookupError, OverflowError) as error:
        raise InputError(f"{path}: not readable as Parquet ({error}); write it again") from None


def _span(where: str, name: str, selector: str, names: Sequence[str]) -> list[str]:
    if selector in names:
        return [selector]
    ends = [part.strip() for part in selector.split(":", 1)] if name in ("wave", "time") else [selector]
    for end in ends:
        if end not in names:
            found = "columns " + ", ".join(names[:6]) + (" ..." if len(names) > 6 else "")
            advice = f"correct the name{nearest(end, names)}"
            raise InputError(complaint(where, f"columns.{name}", expected=f"'{end}'", found=found, advice=advice))
    first, last = names.index(ends[0]), names.index(ends[-1])
    if first > last:
        raise InputError(f"{where}: columns.{name}: expected the first column before the last; turn the range round")
    return list(names[first : last + 1])


def _parquet_column(where: str, name: str, file: Any, span: list[str]) -> NDArray[Any]:
    parts: list[NDArray[Any]] = []
    for batch in file.iter_batches(batch_size=_BATCH_ROWS, columns=span, use_threads=False):
        columns = [batch.column(batch.schema.get_field_index(source)) for source in span]
        for column in columns:
            column.validate(full=True)
        if name in ("wave", "time"):
            parts.append(_parquet_block(where, name, columns))
        else:
            parts.append(_typed(where, name, np.array(columns[0].to_pylist(), object)))
    if not parts:
        raise InputError(complaint(where, "rows", expected="at least one", found="none", advice="give another file"))
    if len({part.shape[1:] for part in parts}) > 1:
        raise InputError(f"{where}: {name}: expected rows of one length, found several; write them equally long")
    return np.concatenate(parts)


def _parquet_block(where: str, name: str, columns: list[Any]) -> NDArray[Any]:
    column = columns[0]
    kind = column.type
    if not pa.types.is_nested(kind):
        return np.column_stack([numbers_of(where, name, one.to_numpy(zero_copy_only=False)) for one in columns])
    lists = pa.types.is_list(kind) or pa.types.is_large_list(kind) or pa.types.is_fixed_size_list(kind)
    if not lists or column.null_count:
        found = f"{kind}, {column.null_count} of them empty"
        advice = "write every row as a list of numbers"
        raise InputError(complaint(where, name, expected="lists of numbers", found=found, advice=advice))
    lengths = set(column.value_lengths().to_pylist())
    if len(lengths) > 1:
        found = f"{min(lengths)} to {max(lengths)} samples"
        advice = "fill the shorter ones with NaN at the end"
        raise InputError(complaint(where, name, expected="rows of one length", found=found, advice=advice))
    values = numbers_of(where, name, column.flatten().to_numpy(zero_copy_only=False))
    return values.reshape(len(column), -1)


def numbers_of(where: str, name: str, values: NDArray[Any]) -> NDArray[Any]:
    """Values as float64; booleans, words and times are no numbers."""
    if values.dtype.kind not in "iuf":
        found = f"type {values.dtype}"
        raise InputError(complaint(where, name, expected="numbers", found=found, advice="write the column as numbers"))
    return values.astype(np.float64)


def _typed(where: str, name: str, values: NDArray[Any]) -> NDArray[Any]:
    """One value a row: numbers as float64, words as objects with None for nothing."""
    flat = values.reshape(-1) if values.ndim != 1 else values
    if name in NUMBERS:
        return numbers_of(where, name, np.array([np.nan if v is None else v for v in flat.tolist()]))
    words = np.empty(len(flat), object)
    words[:] = [_word(value) for value in flat.tolist()]
    return words


def _word(value: object) -> str | None:
    if value is None or (isinstance(value, float) and np.isnan(value)):
        return None
    if isinstance(value, bytes):
        return value.decode("utf-8", "replace").strip() or None
    text = f"{value:g}" if isinstance(value, float) else str(value)
    return text.strip() or None
