"""Trees from scikit-learn as plain arrays."""

import numpy as np
import pytest
from blobs import blobs
from sklearn.ensemble import HistGradientBoostingClassifier

from pdclass.errors import PdclassError
from pdclass.model.forest import margins
from pdclass.pulses import LABELS
from pdclass.training.freeze import freeze, staged_margins


def fitted(labels=LABELS, **options):
    values, pulses = blobs(12, labels=labels)
    values = values[:, :5]
    truth = np.array([labels.index(label) for label in pulses.table["label"]])
    return HistGradientBoostingClassifier(max_iter=12, early_stopping=False, **options).fit(values, truth), values


@pytest.mark.parametrize("labels", [LABELS, LABELS[:3], LABELS[:2]])
def test_frozen_trees_predict_as_they_did(labels):
    """At any number of rounds, with missing values, for two and more classes."""
    model, values = fitted(labels)
    stages = list(staged_margins(model, values))
    for rounds in (1, 7, 12):
        forest = freeze(model, rounds, values)
        assert forest.n_classes == len(labels)
        np.testing.assert_allclose(margins(forest, values), stages[rounds - 1], rtol=0, atol=1e-12)


def test_a_split_of_present_against_missing_is_kept():
    """Where only missingness tells the classes apart, the threshold is +inf and predictions agree."""
    rng = np.random.default_rng(0)
    truth = rng.integers(0, 2, 400)
    values = np.where(truth == 1, np.nan, 3.0)[:, None]
    model = HistGradientBoostingClassifier(max_iter=3).fit(values, truth)
    forest = freeze(model, 3, values)
    assert np.isinf(forest.threshold).any()
    found = margins(forest, np.array([[np.nan], [-1e300], [1e300]]))[:, 1]
    np.testing.assert_allclose(found, model.decision_function([[np.nan], [-1e300], [1e300]]), atol=1e-12)


def test_trees_that_predict_otherwise_are_refused():
    """The check against scikit-learn can fail: a leaf moved by 1e-9 is found."""
    model, values = fitted()
    honest = freeze(model, 12, values)

    class Moved:
        _predictors = model._predictors
        _baseline_prediction = model._baseline_prediction + 1e-9

        def staged_decision_function(self, rows):
            return model.staged_decision_function(rows)

    assert honest.n_classes == 4
    with pytest.raises(PdclassError, match="1e-12"):
        freeze(Moved(), 12, values)


def test_categorical_splits_are_refused():
    """Features are numbers."""
    rng = np.random.default_rng(1)
    values = rng.integers(0, 6, (300, 1)).astype(float)
    model = HistGradientBoostingClassifier(max_iter=2, categorical_features=[0]).fit(values, values[:, 0] % 2 == 0)
    with pytest.raises(PdclassError, match="categorical"):
        freeze(model, 2, values)
