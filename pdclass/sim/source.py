"""Source currents of pulses, in time and as spectra at complex frequency; the area of a current is its charge."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Literal, get_args

import numpy as np
from scipy.special import wofz

from pdclass.errors import InputError, complaint
from pdclass.pulses import FloatArray
from pdclass.sim.grid import ComplexArray, laplace_grid

Shape = Literal["gaussian", "asymmetric", "exponential", "heidler", "ringing", "packet"]

#: Exponent of the Heidler function (F. Heidler, 1985; IEC 62305-1 Annex B).
_STEEPNESS = 10
#: Where its front has come within 1e-7 of the end, in time constants of the front.
_FRONT_END = 5.0
#: Beyond this frequency its spectrum is less than 1e-8 of the front's length and taken as nothing, in radians per time
#: constant of the front.
_FRONT_BAND = 60.0
#: Points of the interpolation along the grid, and its step: error below 1e-5 of the spectrum at 0 Hz.
_POINTS = 8
_STEP_RAD = 0.4
_STRIDES = (64, 32, 16, 8, 4, 2)


@dataclass(frozen=True)
class SourceCurrent:
    """The current that one event drives: a pulse, or a train of equal-shaped ones.

    The area of a gaussian, asymmetric, exponential or heidler current is one. A ringing one has the slope 2*pi*f at
    its beginning, and the envelope of a packet has the area one: their own charge is nearly nothing.

    Attributes
    ----------
    shape : `gaussian`, `asymmetric` (two half Gaussians), `exponential` (difference of two), `heidler`, `ringing`
        (a damped sine), `packet` (a cosine under two half Gaussians, as a short radio signal).
    rise_s : standard deviation of the rising flank, or time constant of the front [s], > 0.
    fall_s : standard deviation of the falling flank, longer time constant, or decay of the ringing [s], > 0.
    ring_hz : frequency of the ringing or of the packet's carrier [Hz]; 0 for the other shapes.
    offsets_s : when each sub-pulse of a train comes, (sub-pulses,) [s], >= 0.
    weights : their shares of the charge, (sub-pulses,), sum 1.

    Raises
    ------
    InputError
        If a value is out of its bounds.
    """

    shape: Shape
    rise_s: float
    fall_s: float
    ring_hz: float = 0.0
    offsets_s: tuple[float, ...] = (0.0,)
    weights: tuple[float, ...] = (1.0,)

    def __post_init__(self) -> None:
        rings = self.shape in ("ringing", "packet")
        checks: tuple[tuple[str, bool, object, str], ...] = (
            ("shape", self.shape in get_args(Shape), self.shape, "one of " + ", ".join(get_args(Shape))),
            ("rise_s, fall_s", min(self.rise_s, self.fall_s) > 0, (self.rise_s, self.fall_s), "times above zero"),
            ("ring_hz", (self.ring_hz > 0) == rings, self.ring_hz, "a frequency for ringing and packet, else zero"),
            ("weights", abs(sum(self.weights) - 1) < 1e-9, self.weights, "shares of one"),
            ("offsets_s", min(self.offsets_s, default=-1) >= 0, self.offsets_s, "times from zero"),
            ("offsets_s", len(self.offsets_s) == len(self.weights), len(self.offsets_s), "as many as weights"),
        )
        for field, good, found, expected in checks:
            if not good:
                raise InputError(
                    complaint("source current", field, expected=expected, found=found, advice="correct the source")
                )

    def stretched(self, factor: float) -> SourceCurrent:
        """The same current, `factor` times as slow (the frequency of a ringing belongs to its circuit and stays)."""
        return replace(
            self,
            rise_s=self.rise_s * factor,
            fall_s=self.fall_s * factor,
            offsets_s=tuple(offset * factor for offset in self.offsets_s),
        )


def train(current: SourceCurrent, offsets_s: Sequence[float], weights: Sequence[float] | None = None) -> SourceCurrent:
    """A current repeated at the given times, of the same charge in all.

    Parameters
    ----------
    current : a single pulse.
    offsets_s : when each sub-pulse comes after the reference instant [s], >= 0.
    weights : their charges relative to each other; equal if None.

    Raises
    ------
    InputError
        If a time is below zero, or there are not as many weights as times.
    """
    shares = [1.0] * len(offsets_s) if weights is None else list(weights)
    total = sum(shares)
    return replace(current, offsets_s=tuple(offsets_s), weights=tuple(share / total for share in shares))


def source_spectrum(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    """Laplace transform of a source current, same shape as s [s at unit charge], reference instant t = 0.

    Gaussian and asymmetric pulses and packets peak at t = 0, the others begin there. A ringing burst begins with a
    Gaussian flank of deviation `rise_s`. On the grid itself (`laplace_grid`) the spectra that cost time are
    interpolated between a part of the frequencies, within 1e-5 of their value at 0 Hz; elsewhere every one is computed.

    Parameters
    ----------
    current : what the source drives.
    s : complex frequencies [1/s], real part >= 0.

    Notes
    -----
    Gaussian: common in the literature on discharges in cables. Heidler: F. Heidler, 1985, and IEC 62305-1 Annex B
    (from memory). Damped oscillation, packet: common practice, no source.
    """
    if current.shape == "gaussian":
        pulse = np.exp((s * current.rise_s) ** 2 / 2)
    elif current.shape == "exponential":
        pulse = 1 / ((1 + s * current.rise_s) * (1 + s * current.fall_s))
    elif current.shape == "ringing":
        omega = 2 * np.pi * current.ring_hz
        pulse = omega / ((s + 1 / current.fall_s) ** 2 + omega**2) * np.exp((s * current.rise_s) ** 2 / 2)
    elif current.shape == "heidler":
        pulse = _along(lambda points: _heidler(current, points), s, 1.5 * current.rise_s + 4 * current.fall_s)
    else:
        pulse = _along(lambda points: _bell(current, points), s, 2 * max(current.rise_s, current.fall_s))
    if current.offsets_s != (0.0,):
        pulse = pulse * _along(lambda points: _repeated(current, points), s, max(current.offsets_s))
    return np.asarray(pulse)


def source_wave(current: SourceCurrent, time_s: FloatArray) -> FloatArray:
    """The current at given times after its reference instant, same shape [1/s at unit charge].

    Parameters
    ----------
    current : what the source drives; the Gaussian flank of a ringing one is left out.
    time_s : any times [s].
    """
    wave = np.zeros_like(time_s)
    for offset_s, weight in zip(current.offsets_s, current.weights, strict=True):
        wave += weight * _single_wave(current, time_s - offset_s)
    return wave


def half_width_s(current: SourceCurrent) -> float:
    """Width of a single pulse between half heights [s], to 1e-3; sub-pulses of a train are not counted."""
    time_s = np.arange(-4 * current.rise_s, 4 * (current.rise_s + current.fall_s), current.rise_s / 50)
    wave = _single_wave(current, time_s)
    peak = int(np.argmax(wave))
    half = wave[peak] / 2
    rising = np.interp(half, wave[: peak + 1], time_s[: peak + 1])
    falling = np.interp(-half, -wave[peak:], time_s[peak:])
    return float(falling - rising)


def _single_wave(current: SourceCurrent, time_s: FloatArray) -> FloatArray:
    rise_s, fall_s, after = current.rise_s, current.fall_s, np.maximum(time_s, 0.0)
    if current.shape == "exponential":
        if rise_s == fall_s:
            return np.asarray(after / rise_s**2 * np.exp(-after / rise_s))
        return np.asarray((np.exp(-after / fall_s) - np.exp(-after / rise_s)) / (fall_s - rise_s))
    if current.shape == "heidler":
        front = (after / rise_s) ** _STEEPNESS
        area_s = float(_heidler_area(current, np.zeros(1, complex)).real[0])
        return np.asarray(front / (1 + front) * np.exp(-after / fall_s) / area_s)
    omega = 2 * np.pi * current.ring_hz
    if current.shape == "ringing":
        return np.asarray(np.exp(-after / fall_s) * np.sin(omega * after))
    before = np.minimum(time_s, 0.0)
    bell = np.exp(-((before / rise_s) ** 2) / 2 - (after / fall_s) ** 2 / 2)
    return np.asarray(bell * np.cos(omega * time_s) / (np.sqrt(np.pi / 2) * (rise_s + fall_s)))


def _repeated(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    """Transform of unit impulses at the times of a train."""
    total = np.zeros_like(s)
    for offset_s, weight in zip(current.offsets_s, current.weights, strict=True):
        total += weight * np.exp(-s * offset_s)
    return total


def _bell(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    """Two half Gaussians, alone or as the envelope of a carrier."""
    if current.ring_hz == 0:
        return _two_half_gaussians(current, s)
    shift = 2j * np.pi * current.ring_hz
    return np.asarray((_two_half_gaussians(current, s - shift) + _two_half_gaussians(current, s + shift)) / 2)


def _two_half_gaussians(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    # the transform of exp(-t^2/2 sigma^2) for t > 0 is sigma sqrt(pi/2) erfcx(s sigma/sqrt 2); erfcx(z) = w(jz)
    rising = current.rise_s * wofz(-1j * s * current.rise_s / np.sqrt(2))
    falling = current.fall_s * wofz(1j * s * current.fall_s / np.sqrt(2))
    return np.asarray((rising + falling) / (current.rise_s + current.fall_s))


def _heidler(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    area_s = _heidler_area(current, np.zeros(1, complex)).real[0]
    return np.asarray(_heidler_area(current, s) / area_s)


def _heidler_area(current: SourceCurrent, s: ComplexArray) -> ComplexArray:
    """Transform of x^n/(1 + x^n) exp(-t/fall) with x = t/rise [s], by the trapezoidal rule.

    The function and its first n - 1 derivatives begin at zero, so the rule errs only by what the spectrum holds
    beyond 2 pi / step - |p|. Where the front has ended, what remains is a geometric series.
    """
    p = s * current.rise_s + current.rise_s / current.fall_s
    within = np.abs(p.imag) < _FRONT_BAND
    step = 2 * np.pi / (float(np.abs(p.imag[within]).max(initial=0.0)) + _FRONT_BAND)
    front = (step * np.arange(1, round(_FRONT_END / step) + 1)) ** _STEEPNESS
    turn = np.exp(-p[within] * step)
    lacking = np.zeros_like(turn)
    for share in 1 / (1 + front[::-1]):
        lacking += share
        lacking *= turn
    found = np.zeros_like(p)
    found[within] = current.rise_s * step * (turn / (1 - turn) - lacking)
    return found


def _along(function: Callable[[ComplexArray], ComplexArray], s: ComplexArray, length_s: float) -> ComplexArray:
    """A spectrum at s; on the grid from a part of its frequencies, as a pulse so short is smooth over frequency.

    Parameters
    ----------
    function : the spectrum at any frequencies.
    s : complex frequencies [1/s].
    length_s : time from t = 0 within which (nearly) all of the current flows [s].
    """
    if s is not laplace_grid():
        return function(s)
    step = float(s[1].imag - s[0].imag)
    stride = next((stride for stride in _STRIDES if stride * step * length_s <= _STEP_RAD), 1)
    if stride == 1:
        return function(s)
    spans = -(-s.size // stride)
    ahead = _POINTS // 2 - 1
    known = function(s[0] + 1j * step * stride * np.arange(-ahead, spans + _POINTS - ahead - 1))
    found = np.zeros((spans, stride), complex)
    for place, share in enumerate(_shares(stride)):
        found += known[place : place + spans, None] * share
    return found.reshape(-1)[: s.size]


@lru_cache(maxsize=len(_STRIDES))
def _shares(stride: int) -> FloatArray:
    """Lagrange's weights of the points around a span at its inner places, (points, stride)."""
    places = np.arange(_POINTS) - (_POINTS // 2 - 1.0)
    inside = np.arange(stride) / stride
    return np.array(
        [np.prod([(inside - other) / (own - other) for other in places if other != own], axis=0) for own in places]
    )
