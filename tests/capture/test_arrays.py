"""Arrays from strangers' NPZ and HDF5 files: what is plain is read, whatever reaches further is refused."""

import io
import os
import sys
import zipfile

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pdclass.capture import arrays
from pdclass.capture.arrays import read_arrays
from pdclass.errors import InputError, MissingPartError


def member(array):
    """The bytes of one array as NPZ holds it."""
    held = io.BytesIO()
    np.lib.format.write_array(held, np.asarray(array), allow_pickle=True)
    return held.getvalue()


@pytest.fixture
def npz(tmp_path):
    """Write an archive of named bytes."""

    def write(*members, compression=zipfile.ZIP_STORED):
        path = tmp_path / "x.npz"
        with zipfile.ZipFile(path, "w", compression) as archive:
            for name, content in members:
                archive.writestr(name, content)
        return path

    return write


def refusal(path, needed=("a",)):
    with pytest.raises(InputError) as caught:
        read_arrays(path, needed)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert "\n" not in message
    return message


def complaint_of(path):
    """What is said against a file that holds twenty numbers, None where they come back."""
    try:
        return None if read_arrays(path, ["a"], ["b"])["a"].size == 20 else "another size"
    except InputError as error:
        return str(error)


def test_plain_arrays_come_back(tmp_path):
    """Numbers and text of any order and packing come back; what nobody asks for does not."""
    wanted = {"a": np.arange(6, dtype=">i2").reshape(2, 3), "b": np.array("Quay"), "c": np.asfortranarray(np.eye(3))}
    for save in (np.savez, np.savez_compressed):
        save(tmp_path / "x.npz", other=np.array([{}], object), **wanted)
        found = read_arrays(tmp_path / "x.npz", ["a", "c"], ["b", "absent"])
        assert set(found) == {"a", "b", "c"}
        assert all(np.array_equal(found[name].reshape(-1), wanted[name].reshape(-1)) for name in found)


def test_objects_are_never_unpickled(npz, tmp_path):
    """An array of objects is refused by its header; the trap in it does not go off."""

    class Trap:
        def __reduce__(self):
            return os.mkdir, (str(tmp_path / "sprung"),)

    path = npz(("a.npy", member(np.array([Trap()], object))))
    assert "without objects" in refusal(path)
    assert not (tmp_path / "sprung").exists()


def test_a_file_that_swells_is_refused(npz):
    """A small file that unpacks to a hundred times its size and more is refused before it is unpacked."""
    path = npz(("a.npy", member(np.zeros(100 << 20, np.int8))), compression=zipfile.ZIP_DEFLATED)
    assert "times its size unpacked" in refusal(path)


@pytest.mark.filterwarnings("ignore:Duplicate name")
def test_what_else_a_file_may_not_be(npz, tmp_path, monkeypatch):
    """Doubled names, cut bodies, other packings, missing arrays, other kinds of file and too much are named."""
    good = member(np.arange(4.0))
    assert "'a.npy' twice" in refusal(npz(("a.npy", good), ("a.npy", good)))
    assert "another packing" in refusal(npz(("a.npy", good), compression=zipfile.ZIP_BZIP2))
    assert "nearest known one is 'counts'" in refusal(npz(("counts.npy", good)), ["count"])
    (tmp_path / "x.npz").write_bytes(b"PK is not enough")
    assert "not readable as NPZ" in refusal(tmp_path / "x.npz")
    assert "no such file" in refusal(tmp_path / "none.npz")
    path = npz(("a.npy", good))
    monkeypatch.setattr(arrays, "ARRAY_LIMIT_BYTES", 16)
    assert "split the file" in refusal(path)
    monkeypatch.setattr(arrays, "MEMBER_LIMIT", 0)
    assert "at most 0" in refusal(path)


def test_a_cut_body_and_a_lying_header_are_refused(npz):
    """Fewer bytes than the header's shape promises are refused, and so are more."""
    good = member(np.arange(4.0))
    assert "a: expected" in refusal(npz(("a.npy", good[:-8])))
    assert "reading array header" in refusal(npz(("a.npy", good[:100])))
    huge = good.replace(b"(4,), }" + 18 * b" ", b"(9" + 18 * b"0" + b",), }")
    assert huge != good
    assert "a: expected at most" in refusal(npz(("a.npy", huge)))


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(place=st.integers(0, 600), value=st.integers(0, 255))
def test_a_damaged_archive_ends_in_one_line(tmp_path, place, value):
    """Whatever byte is changed, the arrays come back or one line says why not."""
    path = tmp_path / "d.npz"
    np.savez_compressed(path, a=np.arange(20.0), b="text")
    content = bytearray(path.read_bytes())
    content[place % len(content)] = value
    path.write_bytes(content)
    complaint = complaint_of(path)
    assert complaint is None or (complaint.startswith(str(path)) and "\n" not in complaint)


@pytest.fixture
def hdf5(tmp_path):
    """The library and a file with everything that an HDF5 file may hold."""
    h5py = pytest.importorskip("h5py")
    path = tmp_path / "x.h5"
    (tmp_path / "secret.bin").write_bytes(bytes(64))
    with h5py.File(path, "w") as file:
        file["counts"] = np.arange(5, dtype=np.int16)
        file["inner/waves"] = np.ones((2, 3))
        file["words"] = ["one", "two"]
        file["soft"] = h5py.SoftLink("/counts")
        file["away"] = h5py.ExternalLink("other.h5", "/counts")
        file["far/away"] = h5py.ExternalLink("other.h5", "/counts")
        file.create_dataset("outside", (4,), np.int16, external=[(str(tmp_path / "secret.bin"), 0, 8)])
        layout = h5py.VirtualLayout((4,), np.int16)
        layout[:] = h5py.VirtualSource("other.h5", "counts", (4,))
        file.create_virtual_dataset("virtual", layout)
        file.create_dataset("swollen", (200 << 20,), np.int8, chunks=(1 << 20,), compression="gzip")
        file.create_dataset("nothing", data=h5py.Empty(np.float32))
        file.create_dataset("reference", data=file["counts"].ref, dtype=h5py.ref_dtype)
        file.create_dataset("packed", data=np.arange(100), compression="gzip", shuffle=True, fletcher32=True)
    return path


def test_hdf5_arrays_come_back(hdf5):
    """Numbers, packed numbers, text and arrays in groups come back."""
    found = read_arrays(hdf5, ["counts", "inner/waves", "words", "packed"], ["absent", "inner/absent"])
    assert found["counts"].dtype == np.int16
    assert found["inner/waves"].shape == (2, 3)
    assert found["words"].tolist() == ["one", "two"]
    assert found["packed"][-1] == 99
    assert "absent" not in found


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("soft", "a symbolic link"),
        ("away", "a link to another file"),
        ("far/away", "a link to another file"),
        ("outside", "samples that lie in another file"),
        ("virtual", "put together from other files"),
        ("swollen", "times its size unpacked"),
        ("nothing", "an empty dataset"),
        ("reference", "without objects"),
        ("inner", "found a group"),
        ("count", "nearest known one is 'counts'"),
    ],
)
def test_what_reaches_out_of_an_hdf5_file_is_refused(hdf5, name, words):
    """Links, virtual and external storage, references, bombs and groups are each refused by name."""
    assert words in refusal(hdf5, [name])


def test_a_filter_that_would_load_code_is_refused(hdf5):
    """A packing that does not come with the library is refused before a value is read."""
    h5py = pytest.importorskip("h5py")
    with h5py.File(hdf5, "a") as file:
        plist = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
        plist.set_chunk((10,))
        plist.set_filter(305, h5py.h5z.FLAG_OPTIONAL)
        space = h5py.h5s.create_simple((10,))
        h5py.h5d.create(file.id, b"odd", h5py.h5t.NATIVE_INT16, space, plist)
    assert "filter 305" in refusal(hdf5, ["odd"])


def test_a_heap_without_sizes_is_refused(tmp_path):
    """Texts whose heap was damaged so that the library would go round for ever are refused before it looks."""
    h5py = pytest.importorskip("h5py")
    path = tmp_path / "x.h5"
    with h5py.File(path, "w") as file:
        file["a"] = "Quay Road"
        file["b"] = "HF1"
    content = bytearray(path.read_bytes())
    heap = content.index(b"GCOL")
    assert str(read_arrays(path, ["a"])["a"]) == "Quay Road"
    for place, value in ((heap + 24, 57), (heap + 24, 255), (heap + 9, 0), (heap + 15, 1)):
        damaged = bytearray(content)
        damaged[place] = value
        path.write_bytes(damaged)
        assert "heap of texts" in refusal(path)


def test_other_files_are_no_hdf5(tmp_path):
    """The first bytes decide before the library is asked."""
    (tmp_path / "x.h5").write_bytes(b"not at all")
    assert "expected an HDF5 file" in refusal(tmp_path / "x.h5")


def test_without_the_extra_it_is_named(tmp_path, monkeypatch):
    """Where h5py is not installed the message names the extra, and the exit code is 5."""
    (tmp_path / "x.h5").write_bytes(b"\x89HDF\r\n\x1a\n" + bytes(100))
    monkeypatch.setitem(sys.modules, "h5py", None)
    with pytest.raises(MissingPartError, match=r"pdclass\[hdf5\]") as caught:
        read_arrays(tmp_path / "x.h5", ["a"])
    assert caught.value.exit_code == 5
