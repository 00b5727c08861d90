"""What is written is valid SigMF, always the same bytes, and whole or not there."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import sigmf

from pdclass import writing
from pdclass.capture import counts_digest, open_capture, write_sigmf
from pdclass.errors import InputError


@pytest.mark.parametrize("dtype", ["int8", "int16", "float32"])
def test_the_standard_package_accepts_and_reads_it(tmp_path, make_capture, dtype):
    """The sigmf package's own validator passes the recording and finds the same samples."""
    capture = make_capture(dtype=dtype)
    path = write_sigmf(tmp_path, capture)
    other = sigmf.sigmffile.fromfile(str(path), autoscale=False)
    other.validate()
    assert other.sample_count == capture.counts.size
    samples = other.read_samples()
    np.testing.assert_array_equal(samples, capture.counts.astype(np.float32))


def test_the_same_capture_gives_the_same_bytes(tmp_path, make_capture):
    """Two writings differ in no byte."""
    for folder in ("one", "two"):
        (tmp_path / folder).mkdir()
        write_sigmf(tmp_path / folder, make_capture())
    for name in ("night-1.sigmf-meta", "night-1.sigmf-data"):
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()
    assert sorted(path.name for path in (tmp_path / "one").iterdir()) == ["night-1.sigmf-data", "night-1.sigmf-meta"]


def test_a_failed_write_leaves_the_old_file_and_nothing_else(tmp_path, make_capture, monkeypatch):
    """A disk that fills up changes nothing that was there."""
    path = write_sigmf(tmp_path, make_capture())
    before = {each.name: each.read_bytes() for each in tmp_path.iterdir()}

    def full(number):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(writing.os, "fsync", full)
    with pytest.raises(InputError, match="No space left on device"):
        write_sigmf(tmp_path, make_capture(circuit="Another"))
    assert {each.name: each.read_bytes() for each in tmp_path.iterdir()} == before
    assert path.exists()


def test_a_missing_folder_is_named(tmp_path, make_capture):
    """A folder that is not there gives one line."""
    with pytest.raises(InputError, match="cannot be written"):
        write_sigmf(tmp_path / "nowhere", make_capture())


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"counts": np.zeros((2, 2), np.int16)}, "counts: expected"),
        ({"counts": np.arange(4.0)}, "found float64"),
        ({"name": "../up"}, "a plain file name"),
        ({"name": ""}, "a plain file name"),
        ({"digest": "0" * 64}, "digest: expected"),
        ({"phase_marks": np.array([[0.5, 10.0]])}, "whole sample"),
        ({"phase_marks": np.array([[4000.0, 10.0]])}, "from 0 to 3999"),
        ({"circuit": ""}, "pdclass:circuit"),
        ({"conductor": "red"}, "pdclass:conductor"),
    ],
)
def test_what_could_not_be_read_back_is_not_written(tmp_path, make_capture, changes, said):
    """A capture that the reader would refuse leaves no file."""
    with pytest.raises(InputError, match=said):
        write_sigmf(tmp_path, replace(make_capture(), **changes))
    assert list(tmp_path.iterdir()) == []


def test_big_endian_counts_are_written_little_endian(tmp_path, make_capture):
    """The byte order in memory does not show in the file."""
    big = make_capture().counts.astype(">i2")
    assert counts_digest(big) == make_capture().digest
    path = write_sigmf(tmp_path, replace(make_capture(), counts=big))
    np.testing.assert_array_equal(open_capture(path).counts, big)
