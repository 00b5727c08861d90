"""Captures of every kind that is promised go the whole way: rates, sample types, gaps, missing chain and phase."""

import dataclasses
import hashlib

import numpy as np
import pytest

from pdclass.capture import write_sigmf
from pdclass.extract import ExtractSettings
from pdclass.jobs.score import score_inputs
from pdclass.pulses import Chain
from pdclass.sim.scenario import Scenario, simulate_capture
from pdclass.verdict.batch import read_verdicts


def world(segments=1, duration_ms=4.0, **chain):
    capture = {"duration_ms": duration_ms, "pulses": [25, 25], "segments": segments}
    ranges = {"name": "kinds", "circuits": 1, "snr_db": [20.0, 40.0], "capture": capture, "chain": chain}
    return Scenario.model_validate(ranges)


def scored(folder, capture, bundle, settings=None):
    """Verdicts and the capture's record in the run."""
    (folder / "in").mkdir()
    path = write_sigmf(folder / "in", capture)
    done = score_inputs([path], folder / "out", bundle=bundle, settings=settings)
    return read_verdicts(done.out), done.run["captures"][0]


@pytest.mark.parametrize("rate_hz", [62.5e6, 125e6, 200e6])
def test_rates(rate_hz, tiny_bundle, tmp_path):
    """62.5, 125 and 200 MS/s are scored, none of them outside for its rate."""
    verdicts, _ = scored(tmp_path, simulate_capture(world(rates_hz=[rate_hz]), 1, seed=1), tiny_bundle)
    assert len(verdicts) >= 10
    assert not verdicts["outside"].fillna("").str.contains("rate").any()


def test_sixty_hertz_phases(tiny_bundle, tmp_path):
    """At 60 Hz a pulse's phase follows its time at 21,600 degrees a second."""
    verdicts, _ = scored(tmp_path, simulate_capture(world(mains_hz=[60.0]), 1, seed=1), tiny_bundle)
    first = verdicts.iloc[0]
    turned = first["phase_deg"] + 360 * 60 * (verdicts["onset_s"] - first["onset_s"])
    apart = np.abs((verdicts["phase_deg"] - turned + 180) % 360 - 180)
    assert (apart < 0.1).all()


def test_segments_with_gaps(tiny_bundle, tmp_path):
    """Three segments with gaps are scored; times count the gaps, and no window reaches over one."""
    capture = simulate_capture(world(segments=3), 1, seed=2)
    assert len(capture.segments) == 3
    verdicts, _ = scored(tmp_path, capture, tiny_bundle)
    assert verdicts["onset_s"].max() > capture.duration_s


def test_floats(tiny_bundle, tmp_path):
    """Float samples are scored as their counts would be: at least 95 % of the pulses are the same within 20 ns.

    Whole numbers are spread over the width of a count, floats are not: pulses at the threshold may differ.
    """
    capture = simulate_capture(world(), 1, seed=3)
    floats = capture.counts.astype("<f4")
    same = dataclasses.replace(capture, counts=floats, digest=hashlib.sha256(floats.tobytes()).hexdigest())
    counted, _ = scored(tmp_path, capture, tiny_bundle)
    (tmp_path / "floats").mkdir()
    floated, _ = scored(tmp_path / "floats", same, tiny_bundle)
    apart = np.abs(counted["onset_s"].to_numpy()[:, None] - floated["onset_s"].to_numpy()).min(axis=1)
    assert np.mean(apart < 20e-9) >= 0.95


def test_missing_chain_and_phase(tiny_bundle, tmp_path):
    """Without corners, bits, mains and phase pulses are scored, phases null, and the record says what is lost."""
    capture = simulate_capture(world(), 1, seed=4)
    bare = dataclasses.replace(
        capture,
        chain=Chain(capture.chain.rate_hz, capture.chain.volts_per_count),
        phase_marks=None,
        phase_reference=None,
    )
    verdicts, record = scored(tmp_path, bare, tiny_bundle)
    assert len(verdicts) >= 10
    assert verdicts["phase_deg"].isna().all()
    unchecked = " ".join(record["not_checked"])
    assert "lower corner not checked" in unchecked
    assert "upper corner not checked" in unchecked
    assert "no phase reference" in " ".join(record["notes"])


def test_a_narrow_chain_is_scored_on_what_it_carries(tiny_bundle, tmp_path):
    """A sensor that ends at 10 MHz lies within what the world was trained on: not outside for that alone."""
    capture = simulate_capture(world(high_corner_hz=[10e6, 10e6]), 1, seed=5)
    verdicts, _ = scored(tmp_path, capture, tiny_bundle)
    assert len(verdicts) >= 10
    assert not verdicts["outside"].fillna("").str.contains("corner").any()


def test_a_quiet_capture_gives_an_empty_but_whole_folder(tiny_bundle, tmp_path):
    """A capture without a single pulse is scored: no verdicts, a record with its detection limit, a report."""
    capture = simulate_capture(world(duration_ms=1.0), 1, seed=6, pulses=0)
    noise = np.random.default_rng(0).normal(0, 40, 100_000).round().astype("<i2")
    quiet = dataclasses.replace(
        capture,
        counts=noise,
        annotations=(),
        digest=hashlib.sha256(noise.tobytes()).hexdigest(),
        phase_marks=None,
        segments=np.zeros((1, 2), np.int64),
        chain=Chain(100e6, 1e-4, 14, mains_hz=50.0),
    )
    strict = ExtractSettings(false_events_per_cycle=1e-6)
    verdicts, record = scored(tmp_path, quiet, tiny_bundle, strict)
    assert len(verdicts) == 0
    assert record["pulses_found"] == 0
    assert record["detection_limit_mv"] > 0
    assert (tmp_path / "out" / "report.html").is_file()
