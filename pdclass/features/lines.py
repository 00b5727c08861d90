"""Lines in the spectrum of what follows a pulse: carriers that were not taken out, or that fade as it passes.

A carrier is a few bins wide, while a pulse with its copies fills the band smoothly but for the ripple of the copies.
"""

from __future__ import annotations

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.transforms import SpectrumArray
from pdclass.pulses import WaveArray

#: A line stands so many times above what lies beside it, in size.
STANDS_OUT = 4.0
#: A pulse with its copies and its ringing is hardly more than so many times its beginning, in size.
PULSE_STANDS_OUT = 3.0
#: Beside it: so many bins [a power of two] on either side, after so many that a line may spread over.
_BESIDE, _APART = 8, 5


@compiled
def cut_lines(spectra: SpectrumArray, pulses: SpectrumArray) -> None:  # pragma: no cover - compiled
    """Cut lines in spectra of what follows each pulse, (waves, bins), in place; phases stay.

    A bin is cut to `STANDS_OUT` times the root mean square of the lower side of it (at the ends of the band there is
    one side only), but not below `PULSE_STANDS_OUT` times the pulse's own spectrum, lest a ringing be taken for a line.
    """
    bins = spectra.shape[1]
    power, most = np.empty(bins, np.float32), np.empty(bins, np.float32)
    share = np.float32(PULSE_STANDS_OUT**2)
    for row in range(len(spectra)):
        spectrum, pulse = spectra[row], pulses[row]
        for k in range(bins):
            power[k] = spectrum[k].real ** 2 + spectrum[k].imag ** 2
        _most_into(power, most)
        for k in range(bins):
            allowed = max(most[k], share * (pulse[k].real ** 2 + pulse[k].imag ** 2))
            most[k] = np.sqrt(min(allowed / max(power[k], np.float32(1e-30)), np.float32(1)))
        weigh(spectrum, most)


@compiled
def weigh(spectrum: SpectrumArray, weights: WaveArray) -> None:  # pragma: no cover - compiled
    """Multiply a spectrum, (bins,), by weights in place; as plain floats, which fill a vector."""
    parts = spectrum.view(np.float32)
    for k in range(weights.size):
        parts[2 * k] *= weights[k]
        parts[2 * k + 1] *= weights[k]


@compiled
def _most_into(power: WaveArray, most: WaveArray) -> None:  # pragma: no cover - compiled
    """Write the power from which a bin is cut; box sums come by doubling."""
    beside, width, sums = power.copy(), 1, power.size
    while width < _BESIDE:
        sums -= width
        ahead = beside[width:]
        for k in range(sums):
            beside[k] += ahead[k]
        width *= 2
    share, before = np.float32(STANDS_OUT**2 / _BESIDE), _APART + _BESIDE - 1
    for k in range(before):
        most[k] = share * beside[k + _APART]
    early, late = beside[: sums - before - _APART], beside[before + _APART : sums]
    middle = most[before : before + early.size]
    for k in range(early.size):
        middle[k] = share * min(early[k], late[k])
    for k in range(before + early.size, power.size):
        most[k] = share * beside[k - before]
