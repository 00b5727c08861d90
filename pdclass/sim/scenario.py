"""From a scenario to captures: pulses of mixed origin in one continuous record, with their truth."""

from __future__ import annotations

import hashlib
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass.errors import InputError, complaint
from pdclass.pulses import Annotation, Capture, Chain, FloatArray, IntArray
from pdclass.sim.circuit import Circuit, Source, draw_circuit
from pdclass.sim.draw import whole
from pdclass.sim.ranges import Scenario, read_scenario
from pdclass.sim.receiver import chain_band_hz, jittered, most_full_scale_db, quantise
from pdclass.sim.record import Plan, Timeline, draw_plan, draw_signal, draw_timeline, plant

__all__ = [
    "SIMULATOR_VERSION",
    "Scenario",
    "capture_count",
    "capture_of",
    "circuit_of",
    "read_scenario",
    "simulate_capture",
]

#: Goes up whenever the same scenario and seed give other samples than before.
SIMULATOR_VERSION = 2

#: So many fit into memory with all that is planted on them.
_MOST_SAMPLES = 60_000_000
_FIRST_DAY = pd.Timestamp("2025-01-06", tz="UTC")


def capture_count(scenario: Scenario) -> int:
    """How many captures a scenario asks for."""
    return (len(scenario.circuit) or scenario.circuits) * scenario.captures_per_circuit


def simulate_capture(scenario: Scenario, number: int, *, seed: int, pulses: int | None = None) -> Capture:
    """Capture `number` of a scenario with the truth of every planted pulse as annotations.

    Parameters
    ----------
    scenario : the synthetic world.
    number : from 1; in drawn worlds a number beyond `capture_count` gives further circuits, where circuits are
        named further sessions. The capture does not depend on how many others are made.
    seed : of the world, >= 0.
    pulses : planted pulses, >= 0 (converters have no more than their edges); None = what the scenario says.

    Raises
    ------
    InputError
        If `number`, `seed` or `pulses` lies below its bound.
    """
    return capture_of(scenario, circuit_of(scenario, number, seed=seed), number, seed=seed, pulses=pulses)


def circuit_of(scenario: Scenario, number: int, *, seed: int) -> Circuit:
    """The circuit of which capture `number` is taken; arguments and errors as for `simulate_capture`."""
    _check(("capture", number, 1), ("seed", seed, 0))
    index, _ = _circuit_and_session(scenario, number)
    for_good = np.random.SeedSequence(seed, spawn_key=(0, index))
    return draw_circuit(scenario, index, rng=np.random.default_rng(for_good))


def capture_of(scenario: Scenario, circuit: Circuit, number: int, *, seed: int, pulses: int | None = None) -> Capture:
    """Capture `number`, taken of its circuit; arguments and errors as for `simulate_capture`."""
    _check(("capture", number, 1), ("seed", seed, 0), ("pulses", pulses or 0, 0))
    samples = scenario.capture.duration_ms * 1e-3 * circuit.receiver.rate_hz
    if samples > _MOST_SAMPLES:
        expected, advice = f"at most {_MOST_SAMPLES:,} samples in one capture", "shorten it, or take more captures"
        found = f"{samples:,.0f}"
        raise InputError(complaint(scenario.name, "capture.duration_ms", expected=expected, found=found, advice=advice))
    index, session = _circuit_and_session(scenario, number)
    visit = np.random.SeedSequence(seed, spawn_key=(1, index, session))
    time_rng, noise_rng, plan_rng, offset_rng, jitter_rng = np.random.default_rng(visit).spawn(5)
    timeline = draw_timeline(scenario.capture, circuit, rng=time_rng)
    signal = draw_signal(circuit, timeline, rng=noise_rng)
    annotations = plant(signal, circuit, timeline, _plans(scenario, circuit, timeline, pulses, rng=plan_rng))
    signal = jittered(signal, timeline.rate_hz, circuit.receiver.jitter_s, rng=jitter_rng)
    volts_per_count = _volts_per_count(circuit)
    most = scenario.capture.offset_counts
    signal += np.float32(offset_rng.uniform(-most, most) * volts_per_count)
    counts = quantise(signal, volts_per_count, circuit.receiver.bits)
    start = _FIRST_DAY + pd.Timedelta(days=7 * session, minutes=number)
    return _capture(circuit, timeline, counts, annotations, f"{scenario.name}-{number:04d}", start)


def _check(*wanted: tuple[str, int, int]) -> None:
    for field, found, least in wanted:
        if found < least:
            expected = f"{least} or more"
            raise InputError(complaint("simulate", field, expected=expected, found=found, advice=f"give {expected}"))


def _circuit_and_session(scenario: Scenario, number: int) -> tuple[int, int]:
    if scenario.circuit:
        session, index = divmod(number - 1, len(scenario.circuit))
        return index, session
    return divmod(number - 1, scenario.captures_per_circuit)


def _plans(
    scenario: Scenario, circuit: Circuit, timeline: Timeline, pulses: int | None, *, rng: np.random.Generator
) -> list[tuple[Source, Plan]]:
    share_rng, *children = rng.spawn(1 + len(circuit.sources))
    counts = _share_out(scenario, circuit, timeline, pulses, rng=share_rng)
    plans: list[tuple[Source, Plan]] = []
    missing = 0
    for source, count, child in zip(circuit.sources, counts, children, strict=True):
        asked = int(count) + (missing if source.label == "interference" and not scenario.circuit else 0)
        plan = draw_plan(source, asked, timeline, rng=child)
        # what a bridge has too few edges for, the next source of interference of a drawn circuit sends instead
        missing = asked - plan.onset.size
        plans.append((source, plan))
    return plans


def _share_out(
    scenario: Scenario, circuit: Circuit, timeline: Timeline, pulses: int | None, *, rng: np.random.Generator
) -> IntArray:
    """Pulses of each source: by the scenario's mix of classes, or by the rates that it names."""
    labels = [source.label for source in circuit.sources]
    if not labels:
        return np.zeros(0, np.int64)
    if scenario.circuit:
        rates = np.array([source.pulses_per_cycle or 0.0 for source in circuit.sources])
        if pulses is None:
            cycles = timeline.samples * timeline.deg_per_sample / 360.0
            return rng.poisson(rates * cycles).astype(np.int64)
    else:
        rates = np.array([getattr(scenario.mix, label) / labels.count(label) for label in labels])
    total = whole(scenario.capture.pulses, rng=rng) if pulses is None else pulses
    return rng.multinomial(total, rates / rates.sum()).astype(np.int64)


def _volts_per_count(circuit: Circuit) -> float:
    """Size of a count [V]: the full scale stands above the noise as drawn, the noise above a count in any case."""
    full_scale_db = min(circuit.full_scale_db, most_full_scale_db(circuit.receiver.bits))
    full_scale_v = circuit.noise_v * 10 ** (full_scale_db / 20)
    return float(full_scale_v / (1 << (circuit.receiver.bits - 1)))


def _phase_marks(timeline: Timeline) -> FloatArray:
    """Phase at the first sample of every segment, and at the first sample of every mains cycle."""
    marks: list[float] = []
    for first, end in timeline.bounds():
        start_deg, last_deg = timeline.phase(np.array([first, end - 1], np.float64))
        cycles = 360.0 * np.arange(np.floor(start_deg / 360.0) + 1, np.floor(last_deg / 360.0) + 1)
        marks += [float(first), *(first + np.ceil((cycles - start_deg) / timeline.deg_per_sample)).tolist()]
    samples = np.unique(np.array(marks))
    return np.stack([samples, timeline.phase(samples)], axis=1)


def _chain(circuit: Circuit) -> Chain:
    receiver = circuit.receiver
    return Chain(
        rate_hz=receiver.rate_hz,
        volts_per_count=_volts_per_count(circuit),
        adc_bits=receiver.bits,
        transfer_ohm=receiver.transfer_ohm,
        band_hz=chain_band_hz(receiver),
        mains_hz=circuit.mains_hz,
    )


def _capture(
    circuit: Circuit,
    timeline: Timeline,
    counts: NDArray[Any],
    annotations: tuple[Annotation, ...],
    name: str,
    start: pd.Timestamp,
) -> Capture:
    counts.flags.writeable = False
    little = counts.astype(counts.dtype.newbyteorder("<"), copy=False)
    return Capture(
        chain=_chain(circuit),
        counts=counts,
        circuit=circuit.name,
        sensor=circuit.sensor,
        session=f"{start:%Y-%m-%d}",
        digest=hashlib.sha256(little.tobytes()).hexdigest(),
        name=name,
        site=circuit.site,
        conductor=circuit.conductor,
        start_utc=start,
        segments=timeline.segments,
        phase_marks=_phase_marks(timeline),
        phase_reference="own",
        annotations=annotations,
    )
