"""One decision a pulse."""

from dataclasses import replace

import numpy as np
import pytest
from blobs import CHAINS, blobs

from pdclass.model.decision import decide, outside, with_parents
from pdclass.model.manifest import Validity
from pdclass.pulses import Chain, PulseSet, typed_table

WIDE = Validity((1e6, 1e9), (0, 1e6), (1e6, 1e9), (8, 16), (0, 90))


def test_decided_is_one_familiar_label_inside_the_limits(parts):
    """Each of set, novelty and validity alone can hold a decision back."""
    values, pulses = blobs(5, seed=7)
    decisive = replace(parts, limits=np.full(4, 0.5), validity=WIDE)
    found = decide(decisive, values, pulses)
    sure = found.probabilities.max(axis=1) >= 0.5
    np.testing.assert_array_equal(found.decided, sure & ~found.unfamiliar)
    assert found.decided.mean() > 0.5
    assert not decide(replace(decisive, limits=np.full(4, np.inf)), values, pulses).decided.any()
    assert not decide(replace(decisive, limits=np.full(4, -1.0)), values, pulses).decided.any()
    assert not decide(replace(decisive, validity=replace(WIDE, snr_db=(80, 90))), values, pulses).decided.any()
    strange = replace(decisive, novelty=replace(parts.novelty, limit=0.0))
    assert not decide(strange, values, pulses).decided.any()


@pytest.mark.parametrize(
    ("chain", "beyond"),
    [
        (Chain(100e6, adc_bits=12, band_hz=(0.1e6, 20e6)), False),
        (Chain(100e6), False),
        (Chain(40e6, adc_bits=12, band_hz=(0.1e6, 20e6)), True),
        (Chain(100e6, adc_bits=8, band_hz=(0.1e6, 20e6)), True),
        (Chain(100e6, adc_bits=12, band_hz=(0.5e6, 20e6)), True),
        (Chain(100e6, adc_bits=12, band_hz=(0.1e6, 60e6)), True),
    ],
)
def test_a_chain_beyond_a_limit_is_outside(chain, beyond):
    """Rate, corners and bits are checked where both sides know them."""
    limits = Validity((62.5e6, 250e6), (0.05e6, 0.3e6), (8e6, 40e6), (12, 16), None)
    table = typed_table({"snr_db": [20.0, np.nan], "chain": [0, 0]}, ["a", "b"])
    pulses = PulseSet(np.zeros((2, 4), np.float32), (chain,), table)
    np.testing.assert_array_equal(outside(limits, pulses), [beyond, beyond])


def test_snr_beyond_the_limit_is_outside_pulse_by_pulse():
    """The SNR limit is each pulse's own; an unknown SNR is not checked."""
    table = typed_table({"snr_db": [5.0, 20.0, 90.0, np.nan], "chain": 0}, list("abcd"))
    pulses = PulseSet(np.zeros((4, 4), np.float32), CHAINS, table)
    limits = Validity(None, None, None, None, (10, 60))
    np.testing.assert_array_equal(outside(limits, pulses), [True, False, True, False])


def test_a_possible_echo_keeps_what_is_open_for_its_parent():
    """Along a chain of doubt, through an echo, and everything where the parent is not there."""
    rows = {
        "onset_sample": [10, 20, 30, 40, 50],
        "echo_of": [None, None, None, "a", None],
        "maybe_echo_of": [None, "a", "b", None, "gone"],
    }
    table = typed_table(rows, list("abcde"))
    own = np.eye(4, dtype=bool)
    found = with_parents(table, own)
    want = [[1, 0, 0, 0], [1, 1, 0, 0], [1, 1, 1, 0], [1, 1, 1, 1]]
    np.testing.assert_array_equal(found, np.array(want, bool))
    through = typed_table({**rows, "maybe_echo_of": [None, None, None, None, "d"]}, list("abcde"))
    np.testing.assert_array_equal(with_parents(through, own)[3], [True, False, False, True])
