"""Fitted scikit-learn trees frozen to plain arrays: the one module that looks at scikit-learn's private attributes."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.errors import PdclassError
from pdclass.model.forest import Forest, check_forest, margins
from pdclass.pulses import FloatArray

#: The frozen trees predict as scikit-learn does, to within this.
TOLERANCE = 1e-12


def freeze(fitted: Any, rounds: int, probe: FloatArray) -> Forest:
    """The first rounds of a fitted HistGradientBoostingClassifier as a forest that has been checked against it.

    Parameters
    ----------
    fitted : the classifier, without categorical features.
    rounds : 1 to the number of rounds fitted.
    probe : (pulses, features), NaN included; predictions are compared on it.

    Raises
    ------
    PdclassError
        If the frozen trees predict otherwise than scikit-learn, or the classifier has categorical splits.
    """
    kept = [tree.nodes for one_round in fitted._predictors[:rounds] for tree in one_round]  # noqa: SLF001
    if any(nodes["is_categorical"].any() for nodes in kept):
        raise PdclassError("trees: expected numerical splits, found categorical ones")
    start = np.asarray(fitted._baseline_prediction, np.float64).ravel()  # noqa: SLF001
    two = start.size == 1
    baseline = np.concatenate([[0.0], start]) if two else start
    tree_class = np.ones(len(kept)) if two else np.tile(np.arange(start.size), rounds)
    arrays: dict[str, NDArray[Any]] = {
        "tree_start": np.cumsum([0, *(len(nodes) for nodes in kept)][:-1]).astype(np.int64),
        "tree_class": tree_class.astype(np.int16),
        **_node_arrays(np.concatenate(kept)),
        "baseline": baseline,
    }
    forest = check_forest(arrays, probe.shape[1], baseline.size)
    _check_against(fitted, rounds, forest, probe)
    return forest


def _node_arrays(nodes: NDArray[Any]) -> dict[str, NDArray[Any]]:
    leaf = nodes["is_leaf"] != 0
    return {
        "feature": np.where(leaf, 0, nodes["feature_idx"]).astype(np.int32),
        "threshold": np.where(leaf, 0.0, nodes["num_threshold"]),
        "left": np.where(leaf, -1, nodes["left"].astype(np.int64)).astype(np.int32),
        "right": np.where(leaf, -1, nodes["right"].astype(np.int64)).astype(np.int32),
        "missing_left": (~leaf & (nodes["missing_go_to_left"] != 0)).astype(np.bool_),
        "value": np.where(leaf, nodes["value"], 0.0),
        "count": nodes["count"].astype(np.int64),
    }


def staged_margins(fitted: Any, values: FloatArray) -> Iterator[FloatArray]:
    """Margins (pulses, classes) after each round in turn, as scikit-learn computes them."""
    for stage in fitted.staged_decision_function(values):
        found = np.asarray(stage, np.float64)
        yield found if found.ndim == 2 else np.stack([np.zeros_like(found), found], axis=1)


def _check_against(fitted: Any, rounds: int, forest: Forest, probe: FloatArray) -> None:
    theirs = next(islice(staged_margins(fitted, probe), rounds - 1, None))
    gap = float(np.abs(theirs - margins(forest, probe)).max(initial=0.0))
    if not gap <= TOLERANCE:
        raise PdclassError(f"frozen trees: expected scikit-learn's margins within {TOLERANCE:g}, found {gap:g} off")
