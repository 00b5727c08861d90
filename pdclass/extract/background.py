"""What a record sounds like without pulses, as it changes, and its samples held against that.

Time is cut into epochs of about 0.3 ms from the start of each segment, and 64 epochs make a stretch (20 ms). A stretch
has its own whitening filter, fitted to itself and half a stretch on either side; an epoch may raise the thresholds.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated as Bounded
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import Field
from scipy.special import ndtri

from pdclass.errors import InputError
from pdclass.extract import bank, whiten
from pdclass.extract.events import threshold_sigmas
from pdclass.extract.fir import TAPS
from pdclass.extract.pages import let_go
from pdclass.pulses import Capture, FloatArray, IntArray, WaveArray, window_samples
from pdclass.settings import Settings

FILTER_ORDER = TAPS - 1
WIDEST_BOX_S = 2e-6
#: A filter is at most a stretch of 64 epochs old (about 20 ms), a raised threshold at most one epoch.
EPOCH_S = 0.3e-3
EPOCHS_PER_STRETCH = 64
_HALF = EPOCHS_PER_STRETCH // 2
#: Of every epoch so many pieces tell the spectrum and a run of so many samples the noise levels; where a stretch has
#: few epochs, as many more as give these sums.
PIECES_PER_EPOCH, PIECES_PER_FIT = 3, 128
RUN_SAMPLES, RUNS_PER_FIT = 2048, 128
_SMALLEST_PIECE = 512
_LEVEL_PIECES, _LEVEL_COMB = 64, 128
#: Where in more than this share of parts of so many samples something stands out by so many noise levels of the part
#: itself, the background is impulsive: too few pieces are left from which its spectrum could be told. Noise that is
#: louder at times is no impulse: its parts are loud all over.
IMPULSIVE_SHARE, IMPULSIVE_SAMPLES, IMPULSIVE_LEVELS = 0.10, 512, 6.0
#: A long impulse lasts so long [s].
IMPULSE_S = 2e-6
#: Noise levels are told from what lies below so many of them; where more than this share of an epoch would be cut,
#: and the background is not impulsive, it is the background that has risen there.
GATE_LEVELS, MOST_CUT = 4.0, 0.3
_ROUGH_RUNS = 32
#: A local level counts where it is above that of the stretch by so many times the chance of its estimate.
_CHANCE_NEAR, _CHANCE_LONE = 2.0, 3.0
_LEAST_RAISE = 0.05
_NEAR_EPOCHS = 5
#: The reference pulse of the detection limit: Gaussian, 50 ns wide at half height.
LIMIT_PULSE_WIDTH_S = 50e-9
_LIMIT_STRETCHES = 64
_RUN_ROOM = 1 << 14


class ExtractSettings(Settings):
    """How pulses are found.

    Attributes
    ----------
    false_events_per_cycle : false events a mains cycle that a Gaussian background would give.
    longest_echo_us : longest delay of an echo [us].
    cycle_s : the cycle meant by the false-event rate where the capture does not state its mains [s].
    """

    false_events_per_cycle: Bounded[float, Field(gt=0, le=1e5)] = 1.0
    longest_echo_us: Bounded[float, Field(gt=0, le=1000)] = 60.0
    cycle_s: Bounded[float, Field(gt=0, le=1)] = 0.02


@dataclass(frozen=True)
class Background:
    """What the record sounds like without pulses.

    Attributes
    ----------
    level : of the record [count].
    dither : pattern that spreads whole numbers over a count.
    epoch_samples : samples an epoch; the last one of a segment has up to twice as many.
    first_epochs : (segments,) number of each segment's first epoch.
    segment_firsts : (segments,) first sample of each segment.
    filters : (stretches, taps) whitening filters to noise of variance 1, [1/count].
    limits : (epochs, scales) thresholds of the box sums of whitened samples.
    gains : (epochs,) 1 over the local noise level of whitened samples, at most 1.
    """

    level: float
    dither: WaveArray
    epoch_samples: int
    first_epochs: IntArray
    segment_firsts: IntArray
    filters: WaveArray
    limits: WaveArray
    gains: WaveArray

    def grid(self, bounds: tuple[int, int]) -> tuple[int, int, int, int]:
        """Samples an epoch, epochs a stretch, a segment's first epoch, its epochs."""
        segment = int(np.searchsorted(self.segment_firsts, bounds[0]))
        epochs = max(1, (bounds[1] - bounds[0]) // self.epoch_samples)
        return self.epoch_samples, EPOCHS_PER_STRETCH, int(self.first_epochs[segment]), epochs

    @property
    def noise(self) -> float:
        """Noise level of the whitened record, the median over stretches [count]."""
        return float(np.median(1 / self.filters[:, 0]))


def measure_background(capture: Capture, settings: ExtractSettings) -> Background:
    """Fit whitening filters and thresholds to every stretch of the record, from pieces of every epoch.

    Raises
    ------
    InputError
        If the record or its segments are too short, hold NaN or infinite samples, or hold no noise.
    """
    rate_hz, counts = capture.chain.rate_hz, capture.counts
    bounds, piece = capture.segment_bounds(), _piece_samples(capture)
    epoch = max(1, round(EPOCH_S * rate_hz / bank.SUB_BLOCK)) * bank.SUB_BLOCK
    epochs, firsts = epoch_places(bounds, epoch)
    dither = bank.dither_table(counts)
    level = _record_level(counts, bounds, piece, dither)
    scales = min(int(np.log2(WIDEST_BOX_S * rate_hz)), int(np.log2(bank.LONGEST_BOX))) + 1
    impulse = round(IMPULSE_S * rate_hz)
    filters, limits, gains = [], [], []
    for inside, spectra in _stretches(counts, epochs, piece, level):
        spectrum = whiten.noise_spectrum(spectra) + _rounding(counts, piece)
        if not np.isfinite(spectra).all() or spectrum.max() <= 0:
            raise InputError(
                f"{capture.name}: samples: expected finite values with noise, found neither; check the sensor"
            )
        taps = whiten.whitening_filter(spectrum, FILTER_ORDER)
        taps, noise, raised = _levels(counts, (dither, level), taps, epochs[inside], scales, impulse)
        if not noise.min() > 0:
            raise InputError(
                f"{capture.name}: no noise in the record (most samples are equal); is the sensor connected?"
            )
        filters.append(taps / np.float32(noise[0]))
        limits.append((noise / noise[0] * raised).astype(np.float32))
        gains.append((1 / raised[:, 0]).astype(np.float32))
        let_go(counts, epochs[inside][0, 0], epochs[inside][-1, 1])
    cycle_s = 1 / capture.chain.mains_hz if capture.chain.mains_hz else settings.cycle_s
    sigmas = threshold_sigmas(scales, cycle_s * rate_hz, settings.false_events_per_cycle)
    held = (np.concatenate(limits) * sigmas).astype(np.float32)
    starts = np.array([first for first, _ in bounds], np.int64)
    return Background(level, dither, epoch, firsts, starts, np.stack(filters), held, np.concatenate(gains))


def whitened(counts: NDArray[Any], background: Background, bounds: tuple[int, int], first: int, last: int) -> WaveArray:
    """A stretch of a segment in local noise levels, (last - first,) float32.

    Parameters
    ----------
    counts : the record.
    background : of this record.
    bounds : first and one past the last sample of the segment.
    first, last : the stretch wanted, within the segment; where it is cut changes no bit of the result.
    """
    held, white = background, np.empty(last - first, np.float32)
    raw = np.empty(bank.SUB_BLOCK + TAPS, np.float32)
    bank.whiten_into(
        counts, held.dither, held.level, held.filters, held.gains, held.grid(bounds), bounds, first, raw, white
    )
    return white


def flagged_runs(
    counts: NDArray[Any], background: Background, bounds: tuple[int, int], first: int, last: int
) -> IntArray:
    """Runs (first, one past last) of the samples of a stretch that leave the background.

    Parameters
    ----------
    counts : the record.
    background : of this record.
    bounds : first and one past the last sample of the segment.
    first, last : the stretch wanted: whole sub-blocks of `bank.SUB_BLOCK` samples from the segment's start on, or up
        to its end. A run that goes on in the next stretch begins there anew.
    """
    held, grid, block = background, background.grid(bounds), first
    found, room = [], np.empty((_RUN_ROOM, 2), np.int64)
    while block < last:
        count, block = bank.runs_into(
            counts, held.dither, held.level, held.filters, held.limits, grid, bounds, block, last, room
        )
        found.append(room[:count].copy())
    return found[0] if len(found) == 1 else np.concatenate([np.zeros((0, 2), np.int64), *found])


def detection_limit_counts(background: Background, rate_hz: float) -> float:
    """Peak [count] of the smallest Gaussian pulse, 50 ns wide at half height, that reaches a threshold.

    Where the background changes it is the median over at most 64 stretches spread over the record, each with the
    median of its epochs' thresholds: half of the time less is found.
    """
    sigma = LIMIT_PULSE_WIDTH_S * rate_hz / 2.3548200
    reach = int(8 * sigma) + 2
    pulse = np.exp(-0.5 * (np.arange(-reach, reach + 1) / sigma) ** 2)
    count = len(background.filters)
    chosen = np.unique(np.linspace(0, count - 1, min(count, _LIMIT_STRETCHES)).astype(np.int64))
    own = [background.limits[k * EPOCHS_PER_STRETCH : (k + 1) * EPOCHS_PER_STRETCH] for k in chosen.tolist()]
    reached = [_limit_of(pulse, background.filters[k], limits) for k, limits in zip(chosen, own, strict=True)]
    # the last stretch may be short
    return float(np.median(np.repeat(reached, [len(limits) for limits in own])))


def _limit_of(pulse: FloatArray, taps: WaveArray, limits: WaveArray) -> float:
    box, gains = np.convolve(pulse, taps.astype(np.float64)), []
    for scale, limit in enumerate(np.median(limits, axis=0)):
        if scale:
            half = 1 << (scale - 1)
            box = np.convolve(box, np.concatenate([[1.0], np.zeros(half - 1), [1.0]]))
        gains.append(np.abs(box).max() / limit)
    return float(1 / max(gains))


def epoch_places(bounds: list[tuple[int, int]], epoch: int) -> tuple[IntArray, IntArray]:
    """Epochs of a record as rows (first, one past last, start of their segment), and each segment's first epoch.

    The grid hangs on the start of the segment; what remains of it at its end belongs to its last epoch.
    """
    counts = np.array([max(1, (last - first) // epoch) for first, last in bounds], np.int64)
    firsts = np.concatenate([[0], np.cumsum(counts)])[:-1]
    places = np.empty((int(counts.sum()), 3), np.int64)
    for (first, last), at, count in zip(bounds, firsts.tolist(), counts.tolist(), strict=True):
        begins = first + epoch * np.arange(count)
        places[at : at + count, 0], places[at : at + count, 2] = begins, first
        places[at : at + count, 1] = [*begins[1:], last]
    return places, firsts


def _piece_samples(capture: Capture) -> int:
    bounds, piece = capture.segment_bounds(), whiten.PIECE_SAMPLES
    longest = max((last - first for first, last in bounds), default=0)
    while piece > _SMALLEST_PIECE and longest < piece:
        piece //= 2
    needed = max(piece, 2 * window_samples(capture.chain.rate_hz))
    if longest < needed:
        raise InputError(
            f"{capture.name}: samples: expected a segment of at least {needed} (two windows of 20 us), found "
            f"{capture.counts.size} in {len(bounds)} segments; record longer without gaps"
        )
    return piece


def _record_level(counts: NDArray[Any], bounds: list[tuple[int, int]], piece: int, dither: WaveArray) -> float:
    """The level that a record stands at without signal: the median of a comb of samples spread over it [count]."""
    starts = whiten.spread_starts(bounds, piece, _LEVEL_PIECES)
    places = (starts[:, None] + np.arange(0, piece, max(1, piece // _LEVEL_COMB))).reshape(-1)
    return float(np.median(counts[places] + dither[places % bank.DITHER_PERIOD]))


def _rounding(counts: NDArray[Any], piece: int) -> float:
    """Power a bin of the dither, a twelfth of a count squared: there even where a record stands still."""
    return float(np.sum(np.hanning(piece) ** 2) / 12) if np.issubdtype(counts.dtype, np.integer) else 0.0


def _stretches(counts: NDArray[Any], epochs: IntArray, piece: int, level: float) -> Iterator[tuple[slice, WaveArray]]:
    """Stretch by stretch: its epochs, and the spectra of them and of half a stretch on either side."""
    room = np.flatnonzero(epochs[:, 1] - epochs[:, 0] >= piece)
    pieces = max(PIECES_PER_EPOCH, -(-PIECES_PER_FIT // len(room)))
    held: dict[int, WaveArray] = {}
    halves = -(-len(epochs) // _HALF)
    for begin in range(0, len(epochs), EPOCHS_PER_STRETCH):
        middle = begin // _HALF
        wanted = range(max(0, min(middle - 1, halves - 4)), min(halves, middle + 3))
        for half in wanted:
            if half not in held:
                held[half] = _epoch_spectra(counts, epochs[half * _HALF : (half + 1) * _HALF], piece, pieces, level)
        held = {half: held[half] for half in wanted}
        spectra = np.concatenate(list(held.values()))
        if not len(spectra):
            spectra = _epoch_spectra(counts, epochs[room[:_HALF]], piece, pieces, level)
        yield slice(begin, begin + EPOCHS_PER_STRETCH), spectra


def _epoch_spectra(counts: NDArray[Any], epochs: IntArray, piece: int, pieces: int, level: float) -> WaveArray:
    """(epochs, bins) the lower median over pieces of every epoch; epochs shorter than a piece have none."""
    long = epochs[epochs[:, 1] - epochs[:, 0] >= piece]
    room = np.maximum(1, 2 * (long[:, 1] - long[:, 0]) // piece - 1)
    spectra = np.empty((len(long), piece // 2 + 1), np.float32)
    taper = np.hanning(piece).astype(np.float32)
    # short epochs hold fewer pieces, every other one overlapping half of the next
    for fitting in np.unique(np.minimum(room, pieces)).tolist():
        rows = np.flatnonzero(np.minimum(room, pieces) == fitting)
        steps = np.arange(1, fitting + 1) / (fitting + 1)
        spare = long[rows, 1] - long[rows, 0] - piece
        starts = (long[rows, 0][:, None] + (spare[:, None] * steps).astype(np.int64)).reshape(-1)
        signals = bank.gathered(counts, starts, level, taper).reshape(len(rows), fitting, piece)
        spectra[rows] = whiten.middle_power(signals)
    return spectra


def _levels(
    counts: NDArray[Any], spread: tuple[WaveArray, float], taps: WaveArray, epochs: IntArray, scales: int, impulse: int
) -> tuple[WaveArray, FloatArray, FloatArray]:
    """The stretch's filter, the noise level of every scale, and by how much each epoch raises it.

    A level comes from the share of box sums beyond a mark near one noise level, which is no more moved by pulses
    than a median deviation and costs a comparison a sample.

    Returns
    -------
    (taps,) filter, refitted between impulses where the background is impulsive; (scales,); (epochs, scales) >= 1.
    """
    dither, level = spread
    runs = _runs(epochs)
    most, white = MOST_CUT, _few_whitened(counts, spread, taps, runs)
    if _is_impulsive(white):
        taps = whiten.gated_filter(_raw_runs(counts, spread, runs), taps, impulse)
        white = _few_whitened(counts, spread, taps, runs)
        most = 1.0
    rough = whiten.quiet_level(white)
    marks = rough * np.sqrt(2.0 ** np.arange(scales))
    above, looked = bank.count_runs(
        counts, dither, level, taps, runs, (GATE_LEVELS * rough, most), marks.astype(np.float32)
    )
    usual = marks * _ratio(above.sum(axis=0), looked.sum(axis=0))
    raised = np.maximum(
        _raise(marks / usual, _windowed(above), _windowed(looked), _CHANCE_NEAR),
        _raise(marks / usual, above, looked, _CHANCE_LONE),
    )
    beside = raised.copy()
    beside[1:] = np.maximum(beside[1:], raised[:-1])
    beside[:-1] = np.maximum(beside[:-1], raised[1:])
    return taps, usual, beside


def _runs(epochs: IntArray) -> IntArray:
    """A run in the middle of every epoch, as rows (first, one past last, start of the segment)."""
    lengths = epochs[:, 1] - epochs[:, 0]
    wanted = max(RUN_SAMPLES, RUN_SAMPLES * RUNS_PER_FIT // len(epochs))
    own = np.minimum(lengths, wanted)
    begins = epochs[:, 0] + (lengths - own) // 2
    return np.stack([begins, begins + own, epochs[:, 2]], axis=1)


def _few_whitened(counts: NDArray[Any], spread: tuple[WaveArray, float], taps: WaveArray, runs: IntArray) -> WaveArray:
    chosen = runs[np.unique(np.linspace(0, len(runs) - 1, _ROUGH_RUNS).astype(np.int64))]
    return np.concatenate([bank.white_run(counts, *spread, taps, run) for run in chosen])


def _is_impulsive(white: WaveArray) -> bool:
    """Whether impulses come so often that hardly a stretch of the whitened samples is without one."""
    samples = min(IMPULSIVE_SAMPLES, white.size)
    parts = np.abs(white[: white.size // samples * samples]).reshape(-1, samples)
    quiet = whiten.quiet_levels(parts)
    return bool(np.mean(parts.max(axis=1) > IMPULSIVE_LEVELS * quiet) > IMPULSIVE_SHARE)


def _raw_runs(counts: NDArray[Any], spread: tuple[WaveArray, float], runs: IntArray) -> WaveArray:
    """(runs, samples) raw runs of one length, without the level."""
    long = runs[runs[:, 1] - runs[:, 0] >= min(RUN_SAMPLES, int((runs[:, 1] - runs[:, 0]).max()))]
    size = int((long[:, 1] - long[:, 0]).min())
    signals = np.empty((len(long), size), np.float32)
    for signal, (first, _, segment) in zip(signals, long.tolist(), strict=True):
        for begin in range(0, size, bank.SUB_BLOCK):
            bank.load_signal(counts, *spread, segment, first + begin, signal[begin : begin + bank.SUB_BLOCK])
    return signals


def _ratio(above: IntArray, looked: IntArray) -> FloatArray:
    """Noise level over mark from the share of box sums beyond the mark; that of the next smaller box where none is."""
    share = np.clip((above + 0.5) / (looked + 1), 1e-3, 1 - 1e-3)
    ratio = -1 / ndtri(share / 2)
    for scale in np.flatnonzero(looked[..., 1:] == 0) + 1 if ratio.ndim == 1 else ():
        ratio[scale] = ratio[scale - 1]
    return np.asarray(ratio)


def _windowed(sums: IntArray) -> IntArray:
    """Sums over the epochs near each one."""
    count, half = len(sums), _NEAR_EPOCHS // 2
    total = np.zeros((count + 2 * half + 1, sums.shape[1]), np.int64)
    total[half + 1 : half + 1 + count] = sums.cumsum(axis=0)
    total[half + 1 + count :] = total[half + count]
    return total[_NEAR_EPOCHS:] - total[:-_NEAR_EPOCHS]


def _raise(marks: FloatArray, above: IntArray, looked: IntArray, chances: float) -> FloatArray:
    """Local over usual noise level where it is above it by more than chance, else 1, (epochs, scales).

    The share of n independent sums beyond one level tells the level to about 1/sqrt(n) of it.
    """
    ratio = marks * _ratio(above, looked)
    chance = np.sqrt(2.0 ** np.arange(marks.size) / np.maximum(looked, 1))
    return np.where((ratio > 1 + np.maximum(chances * chance, _LEAST_RAISE)) & (looked > 0), ratio, 1.0)
