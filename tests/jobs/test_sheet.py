"""The labelling sheet: pictures that say enough, a label file that comes back, and nothing filled in is ever lost."""

import dataclasses
import re
from html.parser import HTMLParser

import numpy as np
import pandas as pd
import pytest

from pdclass.capture import LABEL_COLUMNS, join_labels, read_labels, read_pulses
from pdclass.errors import InputError
from pdclass.jobs.extract import extract_captures
from pdclass.jobs.sheet import write_sheet


class Tags(HTMLParser):
    """Names of the elements of a page."""

    def __init__(self):
        super().__init__()
        self.names = set()
        self.links = []

    def handle_starttag(self, tag, attrs):
        self.names.add(tag)
        self.links += [value for name, value in attrs if name in ("href", "src", "xlink:href", "action")]


@pytest.fixture(scope="module")
def sheet(tiny_world, tmp_path_factory):
    """A capture extracted with a sheet of at most twelve pulses."""
    folder = tmp_path_factory.mktemp("sheet")
    done = extract_captures(tiny_world.captures[:1], folder / "p.parquet", sheet=folder / "sheet", sheet_pulses=12)
    return folder, done


def test_the_page_shows_each_row_of_the_label_file(sheet):
    """Pictures and rows are the same pulses in the same order, all of them in the table."""
    folder, done = sheet
    page = done.sheet.page.read_text(encoding="utf-8")
    rows = pd.read_csv(done.sheet.labels, dtype=str)
    assert tuple(rows.columns) == LABEL_COLUMNS
    shown = re.findall(r'<h3><span class="number-of">(\d+)</span> <code>([0-9a-f]{16})</code>', page)
    assert [name for _, name in shown] == rows["pulse_id"].tolist()
    assert [int(number) for number, _ in shown] == list(range(1, 13))
    pulses, _ = read_pulses(folder / "p.parquet")
    assert set(rows["pulse_id"]) <= set(pulses.table.index)
    assert page.count('class="figure"') == 12


def test_the_page_stands_alone_and_carries_the_cautions(sheet):
    """No script, no request to outside, and the cautions of every report."""
    page = sheet[1].sheet.page.read_text(encoding="utf-8")
    tags = Tags()
    tags.feed(page)
    assert "script" not in tags.names
    assert all(link.startswith("#") for link in tags.links)
    for words in ("not a permit to work", "High voltage kills", "many equal labels are not many proofs"):
        assert words in page
    assert "12 of " in page
    assert "shared evenly over the bands of height" in page


def test_a_filled_in_sheet_labels_its_pulses(sheet):
    """Labels written into the file reach the pulses by name, and by place when a spreadsheet has spoilt the names."""
    folder, done = sheet
    pulses, _ = read_pulses(folder / "p.parquet")
    rows = pd.read_csv(done.sheet.labels, dtype=str)
    filled = rows.assign(label="switchgear", basis="isolated", labelled_by="ab")
    for names in (rows["pulse_id"], pd.Series(["1.2E+15"] * len(rows))):
        path = folder / "filled.csv"
        filled.assign(pulse_id=names).to_csv(path, index=False)
        found = join_labels([pulses], read_labels(path))
        assert found.lost == ()
        assert (found.sets[0].table.loc[rows["pulse_id"], "label"] == "switchgear").all()


def test_the_same_sheet_is_written_again(sheet, tmp_path):
    """Same pulses, same bytes."""
    folder, done = sheet
    pulses, _ = read_pulses(folder / "p.parquet")
    again = write_sheet(pulses, _made(tmp_path / "again"), {pulses.table["capture_digest"].iloc[0]: "own"}, most=12)
    assert again.labels.read_bytes() == done.sheet.labels.read_bytes()
    assert again.page.read_bytes() == done.sheet.page.read_bytes()


def test_a_label_file_is_never_replaced(sheet, tiny_world):
    """Not even with force: somebody may have filled it in; nothing else is touched either."""
    folder, done = sheet
    before = done.sheet.labels.read_bytes()
    with pytest.raises(InputError, match="never replaced"):
        extract_captures(tiny_world.captures[:1], folder / "q.parquet", sheet=folder / "sheet", force=True)
    assert done.sheet.labels.read_bytes() == before
    assert not (folder / "q.parquet").exists()


def test_pulses_without_phase_or_pretrigger_are_drawn_too(sheet, tmp_path):
    """What is not known is said in the picture; a window without samples before the onset has no floor."""
    pulses, _ = read_pulses(sheet[0] / "p.parquet")
    waves = pulses.waves[:3].copy()
    waves[0, : waves.shape[1] // 4] = np.nan
    bare = dataclasses.replace(pulses.take(np.arange(3)), waves=waves)
    bare = dataclasses.replace(bare, table=bare.table.assign(phase_deg=np.float32(np.nan)))
    done = write_sheet(bare, _made(tmp_path / "bare"), {})
    assert "phase not known" in done.page.read_text(encoding="utf-8")
    assert done.shown == int(bare.table["echo_of"].isna().sum())


def test_no_pulse_gives_a_sheet_that_says_so(sheet, tmp_path):
    """A quiet capture has a page without pictures and a label file with a header."""
    pulses, _ = read_pulses(sheet[0] / "p.parquet")
    done = write_sheet(pulses.take(np.zeros(len(pulses.table), bool)), _made(tmp_path / "none"), {})
    assert "does not show that the circuit is healthy" in done.page.read_text(encoding="utf-8")
    assert done.labels.read_text(encoding="utf-8") == ",".join(LABEL_COLUMNS) + "\n"


def test_more_than_the_most_is_refused(tiny_world, tmp_path):
    """A sheet of no pulses, or of too many, is refused before anything is read."""
    for most in (0, 5000):
        with pytest.raises(InputError, match="--sheet-pulses"):
            extract_captures(tiny_world.captures[:1], tmp_path / "p.parquet", sheet=tmp_path / "s", sheet_pulses=most)


def _made(folder):
    folder.mkdir()
    return folder
