"""Exact path-dependent Shapley values."""

from itertools import combinations
from math import factorial

import numpy as np
import pytest

from pdclass.model.forest import ARRAY_TYPES, check_forest, margins
from pdclass.model.shapley import shapley


def grown(rng, n_features, depth, n_classes=3, trees=4):
    """Random full trees with repeated features, +inf thresholds and both missing rules."""
    columns = {name: [] for name in ARRAY_TYPES}

    def grow(level, count):
        here = len(columns["value"]) - start
        split = level < depth and count > 1
        row = {
            "feature": rng.integers(n_features) if split else 0,
            "threshold": (np.inf if rng.random() < 0.2 else rng.normal()) if split else 0.0,
            "missing_left": bool(rng.integers(2)) and split,
            "value": 0.0 if split else rng.normal(),
            "count": count,
            "left": -1,
            "right": -1,
        }
        for name, value in row.items():
            columns[name].append(value)
        if split:
            part = int(rng.integers(1, count))
            columns["left"][start + here] = grow(level + 1, part)
            columns["right"][start + here] = grow(level + 1, count - part)
        return here

    for tree in range(trees):
        start = len(columns["value"])
        columns["tree_start"].append(start)
        columns["tree_class"].append(tree % n_classes)
        grow(0, 1000)
    columns["baseline"] = rng.normal(size=n_classes)
    typed = {name: np.array(columns[name], kind) for name, kind in ARRAY_TYPES.items()}
    return check_forest(typed, n_features, n_classes)


def expected(forest, tree, node, x, known):
    """Value of a coalition by recursion: follow known features, average the others by cover."""
    at = forest.tree_start[tree] + node
    if forest.left[at] == -1:
        return forest.value[at]
    left, right = int(forest.left[at]), int(forest.right[at])
    feature = int(forest.feature[at])
    if feature in known:
        goes_left = forest.missing_left[at] if np.isnan(x[feature]) else x[feature] <= forest.threshold[at]
        return expected(forest, tree, left if goes_left else right, x, known)
    start, total = forest.tree_start[tree], forest.count[at]
    one = forest.count[start + left] / total * expected(forest, tree, left, x, known)
    return one + forest.count[start + right] / total * expected(forest, tree, right, x, known)


def by_definition(forest, x, n_features):
    """Shapley values from their definition, over all coalitions."""

    def worth(known):
        total = forest.baseline.copy()
        for tree, column in enumerate(forest.tree_class):
            total[column] += expected(forest, tree, 0, x, known)
        return total

    shares = np.zeros((forest.n_classes, n_features))
    for f in range(n_features):
        others = [g for g in range(n_features) if g != f]
        for size in range(n_features):
            weight = factorial(size) * factorial(n_features - size - 1) / factorial(n_features)
            for known in combinations(others, size):
                shares[:, f] += weight * (worth({*known, f}) - worth(set(known)))
    return shares, worth(set())


@pytest.mark.parametrize("depth", [0, 1, 2, 5, 8])
def test_shares_equal_the_definition(depth):
    """On random trees with missing values the shares are those summed over all coalitions."""
    rng = np.random.default_rng(depth)
    forest = grown(rng, n_features=5, depth=depth)
    values = rng.normal(size=(6, 5))
    values[rng.random(values.shape) < 0.3] = np.nan
    shares, base = shapley(forest, values)
    for row, x in enumerate(values):
        want, start = by_definition(forest, x, 5)
        np.testing.assert_allclose(shares[row], want, rtol=0, atol=1e-12)
        np.testing.assert_allclose(base, start, rtol=0, atol=1e-12)


def test_shares_add_up_to_the_margins(parts):
    """Base plus shares is the margin, for missing values too."""
    values = np.random.default_rng(1).normal(size=(200, 6))
    values[::3, 1] = np.nan
    values[7] = np.nan
    shares, base = shapley(parts.forest, values)
    np.testing.assert_allclose(base + shares.sum(axis=2), margins(parts.forest, values), rtol=0, atol=1e-11)


def test_shares_do_not_depend_on_the_batch(parts):
    """One pulse alone gives the same bits as in any batch, on both sides of the inner block."""
    values = np.random.default_rng(2).normal(size=(300, 6))
    together, _ = shapley(parts.forest, values)
    for places in ([0], [299], list(range(250, 262)), list(range(256))):
        np.testing.assert_array_equal(shapley(parts.forest, values[places])[0], together[places])


def test_a_feature_that_no_tree_uses_has_no_share(parts):
    """The always missing feature gets exactly nothing."""
    shares, _ = shapley(parts.forest, np.random.default_rng(3).normal(size=(20, 6)))
    assert not shares[:, :, 5].any()
    assert shares[:, :, :5].any()
