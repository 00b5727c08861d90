"""The footer of a Parquet file in plain Python, so that declared sizes are known before the library acts on them.

The library aborts the whole process on some damaged column metadata when these are looked at from Python; here
they are read as plain content: Thrift compact protocol, the fields of `FileMetaData` of the Apache Parquet format.
"""

from __future__ import annotations

import os
import struct
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, BinaryIO

FOOTER_LIMIT_BYTES = 64 << 20
_DEPTH_LIMIT = 12
_MAGIC = b"PAR1"
# places of the fields that are used, in the structs of parquet.thrift
_ROWS, _ROW_GROUPS = 3, 4
_COLUMNS, _GROUP_ROWS = 1, 3
_CHUNK = 3
_PATH, _VALUES, _UNCOMPRESSED = 3, 5, 6


@dataclass(frozen=True)
class Declared:
    """What a footer declares.

    Attributes
    ----------
    rows : rows of the table.
    values : values a top-level column, lists counted by their elements.
    uncompressed_bytes : bytes a top-level column once decompressed, still encoded.
    """

    rows: int
    values: dict[str, int]
    uncompressed_bytes: dict[str, int]


def read_footer(source: BinaryIO) -> Declared:
    """What the footer of an open Parquet file declares; the file is left at its start.

    Raises
    ------
    ValueError
        If the file is not a Parquet file, is cut short, or its footer is damaged; the message has no file name.
    """
    size = os.fstat(source.fileno()).st_size
    head = source.read(4)
    if head != _MAGIC or size < 12:
        raise ValueError(f"kind: expected a Parquet file, found {size} bytes that begin with {head!r}")
    source.seek(size - 8)
    length, tail = struct.unpack("<I4s", source.read(8))
    if tail != _MAGIC:
        raise ValueError(f"last bytes: expected {_MAGIC!r}, found {tail!r}: the file is cut short")
    if length > min(size - 12, FOOTER_LIMIT_BYTES):
        raise ValueError(f"footer: expected at most {min(size - 12, FOOTER_LIMIT_BYTES)} bytes, found {length}")
    source.seek(size - 8 - length)
    content = source.read(length)
    source.seek(0)
    try:
        return _declared(_Compact(content).structure(0))
    except (IndexError, KeyError, TypeError, AttributeError, struct.error) as error:
        raise ValueError(f"footer: damaged ({type(error).__name__} at {error}), copy the file again") from None


def _declared(footer: dict[int, Any]) -> Declared:
    values: dict[str, int] = {}
    sizes: dict[str, int] = {}
    rows = 0
    for group in footer.get(_ROW_GROUPS, []):
        rows += group[_GROUP_ROWS]
        for column in group[_COLUMNS]:
            chunk = column[_CHUNK]
            name = chunk[_PATH][0].decode("utf-8", "replace")
            if chunk[_VALUES] < 0 or chunk[_UNCOMPRESSED] < 0 or group[_GROUP_ROWS] < 0:
                raise ValueError(f"footer: column {name!r}: expected sizes of at least 0, found a negative one")
            values[name] = values.get(name, 0) + chunk[_VALUES]
            sizes[name] = sizes.get(name, 0) + chunk[_UNCOMPRESSED]
    if rows != footer[_ROWS]:
        raise ValueError(f"footer: expected {footer[_ROWS]} rows, found {rows} in the row groups")
    return Declared(rows, values, sizes)


class _Compact:
    """Values of the Thrift compact protocol, taken one after the other from bytes."""

    def __init__(self, content: bytes) -> None:
        self.content = content
        self.place = 0
        self.readers: dict[int, Callable[[int], Any]] = {
            3: lambda _: self.byte(),
            4: lambda _: self.signed(),
            5: lambda _: self.signed(),
            6: lambda _: self.signed(),
            7: lambda _: self.take(8),
            8: lambda _: self.take(self.unsigned()),
            9: self.sequence,
            10: self.sequence,
            12: self.structure,
        }

    def byte(self) -> int:
        self.place += 1
        return self.content[self.place - 1]

    def take(self, count: int) -> bytes:
        if count > len(self.content) - self.place:
            raise IndexError(f"byte {self.place}")
        self.place += count
        return self.content[self.place - count : self.place]

    def unsigned(self) -> int:
        value = 0
        for shift in range(0, 70, 7):
            piece = self.byte()
            value |= (piece & 0x7F) << shift
            if piece < 0x80:
                return value
        raise IndexError(f"byte {self.place}")

    def signed(self) -> int:
        value = self.unsigned()
        return (value >> 1) ^ -(value & 1)

    def structure(self, depth: int) -> dict[int, Any]:
        if depth > _DEPTH_LIMIT:
            raise IndexError(f"byte {self.place}, nested too deep")
        fields: dict[int, Any] = {}
        number = 0
        while head := self.byte():
            number = number + (head >> 4) if head >> 4 else self.signed()
            kind = head & 0x0F
            # in a field, the value of a bool is its type
            fields[number] = kind == 1 if kind in (1, 2) else self.readers[kind](depth + 1)
        return fields

    def sequence(self, depth: int) -> list[Any]:
        head = self.byte()
        count = head >> 4 if head >> 4 != 15 else self.unsigned()
        if count > len(self.content) - self.place or depth > _DEPTH_LIMIT:
            raise IndexError(f"byte {self.place}")
        kind = head & 0x0F
        read = (lambda _: self.byte()) if kind in (1, 2) else self.readers[kind]
        return [read(depth + 1) for _ in range(count)]
