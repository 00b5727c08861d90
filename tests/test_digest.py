"""Digests: the identity of files, arrays and pulses."""

import hashlib

import numpy as np
import pytest

from pdclass.digest import array_digest, canonical_json, file_digest, loose_pulse_id, pulse_id


def test_a_pulse_is_named_by_capture_sensor_and_place():
    """The first 16 hex digits of sha256 over the three, joined by bars."""
    expected = hashlib.sha256(f"{'a' * 64}|strap|12345".encode()).hexdigest()[:16]
    assert pulse_id("a" * 64, "strap", 12345) == expected


def test_names_that_run_together_are_told_apart():
    """Circuit `A1`, session `2` is not circuit `A`, session `12`."""
    wave = np.ones(4, np.float32)
    assert loose_pulse_id(wave, "A1", "2") != loose_pulse_id(wave, "A", "12")


def test_a_file_digest_is_that_of_its_bytes(tmp_path):
    """Read in blocks, the digest is that of the whole."""
    content = bytes(range(256)) * 10_000
    (tmp_path / "f").write_bytes(content)
    assert file_digest(tmp_path / "f") == hashlib.sha256(content).hexdigest()


def test_canonical_json_has_one_form_and_no_nan():
    """Order and spaces do not matter; NaN has no form."""
    assert canonical_json({"b": 1, "a": [1.5, "é"]}) == '{"a":[1.5,"é"],"b":1}'
    with pytest.raises(ValueError, match="JSON"):
        canonical_json({"a": float("nan")})


def test_an_array_digest_knows_type_and_shape():
    """The same bytes as another type or shape are another array; byte order is not."""
    array = np.arange(6, dtype="<f8")
    assert array_digest(array) != array_digest(array.reshape(2, 3))
    assert array_digest(array) == array_digest(array.astype(">f8"))
