"""Pulse metrics against closed forms.

Gaussian, RC and double-exponential figures follow from the formulas; edge conventions after IEEE Std 181-2011 (10, 50
and 90 % of the peak); equivalent length and bandwidth after A. Contin et al., IEEE TDEI 9(3), 335-348, 2002 (from
memory).
"""

import numpy as np
import pytest
import scipy.fft
import scipy.special

from pdclass.features.edges import outer_crossings
from pdclass.features.spectrum import centroid_and_spread
from pdclass.features.spread import equivalent_length, equivalent_width

RATE_HZ = 100e6
T_S = np.arange(2000) / RATE_HZ


def gaussian(sigma_s, centre_s=10e-6):
    return np.exp(-0.5 * ((T_S - centre_s) / sigma_s) ** 2)


def edge_places(wave, peak):
    """Crossings in samples by name, without a running mean."""
    rise, fall = np.empty(4), np.empty(4)
    place, height = outer_crossings(wave.astype(np.float32), peak, 0, rise, fall)
    found = {"peak": place, "height": height}
    for percent, before, after in zip((90, 50, 25, 10), rise, fall, strict=True):
        found |= {f"rise_{percent}": before, f"fall_{percent}": after}
    return found


def equivalent_spread(wave):
    """Equivalent length [s] and bandwidth [Hz] of a wave without noise."""
    one = wave[None].astype(np.float32)
    length = equivalent_length(one, np.array([wave.size]), np.zeros(1))[0]
    size = scipy.fft.next_fast_len(2 * wave.size)
    power = (np.abs(scipy.fft.rfft(wave, size)) ** 2).astype(np.float32)[None]
    power[:, 0] /= 2  # of the two sides all other bins count twice
    hz = scipy.fft.rfftfreq(size, 1 / RATE_HZ)
    width = equivalent_width(power, np.zeros_like(power), hz, np.array([wave.size]))[0]
    return length / RATE_HZ, width


def widths_ns(wave):
    at = edge_places(wave, int(np.argmax(wave)))
    step = 1e9 / RATE_HZ
    return {
        "rise": (at["rise_90"] - at["rise_10"]) * step,
        "width": (at["fall_50"] - at["rise_50"]) * step,
        "fall": (at["fall_10"] - at["fall_90"]) * step,
        "peak": at["peak"] * step,
        "height": at["height"],
    }


@pytest.mark.parametrize("sigma_ns", [50, 200])
def test_gaussian_pulse_edges_and_width(sigma_ns):
    """Width at half height 2.354820 sigma within 0.1 %, edge of the pulse 1.686922 sigma within 1 %."""
    found = widths_ns(gaussian(sigma_ns * 1e-9))
    assert found["width"] == pytest.approx(2.354820 * sigma_ns, rel=1e-3)
    assert found["rise"] == pytest.approx(1.686922 * sigma_ns, rel=1e-2)
    assert found["fall"] == pytest.approx(1.686922 * sigma_ns, rel=1e-2)


def test_gaussian_centroid_one_sided_and_power_weighted():
    """0.0897936/sigma: 1.796 MHz at 50 ns, within 0.02 MHz."""
    power = np.abs(scipy.fft.rfft(gaussian(50e-9))) ** 2
    centre, _ = centroid_and_spread(scipy.fft.rfftfreq(2000, 1 / RATE_HZ) / 1e6, power)
    assert centre == pytest.approx(0.0897936 / 0.05, abs=0.02)


@pytest.mark.parametrize("sigma_ns", [20, 50, 200])
def test_gaussian_reaches_the_bound_of_length_times_bandwidth(sigma_ns):
    """T W = 1/(4 pi) = 0.0795775 for a Gaussian, T = sigma/sqrt(2), within 0.5 %."""
    length, width = equivalent_spread(gaussian(sigma_ns * 1e-9))
    assert length * width == pytest.approx(0.0795775, rel=5e-3)
    assert length == pytest.approx(sigma_ns * 1e-9 / np.sqrt(2), rel=5e-3)


def test_no_wave_beats_the_bound():
    """T W >= 1/(4 pi) for waves of any other shape."""
    rng = np.random.default_rng(0)
    for wave in (rng.normal(size=2000), np.exp(-T_S / 1e-6), np.sin(2e7 * T_S) * np.exp(-T_S / 2e-6)):
        length, width = equivalent_spread(wave)
        assert length * width >= 1 / (4 * np.pi)


def test_double_exponential_of_1000_and_100_ns():
    """Peak at 255.843 ns, 0.6968373 high; rise 134.715, width 1003.54, fall 2214.99 ns within 0.1 %; area 900 ns."""
    wave = np.exp(-T_S / 1000e-9) - np.exp(-T_S / 100e-9)
    found = widths_ns(wave)
    assert found["rise"] == pytest.approx(134.715, rel=1e-3)
    assert found["width"] == pytest.approx(1003.54, rel=1e-3)
    assert found["fall"] == pytest.approx(2214.99, rel=1e-3)
    assert found["peak"] == pytest.approx(255.843, abs=1.0)
    assert found["height"] == pytest.approx(0.6968373, rel=1e-4)
    assert wave.sum() / RATE_HZ == pytest.approx(900e-9, rel=1e-3)


@pytest.mark.parametrize(
    ("step", "time_ns"),
    [
        (lambda t: 1 - np.exp(-np.maximum(t, 0) / 500e-9), 2.197225 * 500),
        (lambda t: 0.5 * (1 + scipy.special.erf(t / (200e-9 * np.sqrt(2)))), 2.563103 * 200),
    ],
    ids=["RC", "Gaussian-filtered"],
)
def test_step_edges(step, time_ns):
    """An RC step takes ln 9 RC, a Gaussian-filtered one 2.563103 sigma from 10 to 90 %, within 0.5 %."""
    wave = step(T_S - 5e-6)
    at = edge_places(wave / wave[-1], wave.size - 1)
    assert (at["rise_90"] - at["rise_10"]) * 10 == pytest.approx(time_ns, rel=5e-3)


def test_rc_edge_times_bandwidth():
    """10-90 % time times the -3 dB frequency of an RC low-pass is ln 9/(2 pi) = 0.349699 (measured, not set)."""
    tau = 300e-9
    wave = 1 - np.exp(-np.maximum(T_S - 2e-6, 0) / tau)
    at = edge_places(wave / wave[-1], wave.size - 1)
    impulse = np.exp(-T_S / tau)
    response = np.abs(scipy.fft.rfft(impulse, 1 << 18))
    corner = np.interp(-np.sqrt(0.5), -response / response[0], scipy.fft.rfftfreq(1 << 18, 1 / RATE_HZ))
    assert (at["rise_90"] - at["rise_10"]) / RATE_HZ * corner == pytest.approx(0.349699, rel=0.02)
