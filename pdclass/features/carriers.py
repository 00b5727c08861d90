"""Carriers: steady lines in the pre-trigger of a pulse, fitted there and continued through its window.

Lines are taken one by one from the periodogram of what is left and fitted together by least squares. Seen from the
middle of the stretch cosines are even and sines odd: the normal equations fall into two small ones in closed form.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.features.kernels import LANES, place_of_largest
from pdclass.features.transforms import spectra
from pdclass.pulses import FloatArray, IntArray, WaveArray

MOST_TONES = 4
#: A line is looked for on the grid of this transform, up to a quarter of the rate, and placed on a finer one.
_FFT, _FINER = 1024, 4
#: Between two bins of the coarse grid a line has at most so much more power than on the nearer one.
_BETWEEN = 1.2
#: A line this far above the median of the pre-trigger's periodogram is a carrier, not noise.
_TONE_POWER = 20.0
#: Sines are made block by block: a table within a block, turned on from one to the next.
_BLOCK = 40
#: By how much the neighbours of a place on the fine grid turn against it.
_ASIDE = 2 * np.pi / (_FFT * _FINER)
_ASIDE_COS, _ASIDE_SIN = (wave(_ASIDE * np.arange(480)).astype(np.float32) for wave in (np.cos, np.sin))
#: Carriers are not fitted to fewer samples, and never to more.
_SHORTEST, _LONGEST = 200, 480
#: A direction that the earlier ones span but for this share is left out of the fit.
_SPANNED = 1e-12


class Tones(NamedTuple):
    """Lines of several waves, row by row.

    Kernels take the arrays one by one: a tuple costs more to pass into one than the work of many rows.

    Attributes
    ----------
    lines : (rows,) how many were found, 0 to `MOST_TONES`.
    centre : (rows,) the place that phases count from [samples].
    turn : (rows, MOST_TONES) frequencies [radians a sample].
    even, odd : (rows, 1 + MOST_TONES) weights of cosines and sines; the first even one is the level.
    """

    lines: IntArray
    centre: FloatArray
    turn: FloatArray
    even: FloatArray
    odd: FloatArray


def fitted_tones(waves: WaveArray, start: IntArray, stop: IntArray) -> Tones:
    """The lines that stand out of a stretch of each wave.

    Parameters
    ----------
    waves : (rows, samples).
    start, stop : (rows,) the stretches, at most 480 samples long; none is found in fewer than 200.
    """
    rows, shape = len(waves), (len(waves), 1 + MOST_TONES)
    tones = Tones(
        np.zeros(rows, np.int64),
        np.asarray(0.5 * (start + stop - 1), np.float64),
        np.zeros((rows, MOST_TONES)),
        np.zeros(shape),
        np.zeros(shape),
    )
    moments, gram = np.zeros(shape, np.complex128), np.empty((rows, 2, 1 + MOST_TONES, 1 + MOST_TONES))
    rest = np.zeros((rows, _LONGEST), np.float32)
    open_rows = np.flatnonzero(stop - start >= _SHORTEST)
    _begin(waves, start, stop, open_rows, moments, rest, *tones)
    for _ in range(MOST_TONES):
        if not open_rows.size:
            break
        spectrum = spectra(rest[open_rows], _FFT).view(np.float32)
        open_rows = open_rows[_next_line(spectrum, waves, start, stop, open_rows, moments, gram, rest, *tones)]
    return tones


def without_tones(waves: WaveArray, tones: Tones) -> WaveArray:
    """The waves less their lines, (rows, samples), samples a multiple of 40; their levels stay."""
    clean = np.empty_like(waves)
    _take_out(waves, clean, *tones)
    return clean


@compiled
def _take_out(
    waves: WaveArray,
    clean: WaveArray,
    lines: IntArray,
    centre: FloatArray,
    turn: FloatArray,
    even: FloatArray,
    odd: FloatArray,
) -> None:  # pragma: no cover - compiled
    tones = Tones(lines, centre, turn, even, odd)
    for r in range(len(waves)):
        _leave(waves[r], 0, waves.shape[1], tones, r, clean[r])


@compiled
def _begin(
    waves: WaveArray,
    start: IntArray,
    stop: IntArray,
    rows: IntArray,
    moments: NDArray[np.complex128],
    rest: WaveArray,
    lines: IntArray,
    centre: FloatArray,
    turn: FloatArray,
    even: FloatArray,
    odd: FloatArray,
) -> None:  # pragma: no cover - compiled
    """Take out the level alone."""
    tones = Tones(lines, centre, turn, even, odd)
    for r in rows:
        moments[r, 0] = _transform(waves[r], start[r], stop[r], 0.0)
        tones.even[r, 0] = moments[r, 0].real / (stop[r] - start[r])
        _leave_tapered(waves[r], start[r], stop[r], tones, r, rest[r])


@compiled
def _next_line(
    spectrum: WaveArray,
    waves: WaveArray,
    start: IntArray,
    stop: IntArray,
    rows: IntArray,
    moments: NDArray[np.complex128],
    gram: FloatArray,
    rest: WaveArray,
    lines: IntArray,
    centre: FloatArray,
    turns: FloatArray,
    even: FloatArray,
    odd: FloatArray,
) -> NDArray[np.bool_]:  # pragma: no cover - compiled
    """Add the strongest line of what is left, where one stands out, and fit all anew; returns which rows had one."""
    tones = Tones(lines, centre, turns, even, odd)
    found = np.zeros(rows.size, np.bool_)
    power = np.empty(_FFT // 4 + 1, np.float32)
    for place in range(rows.size):
        r = rows[place]
        length = stop[r] - start[r]
        turn = _strongest_line(spectrum[place], rest[r], length, power)
        if turn > 0:
            found[place] = True
            tones.lines[r] += 1
            tones.turn[r, tones.lines[r] - 1] = turn
            half_way = np.exp(0.5j * turn * (length - 1))
            moments[r, tones.lines[r]] = _transform(waves[r], start[r], stop[r], turn) * half_way
            _fit(length, tones.turn[r, : tones.lines[r]], moments[r], gram[r], tones.even[r], tones.odd[r])
            _leave_tapered(waves[r], start[r], stop[r], tones, r, rest[r])
    return found


@compiled
def _strongest_line(
    spectrum: WaveArray, rest: WaveArray, length: int, power: WaveArray
) -> float:  # pragma: no cover - compiled
    """Frequency [radians a sample] of a line that stands out of the noise, else 0.

    The strongest bin of the coarse grid leads to that of the fine one, whose three highest bins give the place.
    """
    top, low = _FFT // 4, max(2, round(_FFT * _FINER / length))
    first = low // _FINER
    for k in range(first - 1, top + 1):
        power[k] = spectrum[2 * k] * spectrum[2 * k] + spectrum[2 * k + 1] * spectrum[2 * k + 1]
    k = first + place_of_largest(power[first:top])
    if not _stands_out(power[first + 1 : top], _BETWEEN * power[k]):
        return 0.0
    guess = round((k + _vertex(power[k - 1], power[k], power[k + 1])) * _FINER)
    fine, last = min(max(guess, low, (k - 1) * _FINER), (k + 1) * _FINER, top * _FINER - 1), top * _FINER - 1
    left, middle, right = _three_powers(rest, length, fine * _ASIDE)
    while (right > middle and fine < last) or (left > middle and fine > low):
        fine += 1 if right > middle and fine < last else -1
        left, middle, right = _three_powers(rest, length, fine * _ASIDE)
    if not _stands_out(power[first + 1 : top], middle):
        return 0.0
    return _ASIDE * (fine + _vertex(left, middle, right))


@compiled
def _stands_out(power: WaveArray, line: float) -> bool:  # pragma: no cover - compiled
    """Whether a line's power is that of a carrier: so far above the median."""
    limit, below = np.float32(line / _TONE_POWER), np.int32(0)
    for i in range(power.size):
        below += np.int32(power[i] <= limit)
    return bool(2 * below > power.size)


@compiled
def _vertex(left: float, middle: float, right: float) -> float:  # pragma: no cover - compiled
    """Place of the top of the parabola through the logarithms of three powers, from the middle one."""
    a, b, c = np.log(left + 1e-300), np.log(middle + 1e-300), np.log(right + 1e-300)
    bend = a - 2 * b + c
    return 0.5 * (a - c) / bend if bend != 0 else 0.0


@compiled
def _three_powers(
    rest: WaveArray, length: int, turn: float
) -> tuple[float, float, float]:  # pragma: no cover - compiled
    """Power at a place on the fine grid [radians a sample] between those of its neighbours.

    What is left is turned back at the place's own frequency once; its neighbours are a little off that.
    """
    cosine, sine, lane = np.empty(LANES, np.float32), np.empty(LANES, np.float32), np.zeros((6, LANES), np.float32)
    _spread(-turn, cosine, sine)
    phasor, step = 1.0 + 0.0j, np.exp(-1j * turn * LANES)
    for first in range(0, length, LANES):
        across, along = np.float32(phasor.real), np.float32(phasor.imag)
        for j in range(LANES):
            value, ahead, aside = rest[first + j], _ASIDE_COS[first + j], _ASIDE_SIN[first + j]
            real = value * (across * cosine[j] - along * sine[j])
            imag = value * (across * sine[j] + along * cosine[j])
            lane[0, j] += real
            lane[1, j] += imag
            lane[2, j] += real * ahead
            lane[3, j] += imag * ahead
            lane[4, j] += real * aside
            lane[5, j] += imag * aside
        phasor *= step
    total = np.zeros(6)
    for k in range(6):
        for j in range(LANES):
            total[k] += lane[k, j]
    left = (total[2] - total[5]) ** 2 + (total[3] + total[4]) ** 2
    right = (total[2] + total[5]) ** 2 + (total[3] - total[4]) ** 2
    return left, total[0] ** 2 + total[1] ** 2, right


@compiled
def _transform(wave: WaveArray, start: int, stop: int, turn: float) -> complex:  # pragma: no cover - compiled
    """The Fourier transform of a stretch at one frequency [radians a sample], phases from its first sample."""
    lane = np.zeros((2, LANES), np.float32)
    phasor, step = 1.0 + 0.0j, np.exp(-1j * turn * LANES)
    for first in range(start, stop, LANES):
        along, across = np.float32(phasor.real), np.float32(phasor.imag)
        for j in range(min(LANES, stop - first)):
            lane[0, j] += wave[first + j] * along
            lane[1, j] += wave[first + j] * across
        phasor *= step
    total, phasor, step = 0.0j, 1.0 + 0.0j, np.exp(-1j * turn)
    for j in range(LANES):
        total += phasor * (lane[0, j] + 1j * lane[1, j])
        phasor *= step
    return total


@compiled
def _fit(
    length: int, turn: FloatArray, moments: NDArray[np.complex128], gram: FloatArray, even: FloatArray, odd: FloatArray
) -> None:  # pragma: no cover - compiled
    """Least-squares weights of a level, cosines (even) and sines (odd) from the transform at each frequency.

    `gram`, (2, 1 + MOST_TONES, 1 + MOST_TONES), holds the lower half of what cosines and sines have in common among
    themselves; the row of the last frequency is added to it.
    """
    n = turn.size
    gram[0, 0, 0], gram[0, n, 0] = length, _kernel(length, turn[n - 1])
    for j in range(n):
        near, far = _kernel(length, turn[n - 1] - turn[j]), _kernel(length, turn[n - 1] + turn[j])
        gram[0, n, j + 1], gram[1, n - 1, j] = 0.5 * (near + far), 0.5 * (near - far)
    even[: n + 1] = _solved(gram[0, : n + 1, : n + 1].copy(), moments[: n + 1].real.copy())
    odd[1 : n + 1] = _solved(gram[1, :n, :n].copy(), -moments[1 : n + 1].imag)


@compiled
def _kernel(length: int, turn: float) -> float:  # pragma: no cover - compiled
    """Sum of cos(turn x) over so many places one apart about 0: the kernel of P. G. L. Dirichlet."""
    single = np.sin(0.5 * turn)
    return np.sin(0.5 * length * turn) / single if abs(single) > 1e-9 else float(length)


@compiled
def _solved(matrix: FloatArray, right: FloatArray) -> FloatArray:  # pragma: no cover - compiled
    """Solution of a symmetric system of which the lower half is given, by Cholesky; 0 along spanned directions."""
    n = right.size
    for i in range(n):
        whole = matrix[i, i]
        for j in range(i + 1):
            total = matrix[i, j]
            for k in range(j):
                total -= matrix[i, k] * matrix[j, k]
            if i != j:
                matrix[i, j] = total * matrix[j, j]
        # the diagonal holds reciprocals; 0 leaves the direction out of everything that follows
        matrix[i, i] = 1 / np.sqrt(total) if total > _SPANNED * whole else 0.0
        for k in range(i):
            right[i] -= matrix[i, k] * right[k]
        right[i] *= matrix[i, i]
    for i in range(n - 1, -1, -1):
        for k in range(i + 1, n):
            right[i] -= matrix[k, i] * right[k]
        right[i] *= matrix[i, i]
    return right


@compiled
def _leave(
    wave: WaveArray, start: int, stop: int, tones: Tones, r: int, left: WaveArray
) -> None:  # pragma: no cover - compiled
    """Write a stretch without the lines of a row to `left`, in whole blocks; the level stays."""
    size = (stop - start + _BLOCK - 1) // _BLOCK * _BLOCK
    cosine, sine = np.empty(_BLOCK, np.float32), np.empty(_BLOCK, np.float32)
    left[:size] = wave[start : start + size]
    for t in range(tones.lines[r]):
        turn = tones.turn[r, t]
        _spread(turn, cosine, sine)
        phasor, step = np.exp(1j * turn * (start - tones.centre[r])), np.exp(1j * turn * _BLOCK)
        phasor *= tones.even[r, 1 + t] - 1j * tones.odd[r, 1 + t]
        for first in range(0, size, _BLOCK):
            along, across = np.float32(phasor.real), np.float32(phasor.imag)
            block = left[first : first + _BLOCK]
            for j in range(_BLOCK):
                block[j] -= along * cosine[j] - across * sine[j]
            phasor *= step


@compiled
def _leave_tapered(
    wave: WaveArray, start: int, stop: int, tones: Tones, r: int, rest: WaveArray
) -> None:  # pragma: no cover - compiled
    """Write a stretch without level and lines to `rest`, under the taper of J. von Hann and with zeros behind it."""
    _leave(wave, start, stop, tones, r, rest)
    length, level = stop - start, np.float32(tones.even[r, 0])
    cosine, sine = np.empty(_BLOCK, np.float32), np.empty(_BLOCK, np.float32)
    turn = 2 * np.pi / (length - 1)
    _spread(turn, cosine, sine)
    phasor, step, half = 1.0 + 0.0j, np.exp(1j * turn * _BLOCK), np.float32(0.5)
    for first in range(0, length, _BLOCK):
        along, across = half * np.float32(phasor.real), half * np.float32(phasor.imag)
        block = rest[first : first + _BLOCK]
        for j in range(_BLOCK):
            block[j] = (block[j] - level) * (half - (along * cosine[j] - across * sine[j]))
        phasor *= step
    rest[length:] = 0.0


@compiled
def _spread(turn: float, cosine: WaveArray, sine: WaveArray) -> None:  # pragma: no cover - compiled
    """Cosine and sine of 0, 1, 2 ... turns."""
    step, phasor = np.exp(1j * turn), 1.0 + 0.0j
    for j in range(cosine.size):
        cosine[j], sine[j] = phasor.real, phasor.imag
        phasor *= step
