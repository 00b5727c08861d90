"""Somebody else's pulses: the same rows from every container, and one line on each row that cannot be one."""

import numpy as np
import pandas as pd
import pytest
from foreign_files import (
    ONSET,
    RATE_HZ,
    changed,
    columns,
    frame,
    waves_mv,
    write_csv,
    write_map,
    write_npz,
    write_parquet,
)

from pdclass.capture import read_pulses, write_pulses
from pdclass.capture.foreign import pulses_of, read_rows, time_rate_hz
from pdclass.capture.maps import Map, read_map
from pdclass.errors import InputError


def rows_of(path, map_path):
    return read_rows(path, read_map(map_path))


def cut(path, map_path):
    rows = rows_of(path, map_path)
    return pulses_of(rows, rows.onsets)


def refusal(path, map_path):
    with pytest.raises(InputError) as caught:
        cut(path, map_path)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert "\n" not in message
    return message


@pytest.mark.parametrize(
    ("write", "wave"), [(write_csv, "s0000:s1499"), (write_npz, "waves"), (write_parquet, "waves")]
)
def test_rows_come_in_from_every_container(tmp_path, write, wave):
    """CSV, NPZ and Parquet give the same pulses: volts, labels, names, the onset a quarter in, NaN where short."""
    path = write(tmp_path)
    rows = rows_of(path, write_map(tmp_path, wave=wave))
    pulses, notes = pulses_of(rows, rows.onsets)
    assert notes == []
    assert pulses.waves.shape == (6, 2000)
    assert np.isnan(pulses.waves[:, :200]).all()
    assert np.isnan(pulses.waves[:, 1700:]).all()
    np.testing.assert_allclose(pulses.waves[:, 200:1700], waves_mv() * 1e-3, atol=1e-9)
    assert pulses.table["label"].tolist() == ["cable", "switchgear", "crane drive", None, "cable", "switchgear"]
    assert set(pulses.table["basis"]) == {"expert"}
    assert pulses.table["circuit"].tolist() == columns()["feeder"]
    assert pulses.chains[0].band_hz == (0.1e6, 25e6)
    assert (pulses.table["snr_db"] > 30).all()


def test_hdf5_rows_are_those_of_npz(tmp_path):
    """The same arrays in HDF5 give the same pulses under the same names."""
    h5py = pytest.importorskip("h5py")
    with h5py.File(tmp_path / "rows.h5", "w") as file:
        file["waves"] = waves_mv()
        for name, words in columns().items():
            file[name] = words
    map_path = write_map(tmp_path, wave="waves")
    both = [rows_of(path, map_path) for path in (tmp_path / "rows.h5", write_npz(tmp_path))]
    first, second = (pulses_of(rows, rows.onsets)[0] for rows in both)
    assert first.table.index.tolist() == second.table.index.tolist()
    np.testing.assert_array_equal(first.waves, second.waves)


def test_imported_pulses_survive_their_table(tmp_path):
    """Own classes and labels come back from the Parquet file; a label that is not declared does not."""
    rows = rows_of(write_npz(tmp_path), write_map(tmp_path, wave="waves"))
    pulses, _ = pulses_of(rows, rows.onsets)
    write_pulses(tmp_path / "p.parquet", pulses)
    found, _ = read_pulses(tmp_path / "p.parquet")
    assert found.own_classes == {"crane drive": "interference"}
    pd.testing.assert_frame_equal(found.table, pulses.table)


def test_longer_rows_are_cut(tmp_path):
    """A row of 60 us becomes a window of 20 us about its onset."""
    wide = np.pad(waves_mv(), ((0, 0), (2500, 2000)), mode="edge")
    np.savez(tmp_path / "rows.npz", waves=wide, **columns())
    rows = rows_of(
        tmp_path / "rows.npz", write_map(tmp_path, ("onset_sample = 300", "onset_ns = 28000.0"), wave="waves")
    )
    assert rows.onsets.tolist() == [2800] * 6
    pulses, _ = pulses_of(rows, rows.onsets)
    np.testing.assert_allclose(pulses.waves[:, 200:1700], waves_mv() * 1e-3, atol=1e-9)


def test_onsets_from_a_column(tmp_path):
    """Each row may have an onset of its own; one outside of the row is named."""
    change = ("onset_sample = 300\n", ""), ('label = "type"', 'label = "type"\nonset_sample = "at"')
    np.savez(tmp_path / "rows.npz", waves=waves_mv(), at=np.arange(300, 306), **columns())
    map_path = write_map(tmp_path, *change, wave="waves")
    assert rows_of(tmp_path / "rows.npz", map_path).onsets.tolist() == list(range(300, 306))
    np.savez(tmp_path / "rows.npz", waves=waves_mv(), at=np.arange(1496, 1502), **columns())
    assert "onset, row 4: expected a place from 0 to 1499" in refusal(tmp_path / "rows.npz", map_path)


def test_without_an_onset_it_is_left_open(tmp_path):
    """Where the map says nothing of the onset, nothing is assumed."""
    assert rows_of(write_npz(tmp_path), write_map(tmp_path, ("onset_sample = 300\n", ""), wave="waves")).onsets is None


@pytest.mark.parametrize(("unit", "volts"), [("V", 1.0), ("mV", 1e-3), ("uV", 1e-6)])
def test_units_of_the_wave(tmp_path, unit, volts):
    """Every unit gives volts."""
    map_path = write_map(tmp_path, ('wave = "mV"', f'wave = "{unit}"'), wave="waves")
    rows = rows_of(write_npz(tmp_path), map_path)
    np.testing.assert_allclose(rows.waves, waves_mv() * volts, rtol=1e-6)


def test_counts_are_worth_what_the_map_says(tmp_path):
    """Counts times the size of one give volts."""
    changes = ('wave = "mV"', 'wave = "count"'), ("rate_hz = 100e6", "rate_hz = 100e6\nvolts_per_count = 0.002")
    rows = rows_of(write_npz(tmp_path), write_map(tmp_path, *changes, wave="waves"))
    np.testing.assert_allclose(rows.waves, waves_mv() * 0.002, rtol=1e-6)


def test_a_wave_above_a_kilovolt_is_refused(tmp_path):
    """Millivolts read as volts are found out where they pass a kilovolt."""
    np.savez(tmp_path / "rows.npz", waves=waves_mv() * 1e3, **columns())
    map_path = write_map(tmp_path, ('wave = "mV"', 'wave = "V"'), wave="waves")
    assert "wave, row 0: expected at most 1 kV" in refusal(tmp_path / "rows.npz", map_path)


@pytest.mark.parametrize(("step", "fits"), [(1.0, True), (1.0009, True), (1.002, False), (1e-3, False)])
def test_a_time_axis_agrees_with_the_rate_or_is_refused(tmp_path, step, fits):
    """Within 0.1 % the stated rate stands; beyond it, or in another unit, the file is refused."""
    time = np.arange(1500) * 10.0 * step
    np.savez(tmp_path / "rows.npz", waves=waves_mv(), t=time, **columns())
    changes = ('label = "type"', 'label = "type"\ntime = "t"'), ("[units]", '[units]\ntime = "ns"')
    map_path = write_map(tmp_path, *changes, wave="waves")
    if fits:
        assert rows_of(tmp_path / "rows.npz", map_path).chain.rate_hz == RATE_HZ
    else:
        assert "time: expected 1e+08 samples a second" in refusal(tmp_path / "rows.npz", map_path)


@pytest.mark.parametrize("missing", [1, 5])
def test_a_time_axis_with_a_gap_is_refused(tmp_path, missing):
    """Times that do not rise evenly are no axis of one stretch, be it for a single sample."""
    time = np.arange(1500) * 10.0
    time[700:] += 10.0 * missing
    np.savez(tmp_path / "rows.npz", waves=waves_mv(), t=time, **columns())
    changes = ('label = "type"', 'label = "type"\ntime = "t"'), ("[units]", '[units]\ntime = "ns"')
    changes += (("rate_hz = 100e6\n", ""),)
    assert "times that rise evenly" in refusal(tmp_path / "rows.npz", write_map(tmp_path, *changes, wave="waves"))


@pytest.mark.parametrize(("samples", "gap", "fits"), [(200_000, 0, True), (200_000, 30, False)])
def test_times_printed_with_few_digits_are_an_axis(samples, gap, fits):
    """Six digits are ten samples wide at the end of 2 ms in ns: no gap for that, and one of 30 samples still shows."""
    ns = np.arange(samples) * 10.0
    ns[samples // 2 :] += 10.0 * gap
    printed = np.array([float(f"{value:.5g}") for value in ns])
    given = Map.model_validate(
        {"kind": "trace", "columns": {"time": "t", "volts": "v"}, "units": {"time": "ns"}, "fixed": {}}
    )
    if fits:
        assert time_rate_hz("x", given, printed) == pytest.approx(1e8, rel=1e-4)
    else:
        with pytest.raises(InputError, match="rise evenly"):
            time_rate_hz("x", given, printed)


def test_the_rate_may_stand_in_the_file(tmp_path):
    """One value, or the same for every row; two are refused."""
    change = ("rate_hz = 100e6\n", ""), ('label = "type"', 'label = "type"\nrate_hz = "fs"')
    map_path = write_map(tmp_path, *change, wave="waves")
    np.savez(tmp_path / "rows.npz", waves=waves_mv(), fs=125e6, **columns())
    assert rows_of(tmp_path / "rows.npz", map_path).chain.rate_hz == 125e6
    np.savez(tmp_path / "rows.npz", waves=waves_mv(), fs=[1e8] * 5 + [2e8], **columns())
    assert "one rate a file" in refusal(tmp_path / "rows.npz", map_path)


def test_unlisted_labels_are_refused_by_row(tmp_path):
    """A word that the map does not list is named with its row and the nearest one that is listed."""
    table = frame()
    table.loc[4, "type"] = "cran"
    table.to_csv(tmp_path / "rows.csv", index=False)
    message = refusal(tmp_path / "rows.csv", write_map(tmp_path))
    assert "label, row 4" in message
    assert "nearest known one is 'crane'" in message


@pytest.mark.parametrize(
    ("column", "row", "value", "words"),
    [
        ("s0500", 2, np.nan, "wave, row 2: expected NaN at the ends only"),
        ("s0500", 3, np.inf, "wave, row 3: expected at most 1 kV"),
        ("s0500", 1, "1,5", "decimal mark"),
        ("feeder", 1, "", "circuit, row 1: expected one line of text"),
        ("feeder", 1, "x" * 300, "circuit, row 1"),
        ("visit", 5, "", "session, row 5"),
    ],
)
def test_wrong_rows_of_a_csv_are_named(tmp_path, column, row, value, words):
    """A cell that cannot be one is named by column and row."""
    table = frame().astype({column: object})
    table.loc[row, column] = value
    table.to_csv(tmp_path / "rows.csv", index=False)
    assert words in refusal(tmp_path / "rows.csv", write_map(tmp_path))


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("s0000:s1499", "s0000:s1500", "columns.wave: expected a column 's1500'"),
        ("s0000:s1499", "s1499:s0000", "turn the range round"),
        ('circuit = "feeder"', 'circuit = "Feeder"', "nearest known one is 'feeder'"),
    ],
)
def test_columns_that_are_not_there_are_named(tmp_path, old, new, words):
    """What the map asks for and the header lacks is named with the nearest name."""
    assert words in refusal(write_csv(tmp_path), write_map(tmp_path, (old, new)))


def test_shapes_that_are_no_rows_are_refused(tmp_path):
    """One dimension, words instead of numbers, and columns of other lengths are refused."""
    map_path = write_map(tmp_path, wave="waves")
    path = tmp_path / "rows.npz"
    for waves, words in ((waves_mv()[0], "rows of 4"), (waves_mv().astype(str), "expected numbers")):
        np.savez(path, waves=waves, **columns())
        assert words in refusal(path, map_path)
    np.savez(path, waves=waves_mv(), **columns(5))
    assert "5 values" in refusal(path, map_path)


def test_wrong_parquet_is_refused(tmp_path):
    """Lists of two lengths, missing columns and damaged files end in one line."""
    map_path, path = write_map(tmp_path, wave="waves"), tmp_path / "rows.parquet"
    uneven = [row[: 1500 - (place == 3)] for place, row in enumerate(waves_mv())]
    pd.DataFrame({**columns(), "waves": uneven}).to_parquet(path)
    assert "rows of one length" in refusal(path, map_path)
    pd.DataFrame(columns()).to_parquet(path)
    assert "columns.wave: expected 'waves'" in refusal(path, map_path)
    path.write_bytes(b"PAR1 and no more")
    assert str(path) in refusal(path, map_path)


def test_other_kinds_of_file_and_map_are_refused(tmp_path):
    """An ending that is not read, and a map of a trace, are refused with what to do."""
    path = changed(tmp_path / "rows.txt", "x")
    assert "ending: expected one of .csv" in refusal(path, write_map(tmp_path))
    trace = changed(tmp_path / "t.toml", 'kind = "trace"\n[columns]\nvolts = "v"\n[fixed]\nrate_hz = 1e8\n')
    assert "kind of the map" in refusal(write_csv(tmp_path), trace)


def test_a_row_that_stands_twice_is_kept_once(tmp_path):
    """Equal rows are one pulse; where their labels disagree it is left unlabelled, and both are said."""
    waves, words = waves_mv(), columns()
    waves[4], waves[5] = waves[0], waves[1]
    words["type"][5] = "K"
    np.savez(tmp_path / "rows.npz", waves=waves, **words)
    rows = rows_of(tmp_path / "rows.npz", write_map(tmp_path, wave="waves"))
    pulses, notes = pulses_of(rows, rows.onsets)
    assert pulses.table["label"].tolist() == ["cable", None, "crane drive", None]
    assert "2 rows hold a pulse that stands there already" in notes[0]
    assert "1 pulses have two labels" in notes[1]
    assert rows.onsets[0] == ONSET
