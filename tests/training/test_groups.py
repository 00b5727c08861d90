"""Groups, weights, and how groups are shared out."""

import numpy as np
import pytest

from pdclass.errors import InputError, TooFewError
from pdclass.pulses import LABELS, typed_table
from pdclass.training.groups import check_enough, class_group_weights, group_names, share_out


def table(pairs):
    rows = {"circuit": [circuit for circuit, _ in pairs], "site": [site for _, site in pairs]}
    return typed_table(rows, [str(number) for number in range(len(pairs))])


def test_groups_are_connected_sets():
    """A-x, B-x, B-y and C-y are one group; D without a site, and E at another one, stand alone."""
    pairs = [("C", "y"), ("D", None), ("A", "x"), ("B", "x"), ("E", "z"), ("B", "y"), ("D", None)]
    assert group_names(table(pairs)).tolist() == ["A", "D", "A", "A", "E", "A", "D"]


def test_an_unknown_site_joins_nothing():
    """Two circuits without a site are two groups, and a circuit may have pulses with and without."""
    pairs = [("A", None), ("B", None), ("A", "x"), ("C", "x")]
    assert group_names(table(pairs)).tolist() == ["A", "B", "A", "A"]


def test_a_site_named_like_a_circuit_is_no_circuit():
    """Names of sites and circuits live apart."""
    assert group_names(table([("A", "B"), ("B", "q")])).tolist() == ["A", "B"]


def test_by_circuit_leaves_sites_aside():
    """The weaker choice parts circuits of one site."""
    assert group_names(table([("A", "x"), ("B", "x")]), "circuit").tolist() == ["A", "B"]


def test_a_pulse_without_a_circuit_is_an_error():
    """The message names the pulse."""
    with pytest.raises(InputError, match="pulse 1: circuit"):
        group_names(table([("A", "x"), (None, "x")]))


def test_weights_make_classes_and_groups_equal():
    """Each class has the same sum, each group of a class the same share of it; the mean is 1."""
    rng = np.random.default_rng(0)
    label, groups = rng.integers(0, 3, 500), rng.choice([f"g{k}" for k in range(7)], 500, p=np.arange(1, 8) / 28)
    weights = class_group_weights(label, groups.astype(object))
    assert weights.mean() == pytest.approx(1.0)
    for k in range(3):
        own = label == k
        assert weights[own].sum() == pytest.approx(500 / 3)
        sums = [weights[own & (groups == name)].sum() for name in set(groups[own])]
        np.testing.assert_allclose(sums, 500 / 3 / len(sums))


def test_too_few_groups_name_the_class():
    """Under eight groups, a class in under five, or one class alone is refused with the numbers."""
    groups = np.repeat([f"g{k}" for k in range(10)], 4).astype(object)
    label = np.tile(np.arange(4), 10)
    check_enough(label, groups, LABELS)
    with pytest.raises(TooFewError, match="at least 8, found 7"):
        check_enough(label[:28], groups[:28], LABELS)
    few = np.where((label == 2) & (np.arange(40) >= 16), 1, label)
    with pytest.raises(TooFewError, match="'switchgear': expected labels in at least 5 groups, found 4"):
        check_enough(few, groups, LABELS)
    with pytest.raises(TooFewError, match="at least 2 with labels, found 1"):
        check_enough(np.zeros(40, int), groups, ["cable"])


def test_sharing_out_parts_no_group_and_spreads_classes():
    """Every group is in exactly one part, and rare classes reach every part."""
    rng = np.random.default_rng(1)
    groups = np.repeat([f"g{k:02d}" for k in range(50)], 4).astype(object)
    kinds = [rng.choice(4, 2, replace=False, p=[0.5, 0.3, 0.1, 0.1]) for _ in range(50)]
    label = np.concatenate([np.repeat(kind, 2) for kind in kinds])
    shares = {"conform": 0.2, "fit": 0.6, "stop": 0.1, "temper": 0.1}
    for seed in range(20):
        parts = share_out(label, groups, shares, rng=np.random.default_rng(seed))
        assert sorted(name for names in parts.values() for name in names) == sorted(set(groups))
        for k in range(4):
            total = len(set(groups[label == k]))
            for part, names in parts.items():
                held = len(set(groups[np.isin(groups, names) & (label == k)]))
                assert held >= 1
                assert abs(held - shares[part] * total) <= max(2.5, 0.15 * total)


def test_the_seed_decides_and_nothing_else():
    """The same seed shares out alike, whatever the order of the pulses; another seed differently."""
    groups = np.repeat([f"g{k:02d}" for k in range(20)], 2).astype(object)
    label = np.tile([0, 1], 20)
    shares = {"one": 0.5, "other": 0.5}

    def parts(order, seed):
        return share_out(label[order], groups[order], shares, rng=np.random.default_rng(seed))["one"].tolist()

    straight = np.arange(40)
    assert parts(straight, 3) == parts(straight[::-1], 3) != parts(straight, 4)
