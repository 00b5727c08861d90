"""Label files: joined by name, else by place; what is lost, doubled or contradicts itself is listed."""

import numpy as np
import pandas as pd
import pytest

from pdclass.capture.labels import LABEL_COLUMNS, double_notes, join_labels, labels_text, read_labels
from pdclass.errors import InputError
from pdclass.pulses import PulseSet

DIGEST = "ab" * 32


@pytest.fixture
def pulses(make_pulses):
    """Five pulses of one capture, unlabelled, 1,000 samples apart, the last one an echo."""
    found = make_pulses()
    table = found.table.assign(capture_digest=DIGEST, label=None, basis=None, labelled_by=None)
    table["echo_of"] = [None, None, None, None, table.index[3]]
    return PulseSet(found.waves, found.chains, table)


@pytest.fixture
def written(tmp_path):
    """Write rows of a label file; columns that no row has are left out."""

    def write(*rows, names=LABEL_COLUMNS):
        path = tmp_path / "labels.csv"
        used = [name for name in names if any(name in row for row in rows)] or list(names)
        pd.DataFrame(rows, columns=used).to_csv(path, index=False)
        return path

    return write


def joined(pulses, path, own_classes=()):
    return join_labels([pulses], read_labels(path, own_classes))


def test_labels_find_their_pulses_by_name(pulses, written):
    """Label, basis and labeller pass to the pulse of that name; the others stay as they were."""
    row = {"pulse_id": pulses.table.index[2], "label": "cable", "basis": "located", "labelled_by": "ab"}
    table = joined(pulses, written(row)).sets[0].table
    assert table["label"].tolist() == [None, None, "cable", None, None]
    assert table["basis"].iloc[2] == "located"
    assert table["labelled_by"].iloc[2] == "ab"
    assert pulses.table["label"].isna().all()


@pytest.mark.parametrize(("onset", "place"), [(1050, 1), (1950, 2), (2000, 2), (1951, 2), (1500, None), (1051, None)])
def test_labels_find_their_pulses_by_place(pulses, written, onset, place):
    """The nearest onset of that capture within 0.5 us (50 samples here) takes the label; beyond it, it is lost."""
    row = {"pulse_id": "1.23E+15", "capture_digest": DIGEST, "onset_sample": onset, "sensor": "HF1", "label": "local"}
    found = joined(pulses, written(row))
    labels = found.sets[0].table["label"]
    assert labels.notna().sum() == (place is not None)
    assert found.lost == (() if place is not None else (0,))
    if place is not None:
        assert labels.iloc[place] == "local"
    else:
        assert any("1 rows found no pulse" in note and "row 0 (1.23E+15)" in note for note in found.notes)


@pytest.mark.parametrize("changes", [{"capture_digest": "cd" * 32}, {"sensor": "HF2"}])
def test_another_capture_or_sensor_is_another_place(pulses, written, changes):
    """The same onset in another capture, or at another sensor, is not that pulse."""
    row = {"capture_digest": DIGEST, "onset_sample": 1000, "sensor": "HF1", "label": "local", **changes}
    assert joined(pulses, written(row)).lost == (0,)


def test_two_labels_for_one_pulse_leave_none(pulses, written):
    """Contradicting rows are listed and the pulse stays unlabelled; equal ones keep the stronger basis."""
    first, second = pulses.table.index[:2]
    path = written(
        {"pulse_id": first, "label": "cable", "basis": "expert"},
        {"pulse_id": first, "label": "local", "basis": "expert"},
        {"pulse_id": first, "label": "cable", "basis": "expert"},
        {"pulse_id": second, "label": "cable", "basis": "expert"},
        {"pulse_id": second, "label": "cable", "basis": "dissected"},
    )
    found = joined(pulses, path)
    assert found.conflicting == (first,)
    assert found.sets[0].table["label"].tolist()[:2] == [None, "cable"]
    assert found.sets[0].table["basis"].tolist()[:2] == [None, "dissected"]
    assert any("1 pulses have two labels" in note for note in found.notes)


def test_what_the_file_says_replaces_the_table(make_pulses, written):
    """A label, and an empty one, stand in place of what the table said; how many is said."""
    pulses = make_pulses()
    names = pulses.table.index
    path = written({"pulse_id": names[0], "label": "local"}, {"pulse_id": names[2], "label": None})
    found = joined(pulses, path)
    assert found.sets[0].table["label"].tolist() == ["local", None, None, "interference", "local"]
    assert any("2 labels of the tables replaced" in note for note in found.notes)


def test_labelled_echoes_are_listed(pulses, written):
    """A label on an echo neither teaches nor tests, and that is said."""
    found = joined(pulses, written({"pulse_id": pulses.table.index[4], "label": "cable"}))
    assert any("are echoes" in note for note in found.notes)


def test_pulses_that_stand_twice_are_listed(make_pulses):
    """The same wave under two names is found by its digest; two labels for it are said apart."""
    pulses = make_pulses()
    waves = pulses.waves.copy()
    waves[2], waves[4] = waves[0], waves[3]
    table = pulses.table.assign(label=["cable", None, "local", "interference", "interference"])
    notes = double_notes([PulseSet(waves, pulses.chains, table)])
    assert "2 labelled pulses hold a wave that stands under another name" in notes[0]
    assert "1 of these have another label there" in notes[1]
    assert double_notes([pulses]) == []


def test_own_classes_must_be_named(pulses, written):
    """A class of one's own is a label where it is declared, and a slip of the pen where it is not."""
    path = written({"pulse_id": pulses.table.index[0], "label": "crane drive"})
    found = joined(pulses, path, ["crane drive"])
    assert found.sets[0].table["label"].iloc[0] == "crane drive"
    with pytest.raises(InputError, match="label, row 0"):
        read_labels(path)


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ({"pulse_id": "a", "label": "cabel"}, "nearest known one is 'cable'"),
        ({"pulse_id": "a", "label": "cable", "basis": "guess"}, "basis, row 0"),
        ({"pulse_id": "a", "label": "cable", "capture_digest": "12"}, "capture_digest, row 0: expected 64 hex digits"),
        ({"pulse_id": "a", "label": "cable", "onset_sample": -1}, "onset_sample, row 0"),
        ({"pulse_id": "a", "label": "cable", "onset_sample": 1.5}, "onset_sample, row 0"),
        ({"pulse_id": "a", "label": "cable", "onset_sample": "here"}, "column 'onset_sample': expected numbers"),
        ({"pulse_id": "a", "label": "cable", "comment": "x" * 3000}, "comment, row 0"),
        ({"pulse_id": "a"}, "expected a column 'label'"),
        ({"label": "cable", "sensor": "HF1"}, "columns that name the pulse"),
    ],
)
def test_wrong_label_files_are_refused_in_one_line(written, row, words):
    """Each thing that a label file may not say is named with its row, counted from 0."""
    path = written(row)
    with pytest.raises(InputError) as caught:
        read_labels(path)
    assert words in str(caught.value)
    assert str(caught.value).startswith(str(path))
    assert "\n" not in str(caught.value)


def test_unknown_columns_are_said(pulses, written):
    """A column that is not ours is left out, in one line."""
    row = {"pulse_id": pulses.table.index[0], "label": "cable", "mood": "good"}
    path = written(row, names=(*LABEL_COLUMNS, "mood"))
    assert "mood" in read_labels(path).notes[0]


def test_a_sheet_comes_back_as_it_was(tmp_path):
    """What is written is read again; cells that a spreadsheet would run are quoted."""
    rows = pd.DataFrame(
        {
            "pulse_id": ["0123456789abcdef", "11"],
            "capture_digest": [DIGEST, None],
            "sensor": ["HF1", None],
            "onset_sample": [2**40, 3],
            "label": ["cable", None],
            "comment": ["=1+1", 'says "no", twice'],
        }
    )
    path = tmp_path / "labels.csv"
    path.write_text(labels_text(rows), encoding="utf-8")
    assert path.read_text(encoding="utf-8").splitlines()[0] == ",".join(LABEL_COLUMNS)
    found = read_labels(path)
    assert found.rows["pulse_id"].tolist() == ["0123456789abcdef", "11"]
    assert found.rows["onset_sample"].tolist() == [2.0**40, 3.0]
    assert found.rows["comment"].tolist() == ["=1+1", 'says "no", twice']
    assert "'=1+1" in path.read_text(encoding="utf-8")
    assert found.rows["label"].tolist() == ["cable", None]
    assert np.isnan(read_labels(path).rows["onset_sample"]).sum() == 0
