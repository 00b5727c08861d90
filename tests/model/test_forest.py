"""Trees as arrays."""

import numpy as np
import pytest

from pdclass.errors import InputError, PdclassError, RefusedError
from pdclass.model.forest import ARRAY_TYPES, MAX_DEPTH, check_forest, margins

# x0 <= 1 ? (missing goes left) : x1 present?
ARRAYS = {
    "tree_start": [0, 5],
    "tree_class": [0, 2],
    "feature": [0, 0, 1, 0, 0, 0],
    "threshold": [1.0, 0, np.inf, 0, 0, 0],
    "left": [1, -1, 3, -1, -1, -1],
    "right": [2, -1, 4, -1, -1, -1],
    "missing_left": [True, False, False, False, False, False],
    "value": [0, 1.0, 0, 2.0, 4.0, 8.0],
    "count": [10, 4, 6, 3, 3, 10],
    "baseline": [0.5, 0.25, 0.0],
}


def arrays(**changes):
    merged = {**ARRAYS, **changes}
    return {name: np.array(merged[name], kind) for name, kind in ARRAY_TYPES.items()}


def changed(name, place, value):
    array = list(ARRAYS[name])
    array[place] = value
    return arrays(**{name: array})


def test_margins_follow_the_branches():
    """A value at the threshold goes left, a missing one where its flag says, +inf parts present from missing."""
    values = np.array([[1.0, 0.0], [1.1, 0.0], [1.1, np.nan], [np.nan, np.nan]])
    found = margins(check_forest(arrays(), 2, 3), values)
    np.testing.assert_array_equal(found[:, 0], [1.5, 2.5, 4.5, 1.5])
    np.testing.assert_array_equal(found[:, 1:], [[0.25, 8.0]] * 4)


def test_margins_do_not_depend_on_the_batch(parts):
    """One pulse alone gives the same bits as in any batch."""
    values = np.random.default_rng(0).normal(size=(150, 6))
    together = margins(parts.forest, values)
    alone = np.concatenate([margins(parts.forest, values[row : row + 1]) for row in range(150)])
    np.testing.assert_array_equal(together, alone)


def test_no_pulses_give_no_margins():
    """An empty table is no error."""
    assert margins(check_forest(arrays(), 2, 3), np.empty((0, 2))).shape == (0, 3)


@pytest.mark.parametrize(
    ("name", "place", "value", "said"),
    [
        ("left", 0, 0, "after their parent"),
        ("left", 2, 2, "after their parent"),
        ("right", 2, 7, "after their parent"),
        ("right", 2, 3, "exactly once"),
        ("right", 0, 1, "exactly once"),
        ("left", 0, -2, "after their parent"),
        ("left", 0, -1, "right[0]"),
        ("right", 0, -1, "right[0]"),
        ("feature", 0, 2, "feature[0]"),
        ("feature", 2, -1, "feature[2]"),
        ("threshold", 0, np.nan, "threshold[0]"),
        ("threshold", 0, -np.inf, "threshold[0]"),
        ("value", 1, np.inf, "value[1]"),
        ("value", 5, np.nan, "value[5]"),
        ("count", 3, 0, "count[3]"),
        ("baseline", 0, np.nan, "baseline[0]"),
        ("tree_class", 0, 3, "tree_class[0]"),
        ("tree_class", 1, -1, "tree_class[1]"),
        ("tree_start", 0, 1, "tree_start"),
        ("tree_start", 1, 6, "tree_start"),
        ("tree_start", 1, 0, "tree_start"),
    ],
)
def test_a_wrong_place_is_refused(name, place, value, said):
    """Each rule of the structure check refuses the one change that breaks it, and names it."""
    with pytest.raises(RefusedError, match=r"trees\.npz") as caught:
        check_forest(changed(name, place, value), 2, 3)
    assert said in str(caught.value)


def test_a_wrong_type_size_or_name_is_refused():
    """Arrays must have their type, one dimension, one length, and all be there."""
    for wrong in (
        {**arrays(), "value": arrays()["value"].astype(np.float32)},
        {**arrays(), "value": arrays()["value"][:-1]},
        {**arrays(), "value": arrays()["value"][None]},
        {name: array for name, array in arrays().items() if name != "count"},
        {**arrays(), "more": np.zeros(1)},
    ):
        with pytest.raises(RefusedError):
            check_forest(wrong, 2, 3)
    with pytest.raises(RefusedError, match="baseline"):
        check_forest(arrays(), 2, 4)


def test_two_classes_push_the_second_only():
    """With two classes a tree of the first, or a first baseline, is refused."""
    two = arrays(tree_class=[1, 1], baseline=[0.0, 0.5])
    assert margins(check_forest(two, 2, 2), np.zeros((1, 2))).tolist() == [[0.0, 9.5]]
    for wrong in ({"tree_class": [0, 1], "baseline": [0, 0.5]}, {"tree_class": [1, 1], "baseline": [0.1, 0.5]}):
        with pytest.raises(RefusedError):
            check_forest(arrays(**wrong), 2, 2)


def test_a_bottomless_tree_is_refused():
    """A chain of splits beyond the depth limit is refused."""

    def chain(depth):
        n = 2 * depth + 1
        left, right = np.full(n, -1), np.full(n, -1)
        left[0:-1:2], right[0:-1:2] = np.arange(1, n, 2), np.arange(2, n, 2)
        ones = {"feature": np.zeros(n), "threshold": np.zeros(n), "missing_left": np.zeros(n), "count": np.ones(n)}
        tree = {"tree_start": [0], "tree_class": [1], "baseline": [0, 0], "value": np.ones(n)}
        return arrays(left=left, right=right, **ones, **tree)

    assert check_forest(chain(MAX_DEPTH), 1, 2).n_classes == 2
    with pytest.raises(RefusedError, match="levels"):
        check_forest(chain(MAX_DEPTH + 1), 1, 2)


def test_values_that_do_not_fit_are_refused():
    """Infinity is bad input; a table with too few columns is a defect."""
    forest = check_forest(arrays(), 2, 3)
    with pytest.raises(InputError, match="pulse 1, feature 0"):
        margins(forest, np.array([[0.0, 0.0], [np.inf, 0.0]]))
    with pytest.raises(PdclassError, match="columns"):
        margins(forest, np.zeros((3, 1)))
