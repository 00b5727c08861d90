"""One-dimensional arrays in an NPZ file: plain numbers only, the same arrays giving the same bytes."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.lib import format as npy
from numpy.typing import NDArray

from pdclass.errors import RefusedError, complaint

_FIXED_TIME = (1980, 1, 1, 0, 0, 0)
_ADVICE = "do not use it; get the bundle again from its maker"


def write_arrays(path: Path, arrays: Mapping[str, NDArray[Any]]) -> None:
    """Write arrays uncompressed with fixed times, little-endian, in the order given."""
    with zipfile.ZipFile(path, "w", zipfile.ZIP_STORED) as archive:
        for name, array in arrays.items():
            member = io.BytesIO()
            little = np.ascontiguousarray(array, array.dtype.newbyteorder("<"))
            npy.write_array(member, little, version=(1, 0), allow_pickle=False)
            entry = zipfile.ZipInfo(f"{name}.npy", _FIXED_TIME)
            entry.create_system = 3
            entry.external_attr = 0o644 << 16
            archive.writestr(entry, member.getvalue())


def read_arrays(path: Path, types: Mapping[str, str]) -> dict[str, NDArray[Any]]:
    """The arrays of the given names and types; nothing is unpacked before its size has been checked.

    Raises
    ------
    RefusedError
        If the file is no such archive, has other or compressed members, or an array of another type or size.
    """
    try:
        with zipfile.ZipFile(path) as archive:
            _check_members(path, archive, types)
            return {name: _array(path, name, archive.read(f"{name}.npy"), kind) for name, kind in types.items()}
    except (zipfile.BadZipFile, EOFError, OSError, ValueError, NotImplementedError) as error:
        found = f"{type(error).__name__}: {error}"
        raise RefusedError(complaint(path, "content", expected="plain arrays", found=found, advice=_ADVICE)) from None


def _check_members(path: Path, archive: zipfile.ZipFile, types: Mapping[str, str]) -> None:
    found = sorted(entry.filename for entry in archive.infolist())
    expected = sorted(f"{name}.npy" for name in types)
    if found != expected:
        raise RefusedError(
            complaint(path, "members", expected=", ".join(expected), found=", ".join(found)[:200], advice=_ADVICE)
        )
    size = path.stat().st_size
    for entry in archive.infolist():
        stored = entry.compress_type == zipfile.ZIP_STORED and entry.file_size == entry.compress_size <= size
        if not stored:
            raise RefusedError(complaint(path, entry.filename, expected="stored", found="compressed", advice=_ADVICE))


def _array(path: Path, name: str, raw: bytes, kind: str) -> NDArray[Any]:
    stream = io.BytesIO(raw)
    if npy.read_magic(stream) != (1, 0):
        raise ValueError(f"{name}: another version of the array format")
    shape, fortran, dtype = npy.read_array_header_1_0(stream, max_header_size=1000)
    body = raw[stream.tell() :]
    wanted = np.dtype(kind)
    if dtype != wanted or len(shape) != 1 or fortran or shape[0] * wanted.itemsize != len(body):
        expected, found = f"one dimension of {kind} that fills the member", f"shape {shape} of {dtype}"
        raise RefusedError(complaint(path, name, expected=expected, found=found, advice=_ADVICE))
    if wanted.kind == "b" and not set(body) <= {0, 1}:
        raise RefusedError(complaint(path, name, expected="bytes 0 and 1", found="others", advice=_ADVICE))
    return np.frombuffer(body, wanted).astype(wanted.newbyteorder("="))
