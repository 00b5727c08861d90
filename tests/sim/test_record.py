"""What is planted is what the annotations say."""

import numpy as np
import pytest

from pdclass.sim.circuit import draw_circuit
from pdclass.sim.interference import carriers_wave
from pdclass.sim.ranges import Scenario
from pdclass.sim.record import Plan, draw_plan, draw_signal, draw_timeline, plant

WORLD = Scenario(name="world", circuits=8)
GAPPED = WORLD.model_copy(update={"capture": WORLD.capture.model_copy(update={"segments": 3})})


def _circuit(index):
    return draw_circuit(WORLD, index, rng=np.random.default_rng([11, index]))


def _one(source, timeline, onset, snr_db=40.0):
    single = np.ones(1)
    return source, Plan(single * onset, single * snr_db, single, single)


@pytest.mark.parametrize("index", range(6))
def test_noise_is_the_stated_one(index):
    """MAD/0.6745 of the background, carriers included, is the noise of the circuit."""
    circuit = _circuit(index)
    timeline = draw_timeline(WORLD.capture, circuit, rng=np.random.default_rng(1))
    signal = draw_signal(circuit, timeline, rng=np.random.default_rng(2))
    assert signal.size == round(3e-3 * circuit.receiver.rate_hz)
    measured = np.median(np.abs(signal - np.median(signal))) / 0.6745
    assert measured == pytest.approx(circuit.noise_v, rel=0.03)


@pytest.mark.parametrize("index", range(6))
def test_height_onset_and_silence_before(index):
    """The peak is the planted height, the onset the planted one within 0.2 us, and nothing is heard before."""
    circuit = _circuit(index)
    timeline = draw_timeline(WORLD.capture, circuit, rng=np.random.default_rng(1))
    onset = 0.4 * timeline.samples + 0.37
    for source in circuit.sources:
        signal = np.zeros(timeline.samples, np.float32)
        (said,) = plant(signal, circuit, timeline, [_one(source, timeline, onset)])
        assert np.abs(signal).max() == pytest.approx(circuit.noise_v * 100, rel=1e-5)
        assert abs(said.onset_sample - onset) < 0.2e-6 * timeline.rate_hz
        assert np.abs(signal[: said.onset_sample]).max() <= 0.021 * np.abs(signal).max()
        assert 1 <= said.sample_count <= 20e-6 * timeline.rate_hz
        assert said.label == source.label


def test_charge_is_that_of_the_source():
    """Twice the height is twice the charge; interference has none."""
    circuit = _circuit(0)
    timeline = draw_timeline(WORLD.capture, circuit, rng=np.random.default_rng(1))
    for source in circuit.sources:
        charges = []
        for snr_db in (20.0, 40.0):
            signal = np.zeros(timeline.samples, np.float32)
            (said,) = plant(signal, circuit, timeline, [_one(source, timeline, 1e5, snr_db)])
            charges.append(said.charge_pc)
        if source.label == "interference":
            assert charges == [None, None]
        else:
            assert charges[1] == pytest.approx(10 * charges[0], rel=1e-9)
            assert charges[0] > 0


def test_no_pulse_crosses_a_gap():
    """A pulse at the end of a segment leaves the next one silent."""
    circuit = _circuit(1)
    timeline = draw_timeline(GAPPED.capture, circuit, rng=np.random.default_rng(1))
    first, end = timeline.bounds()[1]
    signal = np.zeros(timeline.samples, np.float32)
    (said,) = plant(signal, circuit, timeline, [_one(circuit.sources[0], timeline, end - 200.0)])
    assert np.abs(signal[first:end]).max() > 0
    assert not signal[:first].any()
    assert not signal[end:].any()
    assert said.onset_sample + said.sample_count <= end


def test_plans_reach_every_segment_and_stay_inside():
    """Pulses spread over all segments, none outside the record."""
    circuit = _circuit(2)
    timeline = draw_timeline(GAPPED.capture, circuit, rng=np.random.default_rng(1))
    for source in circuit.sources:
        plan = draw_plan(source, 200, timeline, rng=np.random.default_rng(3))
        assert plan.onset.min() >= 0
        assert plan.onset.max() < timeline.samples
        if source.repetition is None:
            assert plan.onset.size == 200
            assert set(timeline.home(plan.onset)) == {0, 1, 2}
        assert (plan.snr_db >= 8).all()
        assert (plan.snr_db <= 58).all()


def test_converter_has_no_more_pulses_than_edges():
    """A converter that switches at 5 kHz has some thirty edges in 3 ms, however many are asked for."""
    circuits = [_circuit(index) for index in range(24)]
    converters = [s for circuit in circuits for s in circuit.sources if s.family == "converter"]
    timeline = draw_timeline(WORLD.capture, circuits[0], rng=np.random.default_rng(1))
    for source in converters:
        plan = draw_plan(source, 10_000, timeline, rng=np.random.default_rng(3))
        assert abs(plan.onset.size - 2 * source.repetition.hz * 3e-3) <= 4
    assert converters


def test_carriers_do_not_begin_with_the_visit():
    """Two visits to one circuit hear the same carriers at other instants: their background is not the same."""
    circuit = next(c for c in map(_circuit, range(24)) if len(c.reception.carriers) > 2)
    visits = [draw_timeline(WORLD.capture, circuit, rng=np.random.default_rng(seed)) for seed in (1, 2)]
    assert visits[0].clock != visits[1].clock
    one, two = (
        carriers_wave(circuit.reception.carriers, visit.clock, 4000, circuit.receiver.rate_hz) for visit in visits
    )
    assert abs(np.corrcoef(one, two)[0, 1]) < 0.9


def test_a_point_in_air_has_one_polarity_but_for_strays():
    """Corona pulses of one source have the sign of their half cycle, as its model says."""
    sources = [s for index in range(40) for s in _circuit(index).sources if s.family == "line-corona"]
    cycles = WORLD.capture.model_copy(update={"duration_ms": 40.0})
    timeline = draw_timeline(cycles, _circuit(0), rng=np.random.default_rng(1))
    assert sources
    for source in sources:
        sign = draw_plan(source, 200, timeline, rng=np.random.default_rng(3)).sign
        assert abs(sign.mean()) > 0.5
