"""The compiled pass flags the centres of boxes above their limits, and counts them."""

import numpy as np
import pytest

from pdclass.extract import bank


def flags_of(white, limits, before=0):
    spare = np.empty(white.size, np.float32)
    flags = np.zeros(white.size - 2 * before, np.bool_)
    bank.flag_boxes(white.astype(np.float32), spare, np.asarray(limits, np.float32), before, flags)
    return flags


def plain_flags(white, limits):
    flags = np.zeros(white.size, np.bool_)
    for scale, limit in enumerate(limits):
        width = 1 << scale
        sums = np.convolve(white, np.ones(width), "valid")
        flags[(width >> 1) + np.flatnonzero(np.abs(sums) > limit)] = True
    return flags


def test_flags_are_those_of_sums_by_convolution():
    """The centre i + w/2 of every box of w samples from i on whose sum leaves its limit is flagged, no other."""
    white = np.random.default_rng(1).normal(0, 1, 1000)
    limits = [2.5 * 2 ** (scale / 2) for scale in range(8)]
    assert np.array_equal(flags_of(white, limits), plain_flags(white, limits))
    assert np.array_equal(flags_of(white, limits, before=64), plain_flags(white, limits)[64:-64])


def test_runs_are_joined_across_words_and_blocks():
    """A run that goes on in the next block is one run."""
    flags = np.zeros(64, np.bool_)
    flags[[5, 6, 62, 63]] = True
    runs = np.zeros((100, 2), np.int64)
    count = bank._add_runs(flags, 1000, runs, 0)
    flags[:] = False
    flags[[0, 20]] = True
    count = bank._add_runs(flags, 1064, runs, count)
    assert runs[:count].tolist() == [[1005, 1007], [1062, 1065], [1084, 1085]]


@pytest.mark.parametrize(("most", "cut"), [(0.3, True), (0.0, False)])
def test_boxes_with_a_sample_beyond_the_gate_are_not_counted(most, cut):
    """What stands out is left out of both counts, unless more of it stands out than may be cut."""
    white = np.full(1000, 0.5, np.float32)
    white[500] = 100
    above, looked = np.zeros(3, np.int64), np.zeros(3, np.int64)
    bank.count_above(white, (10.0, most), np.array([0.4, 1.5, 1.5], np.float32), above, looked)
    assert looked.tolist() == ([952, 950, 946] if cut else [1000, 999, 997])
    assert above.tolist() == ([952, 0, 946] if cut else [1000, 2, 997])


def test_the_dither_is_even_and_repeats_by_its_period():
    """Its numbers are spread evenly over a count, repeat after the period, and floats get none."""
    table = bank.dither_table(np.zeros(1, np.int16))
    period = table[: bank.DITHER_PERIOD]
    assert np.histogram(period, 8, (-0.5, 0.5))[0] == pytest.approx(bank.DITHER_PERIOD / 8, rel=0.15)
    assert np.array_equal(table[bank.DITHER_PERIOD :][:1000], period[:1000])
    assert not bank.dither_table(np.zeros(1, np.float32)).any()


def test_a_carrier_is_predicted_back_over_the_beginning():
    """With the filter that annuls a sine the samples before its beginning are the sine's own."""
    step = 2 * np.pi * 0.05
    taps = bank.padded(np.array([1, -2 * np.cos(step), 1], np.float32))
    wave = np.sin(step * np.arange(-20, 100))
    assert bank.continued_back(wave[20:].astype(np.float32)[: taps.size - 1], taps, 20) == pytest.approx(
        wave[:20], abs=1e-3
    )
