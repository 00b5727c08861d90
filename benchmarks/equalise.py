"""Equalisation: a wave as another chain would have shown it, as far as the noise lets the difference be undone.

A sensor that ends at 14 MHz makes a near pulse look like one that came a long way. What its corners took away can be
given back where the pulse still stands out of the noise, and nowhere else. This is not in the way from pulses to
features: `benchmarks/study_equaliser.py` shows what it does to features and labels, and DEVELOPERS why it stays out.
"""

from __future__ import annotations

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from plain_features.window import ANALYSIS_RATE_HZ, Window
from pdclass.pulses import Chain, FloatArray

ComplexArray = NDArray[np.complex128]

#: Corners of the chain that all others are brought to: first order, -3 dB [Hz].
REFERENCE_HZ = (0.3e6, 25e6)
#: Nothing is amplified more than so.
MOST_GAIN_DB = 15.0
#: Powers are averaged over so many bins before they are compared.
_SMOOTHING = 9


def corners(frequency_hz: FloatArray, band_hz: tuple[float, float]) -> ComplexArray:
    """Response of one first-order corner at each end of a band, 1 in its middle, same shape as the frequencies."""
    low = 1j * frequency_hz / (1j * frequency_hz + band_hz[0])
    return np.asarray(low / (1 + 1j * frequency_hz / band_hz[1]))


def chain_shape(chain: Chain, frequency_hz: FloatArray) -> ComplexArray:
    """Response of a chain over its largest, (frequencies,): as it is stated, else a first-order corner at each end.

    Between stated frequencies level and phase run straight over the logarithm of the frequency, beyond them they are
    held. Ones where neither response nor band is known.

    Parameters
    ----------
    frequency_hz : (frequencies,), rising, >= 0 [Hz].
    """
    if chain.response:
        hz, ohm, phase_deg = np.array(sorted(chain.response), np.float64).T
        place, at = np.log(hz), np.log(np.maximum(frequency_hz, hz[0]))
        level = np.interp(at, place, np.log(np.maximum(ohm, 1e-12 * ohm.max()) / ohm.max()))
        phase = np.interp(at, place, np.unwrap(np.deg2rad(phase_deg)))
        return np.asarray(np.exp(level + 1j * phase))
    if chain.band_hz:
        return corners(frequency_hz, chain.band_hz)
    return np.ones(frequency_hz.size, np.complex128)


def clear_share(power: FloatArray, noise: FloatArray) -> FloatArray:
    """Share of the power that is no noise, both averaged over neighbours, (frequencies,), 0 to 1."""
    even = np.full(_SMOOTHING, 1 / _SMOOTHING)
    found, floor = (np.convolve(np.pad(each, _SMOOTHING // 2, "reflect"), even, "valid") for each in (power, noise))
    return np.asarray(np.clip(1 - floor / np.maximum(found, 1e-300), 0.0, 1.0))


def equaliser(
    chain: Chain, frequency_hz: FloatArray, share: FloatArray, reference_hz: tuple[float, float] = REFERENCE_HZ
) -> ComplexArray:
    """Gain that brings a wave from its chain to the reference band, (frequencies,); 0 where nothing but noise is.

    The quotient of both responses times the share of the power that is no noise (N. Wiener, 1949, from memory); never
    more than 15 dB.

    Parameters
    ----------
    frequency_hz : (frequencies,) rising from 0 [Hz].
    share : (frequencies,) of `clear_share`.
    reference_hz : corners to bring it to [Hz].
    """
    shape = chain_shape(chain, frequency_hz)
    # at standstill both responses may vanish: there the quotient is that of the next frequency
    dead = shape == 0
    gain = corners(frequency_hz, reference_hz) / np.where(dead, 1, shape) * share
    gain[dead] = gain[np.argmin(dead)].real
    most = 10 ** (MOST_GAIN_DB / 20)
    return np.asarray(gain * np.minimum(1.0, most / np.maximum(np.abs(gain), 1e-300)))


def equalised(window: Window, chain: Chain, reference_hz: tuple[float, float] = REFERENCE_HZ) -> NDArray[np.float32]:
    """The wave of a window as the reference band would show it [V], (samples,).

    How far the noise reaches is judged on the pulse's own samples; where it is unknown the wave is returned as it is.

    Parameters
    ----------
    window : a pulse ready for measuring.
    chain : that it was recorded with.
    reference_hz : corners to bring it to [Hz].
    """
    wave = window.wave * window.height_v
    if window.noise > 0:
        bins = window.noise_power.size
        share = clear_share(np.abs(scipy.fft.rfft(window.own, 2 * (bins - 1))) ** 2, window.noise_power)
        size = 2 * scipy.fft.next_fast_len(wave.size)
        frequency_hz = scipy.fft.rfftfreq(size, 1 / ANALYSIS_RATE_HZ)
        fine = np.interp(frequency_hz, np.linspace(0, ANALYSIS_RATE_HZ / 2, bins), share)
        gain = equaliser(chain, frequency_hz, fine, reference_hz)
        wave = scipy.fft.irfft(scipy.fft.rfft(wave, size) * gain, size)[: wave.size]
    return wave.astype(np.float32)
