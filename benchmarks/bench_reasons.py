"""Exact reasons on the base bundle against the reference library's exact tree explainer, in one run on one core."""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[name] = "1"

import time

import numpy as np
import shap
from sklearn.ensemble import HistGradientBoostingClassifier

from pdclass.model.shapley import shapley
from pdclass.training.freeze import freeze

if __name__ == "__main__":
    rng = np.random.default_rng(0)
    values = rng.normal(size=(8000, 40))
    labels = np.argmax(values[:, :4] + 0.5 * values[:, 4:8] + rng.normal(0, 0.7, (8000, 4)), axis=1)
    values[rng.uniform(size=values.shape) < 0.05] = np.nan
    model = HistGradientBoostingClassifier(
        max_iter=100, max_leaf_nodes=24, max_depth=6, early_stopping=False, random_state=0
    ).fit(values, labels)
    forest = freeze(model, 100, values[:500])
    shapley(forest, values[:300])
    start = time.process_time()
    own, _ = shapley(forest, values[:4000])
    ours = (time.process_time() - start) / 4000
    explainer = shap.TreeExplainer(model)
    start = time.process_time()
    theirs = np.moveaxis(explainer.shap_values(values[:100]), -1, 1)
    peer = (time.process_time() - start) / 100
    print(f"exact reasons: {peer / ours:.1f} x the peer; largest difference {np.abs(own[:100] - theirs).max():.1e}")
