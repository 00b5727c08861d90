"""Compiled kernels: one decorator, and a store of machine code that no change of a source outlives.

The compiler's own store looks at a kernel's own file alone. A kernel holds the code and the constants of those that it
calls in other modules, so that after a change, or an upgrade, of those it would go on as it was. Here machine code is
kept by the digest of the whole room.
"""

from __future__ import annotations

import hashlib
import os
import sys
from collections.abc import Callable
from functools import lru_cache
from pathlib import Path
from typing import Any, TypeVar, cast

import numba
from numba.core import config

Kernel = TypeVar("Kernel", bound=Callable[..., Any])


def compiled(function: Kernel) -> Kernel:
    """A function compiled at its first call, without the interpreter's lock, its machine code kept on disk."""
    # asked for by the user, or looked for only while the kernel is made: other packages keep their own place
    asked = getattr(config, "CACHE_DIR", "")
    setattr(config, "CACHE_DIR", asked or str(kernel_folder(Path(function.__code__.co_filename).parent)))  # noqa: B010
    try:
        return cast(Kernel, numba.njit(cache=True, nogil=True)(function))
    finally:
        setattr(config, "CACHE_DIR", asked)  # noqa: B010


@lru_cache
def kernel_folder(room: Path) -> Path:
    """Where the machine code of a room's kernels is kept: in the room, else in the user's cache.

    Parameters
    ----------
    room : folder of the modules; the digest of all of them names the place.
    """
    every = hashlib.sha256()
    for source in sorted(room.glob("*.py")):
        every.update(source.name.encode() + b"\0" + source.read_bytes() + b"\0")
    kept = room / "__pycache__"
    if not os.access(kept if kept.is_dir() else room, os.W_OK):
        kept = _user_cache() / "pdclass" / room.name
    return kept / f"kernels-{every.hexdigest()[:16]}"


def _user_cache() -> Path:
    if sys.platform == "win32":
        return Path(os.environ.get("LOCALAPPDATA", Path.home() / "AppData" / "Local"))
    return Path(os.environ.get("XDG_CACHE_HOME", Path.home() / ".cache"))
