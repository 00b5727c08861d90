"""Settings: unknown keys name the nearest known one; shipped folders are found."""

import pytest

from pdclass.errors import InputError
from pdclass.settings import Settings, read_settings, shipped


class Band(Settings):
    """An inner table."""

    low_hz: float = 1.0


class Receiver(Settings):
    """A table with a table in it."""

    band: Band = Band()
    rate_hz: float


def test_an_unknown_key_names_the_nearest(tmp_path):
    """A slip of the pen is answered with the key that was meant."""
    (tmp_path / "s.toml").write_text("rate_hz = 1.0\n[band]\nlow_h = 2.0\n")
    with pytest.raises(InputError, match=r"s\.toml: band\.low_h: unknown key; the nearest known one is 'low_hz'"):
        read_settings(tmp_path / "s.toml", Receiver)


def test_a_wrong_value_is_named_with_its_place(tmp_path):
    """A text where a number belongs is said with what was found."""
    (tmp_path / "s.toml").write_text('rate_hz = "fast"\n')
    with pytest.raises(InputError, match=r"rate_hz: .*found 'fast'"):
        read_settings(tmp_path / "s.toml", Receiver)


def test_numbers_are_finite(tmp_path):
    """TOML knows nan and inf; settings do not."""
    for number in ("nan", "inf"):
        (tmp_path / "s.toml").write_text(f"rate_hz = {number}\n")
        with pytest.raises(InputError, match=r"rate_hz: .*finite"):
            read_settings(tmp_path / "s.toml", Receiver)


def test_a_broken_file_is_one_line(tmp_path):
    """What is no TOML, or not there, is an input error that names the file."""
    (tmp_path / "s.toml").write_text("rate_hz = = 1")
    for name in ("s.toml", "none.toml"):
        with pytest.raises(InputError, match=name) as caught:
            read_settings(tmp_path / name, Receiver)
        assert "\n" not in str(caught.value)


def test_shipped_folders_are_found():
    """Bundle and scenarios are there; what is not shipped is an input error."""
    assert (shipped("synthetic") / "port-ferrow.toml").is_file()
    with pytest.raises(InputError, match="install"):
        shipped("nothing")
