"""From a scenario to a report: every command's job does its part, twice with the same bytes."""

import hashlib
import json

import numpy as np
import pandas as pd
import pytest

from pdclass.capture import FillIns, open_capture, read_pulses, write_pulses
from pdclass.errors import InputError, RefusedError, TooFewError
from pdclass.jobs import base_model
from pdclass.jobs.evaluate import evaluate_bundle
from pdclass.jobs.extract import extract_captures
from pdclass.jobs.score import score_inputs, score_lines
from pdclass.jobs.simulate import simulate
from pdclass.jobs.train import train_bundle
from pdclass.verdict.batch import read_run, read_verdicts


def tree_digest(folder):
    """Digest of every file of a folder, by name."""
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def test_simulated_captures_carry_their_truth_to_the_pulses(tiny_world):
    """Most planted pulses are found at their place with the label that was planted."""
    planted = found = 0
    for path in tiny_world.captures:
        capture = open_capture(path)
        tables = [pd.read_parquet(table) for table in tiny_world.pulse_tables]
        mine = pd.concat([t[t["capture"] == capture.name] for t in tables])
        planted += len(capture.annotations)
        found += int((mine["label"].notna() & (mine["family"] != "background")).sum())
    assert found > 0.75 * planted


def test_the_number_of_processes_changes_nothing(tiny_world, tmp_path):
    """The same scenario in two processes gives the same bytes."""
    again = simulate("tiny", tmp_path / "again", seed=4, jobs=2)
    assert tree_digest(again.captures[0].parent) == tree_digest(tiny_world.captures[0].parent)


def test_a_bundle_is_made_twice_with_the_same_bytes(tiny_bundle, tmp_path):
    """Simulating, extracting, measuring, fitting and calibrating again gives the bundle again, bit for bit."""
    base_model.make_base(tmp_path / "tiny", scenario="tiny", jobs=2)
    assert tree_digest(tmp_path / "tiny") == tree_digest(tiny_bundle)


def test_scoring_gives_reasons_that_add_up_and_a_report(tiny_world, tiny_bundle, tmp_path):
    """Every pulse that is no echo has a verdict; base plus shares is its log-odds; the report names the captures."""
    done = score_inputs(list(tiny_world.captures[:3]), tmp_path / "v", bundle=tiny_bundle, as_csv=True)
    verdicts = read_verdicts(done.out)
    pulses = sum(record["pulses_found"] for record in done.run["captures"])
    assert len(verdicts) == pulses
    page = done.report.read_text(encoding="utf-8")
    assert "<script" not in page
    assert open_capture(tiny_world.captures[0]).circuit in page
    assert (done.out / "verdicts.csv").is_file()
    assert score_lines(done)[-1].startswith("next: ")
    reasons = pd.concat([pd.read_parquet(path) for path in sorted((done.out / "reasons").glob("*"))])
    classes = json.loads((tiny_bundle / "manifest.json").read_text())["classes"]
    shares = np.stack(reasons["share"].to_numpy()).reshape(len(reasons), len(classes), -1).sum(axis=2)
    odds = shares + np.stack(reasons["base"].to_numpy())
    for row, (_, verdict) in enumerate(verdicts.iterrows()):
        pair = [classes.index(verdict["likeliest"]), classes.index(verdict["against"])]
        assert odds[row, pair[0]] - odds[row, pair[1]] == pytest.approx(verdict["log_odds"], abs=1e-9)


def test_scoring_again_gives_the_same_bytes_whatever_the_processes(tiny_world, tiny_bundle, tmp_path):
    """A second run elsewhere, in two processes, writes the same folder but for the path it was given."""
    first = score_inputs(list(tiny_world.captures[:4]), tmp_path / "one", bundle=tiny_bundle)
    second = score_inputs(list(tiny_world.captures[:4]), tmp_path / "two", bundle=tiny_bundle, jobs=2)
    assert tree_digest(first.out) == tree_digest(second.out)


def test_pulse_tables_score_as_their_captures_do(tiny_world, tiny_bundle, tmp_path):
    """Extracting to a table first and scoring the table gives the verdicts that the capture gives."""
    capture = tiny_world.captures[1]
    extract_captures([capture], tmp_path / "p.parquet")
    direct = read_verdicts(score_inputs([capture], tmp_path / "a", bundle=tiny_bundle, report=False).out)
    through = read_verdicts(
        score_inputs([tmp_path / "p.parquet"], tmp_path / "b", bundle=tiny_bundle, report=False).out
    )
    pd.testing.assert_frame_equal(direct, through)


def test_a_bad_file_is_skipped_and_the_rest_scored(tiny_world, tiny_bundle, tmp_path):
    """One unreadable input costs its own verdicts only; the run says which and why."""
    bad = tmp_path / "bad.sigmf-meta"
    bad.write_text("{")
    done = score_inputs([tiny_world.captures[0], bad], tmp_path / "v", bundle=tiny_bundle, report=False)
    assert len(done.skipped) == 1
    assert "bad.sigmf-meta" in done.skipped[0]
    assert [item["state"] == "scored" for item in read_run(done.out)["inputs"]] == [True, False]
    with pytest.raises(InputError, match=r"bad\.sigmf-meta"):
        score_inputs([bad], tmp_path / "w", bundle=tiny_bundle)
    assert not (tmp_path / "w").exists()
    assert not list(tmp_path.glob(".w*"))


def test_another_run_is_not_written_over(tiny_world, tiny_bundle, tmp_path):
    """A folder with other verdicts is refused without force, and left as it was."""
    score_inputs([tiny_world.captures[0]], tmp_path / "v", bundle=tiny_bundle, report=False)
    before = tree_digest(tmp_path / "v")
    with pytest.raises(RefusedError, match="--force"):
        score_inputs([tiny_world.captures[1]], tmp_path / "v", bundle=tiny_bundle, report=False)
    assert tree_digest(tmp_path / "v") == before
    score_inputs([tiny_world.captures[1]], tmp_path / "v", bundle=tiny_bundle, report=False, force=True)
    assert tree_digest(tmp_path / "v") != before


def test_one_flipped_byte_in_a_bundle_is_refused(tiny_world, tiny_bundle, tmp_path):
    """A bundle that is not intact scores nothing and is named."""
    copy = tmp_path / "bundle"
    copy.mkdir()
    for path in tiny_bundle.iterdir():
        content = bytearray(path.read_bytes())
        if path.name == "trees.npz":
            content[len(content) // 2] ^= 1
        (copy / path.name).write_bytes(content)
    with pytest.raises(RefusedError, match=r"trees\.npz"):
        score_inputs([tiny_world.captures[0]], tmp_path / "v", bundle=copy)
    assert not (tmp_path / "v").exists()


def test_training_from_tables_writes_a_bundle_with_its_card(tiny_world, tmp_path):
    """`train` on the labelled tables of many circuits gives a bundle that says what it cannot promise."""
    done = train_bundle(list(tiny_world.pulse_tables), tmp_path / "own")
    assert (tmp_path / "own" / "card.md").read_text().startswith("# Bundle trained on labelled pulses")
    manifest = json.loads((tmp_path / "own" / "manifest.json").read_text())
    assert manifest["error_rate"] == 0.1
    assert len(done.digest) == 64
    with pytest.raises(InputError, match="--force"):
        train_bundle(list(tiny_world.pulse_tables), tmp_path / "own")


def test_one_circuit_is_too_few_to_train_on(tiny_world, tmp_path):
    """Pulses of one circuit cannot be split by group: refused with the number that is missing."""
    extract_captures([tiny_world.captures[0]], tmp_path / "one.parquet")
    with pytest.raises(TooFewError, match="groups"):
        train_bundle([tmp_path / "one.parquet"], tmp_path / "own")
    assert not (tmp_path / "own").exists()


def test_evaluation_counts_and_warns_of_circuits_it_was_trained_on(tiny_world, tiny_bundle, tmp_path):
    """Figures on other circuits come without a warning; on the training circuits themselves with one."""
    done = evaluate_bundle(tiny_bundle, list(tiny_world.pulse_tables), tmp_path / "e")
    assert 0.25 < done.figures["balanced_accuracy"] <= 1
    assert (tmp_path / "e" / "evaluation.md").read_text().count("|") > 50


def test_captures_of_two_rates_do_not_share_a_table(tiny_world, tmp_path):
    """Two rates in one extract are refused, naming both; nothing is written."""
    rates = {}
    for path in tiny_world.captures:
        rates.setdefault(open_capture(path).chain.rate_hz, path)
    assert len(rates) > 1
    with pytest.raises(InputError, match="MS/s") as caught:
        extract_captures(list(rates.values())[:2], tmp_path / "p.parquet")
    assert all(f"{rate / 1e6:g} MS/s" in str(caught.value) for rate in list(rates)[:2])
    assert not (tmp_path / "p.parquet").exists()


def test_fill_ins_supply_what_a_table_lacks(tiny_world, tmp_path):
    """A site given on the command line stands in the pulses of a capture that names none."""
    capture = tiny_world.captures[0]
    meta = json.loads(capture.read_text())
    del meta["global"]["pdclass:site"]
    (tmp_path / "c.sigmf-meta").write_text(json.dumps(meta))
    (tmp_path / "c.sigmf-data").write_bytes(capture.with_suffix(".sigmf-data").read_bytes())
    extract_captures([tmp_path / "c.sigmf-meta"], tmp_path / "p.parquet", fill=FillIns(site="Lantern Substation"))
    pulses, _ = read_pulses(tmp_path / "p.parquet")
    assert set(pulses.table["site"]) == {"Lantern Substation"}


def test_the_same_samples_twice_are_scored_once(tiny_world, tiny_bundle, tmp_path):
    """A recording under a second name, or with other metadata, is skipped with the reason: its pulses count once."""
    capture = tiny_world.captures[0]
    for name, circuit in (("copy", None), ("other", "Other Lane")):
        meta = json.loads(capture.read_text())
        meta["global"]["pdclass:circuit"] = circuit or meta["global"]["pdclass:circuit"]
        text = json.dumps(meta) if circuit else capture.read_text()
        (tmp_path / f"{name}.sigmf-meta").write_text(text)
        (tmp_path / f"{name}.sigmf-data").write_bytes(capture.with_suffix(".sigmf-data").read_bytes())
    inputs = [capture, tmp_path / "copy.sigmf-meta", tmp_path / "other.sigmf-meta"]
    done = score_inputs(inputs, tmp_path / "v", bundle=tiny_bundle, report=False)
    assert len(done.run["captures"]) == 1
    assert "the same recording" in done.skipped[0]
    assert "the same samples with other metadata" in done.skipped[1]


def test_a_wrong_count_size_names_the_capture(tiny_world, tiny_bundle, tmp_path):
    """Waves of kilovolts mean a wrong size of a count: said of the capture, and the other input is scored."""
    capture = tiny_world.captures[0]
    meta = json.loads(capture.read_text())
    meta["global"]["pdclass:volts_per_count"] = 1e3
    (tmp_path / "loud.sigmf-meta").write_text(json.dumps(meta))
    (tmp_path / "loud.sigmf-data").write_bytes(capture.with_suffix(".sigmf-data").read_bytes())
    inputs = [tmp_path / "loud.sigmf-meta", tiny_world.captures[1]]
    done = score_inputs(inputs, tmp_path / "v", bundle=tiny_bundle, report=False)
    assert done.skipped[0].startswith("loud: volts_per_count: expected waves of at most 1000 V")
    assert len(done.run["captures"]) == 1


def test_a_name_that_cannot_stand_in_a_report_is_refused(tiny_world, tiny_bundle, tmp_path):
    """A line break in a file's name is refused for that file; the rest is scored."""
    capture = tiny_world.captures[0]
    odd = tmp_path / "line\nbreak.sigmf-meta"
    odd.write_text(capture.read_text())
    odd.with_suffix(".sigmf-data").write_bytes(capture.with_suffix(".sigmf-data").read_bytes())
    done = score_inputs([odd, tiny_world.captures[1]], tmp_path / "v", bundle=tiny_bundle, report=False)
    assert "cannot be printed" in done.skipped[0]
    assert "\n" not in done.skipped[0]


def test_an_echo_without_its_parent_is_not_lost(tiny_world, tiny_bundle, tmp_path):
    """Cut a table down to an echo alone, and it is scored as a pulse whose every label stays open, and said."""
    pulses, _ = read_pulses(tiny_world.pulse_tables[0])
    echoes = np.flatnonzero(pulses.table["echo_of"].notna().to_numpy())
    write_pulses(tmp_path / "e.parquet", pulses.take(echoes[:3]))
    done = score_inputs([tmp_path / "e.parquet"], tmp_path / "v", bundle=tiny_bundle, report=False)
    verdicts = read_verdicts(done.out)
    assert len(verdicts) == 3
    assert not verdicts["decided"].any()
    assert "without their parent" in " ".join(done.run["captures"][0]["notes"])


def test_an_output_that_holds_an_input_is_refused(tiny_world, tiny_bundle):
    """Verdicts are not written over the captures that they are about."""
    with pytest.raises(InputError, match="without inputs"):
        score_inputs([tiny_world.captures[0]], tiny_world.captures[0].parent, bundle=tiny_bundle, force=True)


def test_a_mix_is_checked_before_any_work(tmp_path):
    """Shares that do not add up, are of no known label or nearly nothing are refused at once."""
    for mix, words in (
        ({"cable": 0.5, "local": 0.1}, "add up to 1"),
        ({"kabel": 1.0}, "kabel"),
        ({"cable": float("nan")}, "at least 0.001"),
    ):
        with pytest.raises(InputError, match=words):
            train_bundle([tmp_path / "none.parquet"], tmp_path / "b", mix=mix)


def test_labels_unknown_to_the_program_are_counted(tiny_world, tmp_path):
    """A mistyped label in a capture's annotations is said, not lost in silence."""
    capture = tiny_world.captures[0]
    meta = json.loads(capture.read_text())
    meta["annotations"][0]["core:label"] = "kabel"
    (tmp_path / "c.sigmf-meta").write_text(json.dumps(meta))
    (tmp_path / "c.sigmf-data").write_bytes(capture.with_suffix(".sigmf-data").read_bytes())
    done = extract_captures([tmp_path / "c.sigmf-meta"], tmp_path / "p.parquet")
    assert any("1 annotations carry labels that pdclass does not know" in note for note in done.found[0].notes)


def test_two_captures_of_one_name_are_both_extracted(tiny_world, tmp_path):
    """Recordings of different content that share a file name, from two folders, both give their pulses."""
    rates = {}
    for path in tiny_world.captures:
        rates.setdefault(open_capture(path).chain.rate_hz, []).append(path)
    pair = next(paths for paths in rates.values() if len(paths) > 1)[:2]
    named = []
    for number, path in enumerate(pair):
        (tmp_path / str(number)).mkdir()
        named.append(tmp_path / str(number) / "night.sigmf-meta")
        named[-1].write_text(path.read_text())
        named[-1].with_suffix(".sigmf-data").write_bytes(path.with_suffix(".sigmf-data").read_bytes())
    done = extract_captures(named, tmp_path / "p.parquet")
    assert done.skipped == ()
    assert read_pulses(tmp_path / "p.parquet")[0].table["capture_digest"].nunique() == 2
    again = extract_captures([*named, pair[0]], tmp_path / "q.parquet")
    assert "holds the same samples as night" in again.skipped[0]


def test_a_failing_simulation_leaves_an_earlier_one_alone(tmp_path):
    """A scenario that cannot be drawn says so before anything is deleted, and foreign files are never touched."""
    simulate("tiny", tmp_path / "world", captures=1)
    (tmp_path / "world" / "pulses-mine.parquet").write_bytes(b"mine")
    before = tree_digest(tmp_path / "world")
    scenario = tmp_path / "tiny.toml"
    scenario.write_text('name = "tiny"\n[cable]\ncurve = "none.csv"', encoding="utf-8")
    with pytest.raises(InputError, match=r"none\.csv"):
        simulate(scenario, tmp_path / "world", force=True)
    assert tree_digest(tmp_path / "world") == before
    simulate("tiny", tmp_path / "world", captures=1, force=True)
    assert (tmp_path / "world" / "pulses-mine.parquet").read_bytes() == b"mine"


def test_an_impossible_folder_is_one_line(tmp_path):
    """A folder below a file, and a scenario below a folder that is not there, are errors of the user."""
    (tmp_path / "file").write_text("x")
    with pytest.raises(InputError, match="cannot be made a folder"):
        simulate("tiny", tmp_path / "file" / "x", captures=1)
    with pytest.raises(InputError, match="no such scenario"):
        simulate("nowhere/tiny", tmp_path / "out", captures=1)


def test_a_record_too_long_for_memory_is_refused(tmp_path):
    """Two seconds at 250 MS/s say how much is possible."""
    scenario = tmp_path / "long.toml"
    scenario.write_text('name = "long"\n[capture]\nduration_ms = 2000.0\n[chain]\nrates_hz = [250e6]', encoding="utf-8")
    with pytest.raises(InputError, match="60,000,000 samples"):
        simulate(scenario, tmp_path / "out", captures=1)
