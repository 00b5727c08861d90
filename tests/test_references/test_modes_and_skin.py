"""Modes against damped sines, tilt and dispersion against the line with skin effect only.

Damped sine A exp(-t/tau) sin(2 pi f t): Q = pi f tau. The line exp(-K sqrt(s)): impulse response K/(2 sqrt(pi) t^1.5)
exp(-K^2/(4 t)), level -K sqrt(pi f) Np, group delay K/(2 sqrt(4 pi f)): R. L. Wigington, N. S. Nahman, Proc. IRE 45,
166-174, 1957 (from memory). Matrix pencil: Y. Hua, T. K. Sarkar, IEEE Trans. ASSP 38(5), 814-824, 1990 (from memory).
"""

import numpy as np
import pytest
import scipy.fft
from one_pulse import features_of, single

from pdclass.features.modes import oscillations

T_S = np.arange(256) / 100e6


@pytest.mark.parametrize(("frequency_hz", "tau_s"), [(10e6, 1e-6), (3e6, 0.4e-6), (0.8e6, 2e-6), (22e6, 0.15e-6)])
def test_the_quality_of_a_damped_sine(frequency_hz, tau_s):
    """Without noise frequency and Q = pi f tau come back to a millionth, and all of the energy."""
    first = oscillations(np.exp(-T_S / tau_s) * np.sin(2 * np.pi * frequency_hz * T_S + 0.4), 100e6)[0]
    assert first.frequency_hz == pytest.approx(frequency_hz, rel=1e-6)
    assert first.quality == pytest.approx(np.pi * frequency_hz * tau_s, rel=1e-6)
    assert first.share == pytest.approx(1.0, rel=1e-6)


def test_three_damped_sines_are_parted():
    """Three modes, two of them 0.8 MHz apart, come back to a thousandth."""
    known = [(2e6, 1e-6, 1.0), (2.8e6, 0.7e-6, 0.6), (12e6, 0.5e-6, 0.3)]
    wave = sum(height * np.exp(-T_S / tau) * np.cos(2 * np.pi * f * T_S) for f, tau, height in known)
    found = sorted(mode for mode in oscillations(wave, 100e6) if mode.share > 1e-3)
    assert [mode.frequency_hz for mode in found] == pytest.approx([f for f, _, _ in known], rel=1e-3)
    assert [mode.quality for mode in found] == pytest.approx([np.pi * f * tau for f, tau, _ in known], rel=1e-3)


def skin_line(k):
    """Impulse response of exp(-K sqrt(s)) at 100 MS/s, nothing above 48 MHz."""
    t = (np.arange(60_000) + 0.5) / 3e9
    spectrum = scipy.fft.rfft(k / (2 * np.sqrt(np.pi) * t**1.5) * np.exp(-(k**2) / (4 * t)))
    spectrum[scipy.fft.rfftfreq(t.size, 1 / 3e9) > 48e6] = 0
    wave = scipy.fft.irfft(spectrum)[::30]
    # a little later, so that nothing lies before the onset
    return np.roll(wave / wave.max(), 15)[:1400]


@pytest.mark.parametrize("k", [1e-4, 2e-4, 4e-4, 6e-4])
def test_the_line_with_skin_effect_only(k):
    """The tilt against the root of f is -8.686 K sqrt(pi) per sqrt(Hz), none is left against f, and 1 MHz is late.

    It comes K/(2 sqrt(4 pi)) (1/sqrt(1 MHz) - 1/sqrt(10 MHz)) after 10 MHz.
    """
    found = features_of(single(skin_line(k), noise_v=1e-5, duration_us=12.0, band_hz=None))
    root_db = -20 * np.log10(np.e) * k * np.sqrt(np.pi) * 1e3
    later_ns = k / (2 * np.sqrt(4 * np.pi)) * (1e-3 - 10**-3.5) * 1e9
    assert found["first_root_tilt_db"] == pytest.approx(root_db, rel=0.05, abs=0.1)
    assert found["first_straight_tilt_db"] == pytest.approx(0.0, abs=0.06)
    assert found["first_dispersion_ns"] == pytest.approx(later_ns, rel=0.12, abs=1.0)


def test_four_times_the_length_is_four_times_the_tilt():
    """K goes with the length: so do tilt and dispersion."""
    near, far = (features_of(single(skin_line(k), noise_v=1e-5, duration_us=12.0, band_hz=None)) for k in (1e-4, 4e-4))
    assert far["first_root_tilt_db"] == pytest.approx(4 * near["first_root_tilt_db"], rel=0.06)
    assert far["first_dispersion_ns"] == pytest.approx(4 * near["first_dispersion_ns"], rel=0.1)
