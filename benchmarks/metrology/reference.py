"""Reference pulses of the metrology of features: closed-form and simulated, behind any sensor, in noise of any height."""

from typing import NamedTuple

import numpy as np
import scipy.signal

from pdclass.jobs.simulate import scenario_path
from pdclass.pulses import LABELS, Chain, PulseSet, onset_in_window, typed_table, window_samples
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.receiver import chain_band_hz
from pdclass.sim.scenario import circuit_of, read_scenario
from pdclass.sim.source import source_spectrum

#: The sensor of the truth [Hz], and its sampling rate.
REFERENCE_HZ, REFERENCE_RATE_HZ = (0.1e6, 40e6), 100e6
PER_CLASS, SEED = 12, 77
#: Carriers [Hz] and their heights over the noise, as of broadcast stations.
CARRIERS = ((0.198e6, 1.5), (0.693e6, 2.0), (0.909e6, 1.75), (6.07e6, 0.75))
ANALYSIS_HZ = 25e6
_AHEAD_S = 6e-6


class Recorded(NamedTuple):
    """A pulse without noise, as some chain records it: (samples,) from well before it on, and the chain."""

    wave: np.ndarray
    chain: Chain


def closed_forms(band_hz, rate_hz, _slowest):
    """Double exponentials, damped sines, and a pulse with a copy, behind corners of first and second order."""
    fine_hz = 2e9
    t = np.arange(round(14e-6 * fine_hz)) / fine_hz

    def two(rise, fall):
        return np.exp(-t / fall) - np.exp(-t / rise)

    def sine(frequency_hz, decay):
        return np.exp(-t / decay) * np.sin(2 * np.pi * frequency_hz * t)

    copy = np.roll(two(60e-9, 250e-9), round(6e-6 * fine_hz))
    copy[: round(6e-6 * fine_hz)] = 0
    shapes = [two(10e-9, 50e-9), two(100e-9, 600e-9), sine(7e6, 0.4e-6), sine(3e6, 1.5e-6)]
    shapes.append(two(20e-9, 90e-9) - 0.4 * copy)
    low = scipy.signal.butter(1, band_hz[0], "highpass", fs=fine_hz, output="sos")
    high = scipy.signal.butter(2, band_hz[1], fs=fine_hz, output="sos")
    place = np.arange(round(14e-6 * rate_hz)) * (fine_hz / rate_hz)
    quiet = np.zeros(round(_AHEAD_S * rate_hz))
    for shape in shapes:
        seen = scipy.signal.sosfilt(np.concatenate([low, high]), shape)
        wave = np.concatenate([quiet, np.interp(place, np.arange(t.size), seen)])
        yield Recorded(wave, Chain(rate_hz, band_hz=band_hz))


def simulated(band_hz, rate_hz, slowest_hz):
    """The same pulses of the base world behind another sensor; their anti-alias filter suits the slowest rate."""
    base = read_scenario(scenario_path("base"))
    corners = {"low_corner_hz": (band_hz[0],) * 2, "high_corner_hz": (band_hz[1],) * 2, "rates_hz": (slowest_hz,)}
    world = base.model_copy(update={"chain": base.chain.model_copy(update=corners)})
    left = dict.fromkeys(LABELS, PER_CLASS)
    for number in range(1, 200):
        circuit = circuit_of(world, number, seed=SEED)
        for label in [label for label, missing in left.items() if missing]:
            source = next(source for source in circuit.sources if source.label == label)
            spectrum = source_spectrum(source.current, laplace_grid()) * source.response
            wave = to_samples(spectrum * np.exp(-laplace_grid() * LEAD_S), rate_hz)
            wave = np.concatenate([np.zeros(round(_AHEAD_S * rate_hz)), wave])
            left[label] -= 1
            yield Recorded(wave / np.abs(wave).max(), Chain(rate_hz, band_hz=chain_band_hz(circuit.receiver)))
        if not any(left.values()):
            return
    raise SystemExit("too few circuits for the reference pulses")


def reference_pulses(band_hz=REFERENCE_HZ, rate_hz=REFERENCE_RATE_HZ, slowest_hz=REFERENCE_RATE_HZ):
    return [*closed_forms(band_hz, rate_hz, slowest_hz), *simulated(band_hz, rate_hz, slowest_hz)]


def in_band(wave, rate_hz):
    """The wave after the analysis band's Gaussian low-pass."""
    frequency_hz = np.fft.rfftfreq(wave.size, 1 / rate_hz)
    return np.fft.irfft(np.fft.rfft(wave) * low_pass(frequency_hz), wave.size)


def low_pass(frequency_hz):
    return np.exp(-0.5 * np.log(2) * (frequency_hz / ANALYSIS_HZ) ** 2)


def noise_level(pulse, snr_db):
    """Standard deviation of the recorded white noise that leaves the given peak over noise in the analysis band."""
    peak = np.abs(in_band(pulse.wave, pulse.chain.rate_hz)).max()
    passed = np.mean(low_pass(np.linspace(0, pulse.chain.rate_hz / 2, 4001)) ** 2)
    return peak / 10 ** (snr_db / 20) / np.sqrt(passed)


def limits(pulse, sigma):
    """Onset and end [samples]: out of 2 % of the peak and half the noise, until the mean power sinks into it."""
    height, ahead = np.abs(pulse.wave), round(0.4e-6 * pulse.chain.rate_hz)
    onset = int(np.argmax(height > max(0.02 * height.max(), 0.5 * sigma)))
    power = np.cumsum(np.append(0.0, pulse.wave**2))
    following = (power[ahead:] - power[:-ahead]) / ahead
    peak = int(np.argmax(height))
    faded = np.flatnonzero(following[peak:] < 0.5 * sigma**2)
    end = peak + int(faded[0]) if faded.size else height.size
    return onset, max(end, onset + 8)


def windows(pulses, snr_db, *, carriers=False, draws=1):
    """Every pulse `draws` times in its window with fresh noise, the truth about onset and end given."""
    rate_hz = pulses[0].chain.rate_hz
    samples, lead = window_samples(rate_hz), onset_in_window(window_samples(rate_hz))
    t = np.arange(samples) / rate_hz
    waves, durations = [], []
    for number, pulse in enumerate(pulses):
        rng = np.random.default_rng([SEED, number])
        sigma = noise_level(pulse, snr_db)
        onset, end = limits(pulse, sigma)
        clean = np.zeros(samples)
        piece = pulse.wave[onset - lead : onset - lead + samples]
        clean[: piece.size] = piece
        for _ in range(draws):
            wave = clean + rng.normal(0, sigma, samples)
            for frequency_hz, height in CARRIERS if carriers else ():
                wave += sigma * height * np.cos(2 * np.pi * (frequency_hz * t + rng.uniform()))
            waves.append(wave.astype(np.float32))
            durations.append((end - onset) / rate_hz * 1e6)
    chains = [pulse.chain for pulse in pulses]
    place = np.repeat(np.arange(len(pulses)), draws)
    table = typed_table({"duration_us": durations, "chain": place}, [f"{row:016x}" for row in range(len(waves))])
    return PulseSet(np.array(waves), tuple(chains), table)
