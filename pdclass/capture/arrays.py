"""Arrays by name from a stranger's NPZ or HDF5 file: plain numbers and text of bounded size, and nothing executed."""

from __future__ import annotations

import contextlib
import os
import tokenize
import zipfile
import zlib
from collections.abc import Callable, Collection, Iterator
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.lib import format as npy
from numpy.typing import NDArray

from pdclass.capture.guard import open_plain
from pdclass.capture.heaps import heaps_are_sound
from pdclass.capture.maps import nearest
from pdclass.digest import file_digest
from pdclass.errors import InputError, MissingPartError, complaint

ARRAY_LIMIT_BYTES = 4 << 30
MEMBER_LIMIT = 1000
#: Recorded samples shrink a few times; a file that grows more than this when unpacked holds none.
GROWTH_LIMIT = 100
_GROWTH_FREE_BYTES = 64 << 20
_HEADER_LIMIT = 10_000
_HDF5_MARK = b"\x89HDF\r\n\x1a\n"
#: Filters that come with the library; others would load code from a folder named in the environment.
_HDF5_FILTERS = {1: "gzip", 2: "shuffle", 3: "fletcher32", 4: "szip", 32000: "lzf"}
_PLAIN_KINDS = "biufUS"

NPZ_ENDINGS = (".npz",)
HDF5_ENDINGS = (".h5", ".hdf5")


def read_arrays(path: Path, needed: Collection[str], wanted: Collection[str] = ()) -> dict[str, NDArray[Any]]:
    """Arrays of an NPZ or HDF5 file by name, in memory; what nobody asks for is not unpacked.

    Parameters
    ----------
    path : ends in .npz, .h5 or .hdf5.
    needed : names that the file must have; in HDF5 paths of datasets, as `group/waves`.
    wanted : names that it may have.

    Raises
    ------
    InputError
        If the file is damaged, too large or grows too much when unpacked, lacks a needed array, names one twice,
        or holds Python objects, links, or samples that lie in another file.
    MissingPartError
        If HDF5 is to be read and `h5py` is not installed.
    """
    reader = _read_hdf5 if path.suffix in HDF5_ENDINGS else _read_npz
    return reader(path, needed, wanted)


def bytes_digest(path: Path) -> str:
    """Sha256 of an ordinary file's bytes as 64 hex digits."""
    open_plain(path).close()
    return file_digest(path)


def _wrong(path: Path, field: str, expected: object, found: object, advice: str) -> InputError:
    return InputError(complaint(path, field, expected=expected, found=found, advice=advice))


def _chosen(path: Path, names: Collection[str], needed: Collection[str], wanted: Collection[str]) -> list[str]:
    for name in needed:
        if name not in names:
            shown = ", ".join(sorted(names)[:8]) or "none"
            raise _wrong(path, name, "an array of that name", shown, f"write it{nearest(name, names)}")
    return [name for name in dict.fromkeys([*needed, *wanted]) if name in names]


def _check_size(path: Path, name: str, total: int, room: int) -> int:
    if total > room:
        raise _wrong(path, name, f"at most {ARRAY_LIMIT_BYTES} bytes altogether", "more declared", "split the file")
    return room - total


def _read_npz(path: Path, needed: Collection[str], wanted: Collection[str]) -> dict[str, NDArray[Any]]:
    with open_plain(path) as file, _npz_errors(path), zipfile.ZipFile(file) as archive:
        entries = _npz_members(path, archive, os.fstat(file.fileno()).st_size)
        room = ARRAY_LIMIT_BYTES
        found = {}
        for name in _chosen(path, entries, needed, wanted):
            room = _check_size(path, name, entries[name].file_size, room)
            with archive.open(entries[name]) as member:
                found[name] = _npz_array(path, name, member, entries[name].file_size)
        return found


@contextlib.contextmanager
def _npz_errors(path: Path) -> Iterator[None]:
    try:
        yield
    except (zipfile.BadZipFile, zipfile.LargeZipFile, EOFError, OSError, ValueError, NotImplementedError) as error:
        reason = " ".join(str(error).split())[:160]
        raise InputError(f"{path}: not readable as NPZ ({reason}); copy it again, or write it again") from None
    except (RuntimeError, SyntaxError, LookupError, OverflowError, zlib.error, tokenize.TokenError) as error:
        raise InputError(f"{path}: damaged NPZ file ({type(error).__name__}: {error}); copy it again") from None


def _npz_members(path: Path, archive: zipfile.ZipFile, size: int) -> dict[str, zipfile.ZipInfo]:
    entries = archive.infolist()
    if len(entries) > MEMBER_LIMIT:
        raise _wrong(path, "members", f"at most {MEMBER_LIMIT}", len(entries), "write the arrays that are needed")
    names = [entry.filename for entry in entries]
    twice = next((name for at, name in enumerate(names) if name in names[:at]), None)
    if twice is not None:
        raise _wrong(path, "members", "each name once", f"{twice!r} twice", "write the file again")
    for entry in entries:
        if entry.flag_bits & 1 or entry.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
            raise _wrong(path, entry.filename, "stored or deflated", "another packing", "write it with numpy.savez")
        if entry.compress_type == zipfile.ZIP_STORED and entry.file_size != entry.compress_size:
            raise _wrong(path, entry.filename, "one size", "two that disagree", "write the file again")
    total = sum(entry.file_size for entry in entries)
    if total > max(_GROWTH_FREE_BYTES, GROWTH_LIMIT * size):
        expected = f"at most {GROWTH_LIMIT} times its size unpacked"
        raise _wrong(path, "size", expected, f"{total} bytes in {size}", "it is no file of samples; do not use it")
    return {entry.filename.removesuffix(".npy"): entry for entry in entries}


def _npz_array(path: Path, name: str, member: Any, size: int) -> NDArray[Any]:
    version = npy.read_magic(member)
    if version not in ((1, 0), (2, 0)):
        raise _wrong(path, name, "array format 1 or 2", version, "write it with numpy.savez")
    read: Callable[..., tuple[tuple[int, ...], bool, Any]]
    read = npy.read_array_header_1_0 if version == (1, 0) else npy.read_array_header_2_0
    shape, fortran, dtype = read(member, max_header_size=_HEADER_LIMIT)
    _check_plain(path, name, dtype)
    count = int(np.prod([int(side) for side in shape], dtype=object)) if shape else 1
    if any(side < 0 for side in shape) or count * dtype.itemsize > size:
        raise _wrong(path, name, f"at most {size} bytes", f"shape {shape} of {dtype}", "write the file again")
    raw = member.read(size)
    if len(raw) != count * dtype.itemsize:
        raise _wrong(path, name, f"{count * dtype.itemsize} bytes", f"{len(raw)} bytes", "copy the file again")
    values = np.frombuffer(raw, dtype).reshape(shape, order="F" if fortran else "C")
    return np.ascontiguousarray(values, dtype.newbyteorder("="))


def _check_plain(path: Path, name: str, dtype: Any) -> None:
    if dtype.hasobject or dtype.kind not in _PLAIN_KINDS or dtype.itemsize == 0:
        advice = "write it as numbers or text, without objects; nothing is ever unpickled"
        raise _wrong(path, name, "numbers or text", f"type {dtype}", advice)


def _read_hdf5(path: Path, needed: Collection[str], wanted: Collection[str]) -> dict[str, NDArray[Any]]:
    with open_plain(path) as file:
        _check_mark(path, file)
    library = _hdf5_library(path)
    try:
        with library.File(path, "r", locking=False) as opened:
            names = _hdf5_names(opened, [*needed, *wanted])
            room = ARRAY_LIMIT_BYTES
            found = {}
            for name in _chosen(path, names, needed, wanted):
                _check_links(path, opened, name, library)
                _check_stored(path, name, opened[name], library)
                room = _check_size(path, name, _declared_bytes(opened[name]), room)
                found[name] = _hdf5_values(path, name, opened[name], library)
            return found
    except (OSError, RuntimeError, KeyError, TypeError, ValueError, UnicodeDecodeError) as error:
        reason = " ".join(str(error).split())[:160]
        raise InputError(f"{path}: not readable as HDF5 ({reason}); copy it again, or write it again") from None


def _check_mark(path: Path, file: BinaryIO) -> None:
    head = file.read(len(_HDF5_MARK))
    if head != _HDF5_MARK:
        raise _wrong(path, "kind", "an HDF5 file", f"a file that begins with {head!r}", "check the name's ending")
    if not heaps_are_sound(file):
        raise _wrong(path, "heap of texts", "objects that fill it", "a damaged one", "copy the file again")


def _hdf5_library(path: Path) -> Any:
    try:
        import h5py  # noqa: PLC0415 - an extra that most users do without
    except ImportError:
        advice = "install it with: pip install 'pdclass[hdf5]'"
        raise MissingPartError(
            complaint(path, "HDF5", expected="the extra [hdf5] (h5py)", found="nothing installed", advice=advice)
        ) from None
    return h5py


def _hdf5_names(opened: Any, asked: Collection[str]) -> list[str]:
    """Names at the top, and those asked for that lie deeper; no link is followed to list them."""
    top = list(opened.keys())[: 10 * MEMBER_LIMIT]
    return [*top, *(name for name in asked if name not in top and _lies_inside(opened, name))]


def _lies_inside(opened: Any, name: str) -> bool:
    place = opened
    for part in name.split("/"):
        if not hasattr(place, "keys") or part not in place.keys():  # noqa: SIM118 - `in` would follow a link
            return False
        link = place.get(part, getlink=True)
        if type(link).__name__ != "HardLink":
            return True
        place = place[part]
    return True


def _check_links(path: Path, opened: Any, name: str, library: Any) -> None:
    place = opened
    for part in name.split("/"):
        link = place.get(part, getlink=True)
        if not isinstance(link, library.HardLink):
            kind = "a link to another file" if isinstance(link, library.ExternalLink) else "a symbolic link"
            raise _wrong(path, name, "an array inside the file", kind, "write the samples into the file itself")
        place = place[part]
    if not isinstance(place, library.Dataset):
        raise _wrong(path, name, "an array", "a group", "name the dataset in it, as group/name")


def _check_stored(path: Path, name: str, dataset: Any, library: Any) -> None:
    if dataset.is_virtual or dataset.external:
        found = "one put together from other files" if dataset.is_virtual else "samples that lie in another file"
        raise _wrong(path, name, "an array inside the file", found, "write the samples into the file itself")
    plist = dataset.id.get_create_plist()
    for place in range(plist.get_nfilters()):
        number = plist.get_filter(place)[0]
        if number not in _HDF5_FILTERS:
            expected = "packing by " + ", ".join(_HDF5_FILTERS.values())
            raise _wrong(path, name, expected, f"filter {number}", "write it with gzip or unpacked")
    if library.check_string_dtype(dataset.dtype) is None:
        _check_plain(path, name, dataset.dtype)
    if dataset.shape is None:
        raise _wrong(path, name, "values", "an empty dataset", "write it again")
    stored, total = dataset.id.get_storage_size(), _declared_bytes(dataset)
    if total > max(_GROWTH_FREE_BYTES, GROWTH_LIMIT * stored):
        expected = f"at most {GROWTH_LIMIT} times its size unpacked"
        raise _wrong(path, name, expected, f"{total} bytes in {stored}", "it holds no samples; do not use it")


def _declared_bytes(dataset: Any) -> int:
    return int(dataset.size or 0) * int(dataset.dtype.itemsize)


def _hdf5_values(path: Path, name: str, dataset: Any, library: Any) -> NDArray[Any]:
    text = library.check_string_dtype(dataset.dtype)
    values = np.asarray(dataset.asstr()[()] if text is not None else dataset[()])
    if text is not None:
        # texts of any length come as objects of one class; they are plain words after this
        values = np.asarray([str(word) for word in values.ravel()], str).reshape(values.shape)
    _check_plain(path, name, values.dtype if values.size else np.dtype("U1"))
    return values
