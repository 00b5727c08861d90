"""Probabilities and log loss against scikit-learn's own."""

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from sklearn.ensemble import HistGradientBoostingClassifier
from sklearn.metrics import log_loss

from pdclass.model.doubt import fit_temperature, probabilities
from pdclass.model.forest import margins
from pdclass.training.freeze import freeze


def model_of(n_classes):
    rng = np.random.default_rng(3)
    truth = rng.integers(0, n_classes, 900)
    values = rng.normal(size=(900, 5)) + rng.normal(size=(n_classes, 5))[truth]
    values[rng.random(values.shape) < 0.1] = np.nan
    model = HistGradientBoostingClassifier(max_iter=20, early_stopping=False).fit(values[:600], truth[:600])
    return model, values, truth


@pytest.mark.parametrize("n_classes", [2, 3, 4])
def test_probabilities_are_predict_proba(n_classes):
    """At temperature 1 and without a mix the frozen trees give scikit-learn's `predict_proba` within 1e-12."""
    model, values, _ = model_of(n_classes)
    forest = freeze(model, 20, values)
    found = probabilities(margins(forest, values), 1.0, np.zeros(n_classes))
    np.testing.assert_allclose(found, model.predict_proba(values), rtol=0, atol=1e-12)


@pytest.mark.parametrize("n_classes", [2, 4])
def test_temperature_minimises_log_loss(n_classes):
    """A general minimiser on scikit-learn's `log_loss` finds the same temperature."""
    model, values, truth = model_of(n_classes)
    raw = margins(freeze(model, 20, values), values)[600:]
    weights = np.random.default_rng(4).uniform(0.2, 2.0, 300)

    def loss(temperature):
        chances = probabilities(raw, temperature, np.zeros(n_classes))
        return log_loss(truth[600:], chances, sample_weight=weights, labels=range(n_classes))

    best = minimize_scalar(loss, bounds=(0.05, 20), method="bounded", options={"xatol": 1e-8})
    assert fit_temperature(raw, truth[600:], weights) == pytest.approx(best.x, rel=1e-4)
