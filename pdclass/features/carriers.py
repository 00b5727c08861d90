"""Carriers: steady lines in the pre-trigger of a pulse, fitted there and continued through its window.

Lines are taken one by one from the periodogram of what is left and fitted together by least squares. Seen from the
middle of the stretch cosines are even and sines odd: the normal equations fall into two small ones in closed form.
"""

from __future__ import annotations

from typing import NamedTuple

import numba
import numpy as np
from numpy.typing import NDArray

from pdclass.features.kernels import LANES
from pdclass.features.transforms import spectra
from pdclass.pulses import FloatArray, IntArray, WaveArray

MOST_TONES = 4
#: A line is looked for on the grid of this transform, up to a quarter of the rate, and placed on a finer one.
_FFT, _FINER = 1024, 4
#: Between two bins of the coarse grid a line has at most so much more power than on the nearer one.
_BETWEEN = 1.2
#: A line this far above the median of the pre-trigger's periodogram is a carrier, not noise.
_TONE_POWER = 20.0
#: Carriers are not fitted to fewer samples, and never to more.
_SHORTEST, _LONGEST = 200, 480
#: A direction that the earlier ones span but for this share is left out of the fit.
_SPANNED = 1e-12


class Tones(NamedTuple):
    """Lines of several waves, row by row.

    Attributes
    ----------
    count : (rows,) lines found, 0 to `MOST_TONES`.
    centre : (rows,) the place that phases count from [samples].
    turn : (rows, MOST_TONES) frequencies [radians a sample].
    even, odd : (rows, 1 + MOST_TONES) weights of cosines and sines; the first even one is the level.
    """

    count: IntArray
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
        0.5 * (start + stop - 1),
        np.zeros((rows, MOST_TONES)),
        np.zeros(shape),
        np.zeros(shape),
    )
    moments, rest = np.zeros(shape, np.complex128), np.zeros((rows, _LONGEST), np.float32)
    open_rows = np.flatnonzero(stop - start >= _SHORTEST)
    _begin(waves, start, stop, open_rows, tones, moments, rest)
    for _ in range(MOST_TONES):
        if not open_rows.size:
            break
        spectrum = spectra(rest[open_rows], _FFT).view(np.float32)
        open_rows = open_rows[_next_line(spectrum, waves, start, stop, open_rows, tones, moments, rest)]
    return tones


@numba.njit(cache=True, nogil=True)
def take_out(waves: WaveArray, tones: Tones, rows: IntArray, clean: WaveArray) -> None:  # pragma: no cover - compiled
    """Write the given rows without their lines; (all rows, samples), samples a multiple of `LANES`."""
    for r in rows:
        _leave(waves[r], 0, waves.shape[1], tones, r, clean[r])


@numba.njit(cache=True, nogil=True)
def _begin(
    waves: WaveArray,
    start: IntArray,
    stop: IntArray,
    rows: IntArray,
    tones: Tones,
    moments: NDArray[np.complex128],
    rest: WaveArray,
) -> None:  # pragma: no cover - compiled
    """Take out the level alone."""
    for r in rows:
        moments[r, 0] = _transform(waves[r], start[r], stop[r], 0.0)
        tones.even[r, 0] = moments[r, 0].real / (stop[r] - start[r])
        _leave_tapered(waves[r], start[r], stop[r], tones, r, rest[r])


@numba.njit(cache=True, nogil=True)
def _next_line(
    spectrum: WaveArray,
    waves: WaveArray,
    start: IntArray,
    stop: IntArray,
    rows: IntArray,
    tones: Tones,
    moments: NDArray[np.complex128],
    rest: WaveArray,
) -> NDArray[np.bool_]:  # pragma: no cover - compiled
    """Add the strongest line of what is left, where one stands out, and fit all anew; returns which rows had one."""
    found = np.zeros(rows.size, np.bool_)
    power = np.empty(_FFT // 4 + 1, np.float32)
    for place in range(rows.size):
        r = rows[place]
        length = stop[r] - start[r]
        turn = _strongest_line(spectrum[place], rest[r], length, power)
        if turn > 0:
            found[place] = True
            tones.count[r] += 1
            tones.turn[r, tones.count[r] - 1] = turn
            half_way = np.exp(0.5j * turn * (length - 1))
            moments[r, tones.count[r]] = _transform(waves[r], start[r], stop[r], turn) * half_way
            _fit(length, tones.turn[r, : tones.count[r]], moments[r], tones.even[r], tones.odd[r])
            _leave_tapered(waves[r], start[r], stop[r], tones, r, rest[r])
    return found


@numba.njit(cache=True, nogil=True)
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
    k = first + np.argmax(power[first:top])
    if not _stands_out(power[first + 1 : top], _BETWEEN * power[k]):
        return 0.0
    guess = round((k + _vertex(power[k - 1], power[k], power[k + 1])) * _FINER)
    fine = min(max(guess, low, (k - 1) * _FINER), (k + 1) * _FINER, top * _FINER - 1)
    unit = 2 * np.pi / (_FFT * _FINER)
    left, middle = _power_at(rest, length, unit * (fine - 1)), _power_at(rest, length, unit * fine)
    right = _power_at(rest, length, unit * (fine + 1))
    while right > middle and fine + 1 < top * _FINER:
        fine, left, middle = fine + 1, middle, right
        right = _power_at(rest, length, unit * (fine + 1))
    while left > middle and fine > low:
        fine, right, middle = fine - 1, middle, left
        left = _power_at(rest, length, unit * (fine - 1))
    if not _stands_out(power[first + 1 : top], middle):
        return 0.0
    return unit * (fine + _vertex(left, middle, right))


@numba.njit(cache=True, nogil=True)
def _stands_out(power: WaveArray, line: float) -> bool:  # pragma: no cover - compiled
    """Whether a line's power is that of a carrier: so far above the median."""
    limit, below = np.float32(line / _TONE_POWER), np.int32(0)
    for i in range(power.size):
        below += np.int32(power[i] <= limit)
    return 2 * below > power.size


@numba.njit(cache=True, nogil=True)
def _vertex(left: float, middle: float, right: float) -> float:  # pragma: no cover - compiled
    """Place of the top of the parabola through the logarithms of three powers, from the middle one."""
    a, b, c = np.log(left + 1e-300), np.log(middle + 1e-300), np.log(right + 1e-300)
    bend = a - 2 * b + c
    return 0.5 * (a - c) / bend if bend != 0 else 0.0


@numba.njit(cache=True, nogil=True)
def _power_at(rest: WaveArray, length: int, turn: float) -> float:  # pragma: no cover - compiled
    value = _transform(rest, 0, length, turn)
    return value.real * value.real + value.imag * value.imag


@numba.njit(cache=True, nogil=True)
def _transform(wave: WaveArray, start: int, stop: int, turn: float) -> complex:  # pragma: no cover - compiled
    """The Fourier transform of a stretch at one frequency [radians a sample], phases from its first sample."""
    real, imag = np.zeros(LANES), np.zeros(LANES)
    phasor, step = 1.0 + 0.0j, np.exp(-1j * turn * LANES)
    whole = start + (stop - start) // LANES * LANES
    for first in range(start, whole, LANES):
        for j in range(LANES):
            real[j] += wave[first + j] * phasor.real
            imag[j] += wave[first + j] * phasor.imag
        phasor *= step
    for j in range(stop - whole):
        real[j] += wave[whole + j] * phasor.real
        imag[j] += wave[whole + j] * phasor.imag
    total, lane, step = 0.0j, 1.0 + 0.0j, np.exp(-1j * turn)
    for j in range(LANES):
        total += lane * (real[j] + 1j * imag[j])
        lane *= step
    return total


@numba.njit(cache=True, nogil=True)
def _fit(
    length: int, turn: FloatArray, moments: NDArray[np.complex128], even: FloatArray, odd: FloatArray
) -> None:  # pragma: no cover - compiled
    """Least-squares weights of a level, cosines (even) and sines (odd) from the transform at each frequency."""
    n = turn.size
    levels, cosines, sines = np.empty(n + 1), np.empty((n + 1, n + 1)), np.empty((n, n))
    cosines[0, 0], levels[0] = length, moments[0].real
    for i in range(n):
        levels[i + 1] = moments[i + 1].real
        cosines[i + 1, 0] = _kernel(length, turn[i])
        for j in range(i + 1):
            near, far = _kernel(length, turn[i] - turn[j]), _kernel(length, turn[i] + turn[j])
            cosines[i + 1, j + 1], sines[i, j] = 0.5 * (near + far), 0.5 * (near - far)
    even[: n + 1] = _solved(cosines, levels)
    odd[0] = 0.0
    odd[1 : n + 1] = _solved(sines, -moments[1 : n + 1].imag)


@numba.njit(cache=True, nogil=True)
def _kernel(length: int, turn: float) -> float:  # pragma: no cover - compiled
    """Sum of cos(turn x) over so many places one apart about 0: the kernel of P. G. L. Dirichlet."""
    single = np.sin(0.5 * turn)
    return np.sin(0.5 * length * turn) / single if abs(single) > 1e-9 else float(length)


@numba.njit(cache=True, nogil=True)
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


@numba.njit(cache=True, nogil=True)
def _leave(
    wave: WaveArray, start: int, stop: int, tones: Tones, r: int, left: WaveArray
) -> None:  # pragma: no cover - compiled
    """Write a stretch without the lines of a row to `left`, in whole steps of `LANES`; the level stays."""
    count = tones.count[r]
    cosine, sine, lane = np.empty((count, LANES)), np.empty((count, LANES)), np.empty(LANES)
    phasor, step = np.empty(count, np.complex128), np.empty(count, np.complex128)
    for t in range(count):
        turn = tones.turn[r, t]
        _spread(turn, cosine[t], sine[t])
        step[t] = np.exp(1j * turn * LANES)
        phasor[t] = (tones.even[r, 1 + t] - 1j * tones.odd[r, 1 + t]) * np.exp(1j * turn * (start - tones.centre[r]))
    for first in range(start, stop, LANES):
        for j in range(LANES):
            lane[j] = wave[first + j]
        for t in range(count):
            real, imag = phasor[t].real, phasor[t].imag
            for j in range(LANES):
                lane[j] -= real * cosine[t, j] - imag * sine[t, j]
            phasor[t] *= step[t]
        for j in range(LANES):
            left[first - start + j] = lane[j]


@numba.njit(cache=True, nogil=True)
def _leave_tapered(
    wave: WaveArray, start: int, stop: int, tones: Tones, r: int, rest: WaveArray
) -> None:  # pragma: no cover - compiled
    """Write a stretch without level and lines to `rest`, under the taper of J. von Hann and with zeros behind it."""
    _leave(wave, start, stop, tones, r, rest)
    length, level = stop - start, tones.even[r, 0]
    cosine, sine = np.empty(LANES), np.empty(LANES)
    turn = 2 * np.pi / (length - 1)
    _spread(turn, cosine, sine)
    phasor, step = 1.0 + 0.0j, np.exp(1j * turn * LANES)
    for first in range(0, length, LANES):
        real, imag = phasor.real, phasor.imag
        for j in range(LANES):
            taper = 0.5 - 0.5 * (real * cosine[j] - imag * sine[j])
            rest[first + j] = (rest[first + j] - level) * taper
        phasor *= step
    rest[length:] = 0.0


@numba.njit(cache=True, nogil=True)
def _spread(turn: float, cosine: FloatArray, sine: FloatArray) -> None:  # pragma: no cover - compiled
    """Cosine and sine of 0, 1, 2 ... turns."""
    step, phasor = np.exp(1j * turn), 1.0 + 0.0j
    for j in range(LANES):
        cosine[j], sine[j] = phasor.real, phasor.imag
        phasor *= step
