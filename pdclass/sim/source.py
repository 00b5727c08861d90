"""Source currents of pulses as spectra at complex frequency; the area of a current is its charge."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.special import wofz

from pdclass.sim.grid import ComplexArray

Shape = Literal["gaussian", "asymmetric", "exponential", "ringing"]


@dataclass(frozen=True)
class SourceCurrent:
    """The current that one event drives, of unit area (a ringing one: unit initial slope over 2*pi*f).

    Attributes
    ----------
    shape : `gaussian`, `asymmetric` (two half Gaussians), `exponential` (difference of two), or `ringing`.
    rise_s : standard deviation of the rising flank, or shorter time constant [s], > 0.
    fall_s : standard deviation of the falling flank, longer time constant, or decay of the ringing [s], > 0.
    ring_hz : frequency of the ringing [Hz]; 0 for the other shapes.
    """

    shape: Shape
    rise_s: float
    fall_s: float
    ring_hz: float = 0.0

    def stretched(self, factor: float) -> SourceCurrent:
        """The same current, `factor` times as slow (the ringing frequency belongs to the circuit and stays)."""
        return SourceCurrent(self.shape, self.rise_s * factor, self.fall_s * factor, self.ring_hz)


def source_spectrum(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    """Laplace transform of a source current, (frequencies,) [s at unit charge], reference instant t = 0.

    Gaussian and asymmetric pulses peak at t = 0, the other two begin there. A ringing burst begins with a
    Gaussian flank of deviation `rise_s`. Gaussian: common in the literature on discharges in cables; damped
    oscillation: common practice, no source.
    """
    if current.shape == "gaussian":
        return np.asarray(np.exp((s * current.rise_s) ** 2 / 2))
    if current.shape == "asymmetric":
        return _two_half_gaussians(current, s)
    if current.shape == "exponential":
        return np.asarray(1 / ((1 + s * current.rise_s) * (1 + s * current.fall_s)))
    omega = 2 * np.pi * current.ring_hz
    ringing = omega / ((s + 1 / current.fall_s) ** 2 + omega**2)
    return np.asarray(ringing * np.exp((s * current.rise_s) ** 2 / 2))


def _two_half_gaussians(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    # the transform of exp(-t^2/2 sigma^2) for t > 0 is sigma sqrt(pi/2) erfcx(s sigma/sqrt 2); erfcx(z) = w(jz)
    rising = current.rise_s * wofz(-1j * s * current.rise_s / np.sqrt(2))
    falling = current.fall_s * wofz(1j * s * current.fall_s / np.sqrt(2))
    return np.asarray((rising + falling) / (current.rise_s + current.fall_s))
