"""Label files and classes of one's own from pulse tables to a bundle, its verdicts and its figures."""

import json

import pandas as pd
import pytest

from pdclass.capture import read_pulses
from pdclass.errors import InputError, TooFewError
from pdclass.jobs.evaluate import evaluate_bundle
from pdclass.jobs.score import score_inputs, score_lines
from pdclass.jobs.train import train_bundle
from pdclass.verdict.batch import read_verdicts

CLASSES = {"crane drive": "interference"}


class Heard:
    """Keeps what a job says."""

    def __init__(self):
        self.lines = []

    def say(self, line, /):
        self.lines.append(line)

    def track(self, items, _words, _total, /):
        return items


@pytest.fixture(scope="module")
def renamed(tiny_world, tmp_path_factory):
    """A label file that calls every interference of the tiny world a crane drive."""
    rows = []
    for path in tiny_world.pulse_tables:
        table = read_pulses(path)[0].table
        rows.append(table[table["label"] == "interference"].assign(label="crane drive", basis="expert"))
    path = tmp_path_factory.mktemp("labels") / "labels.csv"
    whole = pd.concat(rows).rename_axis("pulse_id").reset_index()
    whole[["pulse_id", "capture_digest", "sensor", "onset_sample", "label", "basis"]].to_csv(path, index=False)
    return path


@pytest.fixture(scope="module")
def own_bundle(tiny_world, renamed, tmp_path_factory):
    """A bundle trained with that file, and what was said."""
    out, heard = tmp_path_factory.mktemp("own") / "bundle", Heard()
    done = train_bundle(tiny_world.pulse_tables, out, labels=renamed, classes=CLASSES, talk=heard)
    return out, done, heard.lines


def test_a_class_of_ones_own_is_trained(own_bundle, renamed):
    """The bundle's classes are ours that are left and the own one; the label file is among its inputs."""
    out, done, said = own_bundle
    manifest = json.loads((out / "manifest.json").read_text(encoding="utf-8"))
    assert manifest["classes"] == ["cable", "local", "switchgear", "crane drive"]
    provenance = manifest["account"]["provenance"]
    assert provenance["own_classes"] == CLASSES
    assert provenance["inputs"][-1]["name"] == "labels.csv"
    assert any(line.startswith("  crane drive: ") and line.endswith("24 circuits") for line in done.pulses)
    assert set(done.pulses) <= set(said)
    rows = len(pd.read_csv(renamed))
    assert any(f"{rows} of {rows} rows name a pulse" in line for line in said)


def test_a_class_of_ones_own_goes_through_to_the_report(own_bundle, tiny_world, tmp_path):
    """Verdicts have its probability, and the report draws and explains it."""
    done = score_inputs(list(tiny_world.captures[:1]), tmp_path / "v", bundle=own_bundle[0], as_csv=True)
    verdicts = read_verdicts(done.out)
    shares = [f"p_{name}" for name in ("cable", "local", "switchgear", "crane drive")]
    assert verdicts[shares].sum(axis=1).to_numpy() == pytest.approx(1.0)
    page = done.report.read_text(encoding="utf-8")
    assert "crane drive" in page
    assert "<script" not in page
    assert score_lines(done)


def test_own_labels_are_judged_by_a_bundle_that_has_the_class(own_bundle, tiny_world, renamed, tmp_path):
    """Figures know the class, and a warning says that the dangerous cell does not."""
    done = evaluate_bundle(own_bundle[0], tiny_world.pulse_tables, tmp_path / "e", labels=renamed, classes=CLASSES)
    assert any("'crane drive' is a kind of interference; the dangerous cell" in line for line in done.lines)
    assert done.figures["pulses"] > 100


def test_own_labels_are_judged_as_what_they_are_a_kind_of(tiny_bundle, tiny_world, renamed, tmp_path):
    """A bundle that does not know the class is judged as if the pulses were still called interference."""
    tables = tiny_world.pulse_tables
    plain = evaluate_bundle(tiny_bundle, tables, tmp_path / "plain")
    own = evaluate_bundle(tiny_bundle, tables, tmp_path / "own", labels=renamed, classes=CLASSES)
    assert own.figures == plain.figures
    assert any("'crane drive' is judged as interference" in line for line in own.lines)
    with pytest.raises(InputError, match="the bundle does not know it"):
        evaluate_bundle(tiny_bundle, tables, tmp_path / "x", labels=renamed, classes={"crane drive": ""})


def test_a_class_that_nobody_named_is_refused(tiny_world, renamed, tmp_path):
    """Without --classes a strange label is taken for a slip of the pen; nothing is written."""
    with pytest.raises(InputError, match="label, row 0"):
        train_bundle(tiny_world.pulse_tables, tmp_path / "b", labels=renamed)
    assert not (tmp_path / "b").exists()


def test_too_few_circuits_of_a_class_are_said_beside_what_there_is(tiny_world, renamed, tmp_path):
    """Where a class lives on too few circuits, the refusal comes after the account of what there is."""
    pd.read_csv(renamed).head(2).to_csv(tmp_path / "few.csv", index=False)
    heard = Heard()
    with pytest.raises(TooFewError, match="crane drive"):
        train_bundle(tiny_world.pulse_tables, tmp_path / "b", labels=tmp_path / "few.csv", classes=CLASSES, talk=heard)
    assert "  crane drive: 2 pulses of 1 circuit" in heard.lines


def test_a_mix_may_name_a_class_that_was_declared(tmp_path):
    """A declared class passes the first check of the mix (the table, which is not there, is missed next)."""
    mix = {"cable": 0.5, "crane drive": 0.5}
    with pytest.raises(InputError, match="no such file"):
        train_bundle([tmp_path / "none.parquet"], tmp_path / "b", mix=mix, classes=CLASSES)
    with pytest.raises(InputError, match="--classes"):
        train_bundle([tmp_path / "none.parquet"], tmp_path / "b", mix=mix)
