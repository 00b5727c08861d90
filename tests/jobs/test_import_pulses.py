"""Files of somebody else's pulses become one table: onsets found where they are not said, every pulse once."""

import numpy as np
import pytest
from foreign_files import ONSET, RATE_HZ, columns, waves_mv, write_csv, write_map, write_npz, write_parquet

from pdclass.capture import read_pulses
from pdclass.errors import InputError
from pdclass.jobs.import_pulses import found_onsets, import_pulses


def test_files_of_several_kinds_become_one_table(tmp_path):
    """The same rows in two containers are the same pulses, kept once; the lines say what there is."""
    files, out = [write_npz(tmp_path), write_parquet(tmp_path)], tmp_path / "p.parquet"
    done = import_pulses(files, write_map(tmp_path, wave="waves"), out)
    assert done.pulses == 6
    assert done.skipped == ()
    assert "6 pulses stand in two files; kept once" in done.notes
    assert "  crane drive: 1 pulses of 1 circuit" in done.lines
    assert done.lines[0] == "6 pulses, 5 of them labelled, 0 echoes besides"
    assert len(read_pulses(out)[0].table) == 6


def test_files_that_disagree_leave_the_pulse_unlabelled(tmp_path):
    """Two labels for one pulse in two files give none, and that is said."""
    words = columns()
    words["type"][0] = "P"
    np.savez(tmp_path / "other.npz", waves=waves_mv(), **words)
    done = import_pulses(
        [write_npz(tmp_path), tmp_path / "other.npz"], write_map(tmp_path, wave="waves"), tmp_path / "p.parquet"
    )
    assert "1 of them with two labels; left unlabelled" in done.notes
    assert read_pulses(tmp_path / "p.parquet")[0].table["label"].iloc[0] is None


def test_onsets_are_found_where_the_map_says_none(tmp_path):
    """Without a word on the onset it is found, within 20 ns here, and the notes say so."""
    np.savez(tmp_path / "rows.npz", waves=waves_mv(40), **columns(40))
    map_path = write_map(tmp_path, ("onset_sample = 300\n", ""), wave="waves")
    done = import_pulses([tmp_path / "rows.npz"], map_path, tmp_path / "p.parquet")
    assert "onset: the map does not say where the onset lies" in done.notes[0]
    apart = np.abs(found_onsets((waves_mv(40) * 1e-3).astype(np.float32), RATE_HZ) - ONSET)
    assert np.mean(apart <= 2) >= 0.95


def test_carriers_do_not_move_the_onset():
    """A carrier as high as a tenth of the pulse is whitened away: the onset stays within 50 ns."""
    place = np.arange(1500)
    phases = np.random.default_rng(5).uniform(0, 2 * np.pi, 40)
    carrier = 2.0 * np.cos(2 * np.pi * 1e6 * place / RATE_HZ + phases[:, None])
    waves = ((waves_mv(40) + carrier) * 1e-3).astype(np.float32)
    apart = np.abs(found_onsets(waves, RATE_HZ) - ONSET)
    assert np.mean(apart <= 5) >= 0.9


def test_short_and_flat_rows_do_not_break_the_search():
    """Rows of few samples, of one value and of nothing get some place inside of them; the windows are checked later."""
    waves = np.zeros((3, 12), np.float32)
    waves[1] = np.nan
    waves[2, 5] = 1.0
    places = found_onsets(waves, RATE_HZ)
    assert ((places >= 0) & (places < 12)).all()


def test_a_file_that_cannot_be_read_is_skipped(tmp_path):
    """The others are imported, the reason is kept; with none left nothing is written."""
    (tmp_path / "bad.npz").write_bytes(b"x")
    map_path = write_map(tmp_path, wave="waves")
    done = import_pulses([tmp_path / "bad.npz", write_npz(tmp_path)], map_path, tmp_path / "p.parquet")
    assert done.pulses == 6
    assert "bad.npz" in done.skipped[0]
    with pytest.raises(InputError, match=r"bad\.npz"):
        import_pulses([tmp_path / "bad.npz"], map_path, tmp_path / "q.parquet")
    assert not (tmp_path / "q.parquet").exists()


def test_places_and_rates_are_checked_first(tmp_path):
    """Another ending, an existing table and files of two rates are refused."""
    path, map_path = write_csv(tmp_path), write_map(tmp_path)
    with pytest.raises(InputError, match=r"ends in \.parquet"):
        import_pulses([path], map_path, tmp_path / "p.csv")
    import_pulses([path], map_path, tmp_path / "p.parquet")
    with pytest.raises(InputError, match="exists already"):
        import_pulses([path], map_path, tmp_path / "p.parquet")
    for name, rate in (("one", 1e8), ("two", 2e8)):
        np.savez(tmp_path / f"{name}.npz", waves=waves_mv(), fs=rate, **columns())
    change = ("rate_hz = 100e6\n", ""), ('label = "type"', 'label = "type"\nrate_hz = "fs"')
    files = [tmp_path / "one.npz", tmp_path / "two.npz"]
    with pytest.raises(InputError, match=r"two\.npz: rate: expected 100 MS/s"):
        import_pulses(files, write_map(tmp_path, *change, wave="waves"), tmp_path / "q.parquet")
