"""Whatever path is given, a capture or one line comes back."""

from __future__ import annotations

import pytest

from pdclass.capture import open_capture
from pdclass.errors import InputError


@pytest.mark.parametrize(
    ("name", "found"),
    [("x.wav", "ending '.wav'"), ("x", "ending ''"), ("x.parquet", "a pulse table"), ("x.sigmf", "a SigMF archive")],
)
def test_an_ending_that_is_not_read_lists_what_is(tmp_path, name, found):
    """The message says what is read, and what was found."""
    path = tmp_path / name
    path.write_bytes(b"something")
    with pytest.raises(InputError) as caught:
        open_capture(path)
    assert str(path) in str(caught.value)
    assert found in str(caught.value)
    assert ".sigmf-meta" in str(caught.value)


def test_a_folder_says_what_to_give(recording):
    """A folder is refused, naming its recordings."""
    with pytest.raises(InputError, match=r"found a folder; give its recordings: .*\*\.sigmf-meta"):
        open_capture(recording.parent)


def test_an_impossible_path_is_refused():
    """A path with a zero byte gives one line too."""
    with pytest.raises(InputError):
        open_capture("a\0b.sigmf-meta")


def test_a_folder_in_place_of_the_samples_is_refused(recording):
    """A folder that has the sample file's name is no sample file."""
    samples = recording.with_name("night-1.sigmf-data")
    samples.unlink()
    samples.mkdir()
    with pytest.raises(InputError, match=r"sigmf-data: kind: expected an ordinary file"):
        open_capture(recording)
