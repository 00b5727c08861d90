"""The heaps in which HDF5 keeps texts of any length, looked at in plain Python before the library follows them.

The library goes round for ever in a heap whose objects have no size. Only what keeps it going on is checked here: the
global heap collections of the HDF5 file format (version 1, lengths of 8 bytes).
"""

from __future__ import annotations

import mmap
from collections.abc import Iterator
from typing import BinaryIO

_MARK = b"GCOL\x01"
_HEAD, _OBJECT_HEAD = 16, 16


def heaps_are_sound(file: BinaryIO) -> bool:
    """Whether every heap of an open file that is not empty is filled by objects that have a size."""
    with mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ) as content:
        return all(_is_sound(content, place) for place in _places(content))


def _places(content: mmap.mmap) -> Iterator[int]:
    place = content.find(_MARK)
    while place >= 0:
        yield place
        place = content.find(_MARK, place + 1)


def _is_sound(content: mmap.mmap, place: int) -> bool:
    end = place + _number(content, place + 8, 8)
    if not place + _HEAD <= end <= len(content):
        return False
    at = place + _HEAD
    while at + _OBJECT_HEAD <= end:
        size = _number(content, at + 8, 8)
        if _number(content, at, 2) == 0:
            # the free space at the end of the heap, whose size counts its head
            return size == end - at
        at += _OBJECT_HEAD + -(-size // 8) * 8
    return at <= end


def _number(content: mmap.mmap, place: int, count: int) -> int:
    return int.from_bytes(content[place : place + count], "little")
