"""The two Parquet tables of a bundle: reference pulses and real training pulses."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from pdclass.errors import RefusedError, complaint
from pdclass.pulses import BASES, WaveArray

#: Points of a thinned wave.
THIN_POINTS = 200
_MOST_ROWS = 5_000_000
_MOST_BYTES = 2 << 30
_ADVICE = "do not use it; get the bundle again from its maker"


def thin(waves: WaveArray, points: int = THIN_POINTS) -> WaveArray:
    """Waves thinned for drawing and comparison: of each block of samples the one of largest magnitude.

    Parameters
    ----------
    waves : (pulses, samples) [V], NaN outside the record.
    points : number of blocks; a wave with fewer samples repeats some.

    Returns
    -------
    (pulses, points) float32 [V]
    """
    edges = np.linspace(0, waves.shape[1], points + 1)
    starts = np.floor(edges[:-1]).astype(int)
    stops = np.maximum(np.floor(edges[1:]).astype(int), starts + 1)
    out = np.empty((len(waves), points), np.float32)
    for point, (start, stop) in enumerate(zip(starts, stops, strict=True)):
        block = waves[:, start:stop]
        largest = np.argmax(np.where(np.isnan(block), -1.0, np.abs(block)), axis=1)
        out[:, point] = block[np.arange(len(block)), largest]
    return out


def write_reference(path: Path, reference: pd.DataFrame, features: Sequence[str]) -> None:
    """Write the reference pulses."""
    _write(path, reference, _reference_schema(features))


def write_training(path: Path, training: pd.DataFrame, features: Sequence[str]) -> None:
    """Write the real training pulses."""
    _write(path, training, _training_schema(features))


def read_reference(path: Path, features: Sequence[str], classes: Sequence[str]) -> pd.DataFrame:
    """The reference pulses.

    Raises
    ------
    RefusedError
        If columns, types, labels or values are not as they should be.
    """
    table = _read(path, _reference_schema(features), features, classes)
    frame: pd.DataFrame = table.drop_columns(["wave"]).to_pandas()
    waves = table["wave"].combine_chunks()
    if waves.null_count:
        raise RefusedError(complaint(path, "wave", expected="no null", found="null", advice=_ADVICE))
    frame["wave"] = list(waves.flatten().to_numpy(zero_copy_only=False).reshape(-1, THIN_POINTS))
    return frame


def read_training(path: Path, features: Sequence[str], classes: Sequence[str]) -> pd.DataFrame:
    """The real training pulses.

    Raises
    ------
    RefusedError
        If columns, types, labels or values are not as they should be.
    """
    frame: pd.DataFrame = _read(path, _training_schema(features), features, classes).to_pandas()
    return frame


def _feature_fields(features: Sequence[str]) -> list[tuple[str, Any]]:
    return [(name, pa.float64()) for name in features]


def _reference_schema(features: Sequence[str]) -> Any:
    words = [("label", pa.string()), ("basis", pa.string()), ("group", pa.string())]
    wave = ("wave", pa.list_(pa.float32(), THIN_POINTS))
    return pa.schema([("pulse_id", pa.string()), *_feature_fields(features), *words, wave])


def _training_schema(features: Sequence[str]) -> Any:
    words = [("label", pa.string()), ("basis", pa.string()), ("group", pa.string())]
    return pa.schema([("pulse_id", pa.string()), *_feature_fields(features), *words, ("weight", pa.float64())])


def _write(path: Path, frame: pd.DataFrame, schema: Any) -> None:
    columns = [_column(frame[field.name], field.type) for field in schema]
    pq.write_table(
        pa.table(columns, schema=schema), path, compression="zstd", write_page_checksum=True, store_schema=False
    )


def _column(column: pd.Series[Any], kind: Any) -> Any:
    if pa.types.is_fixed_size_list(kind):
        flat: NDArray[Any] = np.concatenate([np.zeros(0, np.float32), *column]).astype(np.float32)
        return pa.FixedSizeListArray.from_arrays(pa.array(flat, pa.float32()), kind.list_size)
    if pa.types.is_floating(kind):
        return pa.array(column.to_numpy(np.float64), kind)
    return pa.array([None if pd.isna(word) else str(word) for word in column], kind)


def _read(path: Path, schema: Any, features: Sequence[str], classes: Sequence[str]) -> Any:
    try:
        with pq.ParquetFile(path, page_checksum_verification=True) as file:
            _check_size(path, file.metadata)
            _check_schema(path, file.schema_arrow, schema)
            table = file.read().cast(schema)
    except (pa.ArrowException, OSError) as error:
        found = f"{type(error).__name__}: {error}"
        raise RefusedError(complaint(path, "content", expected="Parquet", found=found, advice=_ADVICE)) from None
    _check_content(path, table, features, classes)
    return table


def _check_size(path: Path, metadata: Any) -> None:
    size = sum(metadata.row_group(place).total_byte_size for place in range(metadata.num_row_groups))
    if metadata.num_rows > _MOST_ROWS or size > _MOST_BYTES:
        expected = f"at most {_MOST_ROWS} rows and {_MOST_BYTES} bytes"
        found = f"{metadata.num_rows} rows, {size} bytes"
        raise RefusedError(complaint(path, "size", expected=expected, found=found, advice=_ADVICE))


def _check_schema(path: Path, found: Any, expected: Any) -> None:
    if found.names != expected.names:
        raise RefusedError(complaint(path, "columns", expected=expected.names, found=found.names, advice=_ADVICE))
    for ours, theirs in zip(expected, found, strict=True):
        # without a stored Arrow schema a fixed-size list comes back as a list; the cast checks its length
        plain_list = pa.types.is_fixed_size_list(ours.type) and pa.types.is_list(theirs.type)
        same = theirs.type == ours.type or (plain_list and theirs.type.value_type == ours.type.value_type)
        if not same:
            raise RefusedError(complaint(path, ours.name, expected=ours.type, found=theirs.type, advice=_ADVICE))


def _check_content(path: Path, table: Any, features: Sequence[str], classes: Sequence[str]) -> None:
    for name, allowed in (("label", classes), ("basis", BASES)):
        odd = set(table[name].unique().to_pylist()) - set(allowed) - ({None} if name == "basis" else set())
        if odd:
            found = sorted(map(str, odd))[:3]
            raise RefusedError(complaint(path, name, expected=", ".join(allowed), found=found, advice=_ADVICE))
    for name in features:
        if table[name].null_count or np.isinf(table[name].to_numpy()).any():
            raise RefusedError(
                complaint(path, name, expected="numbers or NaN", found="null or infinity", advice=_ADVICE)
            )
