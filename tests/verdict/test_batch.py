"""The verdict folder: written, refused, continued, read back."""

import csv
import hashlib
import io
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest
from verdict_samples import DIGESTS, INPUTS, PLAN, scored_shard, staged

from pdclass.digest import file_digest
from pdclass.errors import InputError, RefusedError
from pdclass.features import feature_digests
from pdclass.model.bundle import read_bundle
from pdclass.verdict.batch import (
    begin_folder,
    capture_record,
    drop_folder,
    finish_folder,
    is_done,
    read_pulse_tables,
    read_run,
    read_shard_pulses,
    read_verdicts,
    run_record,
    shard_paths,
    write_shard,
)
from pdclass.verdict.tables import csv_text, read_reasons


def _finish(folder, shards, bundle_folder, **more):
    staging, run = staged(folder, shards)
    return finish_folder(staging, folder / "verdicts", run, bundle=bundle_folder, **more)


def _bytes(folder):
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def test_the_folder_has_its_parts_and_nothing_is_left_beside_it(tmp_path, shards, bundle_folder):
    """run.json, three tables a shard, the bundle, the report and the CSV; no temporary folder stays."""
    out = _finish(tmp_path, shards, bundle_folder, report_html="<p>", as_csv=True)
    assert {path.name for path in out.iterdir()} == {
        "run.json", "verdicts", "reasons", "pulses", "bundle", "report.html", "verdicts.csv"
    }  # fmt: skip
    assert [path.name for path in shard_paths(out, "verdicts")] == [
        "crane-b2b2b2b2.parquet", "depot-c3c3c3c3.parquet", "quay-a1a1a1a1.parquet"
    ]  # fmt: skip
    assert [path.name for path in tmp_path.iterdir()] == ["verdicts"]


def test_verdicts_come_back_as_they_were(tmp_path, shards, bundle_folder):
    """Reading the folder gives the tables that were written, types and nulls included."""
    out = _finish(tmp_path, shards, bundle_folder)
    read = read_verdicts(out)
    written = pd.concat([shard.verdicts.table for shard in sorted(shards, key=lambda shard: shard.file)])
    assert list(read.columns) == list(written.columns)
    for name in written:
        for ours, theirs in zip(written[name], read[name], strict=True):
            assert ours == theirs or (pd.isna(ours) and pd.isna(theirs)), name
    assert read["outside"].iloc[0] is None
    assert list(read.index) == list(written.index)


def test_reasons_come_back_bit_for_bit(tmp_path, shards, bundle_folder):
    """Values, base and shares are read with the bits that were written."""
    out = _finish(tmp_path, shards, bundle_folder)
    shard = shards[0]
    ids, values, base, shares = read_reasons(out / "reasons" / shard.file)
    assert list(ids) == list(shard.verdicts.table.index)
    assert np.array_equal(values, shard.verdicts.values, equal_nan=True)
    assert np.array_equal(base, np.broadcast_to(shard.verdicts.base, base.shape))
    assert np.array_equal(shares, shard.verdicts.shares)


def test_pulses_with_echoes_and_waves_travel_along(tmp_path, shards, bundle_folder):
    """pulses/ holds every pulse, echoes among them, so that an audit needs no capture."""
    out = _finish(tmp_path, shards, bundle_folder)
    tables = read_pulse_tables(out)
    assert len(tables) == sum(len(shard.pulses.table) for shard in shards)
    assert tables["echo_of"].notna().sum() == 1
    pulses = read_shard_pulses(out, shards[0].file)
    assert np.array_equal(pulses.waves, shards[0].pulses.waves, equal_nan=True)


def test_the_bundle_in_the_folder_opens(tmp_path, shards, bundle, bundle_folder):
    """The copied bundle is whole: it opens and has the digest that the verdicts name."""
    out = _finish(tmp_path, shards, bundle_folder)
    copy = read_bundle(out / "bundle", feature_digests())
    assert copy.digest == bundle.digest
    assert set(read_verdicts(out)["bundle_digest"]) == {bundle.digest}


def test_run_json_names_every_file_with_its_digest(tmp_path, shards, bundle_folder):
    """The digests in run.json are those of the files, and no file but run.json itself is missing."""
    out = _finish(tmp_path, shards, bundle_folder, report_html="<p>")
    run = read_run(out)
    assert run["files"] == {
        path.relative_to(out).as_posix(): file_digest(path)
        for path in sorted(out.rglob("*"))
        if path.is_file() and path.name != "run.json"
    }
    assert run["inputs"] == INPUTS
    assert run["plan"] == PLAN
    first = next(item for item in run["captures"] if item["capture"] == "quay")
    assert first["detection_limit_mv"] == pytest.approx(2.34)
    assert first["start_utc"] == "2031-02-03T04:05:06+00:00"


def test_the_order_of_the_shards_does_not_matter(tmp_path, shards, bundle_folder):
    """The same shards in another order give the same bytes."""
    for name, order in (("one", shards), ("two", shards[::-1])):
        (tmp_path / name).mkdir()
        _finish(tmp_path / name, order, bundle_folder, as_csv=True)
    assert _bytes(tmp_path / "one") == _bytes(tmp_path / "two")


def test_a_killed_run_is_continued_with_the_same_bytes(tmp_path, shards, bundle_folder):
    """What a killed run left is kept or redone, half-written files vanish, and the bytes are the same."""
    (tmp_path / "whole").mkdir()
    _finish(tmp_path / "whole", shards, bundle_folder)
    torn = tmp_path / "torn"
    torn.mkdir()
    staging = begin_folder(torn / "verdicts", PLAN)
    write_shard(staging, shards[0])
    (staging / "verdicts" / ".depot-c3c3c3c3.parquet.abcd.part").write_bytes(b"half")
    (staging / "pulses" / "lost-00000000.parquet").write_bytes(b"half")
    (staging / "bundle").mkdir()
    assert begin_folder(torn / "verdicts", PLAN) == staging
    assert is_done(staging, "quay", DIGESTS["quay"])
    assert not is_done(staging, "depot", DIGESTS["depot"])
    _finish(torn, shards[1:], bundle_folder)
    assert _bytes(torn) == _bytes(tmp_path / "whole")


def test_the_same_run_may_be_done_again(tmp_path, shards, bundle_folder):
    """A finished folder of the same plan is redone without --force and has the same bytes."""
    out = _finish(tmp_path, shards, bundle_folder)
    before = _bytes(out)
    _finish(tmp_path, shards, bundle_folder)
    assert _bytes(tmp_path / "verdicts") == before


def test_another_folder_is_refused_without_force(tmp_path, shards, bundle_folder):
    """A folder of strangers and one of another plan are refused, and nothing in them changes."""
    out = _finish(tmp_path, shards, bundle_folder)
    before = _bytes(out)
    with pytest.raises(RefusedError, match="--force"):
        begin_folder(out, {**PLAN, "settings": {"error_rate": 0.2}})
    (tmp_path / "letters").mkdir()
    (tmp_path / "letters" / "love.txt").write_text("dear")
    with pytest.raises(RefusedError, match="expected an empty folder"):
        begin_folder(tmp_path / "letters", PLAN)
    assert _bytes(out) == before
    assert {path.name for path in tmp_path.iterdir()} == {"verdicts", "letters"}


def test_force_replaces_verdicts_and_keeps_what_belongs_to_others(tmp_path, shards, bundle_folder):
    """With force the verdicts of an earlier run are replaced; a file that is none of ours stays."""
    out = _finish(tmp_path, shards, bundle_folder)
    (out / "love.txt").write_text("dear")
    other = {**PLAN, "bundle_digest": "another"}
    staging = begin_folder(out, other, force=True)
    for shard in shards[:1]:
        write_shard(staging, shard)
    finish_folder(staging, out, run_record(staging, other, INPUTS), bundle=bundle_folder)
    assert (out / "love.txt").read_text() == "dear"
    assert len(list((out / "verdicts").iterdir())) == 1
    assert {path.name for path in tmp_path.iterdir()} == {out.name}


def test_a_folder_without_a_run_is_never_replaced(tmp_path):
    """Somebody's files, though named as ours are, are refused even with force, and stay."""
    out = tmp_path / "mine"
    (out / "pulses").mkdir(parents=True)
    (out / "pulses" / "field.parquet").write_bytes(b"dear")
    with pytest.raises(RefusedError, match="files of another kind"):
        begin_folder(out, PLAN, force=True)
    assert (out / "pulses" / "field.parquet").read_bytes() == b"dear"


def test_the_folder_one_stands_in_is_refused(tmp_path, monkeypatch):
    """--out . would pull the ground from under the shell."""
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InputError, match="where you are"):
        begin_folder(Path(), PLAN)


def test_an_exchange_killed_half_way_is_settled(tmp_path, shards, bundle_folder):
    """When the old folder was put aside and the new one not yet in place, the old one comes back."""
    out = _finish(tmp_path, shards, bundle_folder)
    before = _bytes(out)
    out.rename(tmp_path / ".verdicts.old")
    drop_folder(begin_folder(out, PLAN))
    assert _bytes(out) == before
    assert [path.name for path in tmp_path.iterdir()] == ["verdicts"]


def test_a_file_in_the_place_of_the_folder_is_an_error(tmp_path):
    """--out that names a file is an input error, and the file stays."""
    (tmp_path / "out").write_text("mine")
    with pytest.raises(InputError, match="expected a folder, found a file"):
        begin_folder(tmp_path / "out", PLAN)
    assert (tmp_path / "out").read_text() == "mine"


def test_a_capture_without_pulses_has_empty_tables(tmp_path, bundle, bundle_folder, shards):
    """A capture in which nothing was found still has its shard, and the folder is read as usual."""
    nothing = scored_shard(bundle, shards[0].pulses.take(np.zeros(0, int)), "quay")
    out = _finish(tmp_path, [nothing], bundle_folder, as_csv=True)
    assert len(read_verdicts(out)) == 0
    assert len(read_pulse_tables(out)) == 0
    assert read_reasons(out / "reasons" / nothing.file)[3].shape == (0, 4, 6)


def test_csv_takes_no_text_for_a_formula(shards):
    """Cells that begin like a formula are quoted; numbers, negative ones too, stay numbers."""
    table = shards[2].verdicts.table.copy()
    table["site"] = ["=1+1", "+1", "-1", "@a", "\tb", "\rc", "plain", None]
    table["onset_s"] = -1.5
    rows = list(csv.DictReader(io.StringIO(csv_text(table), newline="")))
    assert [row["site"] for row in rows] == ["'=1+1", "'+1", "'-1", "'@a", "'\tb", "'\rc", "plain", ""]
    assert {row["circuit"] for row in rows} == {"'=Depot $x_1$"}
    assert {float(row["onset_s"]) for row in rows} == {-1.5}
    assert [row["label_set"].split("|") for row in rows] == [members or [""] for members in table["label_set"]]


def test_a_damaged_file_is_named(tmp_path, shards, bundle_folder):
    """One flipped byte in a verdict file is found by its page checksum, and the file is named."""
    out = _finish(tmp_path, shards, bundle_folder)
    path = shard_paths(out, "verdicts")[0]
    column = pq.ParquetFile(path).metadata.row_group(0).column(0)
    content = bytearray(path.read_bytes())
    content[column.data_page_offset + column.total_compressed_size // 2] ^= 0xFF
    path.write_bytes(bytes(content))
    with pytest.raises(InputError, match=path.name):
        read_verdicts(out)


def test_a_folder_of_another_format_or_none_is_refused(tmp_path, shards, bundle_folder):
    """Another format integer is refused with both numbers; a folder without run.json is an input error."""
    out = _finish(tmp_path, shards, bundle_folder)
    run = json.loads((out / "run.json").read_text())
    (out / "run.json").write_text(json.dumps({**run, "format": 99}))
    with pytest.raises(RefusedError, match="expected 1, found 99"):
        read_run(out)
    with pytest.raises(InputError, match=r"run\.json"):
        read_run(tmp_path)
    with pytest.raises(InputError, match="no verdict files"):
        read_verdicts(tmp_path)


def test_a_record_keeps_unknowns_as_null():
    """What a pulse table cannot know is null, not zero."""
    record = capture_record(
        name="t", capture_digest="0" * 64, circuit=None, sensor=None, session=None, found=3, echoes=0
    )
    assert record["detection_limit_mv"] is None
    assert record["duration_s"] is None
    assert record["start_utc"] is None


def test_a_name_that_is_a_path_is_refused(tmp_path, shards):
    """A shard's name cannot lead out of the folder."""
    with pytest.raises(InputError, match="plain file name"):
        is_done(tmp_path, "../evil", "0" * 64)
