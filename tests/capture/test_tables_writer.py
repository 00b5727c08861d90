"""A pulse table is the same bytes for the same pulses, readable by anybody, and whole or not there."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from pdclass.capture import write_pulses
from pdclass.errors import InputError
from pdclass.pulses import TABLE_COLUMNS, Chain


def test_the_same_pulses_give_the_same_bytes(tmp_path, make_pulses):
    """Two writings differ in no byte, and leave nothing beside them."""
    for name in ("one", "two"):
        write_pulses(tmp_path / name, make_pulses())
    assert (tmp_path / "one").read_bytes() == (tmp_path / "two").read_bytes()
    assert sorted(path.name for path in tmp_path.iterdir()) == ["one", "two"]


def test_the_layout_is_the_contract(tmp_path, make_pulses):
    """Names, types, compression and file metadata are as promised."""
    write_pulses(tmp_path / "p.parquet", make_pulses())
    file = pq.ParquetFile(tmp_path / "p.parquet")
    assert file.schema_arrow.names == ["pulse_id", *TABLE_COLUMNS, "wave"]
    assert file.schema_arrow.field("wave").type == pa.list_(pa.float32(), 2000)
    assert file.schema_arrow.field("time_utc").type == pa.timestamp("ns", "UTC")
    assert {file.metadata.row_group(0).column(place).compression for place in range(25)} == {"ZSTD"}
    said = json.loads(file.schema_arrow.metadata[b"pdclass"])
    assert said["format"] == 1
    assert said["rate_hz"] == 100e6
    assert said["chains"][0]["band_hz"] == [1e5, 2e7]
    assert set(said["chains"][1].values()) == {None}


def test_unknown_numbers_are_null_on_disk(tmp_path, make_pulses):
    """NaN in a scalar column is null in the file; NaN in a wave stays."""
    pulses = make_pulses()
    pulses.waves[0, :5] = np.nan
    write_pulses(tmp_path / "p.parquet", pulses)
    table = pq.read_table(tmp_path / "p.parquet")
    assert table["duration_us"].null_count == 5
    assert table["wave"].combine_chunks().flatten().null_count == 0
    assert np.isnan(table["wave"][0].as_py()[:5]).all()


def test_what_could_not_be_read_back_is_not_written(tmp_path, make_pulses):
    """Two rates, no chain, another window or a repeated pulse leave no file."""
    pulses = make_pulses()
    repeated = replace(pulses, table=pulses.table.set_axis(["a", "a", "b", "c", "d"]))
    wrong = {
        "one rate a table": replace(pulses, chains=(Chain(1e8), Chain(2e8))),
        "no chain": replace(pulses, chains=()),
        "expected 2000 samples": replace(pulses, waves=pulses.waves[:, :1999]),
        "each pulse once": repeated,
        "wave, row 0": replace(pulses, waves=pulses.waves * 0),
    }
    for said, each in wrong.items():
        with pytest.raises(InputError, match=said):
            write_pulses(tmp_path / "p.parquet", each)
    assert list(tmp_path.iterdir()) == []


def test_a_missing_folder_is_named(tmp_path, make_pulses):
    """A folder that is not there gives one line."""
    with pytest.raises(InputError, match="cannot be written"):
        write_pulses(tmp_path / "nowhere" / "p.parquet", make_pulses())


def test_a_label_that_could_not_be_read_back_is_refused(tmp_path, make_pulses):
    """A class that is neither ours nor declared is not written; declared it is, and stands in the metadata."""
    pulses = make_pulses()
    odd = replace(pulses, table=pulses.table.assign(label="crane drive"))
    with pytest.raises(InputError, match="'crane drive'"):
        write_pulses(tmp_path / "p.parquet", odd)
    write_pulses(tmp_path / "p.parquet", replace(odd, own_classes={"crane drive": "interference"}))
    said = json.loads(pq.read_schema(tmp_path / "p.parquet").metadata[b"pdclass"])
    assert said["classes"] == {"crane drive": "interference"}
