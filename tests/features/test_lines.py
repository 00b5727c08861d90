"""Lines are cut out of spectra, and nothing else is."""

import numpy as np
import pytest

from pdclass.features.lines import cut_lines


def spectra_of(*waves):
    return np.fft.rfft(np.array(waves), 2048, axis=1).astype(np.complex64)


def pulse():
    t = np.arange(1520) / 100e6
    return np.exp(-t / 60e-9) - np.exp(-t / 10e-9)


def test_a_line_is_cut_to_four_times_its_lower_side():
    """In an even spectrum of 1 a bin of 50 becomes 4, with its phase, wherever it stands."""
    for place in (0, 3, 11, 12, 500, 1012, 1024):
        spectrum = np.ones((1, 1025), np.complex64)
        spectrum[0, place] = 50j
        cut_lines(spectrum, np.zeros_like(spectrum))
        assert spectrum[0, place] == pytest.approx(4j, rel=1e-5)
        assert np.delete(spectrum[0], place) == pytest.approx(1)


def test_a_pulse_with_a_copy_stays_as_it_is():
    """Neither the slope of a pulse's spectrum nor the ripple of a copy of three quarters is a line."""
    both = spectra_of(pulse(), pulse() + 0.75 * np.roll(pulse(), 400))
    kept = both.copy()
    cut_lines(both, np.zeros_like(both))
    np.testing.assert_allclose(both, kept, rtol=1e-6)


def test_a_ringing_is_no_line():
    """A narrow spectrum that is the pulse's own stays, and would be cut if it were not."""
    t = np.arange(1520) / 100e6
    ringing = spectra_of(np.exp(-t / 5e-6) * np.sin(2 * np.pi * 3e6 * t))
    kept, cut = ringing.copy(), ringing.copy()
    cut_lines(kept, ringing)
    cut_lines(cut, np.zeros_like(cut))
    assert np.array_equal(kept, ringing)
    assert np.abs(cut).max() < 0.8 * np.abs(ringing).max()


def test_a_carrier_loses_most_of_its_power():
    """A carrier of a tenth of the pulse, which fades, keeps less than three tenths of its power beside the pulse."""
    t = np.arange(1520) / 100e6
    carrier = 0.1 * np.cos(2 * np.pi * 1.3e6 * t) * (1 - 0.5 * t / t[-1])
    alone, carried = spectra_of(pulse(), pulse() + carrier)
    cut = carried[None].copy()
    cut_lines(cut, spectra_of(pulse()[:300]))
    assert np.sum(np.abs(cut[0] - alone) ** 2) < 0.3 * np.sum(np.abs(carried - alone) ** 2)


def test_each_row_is_cut_alone():
    """A spectrum is cut to the same bits whatever others are beside it, and an empty one stays empty."""
    rng = np.random.default_rng(2)
    many = (rng.normal(size=(7, 1025)) ** 3 + 1j * rng.normal(size=(7, 1025)) ** 3).astype(np.complex64)
    many[3] = 0
    alone = many.copy()
    cut_lines(many, np.zeros_like(many))
    for row in range(7):
        one = alone[row : row + 1]
        cut_lines(one, np.zeros_like(one))
        assert np.array_equal(one[0], many[row])
    assert not many[3].any()
