"""Conformal limits against an independent library and against cases worked by hand."""

import math
from fractions import Fraction

import numpy as np
import pytest
from crepes import ConformalClassifier

from pdclass.model.doubt import conformal_limits, label_sets


def three_classes(n):
    rng = np.random.default_rng(n)
    label = np.repeat(np.arange(3), n)
    chances = rng.dirichlet(np.ones(3), 3 * n)
    return label, chances[np.arange(3 * n), label], rng.dirichlet(np.ones(3), 500)


@pytest.mark.parametrize(
    ("n", "rate"), [(19, "0.05"), (40, "0.1"), (99, "0.1"), (99, "0.25"), (8, "0.1"), (200, "0.07")]
)
def test_one_pulse_a_group_is_the_plain_method(n, rate):
    """With one pulse a group a label is kept when its p-value from the `crepes` library exceeds the error rate.

    p-values are whole numbers over n + 1, compared as such.
    """
    label, p_true, asked = three_classes(n)
    groups = np.arange(3 * n).astype(str)
    ours = label_sets(asked, conformal_limits(p_true, label, groups, 3, float(rate)))
    for k in range(3):
        library = ConformalClassifier().fit(1 - p_true[label == k])
        p = np.asarray(library.predict_p(1 - asked[:, [k]], all_classes=True, smoothing=False))[:, 0]
        kept = [Fraction(round(value * (n + 1)), n + 1) > Fraction(rate) for value in p]
        np.testing.assert_array_equal(ours[:, k], kept)


@pytest.mark.parametrize(("n", "error_rate"), [(40, 0.1), (8, 0.1), (100, 0.25), (200, 0.07)])
def test_one_pulse_a_group_gives_the_same_sets(n, error_rate):
    """The sets are those of the library where (n + 1) times the error rate is no whole number.

    At a whole number the library keeps a label whose p-value equals the error rate, the quantile does not.
    """
    label, p_true, asked = three_classes(n)
    ours = label_sets(asked, conformal_limits(p_true, label, np.arange(3 * n).astype(str), 3, error_rate))
    for k in range(3):
        library = ConformalClassifier().fit(1 - p_true[label == k])
        sets = library.predict_set(1 - asked[:, [k]], confidence=1 - error_rate, smoothing=False)
        np.testing.assert_array_equal(ours[:, k], np.asarray(sets)[:, 0] == 1)


@pytest.mark.parametrize("n", [9, 10, 18, 19, 20, 99])
def test_the_rank_of_split_conformal(n):
    """The limit is the ceil((n + 1) * 0.9)-th smallest of n scores (documentation of two public implementations)."""
    scores = np.random.default_rng(n).permutation(np.arange(1, n + 1)) / (n + 1)
    limit = conformal_limits(1 - scores, np.zeros(n, int), np.arange(n).astype(str), 1, 0.10)[0]
    assert limit == pytest.approx(np.sort(scores)[math.ceil((n + 1) * 9 / 10) - 1], abs=1e-12)


def test_a_weighted_case_by_hand():
    """Three groups, error rate one half: each weighs 1/4, shared among 1, 2 and 4 pulses.

    Scores in order with their weights: 0.1 (1/16), 0.2 (1/8), 0.3 (1/16), 0.4 (1/16), 0.5 (1/4), 0.6 (1/8),
    0.7 (1/16). Summed: 1/16, 3/16, 4/16, 5/16, 9/16, 11/16, 12/16. One half is reached at 0.5, two thirds at
    0.6, three quarters exactly at 0.7, four fifths never.
    """
    scores = np.array([0.5, 0.2, 0.6, 0.1, 0.3, 0.4, 0.7])
    groups = np.array(["a", "b", "b", "c", "c", "c", "c"], object)

    def limit(error_rate):
        return conformal_limits(1 - scores, np.zeros(7, int), groups, 1, error_rate)[0]

    assert limit(0.5) == pytest.approx(0.5, abs=1e-12)
    assert limit(1 / 3) == pytest.approx(0.6, abs=1e-12)
    assert limit(0.25) == pytest.approx(0.7, abs=1e-12)
    assert limit(0.2) == math.inf


def test_nine_groups_of_several_pulses_are_enough_at_one_tenth():
    """Nine groups weigh nine tenths exactly, with 1 to 9 pulses each: the limit is the largest score, and finite."""
    groups = np.concatenate([[f"g{size}"] * size for size in range(1, 10)]).astype(object)
    scores = np.random.default_rng(0).uniform(0, 1, len(groups))
    limit = conformal_limits(1 - scores, np.zeros(len(groups), int), groups, 1, 0.10)[0]
    assert limit == 1 - (1 - scores.max())
    eight = groups != "g9"
    assert conformal_limits(1 - scores[eight], np.zeros(36, int), groups[eight], 1, 0.10)[0] == math.inf
