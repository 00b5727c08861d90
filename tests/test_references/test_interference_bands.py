"""Interference against recommendations, band plans and rules of the trade."""

from collections import Counter

import numpy as np
import pytest
import scipy.signal

from pdclass.sim.disturbers import Repetition, commutation_times, switching_times
from pdclass.sim.drawn_background import BackgroundRanges, draw_background
from pdclass.sim.drawn_disturbance import DisturberRanges, draw_disturber
from pdclass.sim.interference import communication_wave, man_made_noise_db, medium_wave_hz, noise_field_db
from pdclass.sim.source import SourceCurrent, source_spectrum

BOLTZMANN = 1.380649e-23
LIGHT_M_PER_S = 299_792_458.0
#: 10-90 % time of a Gaussian flank over its deviation.
GAUSSIAN_EDGE = 2.563


@pytest.mark.parametrize(
    ("environment", "values_db"),
    [
        ("city", (91.28, 76.8, 63.58, 49.1, 35.88)),
        ("residential", (86.98, 72.5, 59.28, 44.8, 31.58)),
        ("rural", (81.68, 67.2, 53.98, 39.5, 26.28)),
        ("quiet-rural", (68.55, 53.6, 39.95, 25.0, 11.35)),
    ],
)
def test_man_made_noise(environment, values_db):
    """F_am = c - d log10 f at 0.3, 1, 3, 10 and 30 MHz (ITU-R P.372; c and d as in the reference code of its group)."""
    hz = np.array([0.3e6, 1e6, 3e6, 10e6, 30e6])
    assert man_made_noise_db(environment, hz) == pytest.approx(np.array(values_db), abs=0.006)


def test_field_of_the_noise():
    """E_n = F_a + 20 log10 f + 10 log10 b - 95.5 dB(uV/m) for a short vertical monopole (ITU-R P.372, from memory).

    The constant follows from the monopole: k T0 b is what a rod of height h, open-circuit voltage E h/2, radiation
    resistance 40 pi^2 (h/wavelength)^2, can deliver from the field (textbook formulas).
    """
    hz = np.array([0.5e6, 1e6, 20e6])
    available_w = BOLTZMANN * 290 * 10 ** (man_made_noise_db("city", hz) / 10) * 9e3
    field_v_per_m = np.sqrt(available_w * 640 * np.pi**2) * hz / LIGHT_M_PER_S
    assert noise_field_db("city", hz, 9e3) == pytest.approx(20 * np.log10(field_v_per_m * 1e6), abs=0.05)


def test_medium_wave_channels():
    """120 channels, 531 to 1602 kHz every 9 kHz; in the Americas 118, 530 to 1700 kHz every 10 kHz (as published)."""
    nine = [medium_wave_hz(channel) for channel in range(120)]
    ten = [medium_wave_hz(channel, 10e3) for channel in range(118)]
    assert (nine[0], nine[-1], (nine[-1] - nine[0]) / 9e3 + 1) == (531e3, 1602e3, 120)
    assert (ten[0], ten[-1]) == (530e3, 1700e3)
    assert all(hz % 9e3 == 0 for hz in nine)


def test_long_and_short_wave():
    """Long wave 148.5-283.5 kHz, short-wave bands between 3.9 and 26.1 MHz on 5 kHz, depth 30-50 % (from memory)."""
    ranges = BackgroundRanges(
        carriers=(6, 6), carrier_bands={"long": 0.5, "short": 0.5}, medium_wave_raster={"9 kHz": 1.0}
    )
    carriers = [one for seed in range(60) for one in draw_background(ranges, rng=np.random.default_rng(seed)).carriers]
    long = {one.hz for one in carriers if one.hz < 1e6}
    short = {one.hz for one in carriers if one.hz > 1e6}
    assert 148.5e3 < min(long) < max(long) < 283.5e3
    assert len(long) == 15
    assert 3.9e6 <= min(short) < max(short) <= 26.1e6
    assert 0.3 < np.mean([one.depth for one in carriers]) < 0.5


def links(kind, count=20):
    ranges = BackgroundRanges(communication={kind: 1.0})
    drawn = (draw_background(ranges, rng=np.random.default_rng(seed)).communication[0] for seed in range(count))
    return list(drawn)


@pytest.mark.parametrize(
    ("kind", "band_hz"),
    [("ofdm-35-91", (35e3, 91e3)), ("ofdm-98-122", (98e3, 122e3)), ("ofdm-154-488", (154e3, 488e3))],
)
def test_bands_of_carrier_communication(kind, band_hz):
    """Narrow-band OFDM on mains lines: 35-91, 98-122 and 154-488 kHz (band plans, as published).

    The tones lie in the band, and so does all but 3 % of a frame's power.
    """
    link = links(kind)[0]
    assert band_hz[0] <= min(link.tones_hz) < max(link.tones_hz) <= band_hz[1]
    wave = communication_wave(link, 0, 8_000_000, 100e6)[::20].astype(float)
    hz, density = scipy.signal.welch(wave, 5e6, nperseg=16384)
    inside = (hz > band_hz[0] - 2e3) & (hz < band_hz[1] + 2e3)
    assert density[inside].sum() / density.sum() > 0.97


def test_frequency_shift_keying_keeps_to_its_bands():
    """Signalling on low-voltage lines lies between 3 and 148.5 kHz (EN 50065-1, scope, as published)."""
    tones = [hz for link in links("fsk", 200) for hz in link.tones_hz]
    assert 3e3 < min(tones) < max(tones) < 148.5e3


@pytest.mark.parametrize("commutations", [6, 12])
def test_bridges_commutate_six_or_twelve_times_a_cycle(commutations):
    """Six or twelve commutations a mains cycle, evenly spaced (common practice, no source)."""
    repetition = Repetition("mains-locked", commutations=commutations, firing_deg=20.0)
    times = commutation_times(repetition, 1.0, 10.0, 360 * 50.0, rng=np.random.default_rng(1))
    assert times.size == commutations * 50
    assert np.diff(times) * 360 * 50.0 == pytest.approx(360 / commutations)


def test_a_converter_keeps_its_switching_frequency():
    """Pulses repeat at the switching frequency: the edges of one kind have its line (common practice, no source)."""
    times = switching_times(0.1, 8e3, 0.005, rng=np.random.default_rng(2))
    turns = np.exp(2j * np.pi * np.array([[8e3], [7.3e3]]) * times[::2])
    line, beside = np.abs(turns.mean(axis=1))
    assert times.size / 0.1 == pytest.approx(2 * 8e3, rel=0.01)
    assert line > 0.9
    assert beside < 0.1


def test_corner_of_an_edge():
    """A trapezoid falls by 20 dB a decade above 1/(pi t_on), by 40 above 1/(pi t_r): 15.9 MHz for 20 ns (tutorial).

    What couples is its slope, flat up to that corner: an edge of 20 ns and a Gaussian one of the same deviation, as
    the simulator has, agree there within 1 %.
    """
    rise_s = 20e-9
    corner_hz = 1 / (np.pi * rise_s)
    assert corner_hz == pytest.approx(15.9e6, rel=2e-3)
    deviation = rise_s / np.sqrt(12)
    gaussian = np.abs(
        source_spectrum(SourceCurrent("gaussian", deviation, deviation), np.array([2j * np.pi * corner_hz]))
    )
    assert gaussian[0] == pytest.approx(np.sinc(corner_hz * rise_s), rel=0.01)


def test_silicon_carbide_switches_within_50_ns():
    """Silicon carbide switches in 50 ns or less (tutorial on emissions of power electronics, as published)."""
    ranges = DisturberRanges.model_validate({"converter": {"carbide_share": 1.0}})
    edges = [
        draw_disturber(ranges, family="converter", rng=np.random.default_rng(s)).current.rise_s for s in range(200)
    ]
    assert GAUSSIAN_EDGE * max(edges) <= 50e-9
    assert GAUSSIAN_EDGE * min(edges) < 15e-9


def test_oscillatory_transients():
    """Above 500 kHz microseconds, 5-500 kHz tens of them (IEEE Std 1159-2019, 4.4.1.2, as quoted in code comments)."""
    drawn = [
        draw_disturber(DisturberRanges(), family="switching-operation", rng=np.random.default_rng(s))
        for s in range(300)
    ]
    lasts = {fast: [] for fast in (True, False)}
    for one in drawn:
        lasts[one.current.ring_hz > 500e3].append(3 * one.current.fall_s)
    assert 1e-6 < np.median(lasts[True]) < 10e-6
    assert 10e-6 < np.median(lasts[False]) < 100e-6


def test_every_kind_of_interference_is_there():
    """Noise, discrete spectral, stochastic and periodic pulsed interference (review, Energies 14(23), 7967, 2021)."""
    drawn = [draw_disturber(DisturberRanges(), rng=np.random.default_rng(seed)) for seed in range(400)]
    kinds = Counter(one.repetition.kind for one in drawn)
    families = {one.family for one in drawn}
    assert {"sferic", "switching-operation", "line-corona"} <= families
    assert {"converter", "thyristor", "switch-mode"} <= families
    assert min(kinds[kind] for kind in ("random", "switching", "mains-locked", "bursts")) > 10
    background = draw_background(BackgroundRanges(carriers=(1, 6)), rng=np.random.default_rng(0))
    assert background.carriers
