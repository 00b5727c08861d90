"""Somebody else's files from closed formulas: rows of pulses in every container, a trace, their maps."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

RATE_HZ = 100e6
ONSET = 300
SAMPLES = 1500

ROWS_MAP = """kind = "pulse-per-row"
[columns]
wave = "{wave}"
circuit = "feeder"
session = "visit"
label = "type"
[units]
wave = "mV"
[fixed]
rate_hz = 100e6
onset_sample = 300
sensor = "HF1"
basis = "expert"
band_hz = [0.1e6, 25e6]
[labels]
K = "cable"
P = "switchgear"
crane = "crane drive"
"?" = ""
[classes]
"crane drive" = "interference"
"""
TRACE_MAP = """kind = "trace"
[columns]
time = "t_us"
volts = "ch1"
[units]
time = "us"
wave = "mV"
[fixed]
circuit = "Quay Road"
sensor = "QR-strap"
session = "2031-05-04"
band_hz = [0.1e6, 25e6]
mains_hz = 50.0
"""


def waves_mv(rows: int = 6, seed: int = 1) -> np.ndarray:
    """(rows, SAMPLES) double-exponential pulses of different widths on a little noise, onset at ONSET [mV]."""
    rng = np.random.default_rng(seed)
    time_us = (np.arange(SAMPLES) - ONSET) / RATE_HZ * 1e6
    late = np.maximum(time_us, 0)
    widths = 0.2 + 0.3 * np.arange(rows)[:, None]
    shape = np.where(time_us >= 0, np.exp(-late / widths) - np.exp(-late / 0.02), 0.0)
    return np.round(20.0 * shape + rng.normal(0, 0.05, (rows, SAMPLES)), 4)


def columns(rows: int = 6) -> dict[str, list[str]]:
    """Words of the rows: two circuits, one visit, every label of the map."""
    labels = ["K", "P", "crane", "?"]
    return {
        "feeder": ["Quay Road" if row % 2 else "Dry Dock" for row in range(rows)],
        "visit": ["2031-05-04"] * rows,
        "type": [labels[row % 4] for row in range(rows)],
    }


def frame(rows: int = 6) -> pd.DataFrame:
    """The rows as a table with a column a sample, `s0000` and on."""
    waves = pd.DataFrame(waves_mv(rows), columns=[f"s{place:04d}" for place in range(SAMPLES)])
    return pd.concat([pd.DataFrame(columns(rows)), waves], axis=1)


def write_map(folder: Path, *changes: tuple[str, str], wave: str = "s0000:s1499") -> Path:
    """The map of rows, with texts in it exchanged for others: pairs of old and new."""
    return changed(folder / "rows.toml", ROWS_MAP.replace("{wave}", wave), *changes)


def write_trace_map(folder: Path, *changes: tuple[str, str]) -> Path:
    """The map of the trace, with texts in it exchanged for others."""
    return changed(folder / "trace.toml", TRACE_MAP, *changes)


def changed(path: Path, text: str, *changes: tuple[str, str]) -> Path:
    """Write a text in which each first text of a pair, which must stand there, is exchanged for the second."""
    for old, new in changes:
        if old not in text:
            raise ValueError(f"{old!r} does not stand in {path.name}")
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")
    return path


def write_csv(folder: Path, rows: int = 6) -> Path:
    """Rows as CSV."""
    path = folder / "rows.csv"
    frame(rows).to_csv(path, index=False)
    return path


def write_npz(folder: Path, rows: int = 6) -> Path:
    """Rows as NPZ, the waves in an array `waves`."""
    path = folder / "rows.npz"
    np.savez(path, waves=waves_mv(rows), **{name: np.array(words) for name, words in columns(rows).items()})
    return path


def write_parquet(folder: Path, rows: int = 6) -> Path:
    """Rows as Parquet, the waves in a list column `waves`."""
    path = folder / "rows.parquet"
    pd.DataFrame({**columns(rows), "waves": list(waves_mv(rows))}).to_parquet(path)
    return path


def trace_counts(samples: int = 6000) -> np.ndarray:
    """(samples,) int16: noise with a pulse every 2,000 samples."""
    rng = np.random.default_rng(3)
    place = np.arange(samples) % 2000 - 700
    pulse = np.where(place >= 0, np.exp(-np.maximum(place, 0) / 40.0) - np.exp(-np.maximum(place, 0) / 3.0), 0.0)
    return np.round(800 * pulse + rng.normal(0, 8, samples)).astype(np.int16)


def write_trace(folder: Path, counts: np.ndarray | None = None, count_mv: float = 0.25) -> Path:
    """A trace as an oscilloscope writes it: time in us, volts in mV."""
    counts = trace_counts() if counts is None else counts
    path = folder / "trace.csv"
    time_us = np.arange(counts.size) / RATE_HZ * 1e6
    pd.DataFrame({"t_us": time_us, "ch1": counts * count_mv}).to_csv(path, index=False, float_format="%.6g")
    return path
