"""The synthetic world against a plain way of the same: labelled pulses a second, and a cycle of two million samples.

The plain way convolves each source current with the response of its network at 250 MS/s and resamples the result.
Run with `make bench`, or alone.
"""

import measuring  # first: one thread

import time

import numpy as np
import scipy.signal

from pdclass.jobs.simulate import scenario_path
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.record import Plan, draw_timeline, plant
from pdclass.sim.scenario import capture_of, circuit_of, read_scenario
from pdclass.sim.source import source_wave

FINE_HZ = 250e6
CIRCUITS = 24
BASE = read_scenario(scenario_path("base"))


def drawn_world():
    """Seconds and labelled pulses of whole circuits: network, chain, noise and pulses."""
    planted, begun = 0, time.process_time()
    for number in range(1, CIRCUITS + 1):
        planted += len(capture_of(BASE, circuit_of(BASE, number, seed=8), number, seed=8).annotations)
    return time.process_time() - begun, planted


def planting(circuit, count):
    """Seconds to plant `count` pulses of a circuit's first source, here and the plain way."""
    timeline = draw_timeline(BASE.capture, circuit, rng=np.random.default_rng(1))
    ones = np.ones(count)
    onset = np.linspace(0.05, 0.9, count) * timeline.samples
    signal = np.zeros(timeline.samples, np.float32)
    begun = time.process_time()
    plant(signal, circuit, timeline, [(circuit.sources[0], Plan(onset, 30 * ones, ones, ones))])
    ours = time.process_time() - begun
    begun = time.process_time()
    for _ in range(count):
        plain(circuit.sources[0], timeline.rate_hz)
    return ours, time.process_time() - begun


def plain(source, rate_hz):
    """One pulse as samples: convolution in time, then resampling."""
    response = to_samples(source.response * np.exp(-laplace_grid() * LEAD_S), FINE_HZ)
    current = source_wave(source.current, np.arange(-500, response.size - 500) / FINE_HZ)
    fine = scipy.signal.fftconvolve(current, response)[: response.size] / FINE_HZ
    return scipy.signal.resample_poly(fine, int(rate_hz / 0.5e6), int(FINE_HZ / 0.5e6))


def cycle():
    """Seconds for one mains cycle of two million samples with 200 pulses."""
    ranges = BASE.capture.model_copy(update={"duration_ms": 20.0})
    chain = BASE.chain.model_copy(update={"rates_hz": (100e6,), "mains_hz": (50.0,)})
    world = BASE.model_copy(update={"capture": ranges, "chain": chain})
    spent = []
    for number in range(1, 9):
        begun = time.process_time()
        capture = capture_of(world, circuit_of(world, number, seed=8), number, seed=8, pulses=200)
        spent.append(time.process_time() - begun)
        if capture.counts.size != 2_000_000:
            raise SystemExit("the cycle has not two million samples")
    return float(np.median(spent))


def main():
    drawn_world()
    seconds, pulses = drawn_world()
    ours, peer = planting(circuit_of(BASE, 3, seed=8), 200)
    measuring.table(
        ("what", "figure", "unit"),
        [
            ("whole circuits: network, chain, noise and pulses", pulses / seconds, "labelled pulses/s"),
            ("one of them", 1e3 * seconds / CIRCUITS, "ms"),
            ("planting", peer / ours, "× the plain way"),
            ("a cycle of 2,000,000 samples with 200 pulses, which itself lasts 20 ms", 1e3 * cycle(), "ms"),
        ],
    )
    measuring.weak("The first, second and last figure have no peer: they are absolute, and as good as the machine.")


if __name__ == "__main__":
    main()
