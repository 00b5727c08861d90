"""Exact path-dependent Shapley values of a forest: what each feature adds to each margin.

A leaf is a product game over the D distinct features of its path: with z_i = 1 when the pulse satisfies all
conditions on feature i (else 0) and w_i = the product of the cover ratios (count of child over count of parent)
of those conditions, a coalition S is worth value * prod_{i in S} z_i * prod_{i not in S} w_i. Its Shapley value is

    phi_i = value * integral_0^1 (z_i - w_i) prod_{j != i} (w_j + t (z_j - w_j)) dt,

a polynomial of degree D - 1 in t, for which Gauss-Legendre quadrature with ceil(D / 2) nodes is exact.
The definition is the path-dependent one: S. Lundberg, G. Erion, S.-I. Lee, arXiv:1802.03888.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.model.forest import Forest, checked_values
from pdclass.pulses import FloatArray, IntArray

_ROWS = 256  # pulses worked on side by side; each is summed on its own, so the number never changes a bit

_Leaves = tuple[IntArray, FloatArray, IntArray, IntArray, FloatArray, FloatArray, NDArray[np.bool_], FloatArray]


def shapley(forest: Forest, values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The share of every feature in every margin, and the base that the shares start from.

    Parameters
    ----------
    forest : a checked forest.
    values : (pulses, features), NaN where a feature is unmeasurable.

    Returns
    -------
    shares : (pulses, classes, features) [natural log-odds].
    base : (classes,), the mean margin over the training pulses as the trees count them [natural log-odds].
        base + the sum of the shares = margin.
    """
    rows = checked_values(values)
    leaves = _leaf_games(
        forest.tree_start, forest.tree_class, forest.feature, forest.threshold,
        forest.left, forest.right, forest.missing_left, forest.value, forest.count,
    )  # fmt: skip
    base = forest.baseline.copy()
    _add_bases(leaves, base)
    most = int(np.diff(leaves[2]).max(initial=1))
    node, weight = _quadrature((most + 1) // 2)
    shares = np.zeros((rows.shape[0], forest.n_classes, rows.shape[1]))
    _add_shares(rows, leaves, node, weight, shares)
    return shares, base


def _quadrature(most: int) -> tuple[FloatArray, FloatArray]:
    """Gauss-Legendre nodes and weights on [0, 1]; row q holds the rule with q nodes."""
    node, weight = np.zeros((most + 1, most)), np.zeros((most + 1, most))
    for q in range(1, most + 1):
        x, w = np.polynomial.legendre.leggauss(q)
        node[q, :q], weight[q, :q] = (x + 1) / 2, w / 2
    return node, weight


@compiled
def _family(
    tree_start: NDArray[np.int64], left: NDArray[np.int32], right: NDArray[np.int32]
) -> tuple[IntArray, IntArray, NDArray[np.bool_], int]:
    """Parent (-1 at a root), tree and side of every node, and the summed depth of all leaves."""
    nodes = left.size
    parent, depth = np.full(nodes, -1, np.int64), np.zeros(nodes, np.int64)
    tree_of, is_left = np.zeros(nodes, np.int64), np.zeros(nodes, np.bool_)
    tree, summed = -1, 0
    for node in range(nodes):
        if tree + 1 < tree_start.size and node == tree_start[tree + 1]:
            tree += 1
        tree_of[node] = tree
        if left[node] == -1:
            summed += depth[node]
            continue
        one, other = tree_start[tree] + left[node], tree_start[tree] + right[node]
        parent[one], parent[other] = node, node
        depth[one], depth[other] = depth[node] + 1, depth[node] + 1
        is_left[one] = True
    return parent, tree_of, is_left, summed


@compiled
def _leaf_games(
    tree_start: NDArray[np.int64],
    tree_class: NDArray[np.int16],
    feature: NDArray[np.int32],
    threshold: FloatArray,
    left: NDArray[np.int32],
    right: NDArray[np.int32],
    missing_left: NDArray[np.bool_],
    value: FloatArray,
    count: NDArray[np.int64],
) -> _Leaves:
    """Every leaf as a product game: class, value, and per distinct feature its interval, missing rule and cover."""
    parent, tree_of, is_left, most = _family(tree_start, left, right)
    leaves = np.flatnonzero(left == -1)
    offset = np.zeros(leaves.size + 1, np.int64)
    which, missing = np.empty(most, np.int64), np.empty(most, np.bool_)
    low, high, cover = np.empty(most), np.empty(most), np.empty(most)
    end = 0
    for leaf in range(leaves.size):
        first, child = end, leaves[leaf]
        while parent[child] != -1:
            above = parent[child]
            place = first
            while place < end and which[place] != feature[above]:
                place += 1
            if place == end:
                end += 1
                which[place], missing[place] = feature[above], True
                low[place], high[place], cover[place] = -np.inf, np.inf, 1.0
            cover[place] *= count[child] / count[above]
            if is_left[child]:
                high[place] = min(high[place], threshold[above])
            else:
                low[place] = max(low[place], threshold[above])
            missing[place] = missing[place] and (missing_left[above] == is_left[child])
            child = above
        offset[leaf + 1] = end
    leaf_class = tree_class[tree_of[leaves]].astype(np.int64)
    return leaf_class, value[leaves], offset, which[:end], low[:end], high[:end], missing[:end], cover[:end]


@compiled
def _add_bases(leaves: _Leaves, base: FloatArray) -> None:
    leaf_class, leaf_value, offset, _, _, _, _, cover = leaves
    for leaf in range(leaf_value.size):
        product = leaf_value[leaf]
        for place in range(offset[leaf], offset[leaf + 1]):
            product *= cover[place]
        base[leaf_class[leaf]] += product


@compiled
def _add_shares(rows: FloatArray, leaves: _Leaves, node: FloatArray, weight: FloatArray, shares: FloatArray) -> None:
    leaf_class, leaf_value, offset, which, low, high, missing, cover = leaves
    n, n_classes, n_features = shares.shape
    column, summed = np.empty((n_features, _ROWS)), np.empty((n_classes, n_features, _ROWS))
    meets, product = np.empty((2 * node.shape[1], _ROWS)), np.empty(_ROWS)
    for start in range(0, n, _ROWS):
        size = min(_ROWS, n - start)
        summed[:] = 0.0
        column[:, :size] = rows[start : start + size].T
        for leaf in range(leaf_value.size):
            first, stop = offset[leaf], offset[leaf + 1]
            for j in range(stop - first):
                place = first + j
                _meet(column[which[place]], low[place], high[place], missing[place], meets[j], size)
            into, Q = summed[leaf_class[leaf]], (stop - first + 1) // 2
            for q in range(Q):
                scaled = leaf_value[leaf] * weight[Q, q]
                _add_node(node[Q, q], scaled, cover[first:stop], which[first:stop], meets, product, into, size)
        for r in range(size):
            shares[start + r] = summed[:, :, r]


@compiled
def _meet(x: FloatArray, low: float, high: float, missing: bool, meets: FloatArray, size: int) -> None:
    """1 where a pulse satisfies all conditions of a path on one feature, else 0."""
    if_missing = 1.0 if missing else 0.0
    for r in range(size):
        inside = 1.0 if (x[r] > low) & (x[r] <= high) else 0.0
        meets[r] = if_missing if np.isnan(x[r]) else inside


@compiled
def _add_node(
    t: float,
    scaled: float,
    cover: FloatArray,
    which: IntArray,
    meets: FloatArray,
    product: FloatArray,
    into: FloatArray,
    size: int,
) -> None:
    """Add one node of the quadrature of one leaf to the shares of all its features."""
    for r in range(size):
        product[r] = scaled
    for j in range(cover.size):
        z, never = meets[j], cover[j] * (1.0 - t)
        for r in range(size):
            product[r] *= never + t * z[r]
    for j in range(cover.size):
        # (z - w) / (w (1 - t) + t z) takes one of two values; the divisor is positive for 0 < t < 1
        w, unmet = cover[j], -1.0 / (1.0 - t)
        step = (1.0 - w) / (w * (1.0 - t) + t) - unmet
        z, sums = meets[j], into[which[j]]
        for r in range(size):
            sums[r] += product[r] * (unmet + step * z[r])
