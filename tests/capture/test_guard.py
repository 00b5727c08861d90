"""Metadata from a stranger is bounded and strict before anything is made of it."""

from __future__ import annotations

import pytest

from pdclass.capture import guard
from pdclass.capture.guard import read_json
from pdclass.errors import InputError


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b'{"a": NaN}', "found NaN"),
        (b'{"a": -Infinity}', "found -Infinity"),
        (b'{"a": 1e999}', "expected finite"),
        (b'{"a": "\xff"}', "byte 7: expected strict UTF-8, found 0xff"),
        (b'{"a": "\\ud800"}', "lone surrogate"),
        (b'{"a": 1, "a": 2}', "field 'a': expected once, found 2 times"),
        (b'{"a": ', "not readable as JSON"),
        (b"", "not readable as JSON"),
        (b"[1, 2]", "expected a JSON object, found list"),
        (b'{"a": ' + b"[" * 20 + b"]" * 20 + b"}", "nesting: expected at most 16 levels"),
        (b'{"a": ' + b"[" * 200_000, "nesting: expected at most 16 levels"),
        (b'{"a": ' + b"9" * 5000 + b"}", "not readable as JSON"),
    ],
)
def test_what_is_not_strict_json_is_refused(tmp_path, content, said):
    """Every way around strict JSON gives one line that names the file."""
    path = tmp_path / "x.sigmf-meta"
    path.write_bytes(content)
    with pytest.raises(InputError) as caught:
        read_json(path)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert said in message
    assert "\n" not in message


def test_metadata_that_is_too_large_is_refused_unread(tmp_path, monkeypatch):
    """The size is looked at before the content."""
    monkeypatch.setattr(guard, "JSON_LIMIT_BYTES", 10)
    path = tmp_path / "x.sigmf-meta"
    path.write_bytes(b'{"a": "0123456789"}')
    with pytest.raises(InputError, match="size: expected at most 10 bytes of metadata, found 19 bytes"):
        read_json(path)


def test_plain_metadata_within_the_limits_is_read(tmp_path):
    """Sixteen levels and any script of the world pass."""
    path = tmp_path / "x.sigmf-meta"
    path.write_text('{"ä": ' + "[" * 14 + '"Ω"' + "]" * 14 + "}", encoding="utf-8")
    assert list(read_json(path)) == ["ä"]
