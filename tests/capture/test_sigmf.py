"""Recordings are read as they say, and what contradicts itself is refused with one line."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import sigmf
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pdclass.capture import FillIns, counts_digest, open_capture, write_sigmf
from pdclass.errors import InputError
from pdclass.pulses import global_index, phase_deg

QUICK = settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


def refusal(path, fill=None) -> str:
    with pytest.raises(InputError) as caught:
        open_capture(path, fill)
    message = str(caught.value)
    assert "\n" not in message
    return message


def complaint_of(path) -> str | None:
    try:
        open_capture(path)
    except InputError as error:
        return str(error)
    return None


@pytest.mark.parametrize(
    ("section", "field", "value", "expected", "found"),
    [
        ("global", "core:dataset", "other.bin", "no such field", "'other.bin'"),
        ("global", "core:datatype", "cf32_le", "ri16_le, ri8, rf32_le", "'cf32_le'"),
        ("global", "core:datatype", "ri16_be", "ri16_le, ri8, rf32_le", "'ri16_be'"),
        ("global", "core:datatype", None, "a value", "nothing"),
        ("global", "core:version", None, "a value", "nothing"),
        ("global", "core:version", "7.0.0", "1.x.y", "'7.0.0'"),
        ("global", "core:num_channels", 2, "expected 1", "found 2"),
        ("global", "core:metadata_only", True, "with samples", "true"),
        ("global", "core:sample_rate", -100e6, "above 0", "-100000000.0"),
        ("global", "core:sample_rate", "fast", "a number", "'fast'"),
        ("global", "core:sample_rate", True, "a number", "True"),
        ("global", "core:sha512", "abc", "128 hex digits", "'abc'"),
        ("global", "core:trailing_bytes", -1, "a whole number", "-1"),
        ("global", "pdclass:volts_per_count", 0, "above 0", "found 0"),
        ("global", "pdclass:volts_per_count", -1e-4, "above 0", "-0.0001"),
        ("global", "pdclass:session", 7, "one line of text", "found 7"),
        ("global", "pdclass:circuit", "a\nb", "one line of text", r"'a\nb'"),
        ("global", "pdclass:sensor", "  ", "one line of text", "' '"),
        ("global", "pdclass:adc_bits", 3, "from 4 to 24", "found 3"),
        ("global", "pdclass:adc_bits", 25, "from 4 to 24", "found 25"),
        ("global", "pdclass:adc_bits", 20, "at most 16 bits", "found 20"),
        ("global", "pdclass:band_hz", [20e6, 1e5], "low < high", "[20000000.0, 100000.0]"),
        ("global", "pdclass:band_hz", [1e5], "2 finite numbers", "[100000.0]"),
        ("global", "pdclass:band_hz", [60e6, 90e6], "half the sample rate", "6e+07 Hz"),
        ("global", "pdclass:mains_hz", 5, "from 10 to 100", "found 5"),
        ("global", "pdclass:mains_hz", 400, "from 10 to 100", "found 400"),
        ("global", "pdclass:transfer_ohm", 0, "above 0", "found 0"),
        ("global", "pdclass:response", [[2e6, 1, 0], [1e6, 1, 0]], "frequencies rising", "[1000000.0, 1, 0]"),
        ("global", "pdclass:response", [], "rows of", "[]"),
        ("global", "pdclass:conductor", "red", "L1, L2, L3, three-core", "'red'"),
        ("global", "pdclass:coupling", "clamp", "strap", "'clamp'"),
        ("global", "pdclass:phase_reference", "moon", "own", "'moon'"),
        ("global", "pdclass:phase_uncertainty_deg", -3, "from 0", "-3"),
        ("global", "pdclass:conducter", "L1", "a known field", "pdclass:conductor"),
        ("global", "core:extensions", "pdclass", "a list of objects", "'pdclass'"),
        ("captures", "core:sample_start", 5, "expected 0", "found 5"),
        ("captures", "core:sample_start", 4000, "from 0 to 3999", "found 4000"),
        ("captures", "core:sample_start", None, "a value", "nothing"),
        ("captures", "core:sample_start", 0.5, "a whole number", "0.5"),
        ("captures", "core:datetime", "yesterday", "a time in UTC", "'yesterday'"),
        ("captures", "core:datetime", "2031-13-04T00:00:00Z", "a time in UTC", "2031-13-04"),
        ("captures", "pdclass:phase_deg", "up", "a number", "'up'"),
        ("annotations", "core:sample_start", 4000, "from 0 to 3999", "found 4000"),
        ("annotations", "core:sample_count", 3991, "at most 3990", "found 3991"),
        ("annotations", "core:label", 3, "text", "found 3"),
        ("annotations", "pdclass:basis", "hunch", "dissected", "'hunch'"),
        ("annotations", "pdclass:distance_m", -1, "from 0", "-1"),
    ],
)
def test_a_wrong_field_is_named_with_what_was_expected_and_found(edit, section, field, value, expected, found):
    """One wrong field gives one line with the file, the field, what was expected and what was found."""
    path = edit(section, field, value)
    message = refusal(path)
    assert message.startswith(str(path))
    assert expected in message
    assert found in message
    assert field in message


@pytest.mark.parametrize(
    ("field", "option"),
    [
        ("core:sample_rate", "--rate-hz"),
        ("pdclass:volts_per_count", "--volts-per-count"),
        ("pdclass:circuit", "--circuit"),
        ("pdclass:sensor", "--sensor"),
        ("pdclass:session", "--session"),
    ],
)
def test_a_missing_needed_field_names_the_option_that_supplies_it(edit, field, option):
    """What is needed and missing is named together with its option."""
    message = refusal(edit("global", field, None))
    assert field in message
    assert option in message


def test_fill_ins_supply_what_is_missing_and_never_override(edit, recording):
    """A fill-in takes effect only where the file has no value (or null)."""
    fill = FillIns(volts_per_count=5e-4, circuit="Other", mains_hz=60.0, band_hz=(2e5, 8e6))
    assert open_capture(recording, fill).circuit == "Harbour 3"
    edit("global", "pdclass:volts_per_count", None)
    edit("global", "pdclass:band_hz", None)
    edit("global", "pdclass:circuit", None)
    capture = open_capture(recording, fill)
    assert capture.chain.volts_per_count == 5e-4
    assert capture.chain.band_hz == (2e5, 8e6)
    assert capture.chain.mains_hz == 50.0
    assert capture.circuit == "Other"


def test_a_wrong_fill_in_names_the_option(edit):
    """A fill-in out of bounds is blamed on the option, not on the file's field."""
    path = edit("global", "pdclass:volts_per_count", None)
    message = refusal(path, FillIns(volts_per_count=-1.0))
    assert "--volts-per-count" in message
    assert "above 0" in message


def test_a_needed_extension_that_we_lack_is_refused(edit):
    """An extension that is not optional must be known."""
    extensions = [{"name": "other", "version": "1.0.0", "optional": False}]
    assert "core:extensions[0].name" in refusal(edit("global", "core:extensions", extensions))


def test_a_newer_own_extension_is_refused(edit):
    """A later major version of the own extension means what this reader does not know."""
    extensions = [{"name": "pdclass", "version": "2.0.0", "optional": True}]
    message = refusal(edit("global", "core:extensions", extensions))
    assert "2.0.0" in message
    assert "newer version" in message


def two_captures(recording, **second) -> None:
    content = json.loads(recording.read_text())
    content["captures"].append({"core:sample_start": 1000} | second)
    recording.write_text(json.dumps(content))


def test_captures_out_of_order_are_refused(recording):
    """Captures rise with their first sample."""
    two_captures(recording, **{"core:global_index": 1000})
    two_captures(recording, **{"core:global_index": 9000})
    message = refusal(recording)
    assert "captures[2].core:sample_start" in message
    assert "more than 1000" in message


def test_a_clock_that_runs_backwards_is_refused(recording):
    """A capture cannot begin on the clock before the one before it has ended."""
    two_captures(recording, **{"core:global_index": 999})
    message = refusal(recording)
    assert "captures[1].core:global_index" in message
    assert "at least 1000" in message


def test_a_gap_told_by_the_times_alone_is_refused(recording):
    """Times that tell of a gap while no global index does would let a filter cross it."""
    two_captures(recording, **{"core:datetime": "2031-05-04T03:02:02.25Z"})
    message = refusal(recording)
    assert "captures[1].core:global_index" in message
    assert "about 100000000" in message


def test_gaps_on_the_clock_part_segments(recording):
    """A gap makes a segment; captures that follow without a gap join the segment before."""
    content = json.loads(recording.read_text())
    starts = [(0, 70), (1000, 1070), (2000, 9000), (3000, 10000)]
    content["captures"] = [{"core:sample_start": s, "core:global_index": i} for s, i in starts]
    recording.write_text(json.dumps(content))
    capture = open_capture(recording)
    assert capture.segments.tolist() == [[0, 70], [2000, 9000]]
    assert capture.segment_bounds() == [(0, 2000), (2000, 4000)]
    assert global_index(capture, np.array([1999, 2000])).tolist() == [2069, 9000]
    assert capture.phase_marks is None


def test_an_offset_recording_is_counted_from_its_first_sample(recording):
    """`core:offset` shifts every index of the metadata, not the samples of the file."""
    content = json.loads(recording.read_text())
    content["global"]["core:offset"] = 500
    content["captures"] = [{"core:sample_start": 500}]
    content["annotations"] = [{"core:sample_start": 510, "core:sample_count": 5, "core:label": "cable"}]
    recording.write_text(json.dumps(content))
    capture = open_capture(recording)
    assert capture.segments.tolist() == [[0, 500]]
    assert capture.annotations[0].onset_sample == 10


def test_no_captures_mean_one_from_the_first_sample(recording):
    """The standard lets `captures` be empty: one capture, nothing known about it."""
    content = json.loads(recording.read_text())
    recording.write_text(json.dumps(content | {"captures": [], "annotations": []}))
    capture = open_capture(recording)
    assert capture.segments.tolist() == [[0, 0]]
    assert capture.start_utc is None
    assert capture.phase_marks is None


@pytest.mark.parametrize("mains_hz", [50.0, 60.0])
def test_phase_marks_are_unwrapped_with_the_mains(tmp_path, make_capture, mains_hz):
    """Between marks many cycles apart, whole turns are added as the mains frequency says."""
    base = make_capture(samples=5000)
    chain = replace(base.chain, rate_hz=1e6, band_hz=None, mains_hz=mains_hz)
    segments = np.array([[0, 0], [2500, 502_500]])
    marks = np.array([[0.0, 20.0], [2500.0, 20.0 + 360.0 * mains_hz * 0.5025]])
    path = write_sigmf(tmp_path, replace(base, chain=chain, segments=segments, phase_marks=marks, annotations=()))
    capture = open_capture(path)
    np.testing.assert_allclose(capture.phase_marks, marks, atol=1e-9)
    half_turn = 2500 + round(0.5e6 / mains_hz)
    expected = (20.0 + 360.0 * mains_hz * 0.5025 + 180.0) % 360.0
    found = float(phase_deg(replace(capture, counts=np.zeros(20_000)), np.array([half_turn]))[0])
    assert found == pytest.approx(expected, abs=0.02)


def test_without_a_mains_frequency_only_countable_marks_are_kept(recording):
    """Marks too far apart to count turns between are left out; nearer ones rise."""
    content = json.loads(recording.read_text())
    del content["global"]["pdclass:mains_hz"]
    places = [(0, 0, 350.0), (1000, 1000, 5.0), (2000, 90_000_000, 40.0)]
    content["captures"] = [
        {"core:sample_start": s, "core:global_index": i, "pdclass:phase_deg": p} for s, i, p in places
    ]
    recording.write_text(json.dumps(content))
    assert open_capture(recording).phase_marks.tolist() == [[0.0, 350.0], [1000.0, 365.0]]


def test_annotations_carry_label_maker_and_truth(recording):
    """Own labels are taken over with their maker; the simulator's truth too; in rising order."""
    first, second = open_capture(recording).annotations
    assert (first.label, first.basis, first.labelled_by, first.comment) == ("cable", "located", "ab", "seen twice")
    assert (second.basis, second.family, second.distance_m, second.charge_pc) == ("simulated", "void", 3.5, 120.0)


def test_foreign_labels_and_makers_are_kept_as_comments(edit):
    """A label that is none of ours gives no label, and is not lost."""
    edit("annotations", "core:label", "corona?")
    edit("annotations", "core:generator", "trigger box")
    path = edit("annotations", "core:sample_count", None)
    first = open_capture(path).annotations[0]
    assert first.label is None
    assert first.labelled_by is None
    assert first.comment == "label: corona?; seen twice; generator: trigger box"
    assert first.sample_count == 3990


@pytest.mark.parametrize(
    ("rate_hz", "dtype", "mains_hz"),
    [
        (40e6, "int8", 50.0),
        (100e6, "float32", 50.0),
        (62.5e6, "int16", 60.0),
        (125e6, "int16", 50.0),
        (200e6, "int16", 60.0),
    ],
)
def test_every_rate_and_sample_type_is_read_back_as_it_was(tmp_path, make_capture, rate_hz, dtype, mains_hz):
    """Rates, sample types and mains frequencies of the trade come back unchanged."""
    base = make_capture(dtype=dtype)
    chain = replace(base.chain, rate_hz=rate_hz, mains_hz=mains_hz)
    capture = open_capture(write_sigmf(tmp_path, replace(base, chain=chain)))
    assert capture.chain == chain
    assert capture.counts.dtype == np.dtype(dtype)
    np.testing.assert_array_equal(capture.counts, base.counts)


def test_a_capture_without_phase_or_chain_is_read(tmp_path, make_capture):
    """Only rate, volts a count and names are needed."""
    base = make_capture(phase_marks=None, phase_reference=None, site=None, conductor=None, start_utc=None)
    bare = replace(base, chain=replace(base.chain, adc_bits=None, transfer_ohm=None, band_hz=None, mains_hz=None))
    capture = open_capture(write_sigmf(tmp_path, bare))
    assert capture.chain == bare.chain
    assert capture.phase_marks is None
    assert np.isnan(phase_deg(capture, np.array([0, 10]))).all()


def test_a_recording_of_the_standard_package_is_read(tmp_path):
    """A recording that the sigmf package alone has written (8 bit, 40 MS/s) is read, its counts unscaled."""
    counts = (20 * np.sin(0.3 * np.arange(5000))).astype(np.int8)
    counts.tofile(tmp_path / "antenna.sigmf-data")
    written = sigmf.SigMFFile(
        data_file=str(tmp_path / "antenna.sigmf-data"),
        global_info={
            "core:datatype": "ri8",
            "core:sample_rate": 40e6,
            "core:extensions": [{"name": "pdclass", "version": "1.0.0", "optional": True}],
            "pdclass:volts_per_count": 1e-3,
        },
    )
    written.add_capture(0, metadata={"core:datetime": "2031-05-04T03:02:01.5Z"})
    written.add_annotation(100, 20, metadata={"core:label": "interference", "core:generator": "human:cd"})
    written.tofile(str(tmp_path / "antenna.sigmf-meta"))
    capture = open_capture(tmp_path / "antenna.sigmf-meta", FillIns(circuit="Line 7", sensor="A1", session="one"))
    np.testing.assert_array_equal(capture.counts, counts)
    assert capture.counts.dtype == np.int8
    assert capture.chain.rate_hz == 40e6
    assert capture.start_utc == pd.Timestamp("2031-05-04T03:02:01.5Z")
    assert (capture.annotations[0].label, capture.annotations[0].labelled_by) == ("interference", "cd")


NAMES = st.text(st.characters(categories=["L", "N", "P", "Zs"]), min_size=1, max_size=20).filter(str.strip)
POSITIVE = st.floats(1e-9, 1e9)


@QUICK
@given(
    counts=st.lists(st.integers(-2048, 2047), min_size=3, max_size=60).filter(lambda c: len(set(c)) > 1),
    dtype=st.sampled_from(["int16", "float32"]),
    circuit=NAMES,
    session=NAMES,
    site=st.none() | NAMES,
    rate_hz=st.sampled_from([40e6, 62.5e6, 100e6, 125e6, 200e6]),
    volts=POSITIVE,
    ohm=st.none() | POSITIVE,
    start=st.none() | st.datetimes(pd.Timestamp("1980-01-01"), pd.Timestamp("2200-01-01")),
    gap=st.integers(0, 10**12),
)
def test_any_capture_comes_back_equal(
    tmp_path, make_capture, counts, dtype, circuit, session, site, rate_hz, volts, ohm, start, gap
):
    """Writing and reading a capture is the identity, field for field."""
    array = np.array(counts, dtype)
    base = make_capture(circuit=circuit, session=session, site=site, counts=array, annotations=())
    chain = replace(base.chain, rate_hz=rate_hz, volts_per_count=volts, transfer_ohm=ohm)
    segments = np.array([[0, 0], [2, 2 + gap]] if gap else [[0, 0]])
    time = None if start is None else pd.Timestamp(start, tz="UTC").as_unit("ns")
    capture = replace(base, chain=chain, start_utc=time, segments=segments, digest=counts_digest(array))
    found = open_capture(write_sigmf(tmp_path, capture))
    np.testing.assert_array_equal(found.counts, array)
    np.testing.assert_array_equal(found.segments, capture.segments)
    np.testing.assert_allclose(found.phase_marks, capture.phase_marks)
    empty = {"counts": None, "segments": None, "phase_marks": None}
    assert replace(found, **empty) == replace(capture, **empty)


@QUICK
@given(place=st.integers(0, 10**6), mask=st.integers(1, 255), cut=st.booleans())
def test_damaged_metadata_is_read_or_refused_with_one_line(recording, place, mask, cut):
    """No flipped byte or cut of the metadata gives anything but a capture or one line."""
    content = bytearray(recording.read_bytes())
    whole = bytes(content)
    place %= len(content)
    content[place] ^= mask
    recording.write_bytes(content[:place] if cut else content)
    message = complaint_of(recording)
    recording.write_bytes(whole)
    assert message is not None or not cut
    assert message is None or ("night-1" in message and "\n" not in message)
