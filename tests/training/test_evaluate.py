"""Figures of a classifier on groups it has not seen."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from blobs import blobs

from pdclass.errors import InputError, TooFewError
from pdclass.model.decision import decide
from pdclass.pulses import LABELS, PulseSet
from pdclass.training.evaluate import (
    CALIBRATION_BINS,
    calibration_error,
    confused,
    evaluate,
    group_interval,
    half_distance,
    judge,
    over_groups,
)


@pytest.fixture(scope="module")
def seen(parts):
    values, pulses = blobs(20, seed=50, prefix="E")
    return values, pulses, evaluate(parts, values, pulses)


def test_groups_weigh_the_same():
    """A group of eight that is wrong and one of two that is right make one half."""
    right = np.array([False] * 8 + [True] * 2)
    groups = np.array(["a"] * 8 + ["b"] * 2, object)
    assert over_groups(right, groups, np.ones(10, bool)) == 0.5
    assert over_groups(right, groups, np.zeros(10, bool)) is None


def test_figures_agree_with_a_plain_count(parts, seen):
    """Accuracy, coverage, set size and the dangerous cell, computed by another route."""
    values, pulses, found = seen
    verdict = decide(parts, values, pulses)
    frame = pd.DataFrame({
        "truth": pulses.table["label"].to_numpy(object), "circuit": pulses.table["circuit"].to_numpy(object),
        "likeliest": np.array(LABELS, object)[verdict.likeliest], "decided": verdict.decided,
        "covered": [verdict.sets[row, LABELS.index(label)] for row, label in enumerate(pulses.table["label"])],
        "size": verdict.sets.sum(axis=1),
    })  # fmt: skip
    frame["hit"] = frame["truth"] == frame["likeliest"]
    figures = found.figures
    recalls = frame.groupby(["truth", "circuit"])["hit"].mean().groupby("truth").mean()
    assert figures["balanced_accuracy"] == pytest.approx(recalls.mean())
    coverage = frame.groupby("circuit")["covered"].mean()
    assert figures["coverage_mean"] == pytest.approx(coverage.mean())
    assert figures["coverage_worst_group"] == coverage.min()
    assert figures["set_size_mean"] == pytest.approx(frame.groupby("circuit")["size"].mean().mean())
    missed = frame.query("truth == 'switchgear' and decided and likeliest == 'interference'")
    assert figures["switchgear_as_interference_count"] == len(missed)
    assert figures["switchgear_pulses"] == (frame["truth"] == "switchgear").sum()
    assert figures["pulses_decided"] == frame["decided"].sum() > 0
    merged = frame[["truth", "likeliest"]].replace({"local": "near", "switchgear": "near"})
    merged["hit"], merged["circuit"] = merged["truth"] == merged["likeliest"], frame["circuit"]
    want = merged.groupby(["truth", "circuit"])["hit"].mean().groupby("truth").mean().mean()
    assert figures["balanced_accuracy_near_end_merged"] == pytest.approx(want)


def test_tables_count_every_pulse_once(seen):
    """Confusion, sets, SNR bands, calibration bins and groups each hold all pulses."""
    values, _, found = seen
    tables = found.tables
    assert tables["confusion"].to_numpy().sum() == len(values)
    for name in ("sets", "by_snr", "calibration", "by_group", "by_class"):
        assert tables[name]["pulses"].sum() == len(values)
    assert tables["by_distance"]["pulses"].sum() == (tables["by_class"].loc["cable", "pulses"])
    assert tables["sets"]["share"].sum() == pytest.approx(1.0)
    assert tables["calibration"]["share"].sum() == pytest.approx(1.0)


def test_unseen_groups_are_covered_about_as_promised(parts):
    """Over many fresh circuits the mean coverage is at least near 0.90."""
    values, pulses = blobs(150, seed=51, prefix="E")
    assert evaluate(parts, values, pulses).figures["coverage_mean"] > 0.86


def test_echoes_and_unlabelled_pulses_do_not_count(parts, seen):
    """They change no figure."""
    values, pulses, found = seen
    more, further = blobs(4, seed=52, prefix="X")
    table = further.table.assign(label=None)
    table.loc[table.index[:40], "label"] = "cable"
    table.loc[table.index[:40], "echo_of"] = pulses.table.index[0]
    both = PulseSet(np.vstack([further.waves, pulses.waves]), pulses.chains, pd.concat([table, pulses.table]))
    assert evaluate(parts, np.vstack([more, values]), both).figures == found.figures


def test_a_possible_echo_shares_its_parents_doubt(parts, seen):
    """As in scoring: the set of a pulse that may be an echo of something lost is everything."""
    values, pulses, _ = seen
    doubtful = replace(pulses, table=pulses.table.assign(maybe_echo_of="lost"))
    figures = evaluate(parts, values, doubtful).figures
    assert figures["set_size_mean"] == 4
    assert figures["share_undecided"] == 1
    assert figures["accuracy_decided"] is None


def test_absent_classes_leave_no_figure(parts):
    """Without switchgear the dangerous cell cannot be said; without distance there is no half distance."""
    values, pulses = blobs(6, seed=53, labels=("cable", "local"), distance_m=np.nan)
    figures = evaluate(parts, values, pulses).figures
    assert figures["switchgear_as_interference_share"] is None
    assert figures["switchgear_as_interference_high"] is None
    assert figures["cable_half_distance_m"] is None


def test_rows_of_confusion_weigh_groups_equally(parts, seen):
    """Each row is the mean over its circuits of the shares within each, and sums to one."""
    values, pulses, _ = seen
    judged = judge(parts, values, pulses)
    table = confused(judged)
    frame = pd.DataFrame({
        "truth": np.array(LABELS, object)[judged.truth], "group": judged.groups,
        "likeliest": np.array(LABELS, object)[judged.verdict.likeliest],
    })  # fmt: skip
    shares = pd.crosstab([frame["truth"], frame["group"]], frame["likeliest"], normalize="index")
    want = shares.groupby("truth").mean().reindex(index=list(LABELS), columns=list(LABELS), fill_value=0.0)
    assert table.index.name == "truth"
    assert table.columns.tolist() == list(LABELS)
    assert table.to_numpy() == pytest.approx(want.to_numpy())
    assert table.sum(axis=1).to_numpy() == pytest.approx(1.0)


def test_a_small_group_confuses_as_much_as_a_large_one(parts, seen):
    """By hand: eight pulses of one circuit all right, two of another all taken for local, make one half each."""
    judged = judge(parts, seen[0], seen[1])
    ten = judged.where(np.arange(len(judged.truth)) < 10)
    likeliest = np.repeat([LABELS.index("cable"), LABELS.index("local")], [8, 2])
    groups = np.array(["a"] * 8 + ["b"] * 2, object)
    truth = np.full(10, LABELS.index("cable"))
    table = confused(ten._replace(truth=truth, groups=groups, verdict=ten.verdict._replace(likeliest=likeliest)))
    assert table.index.tolist() == ["cable"]
    assert table.loc["cable"].to_dict() == {"cable": 0.5, "local": 0.5, "switchgear": 0.0, "interference": 0.0}


def test_bad_input_is_said(parts):
    """No label, or a label that the classifier does not know."""
    values, pulses = blobs(4)
    with pytest.raises(TooFewError, match="found none"):
        evaluate(parts, values, replace(pulses, table=pulses.table.assign(label=None)))
    with pytest.raises(InputError, match="'interference'"):
        evaluate(replace(parts, classes=("cable", "local", "switchgear")), values, pulses)


def test_the_half_distance_is_interpolated():
    """From 0.25 at 10 m to 0.75 at 1000 m the half is at 100 m; the first band above a half gives its own median."""
    bands = pd.DataFrame({"recall": [0.25, np.nan, 0.75, 0.4], "median_m": [10.0, np.nan, 1000.0, 3000.0]})
    assert half_distance(bands) == pytest.approx(100.0)
    assert half_distance(bands.assign(recall=0.6)) == 10.0
    assert half_distance(bands.assign(recall=0.4)) is None


def test_calibration_error_by_hand():
    """Ten pulses each at 0.1, 0.4, 0.8 of which 1, 4, 7 are right: 0.033333."""
    table = pd.DataFrame({"share": [1 / 3] * 3, "stated": [0.1, 0.4, 0.8], "right": [0.1, 0.4, 0.7]})
    assert calibration_error(table) == pytest.approx(0.0333333, abs=1e-6)
    empty = pd.DataFrame({"share": [1.0, 0.0], "stated": [0.5, np.nan], "right": [0.5, np.nan]})
    assert calibration_error(empty) == 0.0
    assert CALIBRATION_BINS == 10


def test_the_interval_counts_groups():
    """Zero of 10 groups: up to 1 - 0.025**(1/10); all of them mirrors it; one of two is nearly everything."""
    low, high = group_interval(0.0, 10)
    assert (low, high) == (0.0, pytest.approx(1 - 0.025**0.1))
    assert group_interval(1.0, 10) == (pytest.approx(0.025**0.1), 1.0)
    assert group_interval(0.5, 2) == (pytest.approx(0.01258, abs=1e-5), pytest.approx(0.98742, abs=1e-5))
