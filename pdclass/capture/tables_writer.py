"""Pulse sets into Parquet pulse tables: the same content gives the same bytes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from pdclass.capture.waves import check_waves
from pdclass.digest import canonical_json
from pdclass.errors import InputError, complaint
from pdclass.pulses import LABELS, SIMULATED_COLUMNS, TABLE_COLUMNS, Chain, PulseSet, window_samples
from pdclass.writing import whole_file

TABLE_KEY = b"pdclass"
TABLE_FORMAT = 1
ROWS_A_GROUP = 2048
#: Arrow types of the table's columns, by the pandas types of the contract.
ARROW_TYPES: Mapping[str, Any] = {
    "str": pa.string(),
    "int16": pa.int16(),
    "int64": pa.int64(),
    "float32": pa.float32(),
    "float64": pa.float64(),
    "bool": pa.bool_(),
    "datetime64[ns, UTC]": pa.timestamp("ns", "UTC"),
}


def write_pulses(path: Path, pulses: PulseSet) -> None:
    """Write pulses as a Parquet pulse table (zstd, page checksums), whole or not at all.

    NaN in a scalar column is written as null; NaN in a wave (outside of the record) stays NaN.

    Raises
    ------
    InputError
        If there is no chain, the chains differ in rate, the window is not 20 us long, a pulse stands twice, a
        wave or a label could not be read back, or the file cannot be written.
    """
    schema = _schema(path, pulses)
    _check_readable(path, pulses)
    texts = [field.name for field in schema if field.type == pa.string()]
    with (
        whole_file(Path(path)) as file,
        pq.ParquetWriter(
            file,
            schema,
            compression="zstd",
            compression_level=3,
            use_dictionary=texts,
            use_byte_stream_split=["wave.list.element"],
            write_statistics=texts,
            write_page_checksum=True,
        ) as writer,
    ):
        for start in range(0, len(pulses.table), ROWS_A_GROUP):
            writer.write_table(_rows(pulses, start, schema))


def table_content(chains: tuple[Chain, ...], own_classes: Mapping[str, str] | None = None) -> str:
    """The JSON text of the file metadata key `pdclass`; own classes stand in it where there are any."""
    rows = [{name: value for name, value in asdict(chain).items() if name != "rate_hz"} for chain in chains]
    own = {"classes": dict(own_classes)} if own_classes else {}
    return canonical_json({"format": TABLE_FORMAT, "rate_hz": chains[0].rate_hz, "chains": rows, **own})


def _schema(path: Path, pulses: PulseSet) -> Any:
    rates = sorted({chain.rate_hz for chain in pulses.chains})
    if len(rates) != 1:
        found = " and ".join(f"{rate:g} Hz" for rate in rates) or "no chain"
        advice = "write one table for each rate"
        raise InputError(complaint(path, "rate_hz", expected="one rate a table", found=found, advice=advice))
    simulated = any(name in pulses.table for name in SIMULATED_COLUMNS)
    columns = {**TABLE_COLUMNS, **(SIMULATED_COLUMNS if simulated else {})}
    fields = [pa.field("pulse_id", pa.string(), nullable=False)]
    fields += [pa.field(name, ARROW_TYPES[kind]) for name, kind in columns.items()]
    fields.append(pa.field("wave", pa.list_(pa.float32(), pulses.waves.shape[1])))
    return pa.schema(fields, metadata={TABLE_KEY: table_content(pulses.chains, pulses.own_classes).encode()})


def _check_readable(path: Path, pulses: PulseSet) -> None:
    samples, wanted = pulses.waves.shape[1], window_samples(pulses.rate_hz)
    if samples != wanted:
        advice = "cut the windows to 20 us"
        raise InputError(
            complaint(path, "wave", expected=f"{wanted} samples", found=f"{samples} samples", advice=advice)
        )
    if not pulses.table.index.is_unique:
        found = pulses.table.index[pulses.table.index.duplicated()][0]
        advice = "leave one of the pulses out"
        raise InputError(complaint(path, "pulse_id", expected="each pulse once", found=found, advice=advice))
    odd = set(pulses.table["label"].dropna()) - {*LABELS, *pulses.own_classes}
    if odd:
        expected, found = "labels of ours or declared own classes", repr(min(odd))
        raise InputError(complaint(path, "label", expected=expected, found=found, advice="declare the class"))
    check_waves(str(path), pulses.waves)


def _rows(pulses: PulseSet, start: int, schema: Any) -> Any:
    table = pulses.table.iloc[start : start + ROWS_A_GROUP]
    waves = np.ascontiguousarray(pulses.waves[start : start + ROWS_A_GROUP], np.float32)
    columns = [pa.array(table.index.astype("object"), pa.string())]
    columns += [
        pa.Array.from_pandas(table[field.name], type=field.type) for field in schema if field.name in table.columns
    ]
    columns.append(pa.FixedSizeListArray.from_arrays(pa.array(waves.reshape(-1)), waves.shape[1]))
    return pa.Table.from_arrays(columns, schema=schema)
