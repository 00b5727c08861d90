"""The refined instant of an event moves with the event, and its uncertainty is that of the noise."""

import numpy as np
import pytest
import scipy.fft
from closed_form import as_capture, double_exponential

from pdclass.extract import extract
from pdclass.extract.onsets import edge_foot, onset_by_information

SPAN, LEAD, APART = 1200, 200, 20_000


def band_limited(rise_s, fall_s):
    """Spectrum of a double exponential sampled at 100 MS/s behind an anti-alias filter of 30 MHz."""
    fine = np.zeros(SPAN * 16)
    wave = double_exponential(rise_s, fall_s, rate_hz=1.6e9, span_s=8e-6)
    fine[LEAD * 16 : LEAD * 16 + wave.size] = wave
    hz = scipy.fft.rfftfreq(SPAN, 1e-8)
    return scipy.fft.rfft(fine)[: SPAN // 2 + 1] / np.sqrt(1 + (hz / 30e6) ** 8)


def refined(spectrum, snr_db, shifts, seed):
    """Error of each refined instant about their median, and what is stated for it [samples]."""
    rng = np.random.default_rng(seed)
    signal = rng.normal(0, 10, (len(shifts) + 1) * APART)
    height = np.abs(scipy.fft.irfft(spectrum, SPAN)).max()
    turn = -2j * np.pi * scipy.fft.rfftfreq(SPAN)
    for k, shift in enumerate(shifts):
        wave = scipy.fft.irfft(spectrum * np.exp(turn * shift), SPAN)
        signal[5000 + APART * k : 5000 + APART * k + SPAN] += 10 * 10 ** (snr_db / 20) / height * wave
    table = extract(as_capture(signal, dtype=np.float32)).pulses.table
    at, std = table["onset_s"].to_numpy() * 1e8, table["onset_std_ns"].to_numpy() / 10
    aims = 5000 + LEAD + APART * np.arange(len(shifts)) + shifts
    rows = [int(np.argmin(np.abs(at - aim))) for aim in aims]
    return at[rows] - aims, std[rows]


@pytest.mark.parametrize("rise_s", [5e-9, 12e-9, 30e-9])
def test_a_shift_by_a_share_of_a_sample_moves_the_instant_by_that_share(rise_s):
    """At 50 dB the instants of one pulse at ten fractional offsets follow them to 0.1 sample; at 40 dB two in three."""
    spectrum = band_limited(rise_s, 5 * rise_s)
    shifts = np.arange(10) / 10
    errors, _ = refined(spectrum, 50.0, shifts, seed=1)
    assert np.abs(errors - np.median(errors)).max() <= 0.1
    errors, _ = refined(spectrum, 40.0, shifts, seed=2)
    assert np.percentile(np.abs(errors - np.median(errors)), 68) <= 0.1


@pytest.mark.parametrize("snr_db", [15.0, 20.0, 30.0, 40.0])
@pytest.mark.parametrize("rise_s", [12e-9, 80e-9])
def test_the_stated_uncertainty_covers_the_scatter(rise_s, snr_db):
    """The scatter that holds 68 % of forty pulses is the stated uncertainty within a factor of two."""
    shifts = np.random.default_rng(3).uniform(0, 1, 40)
    errors, stated = refined(band_limited(rise_s, 4 * rise_s), snr_db, shifts, seed=4)
    scatter = np.percentile(np.abs(errors - np.median(errors)), 68)
    assert 0.5 <= scatter / np.median(stated) <= 2


def test_the_uncertainty_ends_where_the_wave_between_samples_is_unknown():
    """A fast pulse a thousand noise levels high is stated to 0.03 sample, no better, and to less than 0.05."""
    white = np.random.default_rng(9).normal(0, 1, 1000).astype(np.float32)
    white[500:600] += 1000 * np.exp(-np.arange(100) / 6).astype(np.float32)
    assert 0.03 <= edge_foot(white, 450, 495, 550)[2] < 0.05


@pytest.mark.parametrize("snr_db", [15.0, 25.0, 40.0])
def test_instants_are_not_late_at_low_signal(snr_db):
    """The median instant lies within 30 ns of the true beginning at 15 dB, within 10 ns at 40 dB."""
    shifts = np.random.default_rng(5).uniform(0, 1, 30)
    errors, _ = refined(band_limited(30e-9, 150e-9), snr_db, shifts, seed=6)
    assert abs(np.median(errors)) <= (3.0 if snr_db < 40 else 1.0)


def test_where_the_stretch_begins_changes_no_bit_of_the_instant():
    """The same samples 1,000 places later in a stretch give the same offset and uncertainty, bit for bit."""
    rng = np.random.default_rng(7)
    white = rng.normal(0, 1, 3000).astype(np.float32)
    white[500:600] += 40 * np.exp(-np.arange(100) / 15).astype(np.float32)
    sample, offset, std = edge_foot(white, 450, 495, 550)
    later = edge_foot(np.concatenate([white[:1000], white])[:3000], 1450, 1495, 1550)
    assert later == (sample + 1000, offset, std)


def test_information_parts_two_noise_levels():
    """Noise of variance 1 and then of 25 is parted where it changes, within two samples."""
    rng = np.random.default_rng(8)
    white = np.concatenate([rng.normal(0, 1, 60), rng.normal(0, 5, 30)]).astype(np.float32)
    assert abs(onset_by_information(white, 0, 90) - 60) <= 2
