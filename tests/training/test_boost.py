"""Fitting, stopping, tempering."""

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from blobs import QUICK, blobs

from pdclass.errors import TooFewError
from pdclass.model.doubt import log_probabilities
from pdclass.model.forest import margins
from pdclass.pulses import LABELS
from pdclass.training.boost import Examples, fit_on_parts, fit_shared
from pdclass.training.groups import group_names


def examples(circuits, seed, **changes):
    values, pulses = blobs(circuits, seed=seed, **changes)
    label_index = np.array([LABELS.index(label) for label in pulses.table["label"]])
    return Examples(values, label_index, group_names(pulses.table))


def test_rounds_are_those_that_suit_unseen_groups():
    """With loud learning the best number of rounds is below the most, and its loss the lowest of all."""
    settings = QUICK.model_copy(update={"max_trees": 80, "learning_rate": 0.5})
    fit, stop, temper = examples(12, 1), examples(8, 2, prefix="S"), examples(8, 3, prefix="T")
    fitted = fit_on_parts(fit, stop, temper, settings)
    assert fitted.rounds < 80
    assert len(fitted.forest.tree_start) == 4 * fitted.rounds
    logs = log_probabilities(margins(fitted.forest, stop.values), 1.0, np.zeros(4))
    own = logs[np.arange(len(logs)), stop.label_index]
    assert fitted.stop_loss == pytest.approx(-np.average(own, weights=stop.weights))


def test_labels_without_meaning_are_tempered_down():
    """Trees that learned noise get a high temperature from honest groups."""
    rng = np.random.default_rng(0)
    fit, stop = (
        given._replace(label_index=rng.integers(0, 4, len(given.groups))) for given in (examples(20, 1), examples(8, 2))
    )
    temper = examples(8, 3)._replace(label_index=rng.integers(0, 4, 192))
    assert fit_on_parts(fit, stop, temper, QUICK).temperature > 1.5


def test_shared_groups_never_judge_themselves():
    """Memorised groups would need no temperature; margins from other folds ask for one above 1."""
    learn = examples(14, 5, spread=1.5)
    settings = QUICK.model_copy(update={"max_trees": 60, "learning_rate": 0.3, "min_samples_leaf": 2})
    fitted, folds = fit_shared(learn, 4, settings)
    assert folds == 5
    logs = log_probabilities(margins(fitted.forest, learn.values), 1.0, np.zeros(4))
    own_loss = -np.average(logs[np.arange(len(logs)), learn.label_index], weights=learn.weights)
    assert fitted.stop_loss > 1.5 * own_loss
    assert fitted.temperature > 1.0


def test_folds_that_would_lose_a_class_are_refused():
    """A class in one group only cannot be cross-validated."""
    learn = examples(6, 5)
    alone = np.where(learn.groups == "C000", 3, np.minimum(learn.label_index, 2))
    with pytest.raises(TooFewError, match="cross-validation"):
        fit_shared(learn._replace(label_index=alone), 4, QUICK)


ONE_THREAD = """
import threadpoolctl
from blobs import QUICK, blobs
from pdclass.training import boost
from test_boost import examples

seen = []
original = threadpoolctl.threadpool_limits.__exit__

def leaving(self, *error):
    seen.append({pool["num_threads"] for pool in threadpoolctl.threadpool_info() if pool["user_api"] == "openmp"})
    return original(self, *error)

threadpoolctl.threadpool_limits.__exit__ = leaving
boost.fit_on_parts(examples(8, 1), examples(8, 2), examples(8, 3), QUICK)
assert seen and all(threads == {1} for threads in seen), seen
"""


def test_trees_are_fitted_on_one_thread():
    """Also in a fresh process, where the library is loaded only at the first fit."""
    here = Path(__file__).parent
    environment = {name: value for name, value in os.environ.items() if not name.endswith("_NUM_THREADS")}
    environment |= {"OMP_NUM_THREADS": "2", "PYTHONPATH": f"{here.parent}{os.pathsep}{here}"}
    done = subprocess.run(
        [sys.executable, "-c", ONE_THREAD], env=environment, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
