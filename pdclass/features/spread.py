"""Spread: how long and how broad a pulse is in all, and what comes late in it."""

from __future__ import annotations

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.kernels import LANES, chance_energy, sum_of_squares
from pdclass.features.window import ANALYSIS_RATE_HZ, BAND, BAND_HZ, GUARD, ONSET, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

#: So far below the pulse nothing tells of the path any more.
_LOWEST_DB = -60.0
#: Stretches after the peak [us] whose level is measured: late, weak structure tells of the path.
LATE_US = ((0.3, 0.6), (0.6, 1.2))
_LATE = tuple(tuple(round(edge * ANALYSIS_RATE_HZ / 1e6) for edge in stretch) for stretch in LATE_US)
#: Samples after the peak that still count as its beginning where late levels are held against it.
_CORE = 30
#: Samples after the onset that the crest factor is held against.
_BEGINNING = 200

_CONTIN = "A. Contin et al., IEEE Trans. Dielectr. Electr. Insul. 9(3), 335-348, 2002 (from memory)"


def measure_spread(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, SPREAD), all on the pulse's own samples."""
    noise = np.where(windows.noise > 0, windows.noise, 0.0)
    size = windows.end - ONSET + GUARD
    length_ns = equivalent_length(windows.own, size, noise) * STEP_NS
    width_mhz = equivalent_width(windows.own_power[:, BAND], windows.noise_power[:, BAND], BAND_HZ / 1e6, size)
    shape = _shape(windows.wave, windows.end, windows.peak, noise)
    late = _late_levels(windows.wave, windows.end, windows.peak, np.where(windows.noise > 0, noise, np.nan))
    onset_to_peak = np.maximum(windows.peak - ONSET, 0)
    return np.column_stack([length_ns, width_mhz, onset_to_peak * STEP_NS, shape, late])


@compiled
def equivalent_length(waves: WaveArray, size: IntArray, noise: FloatArray) -> FloatArray:  # pragma: no cover - compiled
    """Equivalent time length of waves [samples]: root of the second moment of the energy about its centre.

    The mean energy of white noise of the given level is taken out. NaN where what is left is less than three times as
    large as its own chance: late noise weighs with the square of the time, and else only what chance made too long
    would be seen.

    Parameters
    ----------
    waves : (waves, samples) of which the first `size` count, and zeros behind them for a multiple of `LANES`.
    size : (waves,) samples that count.
    noise : (waves,) level of the noise, >= 0.

    References
    ----------
    A. Contin, A. Cavallini, G. C. Montanari, G. Pasini, F. Puletti, IEEE TDEI 9(3), 335-348, 2002 (from memory).
    """
    found = np.full(len(waves), np.nan)
    for r in range(len(waves)):
        lanes, n, floor = np.zeros((3, LANES)), np.float64(size[r]), noise[r] * noise[r]
        for first in range(0, size[r], LANES):
            for j in range(LANES):
                value, time = np.float64(waves[r, first + j]), np.float64(first + j)
                energy = value * value
                lanes[0, j] += energy
                lanes[1, j] += energy * time
                lanes[2, j] += energy * time * time
        total = lanes[0].sum() - floor * n
        if total > 0:
            centre = (lanes[1].sum() - floor * n * (n - 1) / 2) / total
            second = (lanes[2].sum() - floor * (n - 1) * n * (2 * n - 1) / 6) / total - centre * centre
            if second > 0 and second * total > _chance_moment(floor, n, centre):
                found[r] = np.sqrt(second)
    return found


@compiled
def _chance_moment(floor: float, samples: float, centre: float) -> float:  # pragma: no cover - compiled
    """What noise alone may leave of the second moment of its energy about a centre: three deviations.

    As `chance_energy`, each sample weighed with the square of its distance.
    """
    early, late = -centre, samples - centre
    square = (late**3 - early**3) / 3
    return float(3 * floor * np.sqrt(2 * ((late**5 - early**5) / 5 + square * square / 200)))


@compiled
def equivalent_width(
    power: WaveArray, noise: WaveArray, frequency: FloatArray, size: IntArray
) -> FloatArray:  # pragma: no cover - compiled
    """Equivalent bandwidth, in the unit of `frequency`: root of the second moment of power less noise about zero.

    NaN where no more is left than noise may leave; noise that is NaN counts as none. (pulses, bins) twice, (bins,),
    and (pulses,) the samples behind each spectrum.
    """
    found = np.full(len(power), np.nan)
    for r in range(len(power)):
        total, moment, hidden = 0.0, 0.0, 0.0
        for k in range(frequency.size):
            beside = np.float64(noise[r, k]) if noise[r, k] > 0 else 0.0
            signal = np.float64(power[r, k]) - beside
            hidden += beside
            total += signal
            moment += signal * frequency[k] * frequency[k]
        if total > chance_energy(hidden / size[r], size[r]) and moment > 0:
            found[r] = np.sqrt(moment / total)
    return found


@compiled
def _shape(
    waves: WaveArray, end: IntArray, peak: IntArray, noise: FloatArray
) -> FloatArray:  # pragma: no cover - compiled
    """Share of the energy before the middle of the peak sample, and crest factor, (pulses, 2).

    NaN where noise may have left the energy.
    """
    found, first = np.full((len(waves), 2), np.nan), ONSET - GUARD
    for r in range(len(waves)):
        wave, floor = waves[r], noise[r] * noise[r]
        total = _energy(wave, first, end[r], floor)
        if total > chance_energy(floor, end[r] - first):
            at_peak = np.float64(wave[peak[r]]) ** 2 - floor
            found[r, 0] = (_energy(wave, first, peak[r], floor) + 0.5 * at_peak) / total
        size = min(_BEGINNING, end[r] - ONSET)
        beginning = _energy(wave, ONSET, ONSET + size, floor)
        if beginning > chance_energy(floor, size):
            found[r, 1] = 1 / np.sqrt(beginning / _BEGINNING)
    return found


@compiled
def _late_levels(
    waves: WaveArray, end: IntArray, peak: IntArray, noise: FloatArray
) -> FloatArray:  # pragma: no cover - compiled
    """Power in stretches after the peak over that of the pulse up to 0.3 us after it, noise subtracted [dB].

    NaN where a stretch leaves the pulse's own samples, where it does not stand out of the noise, or where the
    noise is unknown.
    """
    found = np.full((len(waves), len(_LATE)), np.nan)
    for r in range(len(waves)):
        floor = noise[r] * noise[r]
        early = waves[r, ONSET - GUARD : peak[r] + _CORE]
        core = (sum_of_squares(early) - floor * early.size) / early.size
        for k in range(len(_LATE)):
            first, stop = peak[r] + _LATE[k][0], min(peak[r] + _LATE[k][1], end[r])
            if first < end[r] and noise[r] > 0:
                power = _energy(waves[r], first, stop, floor) / (stop - first)
                if core > 0 and power > 3 * floor * np.sqrt(2 / (stop - first)):
                    found[r, k] = max(10 * np.log10(power / core), _LOWEST_DB)
    return found


@compiled
def _energy(wave: WaveArray, first: int, stop: int, floor: float) -> float:  # pragma: no cover - compiled
    """Energy of a stretch less that of the noise."""
    return sum_of_squares(wave[first:stop]) - floor * (stop - first) if stop > first else 0.0


def _late_name(first_us: float, last_us: float) -> str:
    return f"late_{first_us:g}_{last_us:g}_db".replace(".", "p")


#: What a missing value means.
_NOTHING_LEFT = "too little energy is left above the noise, or the record ends within the pulse"

SPREAD = (
    Feature(
        "equivalent_length_ns",
        "ns",
        "spread of the energy in time (standard deviation about its centre)",
        "equivalent time length {value}",
        "longer",
        "shorter",
        (0.0, 10000.0),
        5,
        _CONTIN,
        absent=_NOTHING_LEFT,
        needs_snr_db=9.0,
        edition=2,
    ),
    Feature(
        "equivalent_width_mhz",
        "MHz",
        "spread of the energy in frequency (root mean square of the frequency)",
        "equivalent bandwidth {value}",
        "broader",
        "narrower",
        (0.0, 50.0),
        0.15,
        _CONTIN,
        absent=_NOTHING_LEFT,
        needs_snr_db=9.0,
        edition=2,
    ),
    Feature(
        "onset_to_peak_ns",
        "ns",
        "from the first arrival to the peak",
        "peak {value} after the onset",
        "later",
        "earlier",
        (0.0, 15000.0),
        20,
        "own definition",
        absent="the record ends within the pulse",
        needs_snr_db=6.0,
        edition=2,
    ),
    Feature(
        "energy_before_peak",
        "",
        "share of the energy before the peak",
        "share of the energy before the peak {value}",
        "larger",
        "smaller",
        (0.0, 1.0),
        0.17,
        "own definition",
        absent=_NOTHING_LEFT,
        needs_snr_db=9.0,
        edition=2,
    ),
    Feature(
        "crest_factor",
        "",
        "peak over the rms of the first two microseconds",
        "crest factor (peak over rms of the first 2 µs) {value}",
        "more spiky",
        "less spiky",
        (0.5, 100.0),
        0.2,
        "peak over rms, usual definition",
        absent=_NOTHING_LEFT,
        needs_snr_db=6.0,
        edition=2,
    ),
    *(
        Feature(
            _late_name(first, last),
            "dB",
            f"power between {first:g} and {last:g} µs after the peak, over that of the pulse's beginning",
            f"level {first:g}-{last:g} µs after the peak is {{value}} against the pulse's beginning",
            "higher",
            "lower",
            (_LOWEST_DB, 40.0),
            2.5,
            "own definition",
            needs_snr_db=9.0,
            absent="by then the pulse has sunk into the noise, the next one has begun or the record has ended",
            edition=2,
        )
        for first, last in LATE_US
    ),
)
