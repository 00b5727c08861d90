"""What a batch amounts to, in tables and words."""

import numpy as np
import pandas as pd
import pytest
from verdict_samples import INPUTS

from pdclass.pulses import LABELS, UNDECIDED
from pdclass.report.summary import (
    circuit_words,
    compare_with_truth,
    doubt_groups,
    duration,
    example_ids,
    label_counts,
    morning_lines,
    overall_words,
    phase_words,
    pulse_to_question,
    unchecked_lines,
)


@pytest.fixture(scope="module")
def verdicts(shards):
    """All verdicts of the sample batch."""
    return pd.concat([shard.verdicts.table for shard in shards])


@pytest.fixture(scope="module")
def pulses(shards):
    """All pulses of the sample batch, echoes among them."""
    return pd.concat([shard.pulses.table for shard in shards])


@pytest.fixture(scope="module")
def run(shards):
    """The run record of the sample batch."""
    return {"captures": [dict(shard.record) for shard in shards], "inputs": INPUTS}


def test_every_pulse_is_counted_once(verdicts, pulses, run):
    """Labels and undecided sum to the pulses of a circuit and sensor; echoes are counted apart."""
    counts = label_counts(verdicts, pulses, LABELS, run["captures"])
    assert (counts[[*LABELS, UNDECIDED]].sum(axis=1) == counts["pulses"]).all()
    assert counts["pulses"].sum() == len(verdicts)
    assert counts["echoes"].sum() == len(pulses) - len(verdicts) == 1
    assert counts.loc[("=Depot $x_1$", "strap 1"), UNDECIDED] == 8


def test_a_circuit_without_pulses_is_not_forgotten(verdicts, pulses, run):
    """A capture in which nothing was found has its row of zeros, and words that promise no health."""
    silent = {**run["captures"][0], "circuit": "Silent", "sensor": "strap 9"}
    captures = [*run["captures"], silent]
    counts = label_counts(verdicts, pulses, LABELS, captures)
    assert counts.loc[("Silent", "strap 9")].sum() == 0
    words = dict(circuit_words(counts, doubt_groups(verdicts), captures))
    assert words["Silent"] == (
        "0 pulses in 20.0 ms of signal. No pulse was found; that does not show that the circuit is healthy."
    )


def test_doubts_are_grouped_by_cause_and_none_is_lost(verdicts):
    """Every undecided pulse is in exactly one group; the most frequent cause comes first."""
    groups = doubt_groups(verdicts)
    members = [pulse for group in groups for pulse in group.ids]
    assert sorted(members) == sorted(verdicts.index[~verdicts["decided"]])
    assert [group.count for group in groups] == sorted((group.count for group in groups), reverse=True)
    assert sum(sum(group.circuits.values()) for group in groups) == len(members)
    outside = next(group for group in groups if group.kind.startswith("outside"))
    assert outside.kind == "outside what the model was trained on: rate, resolution"
    assert outside.circuits == {"=Depot $x_1$": 8}


def test_a_class_of_ones_own_is_not_passed_over(verdicts, pulses, run):
    """Pulses decided as a class that is none of ours are named among those to act on: it may be a discharge."""
    void = verdicts.assign(label="void", decided=True)
    counts = label_counts(void, pulses, ("cable", "void"), run["captures"])
    for _, words in circuit_words(counts, doubt_groups(void), run["captures"]):
        assert "for void (" in words
        assert "No pulse was decided as a discharge" not in words


def test_circuit_words_say_labels_doubt_and_who_acts(verdicts, pulses, run):
    """The paragraph of a circuit counts labels and doubts and names the crews, without a word on severity."""
    counts = label_counts(verdicts, pulses, LABELS, run["captures"])
    words = dict(circuit_words(counts, doubt_groups(verdicts), run["captures"]))
    quay, row = words["Quay Road"], counts.loc[("Quay Road", "strap 1")]
    assert quay.startswith("119 pulses in 20.0 ms of signal; 1 echo is listed under its pulse.")
    assert f"cable {row['cable']}" in quay
    assert f"for local ({row['local']}), the termination crew" in quay
    assert "None got a label. Undecided: 8; most frequent cause (all): outside" in words["=Depot $x_1$"]
    assert "does not show that the circuit is healthy" in words["=Depot $x_1$"]


def test_near_end_doubt_calls_both_crews(verdicts, pulses, run):
    """Where only termination or switchgear is left open, both crews are named."""
    near = verdicts.iloc[:3].assign(label=UNDECIDED, decided=False, outside=None, unfamiliar=False)
    near["label_set"] = pd.Series([["local", "switchgear"]] * 3, index=near.index)
    counts = label_counts(near, pulses.loc[near.index], LABELS)
    assert "termination crew and switchgear crew together" in circuit_words(counts, doubt_groups(near), [])[0][1]


def test_overall_words_count_what_was_skipped(verdicts, pulses, run):
    """The sentence on the whole batch says how many inputs could not be read."""
    words = overall_words(label_counts(verdicts, pulses, LABELS), run)
    assert words.startswith(f"3 circuits, 3 records: {len(verdicts)} pulses")
    assert words.endswith("1 input could not be read and is listed below.")


def test_examples_are_the_middle_and_the_least_sure(verdicts):
    """Per decided label a pulse of middle probability and the least sure one, never only the best."""
    for label, pairs in example_ids(verdicts, LABELS).items():
        own = verdicts.loc[verdicts["label"] == label, f"p_{label}"].sort_values()
        chosen = [verdicts.loc[pulse, f"p_{label}"] for pulse, _ in pairs]
        assert chosen[-1] == own.iloc[0]
        assert own.iloc[0] <= chosen[0] <= own.iloc[-1]
        assert (own < chosen[0]).sum() <= len(own) / 2


def test_remarks_are_listed_once_with_their_captures(run):
    """The same remark on two captures is one line; the capture's name before it is left away."""
    records = [dict(run["captures"][0]), dict(run["captures"][1])]
    for record in records:
        record["notes"] = [f"{record['capture']}: no response"]
    lines = dict(unchecked_lines({**run, "captures": records}))
    assert lines["no response"] == ["quay", "crane"]
    assert any(line.startswith("skipped: torn") for line in lines)


def test_phase_references_have_words():
    """A low-voltage socket and an unknown reference have an unknown offset, and it is said."""
    assert phase_words("low-voltage-socket").endswith("offset unknown")
    assert phase_words(None).endswith("offset unknown")
    assert "L2" in phase_words("L2-earth")


def test_recall_counts_echoes_and_doubt_as_not_found():
    """Recall is over all planted pulses found, decided or not; wrong ones are only those decided otherwise."""
    index = ["a", "b", "c", "d"]
    verdicts = pd.DataFrame({"label": ["cable", UNDECIDED, "local", "local"]}, index=index)
    truth = pd.Series(["cable", "cable", "cable", "local", "cable", None], index=[*index, "e", "f"])
    found = compare_with_truth(verdicts, truth, LABELS)
    assert found.table.loc["cable"].to_dict() == {
        "cable": 1, "local": 1, "switchgear": 0, "interference": 0, UNDECIDED: 1, "echo": 1
    }  # fmt: skip
    assert found.recall.loc["cable", "recall"] == pytest.approx(0.25)
    assert found.recall.loc["cable", "decided"] == pytest.approx(0.5)
    assert list(found.wrong.index) == ["c"]
    assert list(found.recall.index) == ["cable", "local"]


def test_the_terminal_names_the_report_and_a_real_pulse(verdicts, pulses, run, tmp_path):
    """The last line says where to look next: the report and a pulse of this batch, or how to get a report."""
    assert "--no-report" in morning_lines(verdicts, pulses, run, LABELS, tmp_path)[-1]
    (tmp_path / "report.html").write_text("x")
    last = morning_lines(verdicts, pulses, run, LABELS, tmp_path)[-1]
    assert last.startswith(f"next: open {tmp_path / 'report.html'}")
    assert last.split()[-1] in verdicts.index


def test_a_pulse_that_came_twice_is_counted_once(verdicts, pulses, run, tmp_path):
    """The same capture under two names changes no count on the terminal."""
    twice = [pd.concat([table, table]) for table in (verdicts, pulses)]
    assert morning_lines(*twice, run, LABELS, tmp_path) == morning_lines(verdicts, pulses, run, LABELS, tmp_path)


def test_the_pulse_to_question_is_the_least_sure_discharge(verdicts):
    """A decided discharge of least probability is asked about first; without any pulse there is none."""
    chosen = verdicts.loc[pulse_to_question(verdicts)]
    assert chosen["decided"]
    assert chosen["label"] != "interference"
    assert pulse_to_question(verdicts.iloc[:0]) is None


def test_durations_change_unit_at_a_second():
    """Below one second ms, else s."""
    assert duration(0.02) == "20.0 ms"
    assert duration(np.float64(90)) == "90.0 s"
