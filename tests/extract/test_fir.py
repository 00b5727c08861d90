"""The filter of 64 taps gives every output the same bits wherever it stands."""

import numpy as np
import pytest

from pdclass.extract.fir import TAPS, TILE, _one_by_one, filter_into


def outputs(signal, taps, first, count):
    out = np.empty(count, np.float32)
    filter_into(signal[first : first + count + TAPS - 1].copy(), taps, out)
    return out


def test_it_is_a_convolution():
    """The outputs are those of a convolution in double precision, within what float32 rounds."""
    rng = np.random.default_rng(1)
    signal, taps = rng.normal(0, 1, 5000).astype(np.float32), rng.normal(0, 1, TAPS).astype(np.float32)
    expected = np.convolve(signal.astype(float), taps.astype(float), "valid")
    assert outputs(signal, taps, 0, expected.size) == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize("count", [1, 5, TILE - 1, TILE, TILE + 1, 1000])
def test_the_bits_do_not_depend_on_where_a_stretch_begins(count):
    """Stretches of every length, cut anywhere, give the bits of the plain loop."""
    rng = np.random.default_rng(2)
    signal, taps = rng.normal(0, 100, 3000).astype(np.float32), rng.normal(0, 1, TAPS).astype(np.float32)
    plain = np.empty(signal.size - TAPS + 1, np.float32)
    _one_by_one(signal, taps, plain)
    for first in (0, 1, 17, 333):
        assert np.array_equal(outputs(signal, taps, first, count), plain[first : first + count])
