"""Pages of a mapped record that the pass over it has left behind are given back to the system."""

from __future__ import annotations

import mmap
from typing import Any

import numpy as np
from numpy.typing import NDArray

#: Around a page that is looked at the system maps its neighbours, too [bytes].
_AROUND = 1 << 20


def let_go(counts: NDArray[Any], first: int, last: int) -> None:
    """Give the pages of samples `first` to `last` and their neighbours back; looked at again, they are read again.

    Without effect on an array that is no read-only map of a file, and where the system knows no such advice.
    """
    pages = getattr(counts, "_mmap", None)
    if pages is None or getattr(counts, "mode", None) != "r" or not hasattr(mmap, "MADV_DONTNEED"):
        return
    start = counts.ctypes.data - np.frombuffer(pages, np.uint8).ctypes.data
    begin = max(0, start + first * counts.itemsize - _AROUND) // mmap.PAGESIZE * mmap.PAGESIZE
    end = min(len(pages), start + last * counts.itemsize + _AROUND)
    if end > begin:
        pages.madvise(mmap.MADV_DONTNEED, begin, end - begin)
