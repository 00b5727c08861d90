"""Exact reasons against the reference library's exact tree explainer, in one run on one core.

A fitted model of the base bundle's kind (four classes, 40 features with gaps, 100 rounds, 24 leaves, depth 6) on drawn
numbers; 4,000 rows for ours, 100 for the peer. Run with `make bench`, or alone.
"""

import measuring  # first: one thread

import numpy as np
import shap
from sklearn.ensemble import HistGradientBoostingClassifier

from pdclass.model.shapley import shapley
from pdclass.training.freeze import freeze

ROWS, PEER_ROWS = 4000, 100


def fitted():
    """A model and the rows it is asked about."""
    rng = np.random.default_rng(0)
    values = rng.normal(size=(8000, 40))
    labels = np.argmax(values[:, :4] + 0.5 * values[:, 4:8] + rng.normal(0, 0.7, (8000, 4)), axis=1)
    values[rng.uniform(size=values.shape) < 0.05] = np.nan
    model = HistGradientBoostingClassifier(
        max_iter=100, max_leaf_nodes=24, max_depth=6, early_stopping=False, random_state=0
    ).fit(values, labels)
    return model, values


def main():
    model, values = fitted()
    forest, explainer = freeze(model, 100, values[:500]), shap.TreeExplainer(model)
    found = {}

    def own():
        found["own"] = shapley(forest, values[:ROWS])[0]

    def peer():
        found["peer"] = np.moveaxis(explainer.shap_values(values[:PEER_ROWS]), -1, 1)

    spent = measuring.interleaved({"own": own, "peer": peer}, repeats=3)
    each = {"own": spent["own"] / ROWS, "peer": spent["peer"] / PEER_ROWS}
    faster = measuring.times_faster(each, "own", "peer")
    rows = [
        ("pdclass `shapley`", 1 / np.median(each["own"]), faster),
        ("shap `TreeExplainer`", 1 / np.median(each["peer"]), 1.0),
    ]
    measuring.table(("way", "rows/s", "× peer"), rows)
    print(
        f"Largest difference between the two: {np.abs(found['own'][:PEER_ROWS] - found['peer']).max():.1e} in log-odds.\n"
    )
    measuring.aims([("exact reasons, × the peer (stated for the base bundle)", "at least", 30, faster)])
    measuring.weak(
        "A model on drawn numbers, not the base bundle: depth and leaves of real trees differ, and the ratio with them."
    )


if __name__ == "__main__":
    main()
