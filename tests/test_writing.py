"""Files and folders appear whole or not at all."""

import pytest

from pdclass.errors import InputError
from pdclass.writing import put_in_place, settle, whole_file, write_text


def test_a_failure_leaves_the_old_file(tmp_path):
    """When writing fails half-way the former content stands, and nothing is left beside it."""
    path = tmp_path / "f.txt"
    write_text(path, "old")

    def write_half():
        with whole_file(path) as file:
            file.write(b"new")
            raise RuntimeError

    with pytest.raises(RuntimeError):
        write_half()
    assert path.read_text() == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["f.txt"]


def test_a_folder_that_cannot_be_written_is_one_line(tmp_path):
    """A missing folder is named."""
    with pytest.raises(InputError, match="cannot be written"):
        write_text(tmp_path / "none" / "f.txt", "x")


def test_an_exchange_keeps_what_is_not_ours(tmp_path):
    """A folder is replaced part by part of ours; a stranger's file in it moves along."""
    place, fresh = tmp_path / "run", tmp_path / ".run.part"
    for folder, text in ((place, "old"), (fresh, "new")):
        folder.mkdir()
        (folder / "ours.txt").write_text(text)
    (place / "notes.txt").write_text("mine")
    put_in_place(fresh, place, ["ours.txt"])
    assert (place / "ours.txt").read_text() == "new"
    assert (place / "notes.txt").read_text() == "mine"
    assert [p.name for p in tmp_path.iterdir()] == ["run"]


def test_an_exchange_killed_between_its_renames_is_taken_back(tmp_path):
    """When only the aside folder is left, it takes its place again."""
    aside = tmp_path / ".run.old"
    aside.mkdir()
    (aside / "ours.txt").write_text("old")
    settle(tmp_path / "run", ["ours.txt"])
    assert (tmp_path / "run" / "ours.txt").read_text() == "old"
