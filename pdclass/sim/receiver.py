"""The receiving chain: current transformer on the strap, anti-alias filter, quantisation, clipping."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.signal
from numpy.typing import NDArray

from pdclass.pulses import FloatArray, WaveArray
from pdclass.sim.grid import ComplexArray, band_end

#: -3 dB corner of the anti-alias filter as a share of the rate (common practice, no source).
ANTI_ALIAS_SHARE = 0.4
#: No digitiser of this world passes more [Hz].
WIDEST_HZ = 48e6
_ORDER = 4


@dataclass(frozen=True)
class Receiver:
    """A high-frequency current transformer and its digitiser.

    Attributes
    ----------
    rate_hz : samples a second [Hz].
    bits : resolution [bit], 8 to 16.
    transfer_ohm : mid-band transfer impedance of the sensor [V/A].
    low_hz, high_hz : its first-order corners, -3 dB [Hz].
    """

    rate_hz: float
    bits: int
    transfer_ohm: float
    low_hz: float
    high_hz: float


def sensor_response(receiver: Receiver, s: ComplexArray) -> ComplexArray:
    """Transfer impedance of the current transformer, first order at both ends [V/A], (frequencies,)."""
    low, high = 2 * np.pi * receiver.low_hz, 2 * np.pi * receiver.high_hz
    return np.asarray(receiver.transfer_ohm * s / (s + low) / (1 + s / high))


def anti_alias_response(rate_hz: float, s: ComplexArray) -> ComplexArray:
    """Butterworth low-pass of order 4 at 0.4 of the rate, at most 48 MHz; (frequencies,), 1 at 0 Hz."""
    corner = 2 * np.pi * min(ANTI_ALIAS_SHARE * rate_hz, WIDEST_HZ)
    _, poles, gain = scipy.signal.butter(_ORDER, corner, analog=True, output="zpk")
    return np.asarray(gain / np.prod([s - pole for pole in poles], axis=0))


def chain_response(receiver: Receiver, s: ComplexArray) -> ComplexArray:
    """Strap current to sampled voltage on `laplace_grid()` [V/A], (frequencies,)."""
    return np.asarray(sensor_response(receiver, s) * anti_alias_response(receiver.rate_hz, s) * band_end())


def chain_band_hz(receiver: Receiver) -> tuple[float, float]:
    """Lower and upper -3 dB corner of sensor and anti-alias filter together [Hz]."""
    hz = np.geomspace(receiver.low_hz / 4, min(receiver.rate_hz / 2, 2 * WIDEST_HZ), 4001)
    s = (2j * np.pi * hz).astype(np.complex128)
    gain = np.abs(sensor_response(receiver, s) * anti_alias_response(receiver.rate_hz, s))
    within = np.flatnonzero(gain >= receiver.transfer_ohm / np.sqrt(2))
    return float(hz[within[0]]), float(hz[within[-1]])


def quantise(signal_v: FloatArray | WaveArray, volts_per_count: float, bits: int) -> NDArray[Any]:
    """Counts of a digitiser: rounded, clipped to the range; int8 up to 8 bits, else int16.

    Parameters
    ----------
    signal_v : samples [V], any shape.
    volts_per_count : size of one count [V], > 0.
    bits : resolution [bit], 2 to 16.
    """
    half = 1 << (bits - 1)
    counts = np.rint(signal_v / np.asarray(volts_per_count, signal_v.dtype))
    np.clip(counts, -half, half - 1, out=counts)
    return np.asarray(counts, np.int8 if bits <= 8 else np.int16)
