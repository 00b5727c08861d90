"""Shapley values against a published worked example and an independent library."""

import numpy as np
import pytest
import shap
from sklearn.ensemble import HistGradientBoostingClassifier

from pdclass.model.forest import ARRAY_TYPES, check_forest, margins
from pdclass.model.shapley import shapley
from pdclass.training.freeze import freeze

FEVER, COUGH = 0, 1


def two_symptoms(leaves):
    """A tree on fever, then cough, over four equally likely rows; leaves for (0,0), (0,1), (1,0), (1,1)."""
    columns = {
        "tree_start": [0],
        "tree_class": [1],
        "feature": [FEVER, COUGH, 0, 0, COUGH, 0, 0],
        "threshold": [0.5, 0.5, 0, 0, 0.5, 0, 0],
        "left": [1, 2, -1, -1, 5, -1, -1],
        "right": [4, 3, -1, -1, 6, -1, -1],
        "missing_left": [False] * 7,
        "value": [0, 0, leaves[0], leaves[1], 0, leaves[2], leaves[3]],
        "count": [4, 2, 1, 1, 2, 1, 1],
        "baseline": [0, 0],
    }
    return check_forest({name: np.array(columns[name], kind) for name, kind in ARRAY_TYPES.items()}, 2, 2)


@pytest.mark.parametrize(
    ("leaves", "base", "fever", "cough"), [((0, 0, 0, 80), 20, 30, 30), ((0, 10, 0, 90), 25, 30, 35)]
)
def test_fever_and_cough(leaves, base, fever, cough):
    """Models A and B of figure 1 of S. Lundberg, G. Erion, S.-I. Lee, arXiv:1802.03888 (figures from memory)."""
    shares, start = shapley(two_symptoms(leaves), np.array([[1.0, 1.0]]))
    assert start[1] == pytest.approx(base, abs=1e-12)
    np.testing.assert_allclose(shares[0, 1], [fever, cough], rtol=0, atol=1e-12)
    assert start[1] + shares[0, 1].sum() == pytest.approx(leaves[3], abs=1e-12)


def clouds(n_classes, missing):
    rng = np.random.default_rng(12)
    truth = rng.integers(0, n_classes, 1500)
    values = rng.normal(size=(1500, 8)) + rng.normal(size=(n_classes, 8))[truth] * 1.2
    # missing more often in one class, so that splits of present against missing are worth while
    values[rng.random(values.shape) < missing * (1 + truth[:, None])] = np.nan
    return values, truth


@pytest.mark.filterwarnings("ignore::DeprecationWarning:shap", "ignore::FutureWarning:shap")
@pytest.mark.parametrize("depth", [2, 6, None])
@pytest.mark.parametrize(("n_classes", "missing"), [(4, 0.0), (4, 0.1), (3, 0.2), (2, 0.15)])
def test_agreement_with_shap(n_classes, missing, depth):
    """The `shap` library's path-dependent TreeExplainer gives the same shares and base within 1e-9."""
    values, truth = clouds(n_classes, missing)
    model = HistGradientBoostingClassifier(max_iter=15, max_depth=depth, early_stopping=False).fit(values, truth)
    forest = freeze(model, 15, values)
    asked = values[:60].copy()
    asked[0] = np.nan
    shares, base = shapley(forest, asked)
    explainer = shap.TreeExplainer(model, feature_perturbation="tree_path_dependent")
    theirs = np.asarray(explainer.shap_values(asked, check_additivity=False))
    theirs = theirs.transpose(0, 2, 1) if theirs.ndim == 3 else np.stack([np.zeros_like(theirs), theirs], axis=1)
    np.testing.assert_allclose(shares, theirs, rtol=0, atol=1e-9)
    expected = np.ravel(explainer.expected_value)
    np.testing.assert_allclose(base[-len(expected) :], expected, rtol=0, atol=1e-9)
    np.testing.assert_allclose(base + shares.sum(axis=2), margins(forest, asked), rtol=0, atol=1e-9)
