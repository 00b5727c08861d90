"""Arrays in an archive that needs no trust."""

import io
import zipfile

import numpy as np
import pytest

from pdclass.errors import RefusedError
from pdclass.model.treefile import read_arrays, write_arrays

TYPES = {"one": "<f8", "two": "|b1", "three": "<i4"}
ARRAYS = {"one": np.array([1.5, -0.0, np.inf]), "two": np.array([True, False]), "three": np.arange(3, dtype=np.int32)}


def member(array, **options):
    stream = io.BytesIO()
    np.lib.format.write_array(stream, array, **options)
    return stream.getvalue()


def archive(path, members, compression=zipfile.ZIP_STORED):
    with zipfile.ZipFile(path, "w", compression) as file:
        for name, raw in members:
            file.writestr(name, raw)
    return path


def plain():
    return {f"{name}.npy": member(array) for name, array in ARRAYS.items()}


def test_arrays_come_back_and_numpy_reads_them(tmp_path):
    """Our file is an ordinary NPZ, and ours reads it bit for bit."""
    write_arrays(tmp_path / "a.npz", ARRAYS)
    found = read_arrays(tmp_path / "a.npz", TYPES)
    with np.load(tmp_path / "a.npz", allow_pickle=False) as theirs:
        for name, array in ARRAYS.items():
            assert found[name].tobytes() == array.tobytes() == theirs[name].tobytes()


def test_other_archives_are_refused(tmp_path):
    """Compressed, missing, further, twice, mistyped, mis-sized, pickled or damaged members are refused."""
    good = plain()
    wrong = [
        [*good.items()][:2],
        [*good.items(), ("four.npy", b"")],
        [*{**good, "one.npy": member(ARRAYS["one"].astype(np.float32))}.items()],
        [*{**good, "one.npy": member(ARRAYS["one"].reshape(3, 1))}.items()],
        [*{**good, "one.npy": good["one.npy"][:-8]}.items()],
        [*{**good, "one.npy": good["one.npy"] + b"x"}.items()],
        [*{**good, "one.npy": member(np.array([{}]), allow_pickle=True)}.items()],
        [*{**good, "one.npy": member(ARRAYS["one"], version=(2, 0))}.items()],
        [*{**good, "one.npy": b"nothing"}.items()],
        [*{**good, "two.npy": good["two.npy"][:-1] + b"\x02"}.items()],
    ]
    for number, members in enumerate(wrong):
        path = archive(tmp_path / f"{number}.npz", members)
        with pytest.raises(RefusedError, match=f"{number}.npz"):
            read_arrays(path, TYPES)
    packed = archive(tmp_path / "packed.npz", good.items(), zipfile.ZIP_DEFLATED)
    with pytest.raises(RefusedError, match="compressed"):
        read_arrays(packed, TYPES)
    read_arrays(archive(tmp_path / "good.npz", good.items()), TYPES)
