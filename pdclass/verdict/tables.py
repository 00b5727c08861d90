"""The tables of a verdict folder: verdicts and reasons as Parquet, verdicts as CSV."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from pdclass.errors import InputError
from pdclass.verdict.score import Verdicts
from pdclass.writing import whole_file

#: A spreadsheet takes a text that begins so for a formula.
_FORMULA = ("=", "+", "-", "@", "\t", "\r")

_TEXT_FIRST = ("pulse_id", "capture", "capture_digest", "circuit", "site", "sensor", "session")
_FIXED: Mapping[str, pa.DataType] = {
    **dict.fromkeys(_TEXT_FIRST, pa.string()),
    "onset_s": pa.float64(),
    "phase_deg": pa.float32(),
    "snr_db": pa.float32(),
    "label": pa.string(),
    "likeliest": pa.string(),
    "runner_up": pa.string(),
    "against": pa.string(),
    "decided": pa.bool_(),
    "label_set": pa.list_(pa.string()),
    "log_odds": pa.float64(),
    "novelty": pa.float32(),
    "unfamiliar": pa.bool_(),
    "outside": pa.string(),
    "reason_1": pa.string(),
    "reason_2": pa.string(),
    "reason_3": pa.string(),
    "bundle_digest": pa.string(),
}


def write_verdict_table(path: Path, verdicts: Verdicts) -> None:
    """Write a file of `verdicts/`, whole or not at all."""
    table = verdicts.table.reset_index(names="pulse_id")
    columns, fields = [], []
    for name in table.columns:
        kind = _FIXED.get(name, pa.float64())
        values = table[name]
        missing = values.isna().to_numpy() if kind == pa.float32() else None
        columns.append(pa.array(values.tolist(), kind, mask=missing, from_pandas=False))
        fields.append(pa.field(name, kind))
    _write(path, pa.Table.from_arrays(columns, schema=pa.schema(fields)))


def write_reason_table(path: Path, verdicts: Verdicts) -> None:
    """Write a file of `reasons/`, whole or not at all."""
    count = len(verdicts.table)
    base = np.repeat(verdicts.base[None, :], count, axis=0)
    columns = {
        "pulse_id": pa.array(verdicts.table.index.tolist(), pa.string()),
        "value": _packed(verdicts.values),
        "base": _packed(base),
        "share": _packed(verdicts.shares.reshape(count, verdicts.shares.shape[1] * verdicts.shares.shape[2])),
    }
    _write(path, pa.table(columns))


def read_verdict_table(path: Path) -> pd.DataFrame:
    """One file of `verdicts/`, indexed by `pulse_id`.

    Raises
    ------
    InputError
        If the file is not readable.
    """
    table: pd.DataFrame = read_table(path).to_pandas().set_index("pulse_id")
    table["label_set"] = pd.Series([list(row) for row in table["label_set"]], index=table.index, dtype="object")
    for name, kind in _FIXED.items():
        if name in table and kind == pa.string():
            table[name] = table[name].astype("object").where(table[name].notna(), None)
    return table


def read_reasons(
    path: Path,
) -> tuple[pd.Index[str], np.ndarray[Any, Any], np.ndarray[Any, Any], np.ndarray[Any, Any]]:
    """One file of `reasons/`: pulse ids, values (n, f), base (n, k) and shares (n, k, f).

    Raises
    ------
    InputError
        If the file is not readable.
    """
    table = read_table(path)
    ids = pd.Index(table["pulse_id"].to_pylist(), name="pulse_id", dtype="str")
    value, base, share = (_unpacked(table[name].combine_chunks(), len(ids)) for name in ("value", "base", "share"))
    return ids, value, base, share.reshape(len(ids), base.shape[1], value.shape[1])


def read_table(path: Path, columns: list[str] | None = None) -> pa.Table:
    """A Parquet file of a verdict folder, its page checksums verified.

    Parameters
    ----------
    columns : those wanted; all by default.

    Raises
    ------
    InputError
        If the file is not readable.
    """
    try:
        return pq.ParquetFile(path, page_checksum_verification=True).read(columns)
    except (OSError, pa.ArrowException) as error:
        line = " ".join(str(error).split())
        raise InputError(f"{path}: not readable as Parquet: {line}; the file is damaged, score again") from None


def csv_text(table: pd.DataFrame) -> str:
    """Verdicts as CSV that a spreadsheet opens without taking any text for a formula."""
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow([_cell(name) for name in ("pulse_id", *table.columns)])
    for name, row in zip(table.index, table.itertuples(index=False), strict=True):
        writer.writerow([_cell(value) for value in (name, *row)])
    return text.getvalue()


def _cell(value: Any) -> Any:
    if isinstance(value, list):
        value = "|".join(value)
    if isinstance(value, str):
        return f"'{value}" if value.startswith(_FORMULA) else value
    return "" if value is None or (isinstance(value, float) and np.isnan(value)) else value


def _packed(rows: np.ndarray[Any, Any]) -> pa.FixedSizeListArray:
    flat = pa.array(np.ascontiguousarray(rows, np.float64).ravel())
    return pa.FixedSizeListArray.from_arrays(flat, rows.shape[1])


def _unpacked(column: Any, count: int) -> np.ndarray[Any, Any]:
    width = column.type.list_size
    return np.asarray(column.flatten().to_numpy(zero_copy_only=False), np.float64).reshape(count, width)


def _write(path: Path, table: pa.Table) -> None:
    with whole_file(path) as file:
        pq.write_table(table, file, compression="zstd", write_page_checksum=True)
