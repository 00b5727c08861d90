"""Calibrated reasons."""

from dataclasses import replace

import numpy as np
import pytest

from pdclass.errors import PdclassError
from pdclass.model.doubt import probabilities
from pdclass.model.forest import margins
from pdclass.model.reasons import calibrated_reasons, check_sums

VALUES = np.random.default_rng(6).normal(size=(50, 6))


def test_reasons_add_up_to_the_log_odds_of_every_pair(parts):
    """With a temperature and a class mix, base + shares differ between labels as the logs of probabilities do."""
    mixed = replace(parts, temperature=1.7, shift=np.log(np.array([0.1, 0.1, 0.1, 0.7]) / 0.25))
    shares, base, log_odds = calibrated_reasons(mixed, VALUES)
    logs = np.log(probabilities(margins(mixed.forest, VALUES), mixed.temperature, mixed.shift))
    total = base + shares.sum(axis=2)
    for one in range(4):
        for other in range(4):
            want = logs[:, one] - logs[:, other]
            np.testing.assert_allclose(total[:, one] - total[:, other], want, rtol=0, atol=1e-9)
    np.testing.assert_allclose(total, log_odds, rtol=0, atol=5e-10)


def test_a_mix_moves_the_base_and_no_share(parts):
    """The class mix stands in the base; the features' shares stay."""
    plain = calibrated_reasons(parts, VALUES)
    shift = np.array([0.5, -0.5, 0.0, 0.1])
    mixed = calibrated_reasons(replace(parts, shift=shift), VALUES)
    np.testing.assert_array_equal(mixed.shares, plain.shares)
    np.testing.assert_allclose(mixed.base - plain.base, shift, atol=1e-12)


def test_a_gap_names_the_pulse():
    """Reasons that do not add up, or are no numbers, stop the program and name the place."""
    shares, base = np.zeros((3, 2, 4)), np.zeros(2)
    check_sums(shares, base, np.zeros((3, 2)))
    for wrong in (2e-9, np.nan):
        odd = shares.copy()
        odd[1, 0, 2] = wrong
        with pytest.raises(PdclassError, match="reasons of pulse 1"):
            check_sums(odd, base, np.zeros((3, 2)))
