"""Pulse tables come back as they were; foreign ones are read as far as they are sound, row by row named else."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pdclass.capture import FillIns, read_pulses, tables, write_pulses
from pdclass.digest import loose_pulse_id
from pdclass.errors import InputError
from pdclass.pulses import LABELS, PulseSet, typed_table

QUICK = settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


def refusal(path, fill=None) -> str:
    with pytest.raises(InputError) as caught:
        read_pulses(path, fill)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert "\n" not in message
    return message


def complaint_of(path) -> str | None:
    try:
        read_pulses(path)
    except InputError as error:
        return str(error)
    return None


def assert_same(found: PulseSet, wanted: PulseSet) -> None:
    np.testing.assert_array_equal(found.waves, wanted.waves)
    assert found.chains == wanted.chains
    pd.testing.assert_frame_equal(found.table, wanted.table)


@pytest.fixture
def own(tmp_path, make_pulses):
    """An own table on disk."""
    write_pulses(tmp_path / "own.parquet", make_pulses())
    return tmp_path / "own.parquet"


@pytest.fixture
def foreign(tmp_path, make_pulses):
    """Write a foreign table of five rows: `foreign(column=array, ...)`; None takes a column out."""

    def write(said=None, **columns):
        waves = make_pulses().waves
        content = {
            "circuit": pa.array(["A"] * 5),
            "session": pa.array(["one"] * 5),
            "wave": pa.array([wave.tolist() for wave in waves], pa.list_(pa.float32())),
        } | columns
        table = pa.table({name: column for name, column in content.items() if column is not None})
        said = {"format": 1, "rate_hz": 100e6} if said is None else said
        path = tmp_path / "foreign.parquet"
        pq.write_table(table.replace_schema_metadata({"pdclass": json.dumps(said)} if said else None), path)
        return path

    return write


@pytest.mark.parametrize("rate_hz", [40e6, 62.5e6, 100e6, 125e6, 200e6])
@pytest.mark.parametrize("simulated", [False, True])
def test_a_table_comes_back_equal(tmp_path, make_pulses, rate_hz, simulated):
    """Waves, chains and every column survive the file, at every rate."""
    pulses = make_pulses(rate_hz, simulated=simulated)
    pulses.waves[0, -30:] = np.nan
    pulses.waves[1, :700] = np.nan
    write_pulses(tmp_path / "p.parquet", pulses)
    found, notes = read_pulses(tmp_path / "p.parquet")
    assert_same(found, pulses)
    assert notes == []


def test_a_table_without_pulses_comes_back(tmp_path, make_pulses):
    """No pulse found is a result too."""
    pulses = make_pulses().take(np.zeros(5, bool))
    write_pulses(tmp_path / "p.parquet", pulses)
    found, notes = read_pulses(str(tmp_path / "p.parquet"))
    assert found.waves.shape == (0, 2000)
    assert_same(found, pulses)
    assert notes == []


def test_many_row_groups_come_back_in_order(tmp_path, make_pulses):
    """More rows than a group or a batch holds stay in order."""
    small = make_pulses(40e6)
    rows = 5000
    waves = np.resize(small.waves, (rows, 800)) + np.arange(rows, dtype=np.float32)[:, None] / 1e4
    table = typed_table(
        {"circuit": ["A"] * rows, "session": ["s"] * rows, "onset_sample": range(rows)}, list(map(str, range(rows)))
    )
    pulses = PulseSet(waves, small.chains, table)
    write_pulses(tmp_path / "p.parquet", pulses)
    assert_same(read_pulses(tmp_path / "p.parquet")[0], pulses)


@QUICK
@given(
    label=st.none() | st.sampled_from(LABELS),
    site=st.none() | st.text(st.characters(categories=["L", "N"]), min_size=1, max_size=30),
    phase=st.floats(0, 359.875, width=32) | st.just(float("nan")),
    onset=st.integers(0, 2**63 - 1),
    time=st.none() | st.integers(-(2**62), 2**62),
    mates=st.integers(0, 2**15 - 1),
    clipped=st.booleans(),
    level=st.floats(2**-20, 900, width=32),
)
def test_any_row_comes_back_equal(tmp_path, make_pulses, label, site, phase, onset, time, mates, clipped, level):
    """Any value that the contract allows survives the file, null or not."""
    base = make_pulses(40e6, pulses=1)
    rows = {
        "circuit": ["A"],
        "session": ["s"],
        "label": [label],
        "site": [site],
        "phase_deg": [phase],
        "onset_sample": [onset],
        "time_utc": pd.to_datetime([pd.NaT if time is None else pd.Timestamp(time)], utc=True),
        "window_mates": [mates],
        "clipped": [clipped],
    }
    table = typed_table(rows, ["x"])
    waves = base.waves / np.abs(base.waves).max() * np.float32(level)
    pulses = PulseSet(waves, base.chains, table)
    write_pulses(tmp_path / "p.parquet", pulses)
    found, _ = read_pulses(tmp_path / "p.parquet")
    derived = ["noise_v", "peak_v", "snr_db"]
    assert_same(
        replace(found, table=found.table.drop(columns=derived)), replace(pulses, table=table.drop(columns=derived))
    )


def test_a_table_without_the_onset_uncertainty_reads_it_as_unknown(own, tmp_path, make_pulses):
    """A table written before there was such a column is read, its uncertainty null; a negative one is refused."""
    table = pq.read_table(own)
    pq.write_table(table.drop_columns("onset_std_ns"), tmp_path / "old.parquet")
    found, _ = read_pulses(tmp_path / "old.parquet")
    assert found.table["onset_std_ns"].isna().all()
    place = table.column_names.index("onset_std_ns")
    column = pa.array(np.full(table.num_rows, -1.0, np.float32))
    pq.write_table(table.set_column(place, "onset_std_ns", column), tmp_path / "wrong.parquet")
    assert "onset_std_ns" in refusal(tmp_path / "wrong.parquet")


def test_a_bare_foreign_table_is_read_and_what_is_derived_is_said(foreign, make_pulses):
    """Circuit, session, wave and rate are enough; the rest is derived or null, one line each."""
    path = foreign()
    pulses, notes = read_pulses(path)
    waves = make_pulses().waves
    assert list(pulses.table.index) == [loose_pulse_id(wave, "A", "one") for wave in waves]
    np.testing.assert_allclose(pulses.table["noise_v"], 1e-3, rtol=0.2)
    after = waves[:, 500:] - np.median(waves[:, :500], axis=1, keepdims=True)
    np.testing.assert_array_equal(pulses.table["peak_v"], after[np.arange(5), np.abs(after).argmax(axis=1)])
    expected = 20 * np.log10(np.abs(pulses.table["peak_v"]) / pulses.table["noise_v"])
    np.testing.assert_allclose(pulses.table["snr_db"], expected, rtol=1e-5)
    assert pulses.table["duration_us"].isna().all()
    assert pulses.table["label"].isna().all()
    assert len(notes) == 2
    assert "pulse_id" in notes[0]
    assert "noise_v, peak_v, snr_db" in notes[1]


def test_a_negative_pulse_has_a_negative_peak(foreign, make_pulses):
    """The peak keeps its sign."""
    waves = [(-wave).tolist() for wave in make_pulses().waves]
    pulses, _ = read_pulses(foreign(wave=pa.array(waves, pa.list_(pa.float64()))))
    assert (pulses.table["peak_v"] < 0).all()


def test_unknown_columns_are_left_out_with_one_line(foreign):
    """Foreign columns are named once and not carried along."""
    pulses, notes = read_pulses(foreign(weather=pa.array(["wet"] * 5), crew=pa.array(range(5))))
    assert "weather" not in pulses.table
    assert notes[0].endswith("2 unknown columns left out: 'weather', 'crew'")


def test_fill_ins_supply_rate_circuit_session_and_chain(foreign):
    """Fill-ins stand in for what a foreign table lacks."""
    fill = FillIns(rate_hz=100e6, circuit="B", session="two", site="Quay", band_hz=(1e5, 8e6), mains_hz=60.0)
    pulses, _ = read_pulses(foreign(said={}, circuit=None, session=None), fill)
    assert set(pulses.table["circuit"]) == {"B"}
    assert set(pulses.table["site"]) == {"Quay"}
    assert pulses.chains[0].band_hz == (1e5, 8e6)
    assert pulses.rate_hz == 100e6


def test_fill_ins_never_override_the_table(foreign):
    """What the table says wins."""
    said = {"format": 1, "rate_hz": 100e6, "chains": [{"mains_hz": 50.0}]}
    pulses, _ = read_pulses(foreign(said=said), FillIns(rate_hz=40e6, circuit="B", mains_hz=60.0))
    assert pulses.rate_hz == 100e6
    assert pulses.chains[0].mains_hz == 50.0
    assert set(pulses.table["circuit"]) == {"A"}


def test_fill_ins_stand_in_for_single_nulls(foreign):
    """A row without a circuit gets the fill-in; the others keep their own; without it the option is named."""
    path = foreign(circuit=pa.array(["A", None, "", "A", "A"]))
    assert read_pulses(path, FillIns(circuit="B"))[0].table["circuit"].tolist() == ["A", "B", "B", "A", "A"]
    assert "--circuit" in refusal(path)


def test_a_wrong_fill_in_names_its_option(foreign):
    """A fill-in that is no name is blamed on the option."""
    assert "--site: expected one line of text" in refusal(foreign(), FillIns(site="  "))


def test_a_column_of_one_rate_stands_in_for_the_metadata(foreign):
    """A foreign table may give the rate as a column of one value."""
    assert read_pulses(foreign(said={}, rate_hz=pa.array([100e6] * 5)))[0].rate_hz == 100e6
    message = refusal(foreign(said={}, rate_hz=pa.array([100e6] * 4 + [40e6])))
    assert "rate_hz: expected one rate a table, found 4e+07 and 1e+08" in message


@pytest.mark.parametrize("kind", [pa.string(), pa.large_string(), pa.dictionary(pa.int32(), pa.string())])
def test_every_kind_of_text_column_is_read(foreign, kind):
    """Plain, large and dictionary texts are the same to the reader; empty text is null."""
    pulses, _ = read_pulses(foreign(label=pa.array(["cable", None, "", "local", "cable"]).cast(kind)))
    assert pulses.table["label"].tolist() == ["cable", None, None, "local", "cable"]


def test_a_column_of_nulls_is_null(foreign):
    """A column without any value needs no type."""
    pulses, _ = read_pulses(foreign(site=pa.nulls(5), phase_deg=pa.nulls(5), time_utc=pa.nulls(5)))
    assert pulses.table[["site", "phase_deg", "time_utc"]].isna().all().all()


@pytest.mark.parametrize(
    ("name", "option"), [("circuit", "--circuit"), ("session", "--session"), ("wave", "write the column")]
)
def test_a_missing_needed_column_is_named(foreign, name, option):
    """Each needed column is named with what supplies it."""
    message = refusal(foreign(**{name: None}))
    assert f"{name}: expected a column" in message
    assert option in message


def test_a_missing_rate_names_its_option(foreign):
    """Without a rate nothing can be measured."""
    message = refusal(foreign(said={}))
    assert "rate_hz: expected a value" in message
    assert "--rate-hz" in message


UTC_US = pa.timestamp("us", "UTC")


@pytest.mark.parametrize(
    ("column", "values", "said"),
    [
        ("circuit", pa.array([1, 2, 3, 4, 5]), "circuit: expected string, found int64"),
        ("circuit", pa.array(["A", "A", None, "A", "A"]), "circuit, row 2: expected a value, found nothing"),
        ("circuit", pa.array(["A", "A", "", "A", "A"]), "circuit, row 2: expected one line"),
        ("session", pa.array(["a", "a\nb", "a", "a", "a"]), r"session, row 1: expected one line"),
        ("session", pa.array(["a", "x" * 900, "a", "a", "a"]), "at most 800 bytes, found 900 bytes"),
        ("label", pa.array(["cable", "local", "joint", None, None]), "label, row 2: expected null or one of cable"),
        ("label", pa.array(["cable", "undecided", None, None, None]), "label, row 1"),
        ("basis", pa.array([None, None, None, None, "hunch"]), "basis, row 4: expected null or one of dissected"),
        ("conductor", pa.array(["L1", "R", None, None, None]), "conductor, row 1"),
        ("pulse_id", pa.array(["a", "b", "c", "b", "d"]), "found b in rows 1 and 3"),
        ("pulse_id", pa.array(["a", "b", "c", None, "d"]), "pulse_id, row 3: expected a value"),
        ("phase_deg", pa.array([0.0, 400.0, 1.0, 2.0, 3.0]), "phase_deg, row 1: expected 0 to 360, found 400.0"),
        ("phase_deg", pa.array(["0"] * 5), "phase_deg: expected float, found string"),
        ("noise_v", pa.array([1.0, -1.0, 1.0, 1.0, 1.0]), "noise_v, row 1: expected 0 to"),
        ("snr_db", pa.array([1.0, np.inf, 1.0, 1.0, 1.0]), "snr_db, row 1: expected"),
        ("peak_v", pa.array([1.0, 1e300, 1.0, 1.0, 1.0]), "peak_v, row 1: expected"),
        ("onset_sample", pa.array([0, 1, -2, 3, 4]), "onset_sample, row 2: expected 0 to"),
        ("onset_sample", pa.array([0.5] * 5), "onset_sample: expected int64, found double"),
        ("onset_sample", pa.array([2**64 - 1] * 5, pa.uint64()), "onset_sample: expected int64"),
        ("window_mates", pa.array([0, 0, 0, 0, 70_000]), "window_mates, row 4: expected 0 to 32767"),
        ("chain", pa.array([0, 0, 0, 1, 0]), "chain, row 3: expected 0 to 0, found 1"),
        ("chain", pa.array([0, None, 0, 0, 0]), "chain, row 1: expected a value"),
        ("clipped", pa.array([0, 1, 0, 1, 0]), "clipped: expected bool, found int64"),
        ("time_utc", pa.array([0] * 5), "time_utc: expected timestamp[ns, tz=UTC], found int64"),
        ("time_utc", pa.array([0] * 5, pa.timestamp("ns")), "found timestamp[ns];"),
        ("time_utc", pa.array([2**62] * 5, UTC_US), "fit into nanoseconds"),
        ("distance_m", pa.array([1.0, -1.0, 1.0, 1.0, 1.0]), "distance_m, row 1"),
        ("wave", pa.array([1.0] * 5), "wave: expected lists of float (volts), found double"),
        ("wave", pa.array([[1, 2]] * 5), "wave: expected lists of float (volts)"),
    ],
)
def test_a_wrong_column_or_row_is_named(foreign, column, values, said):
    """A wrong type names the column, a wrong value its row, with what was expected and found."""
    assert said in refusal(foreign(**{column: values}))


def waves_with(make_pulses, row, change):
    waves = make_pulses().waves.astype(float)
    change(waves[row])
    return pa.array([wave.tolist() for wave in waves], pa.list_(pa.float64()))


@pytest.mark.parametrize(
    ("where", "value", "said"),
    [
        (slice(None), np.nan, "expected a finite sample, found NaN throughout"),
        (slice(900, 905), np.nan, "expected NaN at the ends only, found NaN inside"),
        (700, 1500.0, "expected at most 1 kV, found 1500 V"),
        (700, -1500.0, "expected at most 1 kV, found 1500 V"),
        (700, np.inf, "expected at most 1 kV, found inf V"),
        (700, 1e300, "expected at most 1 kV"),
        (slice(None), 0.5, "expected a signal, found all samples equal"),
    ],
)
def test_a_wave_that_is_no_record_is_refused_with_its_row(foreign, make_pulses, where, value, said):
    """NaN only outside of the record, at most a kilovolt, and never constant."""

    def change(wave):
        wave[where] = value

    message = refusal(foreign(wave=waves_with(make_pulses, 3, change)))
    assert "wave, row 3" in message
    assert said in message


def test_a_null_wave_is_refused_with_its_row(foreign, make_pulses):
    """A row without a wave is no pulse."""
    rows = [wave.tolist() for wave in make_pulses().waves]
    rows[2] = None
    assert "wave, row 2: expected a wave, found nothing" in refusal(
        foreign(wave=pa.array(rows, pa.list_(pa.float32())))
    )


def test_waves_of_several_lengths_are_refused_with_the_row(foreign, make_pulses):
    """The first row of another length is named."""
    rows = [wave.tolist() for wave in make_pulses().waves]
    rows[4] = rows[4][:-1]
    message = refusal(foreign(wave=pa.array(rows, pa.list_(pa.float32()))))
    assert "wave, row 4: expected 2000 samples (20 us at the table's rate), found 1999 samples" in message


def test_another_window_length_is_refused(foreign):
    """A window of another length than 20 us says how many samples were expected."""
    message = refusal(foreign(said={"format": 1, "rate_hz": 125e6}))
    assert "expected 2500 samples (20 us at the table's rate), found 2000 samples" in message


def test_another_fixed_window_length_is_refused(own):
    """The same from the schema alone, before a wave is read."""
    table = pq.read_table(own)
    said = json.loads(table.schema.metadata[b"pdclass"]) | {"rate_hz": 62.5e6}
    pq.write_table(table.replace_schema_metadata({"pdclass": json.dumps(said)}), own)
    assert "wave: expected 1250 samples (20 us at the table's rate), found 2000 samples" in refusal(own)


@pytest.mark.parametrize(
    ("said", "message"),
    [
        ({"format": 2, "rate_hz": 1e8}, "pdclass.format: expected 1, found 2"),
        ({"rate_hz": 1e8}, "pdclass.format: expected 1, found None"),
        ({"format": 1, "rate_hz": -1e8}, "pdclass.rate_hz: expected a finite number above 0"),
        ({"format": 1, "rate_hz": 1e8, "chains": []}, "pdclass.chains: expected"),
        ({"format": 1, "rate_hz": 1e8, "chains": [{"adc_bits": 99}]}, "pdclass.chains[0].adc_bits"),
        ({"format": 1, "rate_hz": 1e8, "chains": [{}, {"band_hz": [9, 1]}]}, "pdclass.chains[1].band_hz"),
        ({"format": 1, "rate_hz": float("nan")}, "found NaN"),
    ],
)
def test_wrong_table_metadata_is_named(foreign, said, message):
    """The file metadata is held to the same rules as a capture's."""
    assert message in refusal(foreign(said=said))


def test_declared_sizes_are_looked_at_before_anything_is_built(own, monkeypatch):
    """A table that declares more than the limit is refused from its footer."""
    monkeypatch.setattr(tables, "WAVE_LIMIT_BYTES", 1000)
    assert "wave: expected at most 1000 bytes, found 80000 bytes declared" in refusal(own)
    monkeypatch.setattr(tables, "WAVE_LIMIT_BYTES", 10**9)
    monkeypatch.setattr(tables, "COLUMN_LIMIT_BYTES", 10)
    assert "expected at most 10 bytes" in refusal(own)
    monkeypatch.setattr(tables, "ROW_LIMIT", 4)
    assert "rows: expected at most 4, found 5" in refusal(own)


def test_a_huge_fixed_window_is_refused(tmp_path):
    """A schema of a billion samples a row costs nothing to refuse."""
    kind = pa.list_(pa.float32(), 1_000_000_000)
    empty = pa.schema([("circuit", pa.string()), ("session", pa.string()), ("wave", kind)])
    pq.write_table(
        empty.empty_table().replace_schema_metadata({"pdclass": '{"format":1,"rate_hz":1e8}'}), tmp_path / "h.parquet"
    )
    assert "expected 2000 samples" in refusal(tmp_path / "h.parquet")


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b"", "expected a Parquet file, found 0 bytes"),
        (b"time,volts\n1,2\n", "expected a Parquet file"),
        (b"PAR1" + bytes(20), "the file is cut short"),
        (b"PAR1" + bytes(20) + b"PAR1", "footer: damaged"),
        (b"PAR1" + b"\xff" * 20 + b"PAR1", "footer: expected at most 16 bytes, found 4294967295"),
    ],
)
def test_what_is_no_parquet_file_is_refused(tmp_path, content, said):
    """Anything else under the name gives one line."""
    path = tmp_path / "x.parquet"
    path.write_bytes(content)
    assert said in refusal(path)


def test_a_folder_or_nothing_is_refused(tmp_path):
    """A folder and a missing file are named."""
    assert "an ordinary file" in refusal(tmp_path)
    assert "no such file" in refusal(tmp_path / "none.parquet")


def test_a_flipped_bit_of_a_wave_is_found_by_its_checksum(own, make_pulses):
    """A damaged page is refused, never read as another wave."""
    content = bytearray(own.read_bytes())
    chunk = pq.ParquetFile(own).metadata.row_group(0)
    wave = next(
        chunk.column(number)
        for number in range(chunk.num_columns)
        if "wave" in chunk.column(number).path_in_schema and "mates" not in chunk.column(number).path_in_schema
    )
    content[wave.data_page_offset + wave.total_compressed_size // 2] ^= 16
    own.write_bytes(content)
    assert "damaged Parquet file" in refusal(own)


def test_damage_before_the_footer_never_changes_a_pulse(own):
    """Pages have checksums, their headers do not: whatever byte is damaged, it is refused or changes nothing."""
    whole = own.read_bytes()
    wanted, _ = read_pulses(own)
    refused = 0
    places = range(0, len(whole) - 8 - int.from_bytes(whole[-8:-4], "little"), 53)
    for place in places:
        content = bytearray(whole)
        content[place] ^= 1 << place % 8
        own.write_bytes(content)
        if complaint_of(own) is None:
            assert_same(read_pulses(own)[0], wanted)
        else:
            refused += 1
    assert refused > 0.9 * len(places)


@QUICK
@given(place=st.integers(0, 10**7), mask=st.integers(1, 255), cut=st.booleans())
def test_a_damaged_table_is_read_or_refused_with_one_line(own, place, mask, cut):
    """No flipped byte or cut gives anything but pulses or one line."""
    whole = own.read_bytes()
    content = bytearray(whole)
    place %= len(content)
    content[place] ^= mask
    own.write_bytes(content[:place] if cut else content)
    message = complaint_of(own)
    own.write_bytes(whole)
    assert message is not None or not cut
    assert message is None or (str(own) in message and "\n" not in message)


def test_a_damaged_footer_is_read_or_refused_with_one_line(own):
    """The footer has no checksum: damage there is refused or harmless, and never ends the program."""
    whole = own.read_bytes()
    length = int.from_bytes(whole[-8:-4], "little")
    refused = 0
    for place in range(len(whole) - 8 - length, len(whole), 11):
        content = bytearray(whole)
        content[place] ^= 1
        own.write_bytes(content)
        message = complaint_of(own)
        refused += message is not None
        assert message is None or (str(own) in message and "\n" not in message)
    assert refused > length // 40


def test_a_row_that_stands_for_very_many_samples_is_refused_unread(foreign, make_pulses):
    """A run of equal samples is a few bytes on disk and gigabytes in memory: the footer gives it away."""
    rows = [wave.tolist() for wave in make_pulses().waves]
    rows[1] = [0.0] * 100_000
    message = refusal(foreign(wave=pa.array(rows, pa.list_(pa.float32()))))
    assert "wave: expected 10000 samples in 5 rows" in message
    assert "found 108000 samples" in message


@pytest.mark.parametrize(
    "classes", [["crane drive"], {"crane drive": "noise"}, {"cable": ""}, {"a|b": ""}, {"x1": 3}, {"x1": []}, 7]
)
def test_wrong_own_classes_are_refused(foreign, classes):
    """Own classes in the metadata are names, each with one of ours or nothing."""
    assert "pdclass.classes" in refusal(foreign({"format": 1, "rate_hz": 100e6, "classes": classes}))


def test_own_classes_are_labels_where_they_are_declared(foreign):
    """A declared class may stand in the label column, an undeclared one not."""
    label = pa.array(["crane drive", None, "cable", None, None])
    declared = {"format": 1, "rate_hz": 100e6, "classes": {"crane drive": "interference"}}
    pulses, _ = read_pulses(foreign(declared, label=label))
    assert pulses.table["label"].iloc[0] == "crane drive"
    assert pulses.take(np.array([0])).own_classes == {"crane drive": "interference"}
    assert "label, row 0" in refusal(foreign(label=label))
