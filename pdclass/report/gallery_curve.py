"""What the gallery shows of a measured curve: its points, and the line that was fitted to them."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from pdclass.pulses import FloatArray
from pdclass.report.gallery_physics import Journey, followed
from pdclass.sim.cable import DB_PER_NEPER
from pdclass.sim.measured_line import FittedLine, MeasuredCurve, fit_line, propagation_of, read_curve

_SHOWN_HZ = (0.1e6, 50e6)
_LINE_POINTS = 160


@dataclass(frozen=True)
class Misfit:
    """Largest distance of a fitted line from its curve: fitted over measured less one, and where [MHz]."""

    share: float
    mhz: float


@dataclass(frozen=True)
class CurveFit:
    """A measured curve and its line.

    Attributes
    ----------
    name : of the file, without its folder.
    impedance_ohm : of the line [ohm]; None where the curve has none.
    points_mhz, points_db_per_km, points_m_per_us : as measured, (points,).
    mhz, db_per_km, m_per_us : the fitted line, beyond the measured span too, (frequencies,).
    attenuation, velocity : largest misfits at the points.
    """

    name: str
    impedance_ohm: float | None
    points_mhz: FloatArray
    points_db_per_km: FloatArray
    points_m_per_us: FloatArray
    mhz: FloatArray
    db_per_km: FloatArray
    m_per_us: FloatArray
    attenuation: Misfit
    velocity: Misfit


def curve_name(path: str) -> str:
    """What the page calls the curve of a file."""
    return f"measured curve {Path(path).name}"


def curve_journey(path: str) -> Journey:
    """A current 5 ns wide along the line of a measured curve, matched at both ends."""
    fitted = fit_line(read_curve(Path(path)))
    return followed(curve_name(path), lambda s: propagation_of(fitted, s))


def curve_fit(path: str) -> CurveFit:
    """The points of a measured curve beside the line that stands for them.

    Raises
    ------
    InputError
        If the file is no curve, or none of a passive, causal line.
    """
    curve = read_curve(Path(path))
    fitted = fit_line(curve)
    hz = np.geomspace(min(_SHOWN_HZ[0], curve.freq_hz[0]), max(_SHOWN_HZ[1], curve.freq_hz[-1]), _LINE_POINTS)
    loss, speed = _line(fitted, hz)
    loss_there, speed_there = _line(fitted, curve.freq_hz)
    return CurveFit(
        name=curve_name(path),
        impedance_ohm=fitted.impedance_ohm,
        points_mhz=curve.freq_hz / 1e6,
        points_db_per_km=curve.attenuation_db_per_km,
        points_m_per_us=curve.velocity_m_per_us,
        mhz=hz / 1e6,
        db_per_km=loss,
        m_per_us=speed,
        attenuation=_misfit(curve, loss_there / curve.attenuation_db_per_km - 1),
        velocity=_misfit(curve, speed_there / curve.velocity_m_per_us - 1),
    )


def _line(fitted: FittedLine, hz: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Attenuation [dB/km] and phase velocity [m/us] of a fitted line."""
    gamma = propagation_of(fitted, np.asarray(2j * np.pi * hz, np.complex128))
    return np.asarray(gamma.real * DB_PER_NEPER * 1e3), np.asarray(2e-6 * np.pi * hz / gamma.imag)


def _misfit(curve: MeasuredCurve, shares: FloatArray) -> Misfit:
    at = int(np.argmax(np.abs(shares)))
    return Misfit(float(shares[at]), float(curve.freq_hz[at]) / 1e6)
