"""Trees as arrays: the checked structure and the margins that follow from it.

Layout (the arrays of `trees.npz`): `tree_start` (trees,) is the place of each tree's root in the node arrays;
`left` and `right` count from that root, -1 at a leaf; a value goes left when it is <= `threshold`, a missing
value goes left when `missing_left`. A threshold of +inf parts present (left) from missing values. `count` is the
number of training pulses in a node. `baseline` (classes,) is where the sums begin. With two classes only the
second one has trees, and the first margin is 0.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.errors import InputError, PdclassError, RefusedError, complaint
from pdclass.pulses import FloatArray

#: Type of every array, as it stands on disk (little-endian).
ARRAY_TYPES: Mapping[str, str] = {
    "tree_start": "<i8",
    "tree_class": "<i2",
    "feature": "<i4",
    "threshold": "<f8",
    "left": "<i4",
    "right": "<i4",
    "missing_left": "|b1",
    "value": "<f8",
    "count": "<i8",
    "baseline": "<f8",
}
_PER_NODE = ("feature", "threshold", "left", "right", "missing_left", "value", "count")
#: Deeper trees are refused: reasons cost grows with depth, and no tree of ours comes near.
MAX_DEPTH = 64


@dataclass(frozen=True)
class Forest:
    """Gradient-boosted trees as plain arrays; the layout is described at the head of this module."""

    tree_start: NDArray[np.int64]
    tree_class: NDArray[np.int16]
    feature: NDArray[np.int32]
    threshold: FloatArray
    left: NDArray[np.int32]
    right: NDArray[np.int32]
    missing_left: NDArray[np.bool_]
    value: FloatArray
    count: NDArray[np.int64]
    baseline: FloatArray

    def arrays(self) -> dict[str, NDArray[Any]]:
        """The arrays by name, in the order of the layout."""
        return {field.name: getattr(self, field.name) for field in fields(self)}

    @property
    def n_classes(self) -> int:
        """Number of classes."""
        return int(self.baseline.size)


def check_forest(arrays: Mapping[str, NDArray[Any]], n_features: int, n_classes: int) -> Forest:
    """A forest, once every array and every tree has passed the structure check.

    Children lie in range and after their parent, every node is reached exactly once, features are in range,
    leaf values and baselines are finite, counts are positive, thresholds are never NaN or -inf (+inf is a split
    of present against missing), and no tree is deeper than 64.

    Parameters
    ----------
    arrays : the ten arrays of the layout by name.
    n_features : number of feature columns that the trees may look at.
    n_classes : number of classes, >= 2.

    Raises
    ------
    RefusedError
        At the first thing that is wrong; the message names the array and the place.
    """
    _check_types(arrays)
    _check_shapes(arrays, n_classes)
    forest = Forest(**{name: np.ascontiguousarray(arrays[name]) for name in ARRAY_TYPES})
    _check_values(forest, n_features, n_classes)
    for tree, (start, stop) in enumerate(_tree_bounds(forest)):
        _check_tree(forest, tree, start, stop)
    for array in forest.arrays().values():
        array.flags.writeable = False
    return forest


def _refuse_unless(fine: bool, field: str, expected: object, found: object) -> None:
    if not fine:
        advice = "the bundle is damaged or not of this format; get it again from its maker"
        raise RefusedError(complaint("trees.npz", field, expected=expected, found=found, advice=advice))


def _check_types(arrays: Mapping[str, NDArray[Any]]) -> None:
    _refuse_unless(set(arrays) == set(ARRAY_TYPES), "arrays", sorted(ARRAY_TYPES), sorted(arrays))
    for name, kind in ARRAY_TYPES.items():
        array = arrays[name]
        fine = array.ndim == 1 and array.dtype == np.dtype(kind)
        _refuse_unless(fine, name, f"one dimension of {kind}", f"shape {array.shape} of {array.dtype.str}")


def _check_shapes(arrays: Mapping[str, NDArray[Any]], n_classes: int) -> None:
    nodes, trees = arrays["value"].size, arrays["tree_start"].size
    _refuse_unless(arrays["tree_class"].size == trees, "tree_class", f"{trees} places", arrays["tree_class"].size)
    _refuse_unless(arrays["baseline"].size == n_classes, "baseline", f"{n_classes} places", arrays["baseline"].size)
    for name in _PER_NODE:
        _refuse_unless(arrays[name].size == nodes, name, f"{nodes} places", arrays[name].size)
    edges = np.append(arrays["tree_start"], nodes)
    rising = bool(edges[0] == 0) and bool(np.all(np.diff(edges) > 0))
    _refuse_unless(rising, "tree_start", "0, then rising, below the number of nodes", "another order")


def _check_values(forest: Forest, n_features: int, n_classes: int) -> None:
    leaf = forest.left == -1
    _first_bad("right", (forest.right == -1) != leaf, "-1 exactly where left is -1", forest.right)
    _first_bad("value", leaf & ~np.isfinite(forest.value), "a finite number", forest.value)
    _first_bad("count", forest.count <= 0, "a positive number", forest.count)
    split = ~leaf
    bad_feature = split & ((forest.feature < 0) | (forest.feature >= n_features))
    _first_bad("feature", bad_feature, f"0 to {n_features - 1}", forest.feature)
    bad_threshold = split & (np.isnan(forest.threshold) | (forest.threshold == -np.inf))
    _first_bad("threshold", bad_threshold, "a number or +inf", forest.threshold)
    _first_bad("baseline", ~np.isfinite(forest.baseline), "a finite number", forest.baseline)
    lowest = 1 if n_classes == 2 else 0
    bad_class = (forest.tree_class < lowest) | (forest.tree_class >= n_classes)
    _first_bad("tree_class", bad_class, f"{lowest} to {n_classes - 1}", forest.tree_class)
    if n_classes == 2:
        _first_bad("baseline", forest.baseline[:1] != 0, "0 for the first of two classes", forest.baseline)


def _first_bad(name: str, bad: NDArray[np.bool_], expected: str, array: NDArray[Any]) -> None:
    if bad.any():
        place = int(np.argmax(bad))
        _refuse_unless(fine=False, field=f"{name}[{place}]", expected=expected, found=array[place])


def _tree_bounds(forest: Forest) -> list[tuple[int, int]]:
    starts = [int(start) for start in forest.tree_start]
    return list(zip(starts, [*starts[1:], int(forest.value.size)], strict=True)) if starts else []


def _check_tree(forest: Forest, tree: int, start: int, stop: int) -> None:
    fault, place = _tree_fault(forest.left[start:stop], forest.right[start:stop], MAX_DEPTH)
    faults = {
        1: ("children in range and after their parent", "a child elsewhere"),
        2: ("every node reached exactly once", "a node reached twice or never"),
        3: (f"at most {MAX_DEPTH} levels", "a deeper tree"),
    }
    if fault:
        expected, found = faults[fault]
        _refuse_unless(fine=False, field=f"tree {tree}, node {place}", expected=expected, found=found)


@compiled
def _tree_fault(left: NDArray[np.int32], right: NDArray[np.int32], max_depth: int) -> tuple[int, int]:
    nodes = left.size
    reached = np.zeros(nodes, np.int64)
    depth = np.zeros(nodes, np.int64)
    reached[0] = 1
    for node in range(nodes):
        if reached[node] != 1:
            return 2, node
        if depth[node] > max_depth:
            return 3, node
        if left[node] == -1:
            continue
        for child in (left[node], right[node]):
            if child <= node or child >= nodes:
                return 1, node
            reached[child] += 1
            depth[child] = depth[node] + 1
    return 0, 0


def checked_values(values: FloatArray, n_features: int | None = None) -> FloatArray:
    """Feature values as (pulses, features) float64 in C order, finite or NaN.

    Raises
    ------
    PdclassError
        If the shape is not (pulses, features).
    InputError
        If a value is infinite: a feature is a number or unmeasurable (NaN).
    """
    array = np.ascontiguousarray(values, np.float64)
    if array.ndim != 2 or (n_features is not None and array.shape[1] != n_features):
        raise PdclassError(f"feature values: expected shape (pulses, {n_features}), found {array.shape}")
    if np.isinf(array).any():
        row, column = (int(place[0]) for place in np.nonzero(np.isinf(array)))
        raise InputError(f"feature values: pulse {row}, feature {column}: expected a number or NaN, found infinity")
    return array


def margins(forest: Forest, values: FloatArray) -> FloatArray:
    """The sum of the trees' leaf values for every pulse and class [natural log-odds].

    Trees are added one after another in their stored order, so that the bits do not depend on the batch.

    Parameters
    ----------
    forest : a checked forest.
    values : (pulses, features), NaN where a feature is unmeasurable.

    Returns
    -------
    (pulses, classes)
    """
    rows = checked_values(values)
    if forest.feature.size and rows.shape[1] <= int(forest.feature[forest.left >= 0].max(initial=-1)):
        raise PdclassError(f"feature values: the trees look at more than the {rows.shape[1]} columns given")
    out = np.tile(forest.baseline, (rows.shape[0], 1))
    _add_trees(
        rows, forest.tree_start, forest.tree_class, forest.feature, forest.threshold,
        forest.left, forest.right, forest.missing_left, forest.value, out,
    )  # fmt: skip
    return out


@compiled
def _add_trees(
    rows: FloatArray,
    tree_start: NDArray[np.int64],
    tree_class: NDArray[np.int16],
    feature: NDArray[np.int32],
    threshold: FloatArray,
    left: NDArray[np.int32],
    right: NDArray[np.int32],
    missing_left: NDArray[np.bool_],
    value: FloatArray,
    out: FloatArray,
) -> None:
    for tree in range(tree_start.size):
        start = tree_start[tree]
        column = tree_class[tree]
        for row in range(rows.shape[0]):
            node = start
            while left[node] != -1:
                x = rows[row, feature[node]]
                goes_left = missing_left[node] if np.isnan(x) else x <= threshold[node]
                node = start + (left[node] if goes_left else right[node])
            out[row, column] += value[node]
