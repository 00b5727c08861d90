"""Captures from NPZ, HDF5 and oscilloscope traces: what SigMF would say, and one line on what is missing or wrong."""

import hashlib

import numpy as np
import pandas as pd
import pytest
from foreign_files import trace_counts, write_map, write_trace, write_trace_map

from pdclass.capture import FillIns, open_capture, read_map
from pdclass.errors import InputError
from pdclass.extract import extract

FIELDS = {
    "sample_rate": 100e6,
    "volts_per_count": 0.25e-3,
    "adc_bits": 12,
    "circuit": "Quay Road",
    "sensor": "QR-strap",
    "session": "2031-05-04",
    "site": "Lantern",
    "conductor": "L2",
    "band_hz": [0.1e6, 25e6],
    "mains_hz": 50.0,
    "phase_reference": "own",
}


def write_npz(folder, counts=None, **changes):
    """A capture as NPZ, with fields changed; None takes one out."""
    fields = {name: value for name, value in {**FIELDS, **changes}.items() if value is not None}
    np.savez(folder / "night.npz", counts=trace_counts() if counts is None else counts, **fields)
    return folder / "night.npz"


def refusal(path, fill=None):
    with pytest.raises(InputError) as caught:
        open_capture(path, fill)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert "\n" not in message
    assert "pdclass:" not in message
    assert "core:" not in message
    return message


def test_an_npz_is_a_capture(tmp_path):
    """Counts come back as they were, fields are those of SigMF without prefix, the digest is the file's."""
    path = write_npz(tmp_path)
    capture = open_capture(path)
    assert np.array_equal(capture.counts, trace_counts())
    assert capture.counts.dtype == np.int16
    assert not capture.counts.flags.writeable
    assert capture.digest == hashlib.sha256(path.read_bytes()).hexdigest()
    assert (capture.circuit, capture.sensor, capture.session, capture.site) == (
        "Quay Road",
        "QR-strap",
        "2031-05-04",
        "Lantern",
    )
    assert (capture.chain.rate_hz, capture.chain.adc_bits, capture.chain.band_hz) == (100e6, 12, (0.1e6, 25e6))
    assert capture.name == "night"


def test_stretches_have_places_times_and_phases(tmp_path):
    """Arrays of starts give segments with gaps, the time of the first and the phases."""
    starts = {
        "sample_start": [0, 3000],
        "global_index": [0, 5000],
        "datetime": ["2031-05-04T02:00:00Z", ""],
        "phase_deg": [10.0, 28.0],
    }
    capture = open_capture(write_npz(tmp_path, **starts))
    assert capture.segments.tolist() == [[0, 0], [3000, 5000]]
    assert capture.start_utc == pd.Timestamp("2031-05-04T02:00:00Z")
    assert capture.phase_marks.tolist() == [[0.0, 10.0], [3000.0, 28.0]]


def test_hdf5_is_the_same_capture(tmp_path):
    """The same arrays in HDF5 give the same capture but for the digest of its file."""
    h5py = pytest.importorskip("h5py")
    with h5py.File(tmp_path / "night.h5", "w") as file:
        file["counts"] = trace_counts()
        for name, value in FIELDS.items():
            file[name] = value
    first, second = open_capture(tmp_path / "night.h5"), open_capture(write_npz(tmp_path))
    assert np.array_equal(first.counts, second.counts)
    assert first.chain == second.chain
    assert first.circuit == second.circuit
    assert first.digest == hashlib.sha256((tmp_path / "night.h5").read_bytes()).hexdigest()


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"circuit": None}, "circuit: expected a value, found nothing; write it, or give --circuit"),
        ({"sample_rate": None}, "sample_rate: expected a value"),
        ({"volts_per_count": None}, "volts_per_count: expected a value"),
        ({"volts_per_count": -1.0}, "volts_per_count"),
        ({"adc_bits": 40}, "adc_bits"),
        ({"adc_bits": 4}, "counts from -8 to 7"),
        ({"band_hz": [25e6, 0.1e6]}, "band_hz"),
        ({"band_hz": [1e6, 2e6, 3e6]}, "band_hz"),
        ({"conductor": "L9"}, "conductor"),
        ({"circuit": ["one", "two"]}, "circuit: expected one value"),
        ({"sample_start": [0, 7000]}, "sample_start"),
        ({"sample_start": [0, 10], "phase_deg": [1.0]}, "equally many values"),
        ({"phase_deg": [1.0, 2.0]}, "sample_start: expected an array"),
        ({"sample_count": 17}, "sample_count: expected 17"),
        ({"counts": trace_counts().astype(np.int64)}, "one dimension of int8, int16 or float32"),
        ({"counts": trace_counts().reshape(2, -1)}, "one dimension of int8, int16 or float32"),
        ({"counts": np.zeros(100, np.int16)}, "all samples equal"),
        ({"counts": np.zeros(1, np.int16)}, "at least 2"),
        ({"counts": np.array([1.0, np.nan, 2.0], np.float32)}, "sample 1: expected a finite number"),
        ({"counts": np.array(["a", "b"])}, "one dimension of int8"),
    ],
)
def test_wrong_arrays_are_refused_in_one_line(tmp_path, changes, words):
    """Each thing that an NPZ capture lacks or says wrongly is named by its own field."""
    assert words in refusal(write_npz(tmp_path, **changes))


def test_fill_ins_supply_what_arrays_lack(tmp_path):
    """An option stands in for a field that is not there, and never overrides one that is."""
    path = write_npz(tmp_path, circuit=None)
    capture = open_capture(path, FillIns(circuit="Dry Dock", sensor="other"))
    assert (capture.circuit, capture.sensor) == ("Dry Dock", "QR-strap")


def test_a_trace_is_a_capture(tmp_path):
    """Time gives the rate, the unit volts; with the size of a count the samples are counts again."""
    path = write_trace(tmp_path)
    plain = open_capture(path, FillIns(map=read_map(write_trace_map(tmp_path))))
    assert plain.counts.dtype == np.float32
    np.testing.assert_allclose(plain.counts * plain.chain.volts_per_count, trace_counts() * 0.25e-3, rtol=1e-5)
    assert plain.chain.rate_hz == pytest.approx(100e6, rel=1e-4)
    assert plain.digest == hashlib.sha256(path.read_bytes()).hexdigest()
    stated = ("mains_hz = 50.0", "mains_hz = 50.0\nvolts_per_count = 0.25e-3\nadc_bits = 12\nrate_hz = 100e6")
    counted = open_capture(path, FillIns(map=read_map(write_trace_map(tmp_path, stated))))
    assert np.array_equal(counted.counts, trace_counts())
    assert counted.chain.rate_hz == 100e6
    assert counted.chain.adc_bits == 12


def test_pulses_of_a_trace_lie_where_they_were_put(tmp_path):
    """Extraction finds the three pulses of the trace within 20 ns."""
    found = extract(open_capture(write_trace(tmp_path), FillIns(map=read_map(write_trace_map(tmp_path)))))
    onsets = found.pulses.table["onset_sample"].to_numpy()
    for place in (700, 2700, 4700):
        assert np.abs(onsets - place).min() <= 2


def test_a_trace_may_have_time_and_phase_of_its_first_sample(tmp_path):
    """start_utc and phase_deg of the map stand for the first sample."""
    change = ("mains_hz = 50.0", 'mains_hz = 50.0\nphase_deg = 90.0\nstart_utc = "2031-05-04T02:00:00Z"')
    capture = open_capture(write_trace(tmp_path), FillIns(map=read_map(write_trace_map(tmp_path, change))))
    assert capture.phase_marks.tolist() == [[0.0, 90.0]]
    assert capture.start_utc == pd.Timestamp("2031-05-04T02:00:00Z")


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('time = "us"', 'time = "ns"', "time: expected steps of 10 ns, within 0.1 % of fixed.rate_hz, found 0.01 ns"),
        ('volts = "ch1"', 'volts = "ch2"', "columns.volts: expected a column 'ch2'"),
        ('time = "t_us"', 'time = "t"', "columns.time: expected a column 't'"),
        ('circuit = "Quay Road"\n', "", "circuit: expected a value, found nothing; write it, or give --circuit"),
        ('wave = "mV"', 'wave = "V"', "volts: expected whole multiples"),
        ("0.25e-3", "0.3e-3", "volts: expected whole multiples of 0.0003 V"),
        ("rate_hz = 100e6", "rate_hz = 101e6", "within 0.1 %"),
        ("rate_hz = 100e6", "rate_hz = 100e6\nphase_deg = 400.0", "phase_deg"),
        ('session = "2031-05-04"', 'session = "2031-05-04"\nstart_utc = "yesterday"', "datetime"),
    ],
)
def test_wrong_traces_are_refused_in_one_line(tmp_path, old, new, words):
    """What the map says of a trace and the file contradicts is named."""
    stated = ("mains_hz = 50.0", "mains_hz = 50.0\nvolts_per_count = 0.25e-3\nrate_hz = 100e6")
    path = write_trace(tmp_path)
    with pytest.raises(InputError) as caught:
        open_capture(path, FillIns(map=read_map(write_trace_map(tmp_path, stated, (old, new)))))
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_gaps_and_holes_of_a_trace_are_refused(tmp_path):
    """A missing stretch of time, a missing sample, a kilovolt and a line of nothing are named."""
    fill = FillIns(map=read_map(write_trace_map(tmp_path)))
    path = write_trace(tmp_path)
    whole = pd.read_csv(path)
    pd.concat([whole.iloc[:3000], whole.iloc[3100:]]).to_csv(path, index=False)
    assert "times that rise evenly" in refusal(path, fill)
    whole.assign(ch1=whole["ch1"].where(whole.index != 77)).to_csv(path, index=False)
    assert "ch1: expected a sample in every row, found nothing in row 77" in refusal(path, fill)
    whole.assign(ch1=whole["ch1"] * 1e6).to_csv(path, index=False)
    assert "volts: expected at most 1 kV" in refusal(path, fill)
    whole.iloc[:0].to_csv(path, index=False)
    assert "0 samples" in refusal(path, fill)


def test_a_csv_needs_the_right_kind_of_map(tmp_path):
    """Without a map, or with one of rows, the message says what to do."""
    path = write_trace(tmp_path)
    assert "say with --map" in refusal(path)
    assert "pdclass import" in refusal(path, FillIns(map=read_map(write_map(tmp_path))))
