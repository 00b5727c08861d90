"""Temperature, class mix, conformal limits."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pdclass.errors import InputError, PdclassError
from pdclass.model.doubt import (
    conformal_limits,
    exact_share,
    fit_temperature,
    group_quantile,
    groups_needed,
    label_sets,
    log_probabilities,
    mix_shift,
    probabilities,
)

NONE = np.zeros(3)


def test_probabilities_are_the_softmax_and_sum_to_one():
    """Even huge margins give probabilities that sum to 1."""
    found = probabilities(np.array([[0.0, 0.0, math.log(2)], [1e4, -1e4, 0.0]]), 1.0, NONE)
    np.testing.assert_allclose(found[0], [0.25, 0.25, 0.5], rtol=1e-15)
    np.testing.assert_allclose(found.sum(axis=1), 1.0, rtol=1e-15)
    np.testing.assert_allclose(log_probabilities(np.zeros((1, 3)), 2.0, NONE), -math.log(3))


def test_probabilities_do_not_depend_on_the_batch():
    """One pulse alone gives the same bits as in a batch."""
    margins = np.random.default_rng(0).normal(size=(77, 4)) * 3
    together = probabilities(margins, 1.3, np.zeros(4))
    alone = [probabilities(margins[row : row + 1], 1.3, np.zeros(4))[0] for row in range(77)]
    np.testing.assert_array_equal(together, alone)


def test_temperature_is_found_again():
    """Margins that were blown up by 2.5 are brought back to within the noise of 20,000 draws."""
    rng = np.random.default_rng(1)
    margins = rng.normal(size=(20_000, 3)) * 2
    chances = probabilities(margins, 1.0, NONE)
    label = (rng.random((20_000, 1)) > np.cumsum(chances, axis=1)[:, :2]).sum(axis=1)
    assert fit_temperature(margins * 2.5, label, np.ones(20_000)) == pytest.approx(2.5, rel=0.05)


def test_temperature_is_the_minimum_of_the_weighted_loss():
    """The loss is higher a little to either side, and a weight of two is worth a pulse twice."""
    rng = np.random.default_rng(2)
    margins, label, weight = rng.normal(size=(400, 3)), rng.integers(0, 3, 400), rng.integers(1, 4, 400).astype(float)
    label[:250] = margins[:250].argmax(axis=1)
    found = fit_temperature(margins, label, weight)

    def loss(temperature):
        return -np.sum(weight * log_probabilities(margins, temperature, NONE)[np.arange(400), label])

    assert loss(found) < min(loss(found * 1.01), loss(found / 1.01))
    twice = np.repeat(np.arange(400), weight.astype(int))
    assert fit_temperature(margins[twice], label[twice], np.ones(len(twice))) == pytest.approx(found, rel=1e-9)


def test_temperature_stays_in_bounds():
    """A model that is always right is not made infinitely sure, nor one that is never right infinitely unsure."""
    margins = np.array([[5.0, 0.0], [0.0, 5.0]])
    assert fit_temperature(margins, np.array([0, 1]), np.ones(2)) == pytest.approx(0.05)
    assert fit_temperature(margins, np.array([1, 0]), np.ones(2)) == pytest.approx(20.0)
    with pytest.raises(PdclassError, match="found none"):
        fit_temperature(np.zeros((0, 2)), np.zeros(0, int), np.zeros(0))


def test_a_mix_is_bayes_rule():
    """Probabilities for equal classes times the mix, made to sum to 1 again."""
    equal, mix = np.full(3, 1 / 3), np.array([0.1, 0.2, 0.7])
    margins = np.random.default_rng(3).normal(size=(9, 3))
    before = probabilities(margins, 1.7, NONE)
    after = probabilities(margins, 1.7, mix_shift(equal, mix))
    np.testing.assert_allclose(after, before * mix / (before * mix).sum(axis=1, keepdims=True), rtol=1e-12)


@pytest.mark.parametrize("mix", [[0.5, 0.5, 0.0], [0.5, 0.6, 0.1], [0.5, -0.1, 0.6], [0.5, math.nan, 0.5]])
def test_a_bad_mix_is_refused(mix):
    """Shares must be positive and sum to 1."""
    with pytest.raises(InputError, match="mix"):
        mix_shift(np.full(3, 1 / 3), np.array(mix))


def test_nine_groups_give_a_finite_limit_at_one_tenth():
    """With nine groups at 0.10 the limit is the largest score; with eight there is none."""
    scores = np.linspace(0.1, 0.9, 9)
    groups = np.arange(9).astype(str)
    label = np.zeros(9, int)
    assert conformal_limits(1 - scores, label, groups, 1, 0.10)[0] == pytest.approx(0.9)
    assert np.isinf(conformal_limits(1 - scores[:8], label[:8], groups[:8], 1, 0.10)[0])
    assert (groups_needed(0.10), groups_needed(0.05), groups_needed(0.3)) == (9, 19, 3)


def test_the_exact_sum_matters():
    """Nine float tenths, and groups of three float thirds of them, would miss the mark that exact sums reach."""
    assert sum([0.1 / 3] * 27) != 0.9
    groups = np.repeat(np.arange(9), 3).astype(str)
    limit = conformal_limits(np.linspace(0.99, 0.01, 27), np.zeros(27, int), groups, 1, 0.10)
    assert limit[0] == 1 - 0.01


def test_classes_are_apart():
    """A class's limit comes from its own pulses; a class without any can never be ruled out."""
    p_true = np.array([0.5] * 9 + [0.2] * 9)
    label, groups = np.repeat([0, 1], 9), np.tile(np.arange(9), 2).astype(str)
    limits = conformal_limits(p_true, label, groups, 3, 0.10)
    np.testing.assert_array_equal(limits, [0.5, 0.8, np.inf])
    sets = label_sets(np.array([[0.5, 0.2, 0.3], [0.49, 0.19, 0.32]]), limits)
    np.testing.assert_array_equal(sets, [[True, True, True], [False, False, True]])


@given(st.lists(st.tuples(st.integers(0, 12), st.integers(0, 6)), min_size=1, max_size=40), st.integers(1, 19))
def test_the_quantile_is_the_smallest_that_reaches_the_share(pulses, twentieths):
    """The weight up to the limit reaches the share, and the weight below it does not (checked in other exact sums)."""
    scores = np.array([score / 12 for score, _ in pulses])
    groups = np.array([str(group) for _, group in pulses])
    share = exact_share(twentieths / 20)
    limit = group_quantile(scores, groups, share, beyond=1)

    def reached(mask):
        per_group = [
            exact_share(1.0) * int((mask & (groups == g)).sum()) / int((groups == g).sum()) for g in set(groups)
        ]
        return sum(per_group) / (len(per_group) + 1)

    if np.isinf(limit):
        assert reached(scores <= scores.max()) < share
    else:
        assert reached(scores <= limit) >= share
        assert reached(scores < limit) < share


def test_coverage_holds_over_groups():
    """Over many draws of groups with their own shift, sets miss a new group's pulses no more often than stated."""
    rng = np.random.default_rng(5)
    hits = []
    for _ in range(400):
        shift = rng.normal(size=20)
        scores = 1 / (1 + np.exp(-(shift[:, None] + rng.normal(size=(20, 6)))))
        groups = np.repeat(np.arange(19), 6).astype(str)
        limit = conformal_limits(1 - scores[:19].ravel(), np.zeros(114, int), groups, 1, 0.20)[0]
        hits.append((scores[19] <= limit).mean())
    assert np.mean(hits) == pytest.approx(0.80, abs=0.045)
    assert np.mean(hits) > 0.78
