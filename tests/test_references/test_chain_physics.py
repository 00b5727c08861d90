"""The simulated receiving chain, and whole pulses, against published values and rules of the trade."""

import numpy as np
import pytest

from pdclass.pulses import window_samples
from pdclass.settings import shipped
from pdclass.sim.circuit import from_cable, solve_network
from pdclass.sim.draw import draw_cable, draw_far_end, draw_near_end
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.nearend import bus_node
from pdclass.sim.ranges import CableRanges, NearEndRanges
from pdclass.sim.receiver import Receiver, chain_response, quantise
from pdclass.sim.scenario import read_scenario, simulate_capture
from pdclass.sim.source import SourceCurrent, source_spectrum


def test_quantisation_of_14_bits():
    """A full-scale sine of 14 bits: 86.05 dB (W. Kester, tutorial MT-001: 6.02 N + 1.76 dB, as published)."""
    turns = 4_097 * np.arange(65_536) / 65_536
    sine = (2**13 - 0.5) * np.sin(2 * np.pi * turns + 0.1)
    error = quantise(sine, 1.0, 14) - sine
    ratio_db = 10 * np.log10(np.mean(sine**2) / np.mean(error**2))
    assert ratio_db == pytest.approx(86.05, abs=0.05)


def test_two_million_samples_a_cycle():
    """100 MS/s x 20 ms = 2,000,000 samples of 14 bits in 16-bit words (common practice, no source)."""
    ferrow = read_scenario(shipped("synthetic") / "port-ferrow.toml")
    cycle = ferrow.model_copy(update={"capture": ferrow.capture.model_copy(update={"duration_ms": 20.0})})
    capture = simulate_capture(cycle, 4, seed=1)
    assert (capture.chain.rate_hz, capture.chain.adc_bits, capture.chain.mains_hz) == (100e6, 14, 50.0)
    assert capture.counts.size == 2_000_000
    assert capture.counts.nbytes == 4_000_000
    assert np.abs(capture.counts.astype(int)).max() <= 2**13


def test_a_window_is_a_thousandth_of_a_cycle():
    """20 us at 100 MS/s = 2,000 samples = a thousandth of a 50 Hz cycle (common practice, no source)."""
    assert window_samples(100e6) == 2_000
    assert window_samples(100e6) * 1000 == 2_000_000


def _rise_s(wave, rate_hz):
    """10-90 % time of the first flank that reaches nine tenths of the peak."""
    height = np.abs(wave) / np.abs(wave).max()
    ninth = int(np.argmax(height >= 0.9))
    tenth = ninth - int(np.argmax(height[ninth::-1] < 0.1))
    return (ninth - tenth) / rate_hz


def test_far_pulses_are_slower_than_those_of_the_panel():
    """On nearly every drawn circuit a pulse from 2 km rises more slowly than one from the panel.

    Common practice without a source; that distance slows pulses follows from skin effect and screens.
    """
    s, rate_hz = laplace_grid(), 250e6
    receiver = Receiver(rate_hz, 14, 5.0, 100e3, 30e6)
    source = source_spectrum(SourceCurrent("gaussian", 5e-9, 5e-9), s) * chain_response(receiver, s)
    source = source * np.exp(-s * LEAD_S)
    slower, wider = [], []
    for seed in range(40):
        rng = np.random.default_rng(seed)
        cable, far = draw_cable(CableRanges(), rng=rng), draw_far_end("transformer", rng=rng)
        network = solve_network(cable, 3000.0, far, draw_near_end(NearEndRanges(), rng=rng))
        panel = to_samples(source * network.transfer.from_node[:, bus_node(0)], rate_hz)
        distant = to_samples(source * from_cable(network, 2000.0), rate_hz)
        slower.append(_rise_s(distant, rate_hz) / _rise_s(panel, rate_hz))
        wider.append(_centroid_hz(distant, rate_hz) / _centroid_hz(panel, rate_hz))
    assert np.mean(np.array(slower) > 1) > 0.85
    assert np.mean(np.array(wider) < 1) > 0.95
    assert np.median(slower) > 1.5


def _centroid_hz(wave, rate_hz):
    spectrum, hz = np.abs(np.fft.rfft(wave)), np.fft.rfftfreq(wave.size, 1 / rate_hz)
    return (hz * spectrum).sum() / spectrum.sum()
