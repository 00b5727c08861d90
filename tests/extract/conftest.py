"""A record whose pulses are known in closed form."""

import numpy as np
import pytest
from closed_form import as_capture, background, damped_sine, double_exponential

from pdclass.pulses import Annotation


@pytest.fixture(scope="session")
def planted():
    """Forty pulses of three shapes at 12 noise levels in carriers, 200 us apart on average, none overlapping."""
    rng = np.random.default_rng(7)
    samples = 800_000
    signal = background(rng, samples)
    shapes = [double_exponential(12e-9, 60e-9), double_exponential(80e-9, 250e-9), damped_sine(8e6, 0.3e-6)]
    onsets = np.arange(40) * 20_000 + rng.integers(2000, 15_000, 40)
    notes = []
    for number, onset in enumerate(onsets):
        wave = shapes[number % 3]
        signal[onset : onset + wave.size] += rng.choice([-1, 1]) * 240 * wave
        notes.append(Annotation(int(onset), 10, label="local", basis="expert", labelled_by="human:ab"))
    return onsets, as_capture(signal, annotations=tuple(notes))
