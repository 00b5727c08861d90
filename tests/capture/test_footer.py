"""The footer is read in plain Python as the library reads it, and damage in it is a ValueError."""

from __future__ import annotations

import struct

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from pdclass.capture.footer import read_footer


def declared(path):
    with path.open("rb") as source:
        return read_footer(source)


def test_declared_sizes_agree_with_the_library(tmp_path):
    """Rows, values and bytes of every column are those that the library finds in a healthy file."""
    rows = 3000
    table = pa.table(
        {
            "name": [f"n{row}" for row in range(rows)],
            "flag": [row % 3 == 0 for row in range(rows)],
            "wave": pa.array([[0.5] * (row % 7) for row in range(rows)], pa.list_(pa.float32())),
        }
    )
    path = tmp_path / "x.parquet"
    pq.write_table(table, path, row_group_size=700, write_page_checksum=True, write_page_index=True)
    found, footer = declared(path), pq.read_metadata(path)
    assert found.rows == rows
    for place, name in enumerate(["name", "flag", "wave"]):
        chunks = [footer.row_group(group).column(place) for group in range(footer.num_row_groups)]
        assert found.values[name] == sum(chunk.num_values for chunk in chunks)
        assert found.uncompressed_bytes[name] == sum(chunk.total_uncompressed_size for chunk in chunks)


def with_footer(path, footer: bytes):
    path.write_bytes(b"PAR1" + footer + struct.pack("<I", len(footer)) + b"PAR1")
    return path


@pytest.mark.parametrize(
    ("footer", "said"),
    [
        (b"\x00", "footer: damaged"),
        (b"\x1c" * 40, "nested too deep"),
        (b"\x19" * 40, "footer: damaged"),
        (b"\x19\xfc\xff\xff\xff\x7f", "footer: damaged"),
        (b"\x18\xff\xff\xff\x7f", "footer: damaged"),
        (b"\x15" + b"\xff" * 20, "footer: damaged"),
        (b"\x1d\x00\x00", "footer: damaged"),
        (b"\x36\x02\x00", "expected 1 rows, found 0 in the row groups"),
    ],
)
def test_a_damaged_footer_is_a_value_error(tmp_path, footer, said):
    """Endless nesting, huge lists and numbers, unknown types and missing fields end in one error."""
    with pytest.raises(ValueError, match=said):
        declared(with_footer(tmp_path / "x.parquet", footer))
