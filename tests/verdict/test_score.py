"""From feature values to verdicts."""

import dataclasses
import subprocess
import sys

import numpy as np
import pytest
from verdict_samples import CHAIN, pulse_set

from pdclass.errors import InputError
from pdclass.features import feature_table
from pdclass.model.decision import outside
from pdclass.model.manifest import Validity
from pdclass.pulses import LABELS, UNDECIDED, Chain
from pdclass.verdict.score import held_against, limits_broken, not_checked, score
from pdclass.verdict.sentences import Seen

COLUMNS = [
    *("capture", "capture_digest", "circuit", "site", "sensor", "session", "onset_s", "phase_deg", "snr_db"),
    *("label", "likeliest", "runner_up", "against", "decided", "label_set"),
    *("p_cable", "p_local", "p_switchgear", "p_interference", "log_odds", "novelty", "unfamiliar", "outside"),
    *("reason_1", "reason_2", "reason_3", "bundle_digest"),
]


@pytest.fixture(scope="module")
def pulses():
    """Eighty pulses, twenty a label."""
    return pulse_set([label for label in LABELS for _ in range(20)], rng=np.random.default_rng(3))


@pytest.fixture(scope="module")
def values(pulses, bundle):
    """Their features."""
    return feature_table(pulses, bundle.features)


@pytest.fixture(scope="module")
def verdicts(pulses, values, bundle):
    """Their verdicts."""
    return score(pulses, values, bundle)


def test_the_columns_are_those_of_the_contract(verdicts):
    """A verdict has exactly the columns of a verdict file, in order, indexed by pulse id."""
    assert list(verdicts.table.columns) == COLUMNS
    assert verdicts.table.index.name == "pulse_id"


def test_labels_are_mostly_right_on_easy_pulses(pulses, verdicts):
    """Closed-form pulses of four kinds are decided, and four in five decided ones rightly."""
    truth = np.repeat(LABELS, 20)
    decided = verdicts.table["decided"].to_numpy()
    assert decided.sum() > 20
    assert (verdicts.table["label"].to_numpy()[decided] == truth[decided]).mean() > 0.8


def test_reasons_add_up_to_the_log_odds(verdicts):
    """Base and shares, likeliest less against, give the log-odds to 1e-9, and the probabilities their ratio."""
    table = verdicts.table
    likeliest = [LABELS.index(name) for name in table["likeliest"]]
    against = [LABELS.index(name) for name in table["against"]]
    rows = np.arange(len(table))
    total = verdicts.base + verdicts.shares.sum(axis=2)
    assert np.allclose(total[rows, likeliest] - total[rows, against], table["log_odds"], rtol=0, atol=1e-9)
    p = table[[f"p_{label}" for label in LABELS]].to_numpy()
    assert np.allclose(np.log(p[rows, likeliest] / p[rows, against]), table["log_odds"], rtol=0, atol=1e-9)
    assert np.allclose(p.sum(axis=1), 1.0, rtol=0, atol=1e-12)


def test_the_first_reason_is_the_largest_share(verdicts, bundle):
    """reason_1 tells the feature whose share of the log-odds is largest in size."""
    row = verdicts.table.iloc[0]
    difference = verdicts.shares[0, LABELS.index(row["likeliest"])] - verdicts.shares[0, LABELS.index(row["against"])]
    place = int(np.argmax(np.abs(difference)))
    assert f"{abs(difference[place]):.1f} towards" in row["reason_1"]
    assert (row["reason_1"].startswith("against:")) == (difference[place] < 0)


def test_decided_means_one_likeliest_label_and_nothing_in_the_way(verdicts):
    """Decided and label follow from set, likeliest, unfamiliar and outside alone."""
    for row in verdicts.table.to_dict("records"):
        wanted = row["label_set"] == [row["likeliest"]] and not row["unfamiliar"] and row["outside"] is None
        assert row["decided"] == wanted
        assert row["label"] == (row["likeliest"] if wanted else UNDECIDED)


def test_likeliest_and_runner_up_are_the_two_most_probable(verdicts):
    """The likeliest label has the largest probability, the runner-up the second."""
    p = verdicts.table[[f"p_{label}" for label in LABELS]].to_numpy()
    order = np.argsort(-p, axis=1, kind="stable")
    assert [LABELS[place] for place in order[:, 0]] == list(verdicts.table["likeliest"])
    assert [LABELS[place] for place in order[:, 1]] == list(verdicts.table["runner_up"])


def test_against_is_the_most_probable_label_that_is_ruled_out():
    """For a set of two it is the best label outside; with nothing ruled out it is the runner-up."""
    order = np.array([[1, 2, 0, 3], [1, 2, 0, 3], [1, 2, 0, 3], [1, 2, 0, 3]])
    inside = [{1, 2}, {0, 1, 2, 3}, {1}, set()]
    sets = np.array([[place in members for place in range(4)] for members in inside])
    assert held_against(order, sets).tolist() == [0, 2, 2, 2]


def test_a_batch_gives_what_each_pulse_gives_alone(pulses, values, verdicts, bundle):
    """A verdict does not depend on the company it was scored in, to the last bit."""
    for place in (0, 33, 79):
        alone = score(pulses.take(np.array([place])), values[[place]], bundle)
        assert alone.table.iloc[0].to_dict() == verdicts.table.iloc[place].to_dict()
        assert np.array_equal(alone.shares[0], verdicts.shares[place])


def test_an_echo_gets_no_verdict(pulses, values, bundle):
    """A pulse with echo_of set is left out; the others keep their verdicts."""
    table = pulses.table.copy()
    table.loc[table.index[7], "echo_of"] = table.index[6]
    found = score(dataclasses.replace(pulses, table=table), values, bundle)
    assert table.index[7] not in found.table.index
    assert len(found.table) == len(found.values) == len(found.shares) == len(table) - 1


def test_a_possible_echo_keeps_what_its_parent_leaves_open(pulses, values, verdicts, bundle):
    """The set of a possible echo holds its own labels and its parent's, and nothing else changes."""
    table, names = pulses.table.copy(), pulses.table.index
    single = verdicts.table["label_set"].map(len) == 1
    likeliest = verdicts.table["likeliest"]
    parent = names[single & (likeliest == "cable")][0]
    later = names[single & (likeliest == "interference")][0]
    table.loc[later, "maybe_echo_of"] = parent
    found = score(dataclasses.replace(pulses, table=table), values, bundle).table
    assert found.loc[later, "label_set"] == ["cable", "interference"]
    assert found.loc[later, "label"] == UNDECIDED
    assert found.drop(index=later).equals(verdicts.table.drop(index=later))


def test_what_is_known_of_noise_and_chain_changes_words_alone(pulses, values, bundle, verdicts):
    """How well pulses were seen stands in their reasons, echoes counted over, and in nothing else."""
    echo = pulses.table.assign(echo_of=[pulses.table.index[1], *[None] * (len(pulses.table) - 1)])
    seen = [Seen(3.0, 1e6), *[Seen(5.0, 1e6)] * (len(values) - 1)]
    gone = np.full_like(values, np.nan)
    told = score(dataclasses.replace(pulses, table=echo), gone, bundle, seen=seen)
    assert told.table["reason_1"].str.contains(r"not measurable(?: at 5 dB|, the chain ends at 1 MHz)").any()
    assert not told.table["reason_1"].str.contains("3 dB").any()
    blurred = score(pulses, values, bundle, seen=[Seen(10.0, 40e6)] * len(values))
    assert np.array_equal(blurred.shares, verdicts.shares)
    assert blurred.table["label"].equals(verdicts.table["label"])


def test_words_and_decision_agree_on_what_is_outside(bundle):
    """A pulse has a broken limit in words exactly where the decision rule finds it outside."""
    pulses = pulse_set(["cable"] * 4, rng=np.random.default_rng(2), snr_db=[5.0, 6.0, 61.0, np.nan])
    assert [limit is not None for limit in limits_broken(pulses, bundle.validity)] == outside(
        bundle.validity, pulses
    ).tolist() == [True, False, True, False]  # fmt: skip


def test_outside_names_the_limit_and_decides_nothing(bundle):
    """At 40 MS/s and 8 bit the verdict is undecided and says which limits are broken by how much."""
    slow = Chain(40e6, 1e-4, 8, band_hz=(0.1e6, 15e6))
    pulses = pulse_set(["cable", "local"], rng=np.random.default_rng(2), chain=slow)
    table = score(pulses, feature_table(pulses, bundle.features), bundle).table
    assert (table["label"] == UNDECIDED).all()
    assert set(table["outside"]) == {"rate 40 MS/s is below 62.5 MS/s; resolution 8 bit is below 12 bit"}


def test_limits_are_checked_on_both_sides_and_at_their_ends():
    """A value at a limit is inside; beyond it, even by a hair, the two figures can be told apart."""
    validity = Validity((62.5e6, 100e6), (0.1e6, 0.1e6), (25e6, 25e6), (14.0, 14.0), (6.0, 60.0))
    pulses = pulse_set(["cable"] * 3, rng=np.random.default_rng(2), snr_db=[6.0, 60.0, 5.9999])
    assert limits_broken(pulses, validity) == [None, None, "signal-to-noise ratio 5.9999 dB is below 6 dB"]
    fast = pulse_set(["cable"], rng=np.random.default_rng(2), chain=Chain(125e6, 1e-4, 14, band_hz=(0.1e6, 30e6)))
    assert limits_broken(fast, validity) == ["rate 125 MS/s is above 100 MS/s; upper corner 30 MHz is above 25 MHz"]


def test_an_unknown_chain_is_not_checked_and_not_outside(bundle):
    """Fields that the capture does not state are listed as not checked and break no limit."""
    bare = Chain(100e6)
    pulses = pulse_set(["cable"], rng=np.random.default_rng(2), chain=bare, snr_db=np.nan)
    assert limits_broken(pulses, bundle.validity) == [None]
    lines = not_checked(pulses, bundle.validity)
    assert [line.split(" not checked")[0] for line in lines] == [
        "lower corner",
        "upper corner",
        "resolution",
        "signal-to-noise ratio",
    ]
    known = pulse_set(["cable"], rng=np.random.default_rng(2), chain=CHAIN)
    assert not_checked(known, bundle.validity) == []
    assert len(not_checked(known, Validity(None, None, None, None, None))) == 5


def test_what_resembles_nothing_is_unfamiliar(pulses, values, bundle):
    """Feature values far from every reference pulse, or none at all, are unfamiliar and undecided."""
    strange = values.copy()
    strange[0] *= 1e4
    strange[1] = np.nan
    table = score(pulses, strange, bundle).table
    assert table["unfamiliar"].iloc[:2].all()
    assert (table["label"].iloc[:2] == UNDECIDED).all()


def test_values_of_another_shape_are_refused(pulses, values, bundle):
    """Values that do not fit pulses and bundle are an input error that names both shapes."""
    with pytest.raises(InputError, match=r"expected values of shape \(80, 6\), found \(80, 5\)"):
        score(pulses, values[:, :5], bundle)


def test_a_feature_without_words_is_named(pulses, values, bundle):
    """A bundle whose feature the catalogue lacks is an input error that names the feature."""
    with pytest.raises(InputError, match="'rise_ns' is not in the catalogue"):
        score(pulses, values, bundle, catalogue=())


def test_no_pulses_give_no_verdicts(pulses, values, bundle):
    """An empty set of pulses gives an empty table with all columns."""
    none = score(pulses.take(np.zeros(0, int)), values[:0], bundle)
    assert list(none.table.columns) == COLUMNS
    assert len(none.table) == 0


def test_scoring_loads_neither_drawing_nor_training():
    """The verdict floor loads neither matplotlib nor scikit-learn."""
    code = (
        "import sys, pdclass.verdict.score, pdclass.verdict.batch, pdclass.verdict.sentences;"
        "sys.exit(any(name in sys.modules for name in ('matplotlib', 'sklearn')))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
