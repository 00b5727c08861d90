"""What the gallery shows of records: one source of each kind at a time, well over the noise; and backgrounds.

Everything is cut out of captures as the scenario makes them, background, chain and digitiser included; only the
heights are chosen, and the digitiser's range is wide enough for them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np
import scipy.signal

from pdclass.extract import ExtractSettings, extract
from pdclass.pulses import Annotation, Capture, FloatArray, IntArray
from pdclass.sim.circuit import Circuit, Source
from pdclass.sim.drawn_source import most_charge_pc
from pdclass.sim.ranges import Scenario
from pdclass.sim.receiver import chain_band_hz
from pdclass.sim.scenario import capture_of, circuit_of

#: Examples of a kind, each from another circuit.
EXAMPLES = 3
BEFORE_US, AFTER_US = 5.0, 15.0
BACKGROUNDS = 4
BAND_MHZ = (0.1, 40.0)
#: Bandwidth in which the level of a background is stated [Hz].
LEVEL_HZ = 10e3

_NEAR_M, _FAR_M = 100.0, 500.0
_MOST_CIRCUITS = 90
_SNR_DB = (36.0, 48.0)
#: Where the largest charge of its kind does not reach this, another source is looked for, or it is called faint [dB].
_LEAST_DB = 26.0
#: Where it does not even reach this, there is no pulse to be seen [dB].
_SEEN_DB = 6.0
_FULL_SCALE_DB = 60.0
_DB_PER_BIT = 20 * np.log10(2)
#: So far below the most that its bits allow over the noise, a pulse is not clipped [dB].
_HEADROOM_DB = 6.0
_RECORD_MS, _BACKGROUND_MS, _CROSSING_MS = 4.0, 20.0, 8.0
_FLOOR_WINDOWS = 40
_FLOOR_CLEAR_US = 90.0
_SPECTRUM_POINTS, _LEVEL_POINTS = 160, 420
_STRETCH_US = 40.0
_SLOW_US = 100.0


@dataclass(frozen=True)
class Example:
    """One window, cut at its onset.

    Attributes
    ----------
    label, family, way : of the source.
    distance_m : along the cable [m], or None.
    charge_pc : that was planted [pC], or None for interference.
    faint : whether the largest charge of its kind gives no more than this.
    circuit : what its circuit is like, in words and figures.
    rate_hz, band_hz : of the chain [Hz].
    snr_db, peak_mv : of the window's largest sample over the noise [dB], and itself [mV].
    time_us, wave : from the onset [us], and the samples over their largest one, both (samples,).
    mhz, level_db, floor_db : spectrum of the window after the onset, and of the background in windows as long, over
        the largest value of the former, all (frequencies,).
    """

    label: str
    family: str
    way: str
    distance_m: float | None
    charge_pc: float | None
    circuit: Mapping[str, object]
    rate_hz: float
    band_hz: tuple[float, float]
    snr_db: float
    peak_mv: float
    time_us: FloatArray
    wave: FloatArray
    mhz: FloatArray
    level_db: FloatArray
    floor_db: FloatArray
    faint: bool = False


@dataclass(frozen=True)
class Backdrop:
    """The background of one circuit.

    Attributes
    ----------
    carriers_mhz, communication : what is on the air and on the mains there.
    rate_hz : of the chain [Hz].
    mhz, level_db : level in a band of `LEVEL_HZ`, highest within each drawn step [dB over 1 uV], (frequencies,).
    time_us, wave_mv : a short stretch, (samples,).
    slow_ms, slow_mv : effective value below 0.6 MHz in steps of 100 us over a mains cycle, (steps,).
    """

    carriers_mhz: tuple[float, ...]
    communication: str
    rate_hz: float
    mhz: FloatArray
    level_db: FloatArray
    time_us: FloatArray
    wave_mv: FloatArray
    slow_ms: FloatArray
    slow_mv: FloatArray


def group_of(source: Source, length_m: float) -> str:
    """The kind of example that a source is one of."""
    if source.label == "interference":
        return source.family
    if source.label == "switchgear":
        return source.way
    if source.label == "local":
        return "box" if source.way == "box" else "termination" if source.distance_m == 0 else "first metres"
    if source.distance_m is None:
        return "neighbour"
    if source.distance_m >= length_m * (1 - 1e-9):
        return "far end"
    return "near" if source.distance_m < _NEAR_M else "middle" if source.distance_m < _FAR_M else "far"


def gather_examples(scenario: Scenario, groups: Mapping[str, str], *, seed: int) -> dict[str, list[Example]]:
    """At most three examples of every group, each from another circuit of the scenario.

    Kinds that the scenario has at all are drawn evenly here, so that rare ones are found among few circuits.

    Parameters
    ----------
    scenario : the world.
    groups : names after `group_of`, with the label that each belongs to.
    seed : of the world.
    """
    world = _evened(scenario)
    found: dict[str, list[Example]] = {name: [] for name in groups}
    for number in range(1, (len(world.circuit) or _MOST_CIRCUITS) + 1):
        open_groups = {name for name, examples in found.items() if len(examples) < EXAMPLES}
        if not open_groups:
            break
        circuit = circuit_of(world, number, seed=seed)
        for source in circuit.sources:
            name = group_of(source, float(circuit.traits["length_m"]))
            # a world of named circuits has no others to choose from
            wanted_db = _SEEN_DB if world.circuit else _LEAST_DB
            if name not in open_groups or _believable_db(world, circuit, source) < wanted_db:
                continue
            example = _example(world, circuit, source, number, seed=seed)
            if example is not None:
                found[name].append(example)
                open_groups.discard(name)
    return found


def gather_crossings(scenario: Scenario, *, seed: int) -> list[Example]:
    """What the extraction takes for a pulse where nothing was planted, at most three, each from another circuit."""
    world = _with_record(scenario, _CROSSING_MS)
    examples: list[Example] = []
    for number in range(1, (len(world.circuit) or 8 * EXAMPLES) + 1):
        circuit = replace(circuit_of(world, number, seed=seed), sources=())
        capture = capture_of(world, circuit, number, seed=seed, pulses=0)
        onsets = extract(capture, ExtractSettings()).pulses.table["onset_sample"].to_numpy(np.int64)
        inside = _fully_inside(onsets, capture)
        if inside.size:
            crossing = Annotation(int(inside[0]), 1, "interference", "simulated", "simulated", family="background")
            examples.append(_cut(capture, circuit, crossing, ""))
        if len(examples) == EXAMPLES:
            break
    return examples


def gather_backdrops(scenario: Scenario, *, seed: int) -> list[Backdrop]:
    """The backgrounds of four circuits, unlike each other in their communication where the scenario has several."""
    world = _with_record(scenario, _BACKGROUND_MS)
    numbers = range(1, (len(world.circuit) or 4 * BACKGROUNDS) + 1)
    circuits = [(number, replace(circuit_of(world, number, seed=seed), sources=())) for number in numbers]
    kinds: dict[str, int] = {}
    ranked = []
    for number, circuit in circuits:
        kind = _communication(circuit)
        kinds[kind] = kinds.get(kind, 0) + 1
        ranked.append((kinds[kind], number, circuit))
    chosen = sorted(ranked, key=lambda item: item[:2])[:BACKGROUNDS]
    return [_backdrop(world, circuit, number, seed=seed) for _, number, circuit in chosen]


def _evened(scenario: Scenario) -> Scenario:
    def even(weights: Mapping[str, float]) -> dict[str, float]:
        return {name: float(weight > 0) for name, weight in weights.items()}

    mix, disturbers = scenario.mix, scenario.interference
    ways = {field: even(getattr(mix, field)) for field in ("local_ways", "switchgear_ways")}
    return _with_record(scenario, _RECORD_MS).model_copy(
        update={
            "mix": mix.model_copy(update=ways),
            "interference": disturbers.model_copy(update={"families": even(disturbers.families)}),
        }
    )


def _with_record(scenario: Scenario, duration_ms: float) -> Scenario:
    capture = scenario.capture.model_copy(update={"duration_ms": duration_ms, "segments": 1})
    return scenario.model_copy(update={"capture": capture})


def _example(world: Scenario, circuit: Circuit, source: Source, number: int, *, seed: int) -> Example | None:
    """A window of this source alone, or None where it sends nothing within the record."""
    alone = replace(source, snr_db=_heights(world, circuit, source), pulses_per_cycle=1.0)
    lone = replace(circuit, sources=(alone,), full_scale_db=max(circuit.full_scale_db, _FULL_SCALE_DB))
    pulses = 12 if source.repetition is not None else 1
    capture = capture_of(world, lone, number, seed=seed, pulses=pulses)
    onsets = np.array([note.onset_sample for note in capture.annotations], np.int64)
    # not one that begins in the tail of another
    first = onsets[np.diff(onsets, prepend=-(10**9)) > (BEFORE_US + AFTER_US) * 1e-6 * capture.chain.rate_hz]
    inside = _fully_inside(first, capture)
    if inside.size == 0:
        return None
    note = capture.annotations[int(np.flatnonzero(onsets == inside[0])[0])]
    faint = _believable_db(world, circuit, source) < _LEAST_DB
    return replace(_cut(capture, circuit, note, source.way), faint=faint)


def _heights(world: Scenario, circuit: Circuit, source: Source) -> tuple[float, float]:
    """Heights over the noise that neither clip nor need more charge than such a discharge has, however faint [dB]."""
    unclipped_db = _DB_PER_BIT * (circuit.receiver.bits - 1) - _HEADROOM_DB
    most_db = min(_SNR_DB[1], unclipped_db, _believable_db(world, circuit, source))
    return min(_SNR_DB[0], most_db), most_db


def _believable_db(world: Scenario, circuit: Circuit, source: Source) -> float:
    """Height over the noise that the largest charge of its kind has; interference has no limit [dB]."""
    if source.label == "interference":
        return float("inf")
    most_v = most_charge_pc(world.source, source.family) * 1e-12 * source.volts_per_coulomb
    return float(20 * np.log10(most_v / circuit.noise_v))


def _fully_inside(onsets: IntArray, capture: Capture) -> IntArray:
    per_us = capture.chain.rate_hz * 1e-6
    good = (onsets > (BEFORE_US + 1) * per_us) & (onsets < len(capture.counts) - (AFTER_US + 1) * per_us)
    return np.asarray(onsets[good])


def _volts(capture: Capture, first: int, end: int) -> FloatArray:
    counts = np.asarray(capture.counts[first:end], np.float64)
    return np.asarray(counts * (capture.chain.volts_per_count or 1.0))


def _cut(capture: Capture, circuit: Circuit, note: Annotation, way: str) -> Example:
    """The window of a pulse whose label is known, with its spectrum."""
    onset = note.onset_sample
    rate_hz = capture.chain.rate_hz
    before, after = round(BEFORE_US * 1e-6 * rate_hz), round(AFTER_US * 1e-6 * rate_hz)
    wave = _volts(capture, onset - before, onset + after)
    wave -= np.median(wave[: before - before // 10])
    peak = float(np.abs(wave[before:]).max())
    mhz, level, floor = _levels(capture, onset, after)
    reference = level.max()
    return Example(
        label=str(note.label),
        family=str(note.family),
        way=way,
        distance_m=note.distance_m,
        charge_pc=note.charge_pc,
        circuit=circuit.traits,
        rate_hz=rate_hz,
        band_hz=chain_band_hz(circuit.receiver),
        snr_db=float(20 * np.log10(peak / circuit.noise_v)),
        peak_mv=peak * 1e3,
        time_us=np.arange(-before, after) / rate_hz * 1e6,
        wave=wave / peak,
        mhz=mhz,
        level_db=10 * np.log10(level / reference),
        floor_db=10 * np.log10(floor / reference),
    )


def _levels(capture: Capture, onset: int, samples: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Power spectrum after an onset and of the background far from every planted pulse, on a logarithmic scale."""
    rate_hz = capture.chain.rate_hz
    lead = round(0.3e-6 * rate_hz)
    # flat over the pulse, so that its beginning is not weighed down; fading at both ends, so that nothing leaks
    shape = scipy.signal.windows.tukey(samples + lead, 0.04)
    clear = round(_FLOOR_CLEAR_US * 1e-6 * rate_hz)
    planted = np.array([note.onset_sample for note in capture.annotations] or [onset], np.int64)
    starts = np.arange(0, len(capture.counts) - samples - lead, samples)
    quiet = np.array([np.all((start + samples + lead < planted) | (start > planted + clear)) for start in starts])
    powers = [_power(_volts(capture, int(at), int(at) + shape.size), shape) for at in starts[quiet][:_FLOOR_WINDOWS]]
    power = _power(_volts(capture, onset - lead, onset - lead + shape.size), shape)
    hz = np.arange(power.size) * rate_hz / (2 * (power.size - 1))
    mhz = np.geomspace(BAND_MHZ[0], min(BAND_MHZ[1], rate_hz / 2e6), _SPECTRUM_POINTS)
    return mhz, _on_scale(power, hz, mhz, np.mean), _on_scale(np.mean(powers, axis=0), hz, mhz, np.mean)


def _power(wave: FloatArray, shape: FloatArray) -> FloatArray:
    return np.asarray(np.abs(np.fft.rfft((wave - wave.mean()) * shape, 4 * shape.size)) ** 2)


def _on_scale(power: FloatArray, hz: FloatArray, mhz: FloatArray, within: Callable[[FloatArray], float]) -> FloatArray:
    """Power at points of a logarithmic scale: of the lines within half a step about each, else interpolated."""
    half = np.sqrt(mhz[1] / mhz[0])
    first, last = np.searchsorted(hz, [mhz * 1e6 / half, mhz * 1e6 * half])
    between = np.interp(mhz * 1e6, hz, power)
    return np.array([within(power[a:b]) if b > a else alone for a, b, alone in zip(first, last, between, strict=True)])


def _communication(circuit: Circuit) -> str:
    kinds = [one.kind for one in circuit.reception.communication]
    return kinds[0] if kinds else "none"


def _backdrop(world: Scenario, circuit: Circuit, number: int, *, seed: int) -> Backdrop:
    capture = capture_of(world, circuit, number, seed=seed, pulses=0)
    rate_hz = capture.chain.rate_hz
    volts = _volts(capture, 0, len(capture.counts))
    volts -= volts.mean()
    hz, density = scipy.signal.welch(volts, rate_hz, "hann", nperseg=round(rate_hz / LEVEL_HZ))
    mhz = np.geomspace(0.03, min(50.0, rate_hz / 2e6), _LEVEL_POINTS)
    level = _on_scale(density * LEVEL_HZ, hz, mhz, np.max)
    stretch = volts[: round(_STRETCH_US * 1e-6 * rate_hz)]
    slow_ms, slow_mv = _slow(volts, rate_hz)
    return Backdrop(
        carriers_mhz=tuple(sorted(carrier.hz / 1e6 for carrier in circuit.reception.carriers)),
        communication=_communication_words(circuit),
        rate_hz=rate_hz,
        mhz=mhz,
        level_db=10 * np.log10(level / 1e-12),
        time_us=np.arange(stretch.size) / rate_hz * 1e6,
        wave_mv=stretch * 1e3,
        slow_ms=slow_ms,
        slow_mv=slow_mv,
    )


def _communication_words(circuit: Circuit) -> str:
    return "; ".join(_sent(circuit)) or "no carrier communication"


def _sent(circuit: Circuit) -> Iterator[str]:
    for one in circuit.reception.communication:
        band = f"{min(one.tones_hz) / 1e3:.0f} to {max(one.tones_hz) / 1e3:.0f} kHz"
        frames = f"frames of {one.on_s * 1e3:.1f} ms every {one.period_s * 1e3:.1f} ms"
        yield f"{one.kind.upper()} at {band}, {frames}"


def _slow(volts: FloatArray, rate_hz: float) -> tuple[FloatArray, FloatArray]:
    """Effective value below 0.6 MHz in steps, over the record."""
    filtered = scipy.signal.sosfilt(scipy.signal.butter(4, 0.6e6, fs=rate_hz, output="sos"), volts)
    step = round(_SLOW_US * 1e-6 * rate_hz)
    whole = filtered[: filtered.size // step * step].reshape(-1, step)
    effective = np.sqrt((whole**2).mean(axis=1))
    return np.arange(effective.size) * _SLOW_US * 1e-3, effective * 1e3
