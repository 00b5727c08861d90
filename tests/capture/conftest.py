"""Captures, recordings and pulse sets from closed formulas, small enough for every test."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pdclass.capture import counts_digest, write_sigmf
from pdclass.pulses import Annotation, Capture, Chain, PulseSet, typed_table, window_samples

CHAIN = Chain(100e6, 1e-4, 14, 5.0, (0.1e6, 20e6), None, 50.0)


def counts_of(samples: int, dtype: str = "int16", *, peak: float = 100.0) -> np.ndarray:
    """A damped sine on a slow ramp, in counts."""
    place = np.arange(samples)
    wave = peak * np.exp(-place / samples) * np.sin(0.37 * place)
    return wave.astype(dtype)


def capture_of(samples: int = 4000, dtype: str = "int16", **changes) -> Capture:
    """A whole capture with every optional field set, unless changed."""
    counts = counts_of(samples, dtype)
    bits = 8 if dtype == "int8" else 14
    fields = {
        "chain": replace(CHAIN, adc_bits=bits),
        "counts": counts,
        "circuit": "Harbour 3",
        "sensor": "HF1",
        "session": "2031-05-04",
        "digest": counts_digest(counts),
        "name": "night-1",
        "site": "North quay",
        "conductor": "L2",
        "start_utc": pd.Timestamp("2031-05-04T03:02:01.25Z"),
        "phase_marks": np.array([[0.0, 30.0]]),
        "phase_reference": "own",
        "annotations": (
            Annotation(10, 20, "cable", "located", "ab", "seen twice"),
            Annotation(500, 40, "local", "simulated", None, None, "void", 3.5, 120.0),
        ),
    }
    return Capture(**(fields | changes))


def pulses_of(rate_hz: float = 100e6, pulses: int = 5, *, simulated: bool = False) -> PulseSet:
    """Double-exponential waves on a little noise, one label each."""
    samples = window_samples(rate_hz)
    rng = np.random.default_rng(7)
    time_s = (np.arange(samples) - samples // 4) / rate_hz
    shape = np.where(time_s > 0, np.exp(-np.maximum(time_s, 0) / 1e-6) - np.exp(-np.maximum(time_s, 0) / 1e-7), 0)
    waves = (0.1 * shape + 1e-3 * rng.normal(size=(pulses, samples))).astype(np.float32)
    labels = ["cable", None, "switchgear", "interference", "local"]
    rows = {
        "circuit": ["Harbour 3"] * pulses,
        "session": ["2031-05-04"] * pulses,
        "sensor": ["HF1"] * pulses,
        "phase_deg": np.linspace(0, 359, pulses),
        "onset_sample": np.arange(pulses) * 1000,
        "noise_v": np.full(pulses, 1e-3),
        "label": [labels[number % 5] for number in range(pulses)],
        "basis": ["located" if labels[number % 5] else None for number in range(pulses)],
        "time_utc": pd.to_datetime(["2031-05-04T03:02:01.000000001Z"] * pulses),
    }
    if simulated:
        rows |= {"family": ["void"] * pulses, "distance_m": [1.5] * pulses, "charge_pc": [100.0] * pulses}
    chain = replace(CHAIN, rate_hz=rate_hz, response=((1e5, 1.0, 0.0), (1e6, 5.0, -3.0)))
    ids = [f"{number:016x}" for number in range(pulses)]
    return PulseSet(waves, (chain, Chain(rate_hz)), typed_table(rows, ids, simulated=simulated))


@pytest.fixture
def make_capture():
    """The maker of captures."""
    return capture_of


@pytest.fixture
def make_pulses():
    """The maker of pulse sets."""
    return pulses_of


@pytest.fixture
def recording(tmp_path: Path) -> Path:
    """The metadata path of a recording on disk."""
    return write_sigmf(tmp_path, capture_of())


@pytest.fixture
def edit(recording: Path):
    """Change fields of the recording's metadata: `edit(section, name, value, place=0)`; value None takes it out."""

    def change(section: str, name: str, value: object, place: int = 0) -> Path:
        content = json.loads(recording.read_text())
        target = content[section] if section == "global" else content[section][place]
        target.pop(name, None)
        if value is not None:
            target[name] = value
        recording.write_text(json.dumps(content))
        return recording

    return change
