"""Whole simulated pulses and captures against rules of the trade."""

import numpy as np
import pytest

from pdclass.pulses import window_samples
from pdclass.settings import shipped
from pdclass.sim.drawn_cable import CableRanges, draw_neighbour, draw_route
from pdclass.sim.drawn_near_end import NearEndRanges, draw_near_end
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.ranges import read_scenario
from pdclass.sim.receiver import AntiAlias, Receiver, SensorLead, chain_response, transformer_of
from pdclass.sim.scenario import simulate_capture
from pdclass.sim.source import SourceCurrent, source_spectrum
from pdclass.sim.station import from_bus, from_cable, solve_station

RATE_HZ = 250e6
WIDE = transformer_of(5.0, (100e3, 30e6), turns=5, quality=0.7, winding_ohm=0.5, input_ohm=50.0)
RECEIVER = Receiver(RATE_HZ, 14, 50.0, WIDE, SensorLead(5.0, 50.0, 0.0, 50.0, 0.0), AntiAlias("butterworth", 4, 48e6))


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


@pytest.fixture(scope="module")
def pulses():
    """The same charge at the panel's busbar and 2 km away, on forty drawn circuits of 3 km, (circuits, 2, samples)."""
    s = laplace_grid()
    source = source_spectrum(SourceCurrent("gaussian", 5e-9, 5e-9), s) * chain_response(RECEIVER, s)
    source = source * np.exp(-s * LEAD_S)
    waves = []
    for seed in range(40):
        rng = np.random.default_rng(seed)
        drawn = draw_route(CableRanges(), 3000.0, "transformer", rng=rng, s=s)
        near = draw_near_end(NearEndRanges(), rng=rng)
        neighbours = [draw_neighbour(CableRanges(), drawn.lines, rng=rng, s=s) for _ in range(near.feeders)]
        station = solve_station(near, drawn.route, neighbours)
        both = (from_bus(station, near.own), from_cable(station, 2000.0))
        waves.append([to_samples(source * transfer, RATE_HZ) for transfer in both])
    return np.array(waves)


def rise_s(wave):
    """10-90 % time of the first flank that reaches nine tenths of the peak."""
    height = np.abs(wave) / np.abs(wave).max()
    ninth = int(np.argmax(height >= 0.9))
    tenth = ninth - int(np.argmax(height[ninth::-1] < 0.1))
    return (ninth - tenth) / RATE_HZ


def centroid_hz(wave):
    spectrum, hz = np.abs(np.fft.rfft(wave)), np.fft.rfftfreq(wave.size, 1 / RATE_HZ)
    return (hz * spectrum).sum() / spectrum.sum()


def test_far_pulses_are_slower_than_those_of_the_panel(pulses):
    """On nearly every drawn circuit a pulse from 2 km rises more slowly than one from the panel.

    Common practice without a source; that distance slows pulses follows from skin effect and screens.
    """
    slower = np.array([rise_s(distant) / rise_s(panel) for panel, distant in pulses])
    wider = np.array([centroid_hz(distant) / centroid_hz(panel) for panel, distant in pulses])
    assert (slower > 1).mean() > 0.85
    assert (wider < 1).mean() > 0.95
    assert np.median(slower) > 1.5


def test_far_pulses_are_smaller_and_late(pulses):
    """A pulse from 2 km comes 10 to 15 us later than one from the panel and is smaller (common practice, no source)."""
    panel, distant = np.abs(pulses[:, 0]), np.abs(pulses[:, 1])
    arrival = [np.argmax(wave > 0.5 * wave.max(axis=1)[:, None], axis=1) / RATE_HZ for wave in (panel, distant)]
    travel_s = arrival[1] - arrival[0]
    assert 10e-6 < np.median(travel_s) < 15e-6
    assert (distant.max(axis=1) < panel.max(axis=1)).mean() > 0.85
