"""Training from table to folder."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from blobs import DIGESTS, NAMES, QUICK, blobs, trained

from pdclass.digest import file_digest
from pdclass.errors import InputError, TooFewError
from pdclass.model.bundle import read_bundle, write_bundle
from pdclass.model.forest import margins
from pdclass.model.novelty import fit_novelty
from pdclass.pulses import PulseSet
from pdclass.training.boost import Examples
from pdclass.training.fit import _classes, _examples, _share, reference_places, train, validity_of
from pdclass.training.groups import class_group_weights
from pdclass.training.settings import PartShares, TrainSettings


def test_twice_the_same_input_gives_the_same_bytes(tmp_path):
    """Every file of the folder, and in whatever order the pulses come."""
    values, pulses = blobs(16)
    order = np.random.default_rng(0).permutation(len(values))
    for name, places in (("one", np.arange(len(values))), ("again", np.arange(len(values))), ("mixed", order)):
        parts = train(values[places], NAMES, DIGESTS, pulses.take(places), QUICK, world="w = 1\n")
        write_bundle(tmp_path / name, parts)
    for file in (tmp_path / "one").iterdir():
        assert (
            file_digest(file)
            == file_digest(tmp_path / "again" / file.name)
            == file_digest(tmp_path / "mixed" / file.name)
        )
    read_bundle(tmp_path / "one", DIGESTS)


def test_another_seed_shares_out_otherwise():
    """The seed decides which groups teach, so other trees grow."""
    other = trained(16, settings=QUICK.model_copy(update={"seed": 5}))
    assert not np.array_equal(trained(16).forest.value, other.forest.value)


def test_echoes_and_unlabelled_pulses_are_left_out():
    """They change nothing, whatever they hold."""
    values, pulses = blobs(16)
    more, further = blobs(16, seed=1)
    table = further.table.assign(label=None)
    table.loc[table.index[::2], "label"] = "cable"
    table.loc[table.index[::2], "echo_of"] = "somebody"
    both = PulseSet(np.vstack([pulses.waves, further.waves]), pulses.chains, pd.concat([pulses.table, table]))
    one = train(values, NAMES, DIGESTS, pulses, QUICK)
    other = train(np.vstack([values, more + 50]), NAMES, DIGESTS, both, QUICK)
    np.testing.assert_array_equal(one.forest.value, other.forest.value)
    assert one.account["pulses"] == other.account["pulses"]
    assert one.validity == other.validity


@pytest.mark.parametrize(("circuits", "shared"), [(12, True), (30, True), (45, False)])
def test_few_groups_share_and_many_do_not(circuits, shared):
    """Below 40 groups of the rarest class fit, stop and temper share; the account says so, conform is apart."""
    account = trained(circuits, per_circuit=8).account
    parts = account["groups"]["parts"]
    assert set(parts) == ({"conform", "learn"} if shared else {"conform", "fit", "stop", "temper"})
    assert ("cross-validation" in account["how"]) == shared
    assert sum(part["groups"] for part in parts.values()) == circuits


@pytest.mark.parametrize(("circuits", "conform"), [(18, 9), (25, 9), (44, 9), (60, 12)])
def test_conform_gets_the_groups_that_a_finite_limit_needs(circuits, conform):
    """Nine groups at an error rate of 0.10 where half of the groups or less can give them."""
    parts = trained(circuits, per_circuit=8)
    assert parts.account["groups"]["parts"]["conform"]["groups"] == conform
    assert np.isfinite(parts.limits).all()
    assert not [note for note in parts.account["notes"] if "ruled out" in note]


def test_a_class_that_cannot_be_ruled_out_is_said():
    """With too few conform groups the limit is infinite and the note says how many are missing."""
    parts = trained(12)
    assert np.isinf(parts.limits).all()
    held = parts.account["groups"]["parts"]["conform"]["groups"]
    assert f"needs 9 groups of it and has {held}; {9 - held} missing" in parts.account["notes"][0]


def test_conform_groups_teach_nothing_else():
    """Scrambling the labels of the conform groups leaves trees and temperature as they were."""
    values, pulses = blobs(30)
    before = train(values, NAMES, DIGESTS, pulses, QUICK)
    names = set(before.account["groups"]["parts"])
    assert names == {"conform", "learn"}
    conform = conform_groups(values, pulses)
    hit = pulses.table["circuit"].isin(conform).to_numpy()
    table = pulses.table.copy()
    table.loc[hit, "label"] = np.roll(table.loc[hit, "label"].to_numpy(), 1)
    after = train(values, NAMES, DIGESTS, replace(pulses, table=table), QUICK)
    np.testing.assert_array_equal(before.forest.value, after.forest.value)
    assert before.temperature == after.temperature
    assert (before.limits != after.limits).any()


def test_the_novelty_limit_comes_from_the_conform_groups():
    """Fitted again by hand from the reference and the conform pulses alone, it is the same."""
    values, pulses = blobs(30)
    parts = train(values, NAMES, DIGESTS, pulses, QUICK)
    circuits = pulses.table["circuit"].to_numpy(object)
    held = np.isin(circuits.astype(str), sorted(conform_groups(values, pulses)))
    reference = parts.reference[list(NAMES)].to_numpy()
    again = fit_novelty(reference, parts.reference["group"].to_numpy(object), values[held], circuits[held])
    assert parts.novelty.limit == again.limit
    everyone = fit_novelty(reference, parts.reference["group"].to_numpy(object), values, circuits)
    assert parts.novelty.limit != everyone.limit


def conform_groups(values, pulses):
    order = np.argsort(pulses.table.index.to_numpy(str))
    classes = _classes(pulses.table)
    return set(
        _share(_examples(values[order], pulses.table.iloc[order], classes, QUICK), classes, QUICK).parts["conform"]
    )


def test_a_class_without_groups_for_a_part_is_named():
    """Where no sharing leaves a class in every part, the class is named."""
    values, pulses = blobs(12)
    groups = pulses.table["circuit"].to_numpy(object)
    label = np.where(groups == "C003", 1, 0)
    with pytest.raises(TooFewError, match=r"class 'local': expected groups for every part"):
        _share(Examples(values, label, groups), ("cable", "local"), QUICK)


def test_two_and_three_classes_work():
    """Any number of classes from two; two have one tree a round and a first margin of zero."""
    two = trained(16, labels=("cable", "interference"))
    assert two.classes == ("cable", "interference")
    assert not margins(two.forest, np.zeros((3, 6)))[:, 0].any()
    assert len(two.forest.tree_start) == two.account["rounds"]
    assert trained(16, labels=("cable", "local", "interference")).forest.n_classes == 3


def test_a_mix_moves_the_shift_and_the_limits():
    """log(new/old) stands in the shift, trees and temperature stay; limits are made with the mix."""
    mix = {"cable": 0.1, "local": 0.1, "switchgear": 0.1, "interference": 0.7}
    plain, mixed = trained(24), trained(24, settings=QUICK.model_copy(update={"mix": mix}))
    np.testing.assert_allclose(mixed.shift, np.log([0.4, 0.4, 0.4, 2.8]), rtol=1e-12)
    assert plain.temperature == mixed.temperature
    assert (plain.limits != mixed.limits).all()
    with pytest.raises(InputError, match="mix"):
        trained(24, settings=QUICK.model_copy(update={"mix": {"cable": 1.0}}))


def test_validity_is_the_range_of_the_training_pulses():
    """Plain minimum and maximum of what was seen, unknown where no chain knew."""
    _, pulses = blobs(10)
    limits = validity_of(pulses)
    snr = pulses.table["snr_db"]
    assert limits.rate_hz == (62.5e6, 100e6)
    assert (limits.low_hz, limits.high_hz, limits.adc_bits) == ((0.1e6, 0.2e6), (20e6, 25e6), (12, 14))
    assert limits.snr_db == (float(snr.min()), float(snr.max()))
    bare = replace(pulses, chains=tuple(replace(chain, band_hz=None, adc_bits=None) for chain in pulses.chains))
    assert validity_of(bare).low_hz is None
    assert validity_of(bare).adc_bits is None


def test_the_reference_takes_classes_and_groups_in_turn():
    """A big group does not crowd out the small ones."""
    label = np.array([0] * 100 + [0] * 3 + [1] * 3)
    groups = np.array(["big"] * 100 + ["small"] * 3 + ["small"] * 3, object)
    kept = reference_places(label, groups, 9)
    assert kept.tolist() == [0, 1, 2, 100, 101, 102, 103, 104, 105]


def test_private_training_keeps_no_pulses():
    """Real pulses stand in the bundle unless it is private; simulated ones never do."""
    assert trained(16).training is not None
    assert trained(16, settings=QUICK.model_copy(update={"private": True})).training is None
    assert trained(16, basis="simulated").training is None


def test_bad_input_is_said():
    """Unknown labels, doubled pulses, no labels, infinite values."""
    values, pulses = blobs(12)
    with pytest.raises(InputError, match="'frog'"):
        train(values, NAMES, DIGESTS, replace(pulses, table=pulses.table.assign(label="frog")), QUICK)
    twice = np.r_[0, np.arange(len(values))]
    with pytest.raises(InputError, match="found twice"):
        train(values[twice], NAMES, DIGESTS, pulses.take(twice), QUICK)
    with pytest.raises(TooFewError, match="found none"):
        train(values, NAMES, DIGESTS, replace(pulses, table=pulses.table.assign(label=None)), QUICK)
    with pytest.raises(InputError, match="infinity"):
        train(np.where(values > 3, np.inf, values), NAMES, DIGESTS, pulses, QUICK)
    with pytest.raises(TooFewError, match="groups"):
        trained(7)


def test_sharing_by_circuit_is_said():
    """The weaker groups carry their note."""
    notes = trained(24, site="one place", settings=QUICK.model_copy(update={"group_by": "circuit"})).account["notes"]
    assert any("sites shared" in note for note in notes)
    with pytest.raises(TooFewError, match="expected at least 8, found 1"):
        trained(24, site="one place")


def test_settings_hold_their_bounds():
    """Parts are positive, the error rate lies between 0 and 1."""
    for wrong in ({"error_rate": 1.0}, {"parts": {"fit": 0}}, {"max_depth": 0}, {"frogs": 1}):
        with pytest.raises(ValueError, match="1 validation error"):
            TrainSettings.model_validate(wrong)
    assert PartShares().conform == 0.2


def test_examples_weigh_classes_alike():
    """What the trees see: equal sums for every class."""
    values, pulses = blobs(12)
    label = np.where(np.arange(len(values)) < 200, 0, 1)
    groups = pulses.table["circuit"].to_numpy(object)
    weights = Examples(values, label, groups).weights
    assert weights[label == 0].sum() == pytest.approx(weights[label == 1].sum())
    np.testing.assert_array_equal(weights, class_group_weights(label, groups))
