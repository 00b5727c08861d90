"""What a feature says about itself."""

import dataclasses

import numpy as np
import pytest

from pdclass.features import BY_NAME, why_missing

WIDTH, SHARE = BY_NAME["width_10_ns"], BY_NAME["share_14_25_mhz"]


def test_another_edition_is_another_digest():
    """A bundle taught with numbers measured another way is refused by it."""
    assert dataclasses.replace(WIDTH, edition=WIDTH.edition + 1).digest != WIDTH.digest


def test_another_way_of_preparing_windows_is_another_digest_of_every_feature(monkeypatch):
    """What all features are measured on has an edition of its own."""
    before = {name: feature.digest for name, feature in BY_NAME.items()}
    monkeypatch.setattr("pdclass.features.feature.WINDOW_EDITION", 99)
    assert all(feature.digest != before[name] for name, feature in BY_NAME.items())


@pytest.mark.parametrize(
    ("feature", "snr_db", "reach_hz", "words"),
    [
        (WIDTH, 6.2, 40e6, "not measurable at 6 dB, needs 18 dB"),
        (WIDTH, 17.96, 40e6, "not measurable at 17.9 dB, needs 18 dB"),
        (WIDTH, np.nan, 40e6, "the noise beside the pulse is unknown"),
        (SHARE, 30.0, 14e6, "the chain ends at 14 MHz, needs 20 MHz"),
        (WIDTH, 30.0, 40e6, None),
    ],
)
def test_why_a_value_is_missing_is_said_in_words(feature, snr_db, reach_hz, words):
    """The chain first, then the noise; nothing where neither is the reason."""
    assert why_missing(feature, snr_db, reach_hz) == words
