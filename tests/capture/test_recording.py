"""Sample files are mapped read-only and unscaled, and what is not a whole live record is refused."""

from __future__ import annotations

import hashlib
import json
import os

import numpy as np
import pytest

from pdclass.capture import open_capture, write_sigmf
from pdclass.errors import InputError


def samples_of(recording):
    return recording.with_name("night-1.sigmf-data")


def refusal(path) -> str:
    with pytest.raises(InputError) as caught:
        open_capture(path)
    assert "\n" not in str(caught.value)
    return str(caught.value)


def test_samples_are_mapped_read_only_and_never_rescaled(recording, make_capture):
    """Counts stay counts, stay on disk, and cannot be written."""
    capture = open_capture(recording)
    assert isinstance(capture.counts, np.memmap)
    assert not capture.counts.flags.writeable
    np.testing.assert_array_equal(capture.counts, make_capture().counts)
    assert capture.digest == hashlib.sha256(samples_of(recording).read_bytes()).hexdigest()


def test_either_file_or_the_stem_names_the_recording(recording):
    """Metadata file, sample file and common stem open the same capture."""
    stem = recording.with_name("night-1")
    assert {open_capture(path).digest for path in (recording, samples_of(recording), stem)} == {
        open_capture(str(recording)).digest
    }
    assert open_capture(stem).name == "night-1"


@pytest.mark.parametrize("change", [-2, -1, 2, 4000])
def test_a_cut_or_grown_sample_file_is_refused(recording, change):
    """A sample file of another size than the metadata says is named with both sizes."""
    samples = samples_of(recording)
    content = samples.read_bytes()
    samples.write_bytes(content[:change] if change < 0 else content + bytes(change))
    message = refusal(recording)
    assert message.startswith(str(samples))
    assert "expected 8000 bytes (4000 samples of 2 bytes)" in message
    assert f"found {8000 + change} bytes" in message


def test_a_part_of_a_sample_is_refused_without_a_promised_count(edit, recording):
    """Without a promised number of samples, the size must still be whole samples."""
    edit("global", "pdclass:sample_count", None)
    samples_of(recording).write_bytes(samples_of(recording).read_bytes()[:-1])
    message = refusal(recording)
    assert "whole number of samples of 2 bytes" in message
    assert "found 7999 bytes" in message


def test_header_and_trailing_bytes_are_left_out(edit, recording, make_capture):
    """Bytes that are no samples are skipped, but belong to the digest of the file."""
    edit("captures", "core:header_bytes", 10)
    edit("global", "core:trailing_bytes", 3)
    samples = samples_of(recording)
    assert "expected 8013 bytes" in refusal(recording)
    samples.write_bytes(b"h" * 10 + samples.read_bytes() + b"end")
    capture = open_capture(recording)
    np.testing.assert_array_equal(capture.counts, make_capture().counts)
    assert capture.digest == hashlib.sha256(samples.read_bytes()).hexdigest()


def test_more_header_than_file_is_refused(edit, recording):
    """A header longer than the file leaves no sample."""
    edit("global", "pdclass:sample_count", None)
    edit("captures", "core:header_bytes", 9000)
    assert "9000 header" in refusal(recording)


def test_a_header_inside_the_samples_is_refused(recording):
    """Only one stretch of samples is mapped."""
    content = json.loads(recording.read_text())
    content["captures"].append({"core:sample_start": 10, "core:header_bytes": 4, "core:global_index": 10})
    recording.write_text(json.dumps(content))
    assert "captures[1].core:header_bytes" in refusal(recording)


def test_the_checksum_is_checked(edit, recording):
    """`core:sha512` holds for every byte of the sample file."""
    content = samples_of(recording).read_bytes()
    edit("global", "core:sha512", hashlib.sha512(content).hexdigest().upper())
    assert open_capture(recording).counts.size == 4000
    flipped = bytearray(content)
    flipped[77] ^= 1
    samples_of(recording).write_bytes(flipped)
    message = refusal(recording)
    assert "core:sha512" in message
    assert hashlib.sha512(flipped).hexdigest() in message


def test_an_empty_capture_is_refused(edit, recording):
    """No samples are no capture."""
    edit("global", "pdclass:sample_count", None)
    samples_of(recording).write_bytes(b"")
    message = refusal(recording)
    assert "samples: expected at least 2, found 0" in message


@pytest.mark.parametrize(("dtype", "value"), [("int16", 0), ("int16", -7), ("int8", 3), ("float32", 0.25)])
def test_a_constant_capture_is_refused(tmp_path, make_capture, dtype, value):
    """Equal samples throughout mean that nothing was measured."""
    path = write_sigmf(tmp_path, make_capture(samples=700_000, dtype=dtype))
    np.full(700_000, value, dtype).tofile(samples_of(path))
    message = refusal(path)
    assert f"all samples equal ({value:g})" in message
    assert "is the sensor connected?" in message


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("place", [0, 399_999, 650_000])
def test_the_first_sample_that_is_no_number_is_named(tmp_path, make_capture, bad, place):
    """NaN and infinity are refused with the first place they stand at, in whatever block."""
    path = write_sigmf(tmp_path, make_capture(samples=700_000, dtype="float32"))
    counts = np.fromfile(samples_of(path), "<f4")
    counts[[place, 690_000]] = bad
    counts.tofile(samples_of(path))
    message = refusal(path)
    assert f"sample {place}: expected a finite number, found {bad}" in message


def test_counts_beyond_the_digitiser_are_refused(edit, recording):
    """Counts that need more bits than stated were shifted, or the bits are wrong."""
    edit("global", "pdclass:adc_bits", 6)
    message = refusal(recording)
    assert "counts from -32 to 31" in message
    assert "never shifted" in message


def test_a_link_out_of_the_folder_is_refused(recording, tmp_path_factory):
    """A sample or metadata file that lies elsewhere is not opened; a link within the folder is."""
    samples = samples_of(recording)
    moved = tmp_path_factory.mktemp("elsewhere") / "x.sigmf-data"
    inside = samples.with_name("inside.bin")
    samples.rename(inside)
    samples.symlink_to(inside.name)
    assert open_capture(recording).counts.size == 4000
    samples.unlink()
    inside.rename(moved)
    samples.symlink_to(moved)
    message = refusal(recording)
    assert "symbolic link" in message
    assert str(moved.resolve()) in message


def test_a_link_in_a_circle_is_refused(recording):
    """A circular link gives one line."""
    samples_of(recording).unlink()
    samples_of(recording).symlink_to(samples_of(recording).name)
    assert str(samples_of(recording)) in refusal(recording)


def test_a_pipe_in_place_of_a_file_is_refused_at_once(recording):
    """A named pipe is not waited on."""
    samples_of(recording).unlink()
    os.mkfifo(samples_of(recording))
    assert "expected an ordinary file" in refusal(recording)


def test_a_missing_file_is_named(recording):
    """Metadata without samples, and samples without metadata, name the one that is missing."""
    samples = samples_of(recording)
    content = samples.read_bytes()
    samples.unlink()
    assert refusal(recording).startswith(f"{samples}: no such file")
    samples.write_bytes(content)
    recording.unlink()
    assert refusal(samples).startswith(f"{recording}: no such file")
