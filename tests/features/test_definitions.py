"""A feature never changes under its name: stored values of every feature on closed-form pulses.

Where a definition has to change, the feature gets a new name, and `definitions.json` a new entry:
`python tests/features/test_definitions.py` writes the file anew.
"""

import json
from pathlib import Path

import numpy as np
import pytest
from closed_form import damped_sine, double_exponential

from pdclass.features import BY_NAME, CATALOGUE, feature_table
from pdclass.pulses import Chain, PulseSet, typed_table

STORED = Path(__file__).with_name("definitions.json")
FAST = double_exponential(10e-9, 50e-9, span_s=12e-6)
WAVES = {
    "fast": FAST,
    "slow": double_exponential(100e-9, 600e-9, span_s=12e-6),
    "ringing": damped_sine(7e6, 0.4e-6, span_s=12e-6),
    "long ringing with a copy": damped_sine(2e6, 1.5e-6, span_s=12e-6)
    + 0.3 * np.roll(damped_sine(2e6, 1.5e-6, span_s=12e-6), 800),
    "fast with two copies": FAST + 0.5 * np.roll(FAST, 300) - 0.2 * np.roll(FAST, 800),
}


def measured():
    """Feature values by wave and name; None = unmeasurable."""
    found = {}
    for number, (name, wave) in enumerate(WAVES.items()):
        window = np.random.default_rng(number).normal(0, 0.002, 2000)
        window[500 : 500 + wave.size] += wave[:1500]
        table = typed_table({"duration_us": [6.5], "peak_v": [1.0]}, ["a"])
        chain = Chain(100e6, band_hz=(0.1e6, 30e6))
        values = feature_table(PulseSet(window[None].astype(np.float32), (chain,), table))[0]
        pairs = zip(CATALOGUE, values, strict=True)
        found[name] = {feature.name: None if np.isnan(value) else float(f"{value:.6g}") for feature, value in pairs}
    return found


@pytest.mark.parametrize("wave", WAVES)
def test_every_definition_gives_its_stored_values(wave):
    """Each feature of the catalogue gives the stored value, to a hundredth of its tolerance and a thousandth."""
    stored, found = json.loads(STORED.read_text(encoding="utf-8"))[wave], measured()[wave]
    assert set(stored) == set(found)
    for name, value in found.items():
        allowed = BY_NAME[name].tolerance / 100
        assert value == (stored[name] if stored[name] is None else pytest.approx(stored[name], abs=allowed, rel=1e-3))


def test_every_feature_is_measured_on_some_wave():
    """No stored definition is empty: each feature has a value on at least one of the waves."""
    stored = json.loads(STORED.read_text(encoding="utf-8"))
    assert all(any(values[feature.name] is not None for values in stored.values()) for feature in CATALOGUE)


if __name__ == "__main__":
    STORED.write_text(json.dumps(measured(), indent=1) + "\n", encoding="utf-8")
