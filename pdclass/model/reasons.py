"""Calibrated reasons: each feature's share of each class's calibrated log-odds, adding up exactly."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pdclass.errors import PdclassError
from pdclass.model.bundle import Classifier
from pdclass.model.forest import margins
from pdclass.model.shapley import shapley
from pdclass.pulses import FloatArray

#: Each class may be off by half of what a pair of classes may.
PAIR_TOLERANCE = 1e-9


class Reasons(NamedTuple):
    """What the features say about every class.

    Attributes
    ----------
    shares : (pulses, classes, features), path-dependent Shapley values / temperature [natural log-odds].
    base : (classes,), the trees' mean margin / temperature + the shift of the class mix.
    log_odds : (pulses, classes), calibrated: base + the sum of the shares.
    """

    shares: FloatArray
    base: FloatArray
    log_odds: FloatArray


def calibrated_reasons(classifier: Classifier, values: FloatArray) -> Reasons:
    """The reasons of every pulse and class, checked to add up for every pair of labels within 1e-9.

    Raises
    ------
    PdclassError
        If the reasons of a pulse do not add up; the message names its place.
    """
    raw_shares, raw_base = shapley(classifier.forest, values)
    shares = raw_shares / classifier.temperature
    base = raw_base / classifier.temperature + classifier.shift
    log_odds = margins(classifier.forest, values) / classifier.temperature + classifier.shift
    check_sums(shares, base, log_odds)
    return Reasons(shares, base, log_odds)


def check_sums(shares: FloatArray, base: FloatArray, log_odds: FloatArray) -> None:
    """Make sure that base + shares = calibrated log-odds, for every pulse and pair of labels within 1e-9.

    Raises
    ------
    PdclassError
        If they do not, or are not numbers.
    """
    gap = np.abs(base + shares.sum(axis=2) - log_odds)
    fine = (gap <= PAIR_TOLERANCE / 2).all(axis=1)
    if not fine.all():
        place = int(np.argmin(fine))
        raise PdclassError(
            f"reasons of pulse {place}: expected base + shares = log-odds within {PAIR_TOLERANCE:g}, "
            f"found a gap of {gap[place].max():g}; please report this as a defect"
        )
