"""A line from a measured curve of attenuation and velocity, so that a utility can put in its own cable.

The curve is fitted by parts that are passive and causal each, with weights that are never negative: whatever the
measurement's noise, the line cannot give power back, and nothing arrives before its delay. Attenuation and delay
beyond that of the front belong together by the minimum-phase relation, because each part has both.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.constants import c as light_m_per_s
from scipy.optimize import nnls

from pdclass.errors import InputError, complaint
from pdclass.pulses import FloatArray
from pdclass.sim.cable import DB_PER_NEPER, Line
from pdclass.sim.grid import ComplexArray

#: Columns that a curve needs, and the one that it may have besides.
COLUMNS = ("freq_hz", "attenuation_db_per_km", "velocity_m_per_us")
IMPEDANCE_COLUMN = "impedance_ohm"
#: Least points of a curve, and least ratio of its highest to its lowest frequency.
FEWEST_POINTS = 6
LEAST_SPAN = 10.0
#: Greatest relative misfit at any point: attenuation, velocity, impedance from its mean.
ATTENUATION_TOLERANCE = 0.25
VELOCITY_TOLERANCE = 0.05
IMPEDANCE_TOLERANCE = 0.5
#: Least and most attenuation at 10 MHz [dB/km], elsewhere times sqrt(f / 10 MHz); outside, the unit is another one.
#: Far wider than medium-voltage cables are (a few to some hundred dB/km at 10 MHz; from memory).
PLAUSIBLE_DB_PER_KM = (0.5, 2000.0)
PLAUSIBLE_AT_HZ = 10e6
_LARGEST_FILE = 1 << 20
_COMMAS = "separate the fields by commas, not semicolons"
_POWERS = (0.5, 0.6, 0.7, 0.8, 0.9)
_PER_DECADE = 3
# one per cent of the velocity counts as much as this many of the attenuation
_VELOCITY_WEIGHT = 5.0


@dataclass(frozen=True, eq=False)
class MeasuredCurve:
    """Attenuation and velocity of a cable over frequency, each (points,).

    Attributes
    ----------
    where : file or other origin, for messages.
    freq_hz : rising [Hz].
    attenuation_db_per_km : > 0 [dB/km].
    velocity_m_per_us : phase velocity, up to that of light [m/us].
    impedance_ohm : magnitude of the characteristic impedance [ohm], or None.
    """

    where: str
    freq_hz: FloatArray
    attenuation_db_per_km: FloatArray
    velocity_m_per_us: FloatArray
    impedance_ohm: FloatArray | None = None


@dataclass(frozen=True)
class FittedLine:
    """A line as a delay and a sum of causal, passive parts.

    Attributes
    ----------
    delay_s_per_m : of the front, not below that of light [s/m].
    powers : (power of s / 1 rad/s, weight [1/m]) of parts that attenuate with a power of frequency.
    relaxations : (time constant [s], weight [s/m]) of parts w*s/(1 + s*tau), which saturate.
    impedance_ohm : characteristic impedance [ohm], the same at every frequency; None = not measured.
    """

    delay_s_per_m: float
    powers: tuple[tuple[float, float], ...]
    relaxations: tuple[tuple[float, float], ...]
    impedance_ohm: float | None


def read_curve(path: Path) -> MeasuredCurve:
    """A curve from a CSV file with a header.

    Raises
    ------
    InputError
        If the file cannot be read, is separated by something else than commas, lacks a column, has a row with another
        number of fields than its header, or holds something that is no number, or if `check_curve` refuses the curve.
    """
    table = _read_table(path)
    columns = {name: _numbers(path, table, name) for name in COLUMNS}
    impedance = _numbers(path, table, IMPEDANCE_COLUMN) if IMPEDANCE_COLUMN in table.header else None
    hz, loss, speed = (columns[name] for name in COLUMNS)
    curve = MeasuredCurve(str(path), hz, loss, speed, impedance)
    check_curve(curve)
    return curve


def check_curve(curve: MeasuredCurve) -> None:
    """Nothing, where a curve can be that of a passive, causal line as far as single points show it.

    Raises
    ------
    InputError
        If it has too few points or too narrow a span, frequencies that do not rise, an attenuation or impedance
        that is not above zero, an attenuation that is none of a cable in dB/km, or a velocity that is not above zero
        and up to that of light.
    """
    hz = curve.freq_hz
    if hz.size < FEWEST_POINTS:
        raise _wrong(curve, "rows", f"at least {FEWEST_POINTS}", hz.size, "measure more frequencies")
    _each(curve, "freq_hz", hz, np.diff(hz, prepend=0.0) > 0, "rising from above zero", "sort the rows by frequency")
    if hz[-1] < LEAST_SPAN * hz[0]:
        advice = "a fit over less would be a guess elsewhere"
        raise _wrong(curve, "freq_hz", "a span of a decade or more", f"{hz[0]:g} to {hz[-1]:g}", advice)
    loss, speed = curve.attenuation_db_per_km, curve.velocity_m_per_us
    advice = "a cable without power of its own loses some at every frequency"
    _each(curve, "attenuation_db_per_km", loss, loss > 0, "above zero (passive)", advice)
    _check_unit(curve)
    possible = (speed > 0) & (speed <= light_m_per_s / 1e6)
    advice = "check unit and reference length"
    _each(curve, "velocity_m_per_us", speed, possible, "above zero, up to 299.792458", advice)
    if curve.impedance_ohm is not None:
        ohm = curve.impedance_ohm
        _each(curve, IMPEDANCE_COLUMN, ohm, ohm > 0, "above zero", "give the magnitude, or leave the column out")


def fit_line(curve: MeasuredCurve) -> FittedLine:
    """The causal, passive line nearest to a curve, by non-negative least squares.

    Parts: powers of s from 0.5 to 0.9 and relaxations within the measured span. Attenuation is fitted relative to its
    values and slowness relative to its own, the front's delay being at least that of light.

    Raises
    ------
    InputError
        If `check_curve` refuses the curve, if the line misses an attenuation by more than 25 % or a velocity by more
        than 5 % (then no causal line has both), or if an impedance lies over 50 % off their mean.
    """
    check_curve(curve)
    s = (2j * np.pi * curve.freq_hz).astype(np.complex128)
    tau = _time_constants(curve.freq_hz)
    # every part in units of its attenuation in the middle of the span, so that the weights are of one size
    middle = abs(s[s.size // 2])
    parts = np.array([*((s / middle) ** n for n in _POWERS), *(s / middle / (1 + s * t) for t in tau)])
    neper = curve.attenuation_db_per_km / 1000 / DB_PER_NEPER
    slowness = 1e-6 / curve.velocity_m_per_us
    shape = np.concatenate([parts.real / neper, _VELOCITY_WEIGHT * parts.imag / (s.imag * slowness)], axis=1)
    front = np.concatenate([np.zeros(s.size), _VELOCITY_WEIGHT / slowness])
    wanted = np.concatenate([np.ones(s.size), np.full(s.size, _VELOCITY_WEIGHT)]) - front / light_m_per_s
    # columns of unit length: the weights of the parts, then the front's delay beyond that of light
    matrix = np.concatenate([shape, front[np.newaxis]]).T
    size = np.linalg.norm(matrix, axis=0)
    weights = nnls(matrix / size, wanted, maxiter=10_000)[0] / size
    powers = tuple((n, float(w / middle**n)) for n, w in zip(_POWERS, weights, strict=False) if w > 0)
    saturating = weights[len(_POWERS) : -1] / middle
    line = FittedLine(
        delay_s_per_m=float(1 / light_m_per_s + weights[-1]),
        powers=powers,
        relaxations=tuple((float(t), float(w)) for t, w in zip(tau, saturating, strict=True) if w > 0),
        impedance_ohm=_mean_impedance(curve),
    )
    _check_fit(curve, propagation_of(line, s), s)
    return line


def propagation_of(fitted: FittedLine, s: ComplexArray) -> ComplexArray:
    """Propagation constant of a fitted line [1/m] at complex frequencies [1/s], (frequencies,)."""
    gamma = s * fitted.delay_s_per_m
    logarithm = np.log(s)
    for power, weight in fitted.powers:
        gamma = gamma + weight * np.exp(power * logarithm)
    for tau, weight in fitted.relaxations:
        gamma = gamma + weight * s / (1 + s * tau)
    return np.asarray(gamma)


def measured_line(fitted: FittedLine, s: ComplexArray, *, impedance_ohm: float | None = None) -> Line:
    """A fitted line at complex frequencies [1/s].

    The impedance is real and the same at every frequency: with a propagation constant of positive real part the
    line is then passive.

    Parameters
    ----------
    fitted : the line.
    s : complex frequencies [1/s], (frequencies,).
    impedance_ohm : characteristic impedance [ohm] where the curve has none; a measured one goes before it.

    Raises
    ------
    InputError
        If neither is known.
    """
    ohm = fitted.impedance_ohm if fitted.impedance_ohm is not None else impedance_ohm
    if ohm is None:
        advice = "add the column or give an impedance"
        raise InputError(complaint("curve", IMPEDANCE_COLUMN, expected="a value", found="none", advice=advice))
    return Line(propagation_of(fitted, s), np.full(s.shape, complex(ohm)))


def _check_unit(curve: MeasuredCurve) -> None:
    """Look at the point nearest to 10 MHz, where cables are least unlike each other."""
    at = int(np.argmin(np.abs(np.log(curve.freq_hz / PLAUSIBLE_AT_HZ))))
    hz, loss = float(curve.freq_hz[at]), float(curve.attenuation_db_per_km[at])
    least, most = (bound * np.sqrt(hz / PLAUSIBLE_AT_HZ) for bound in PLAUSIBLE_DB_PER_KM)
    if not least <= loss <= most:
        low, high = PLAUSIBLE_DB_PER_KM
        expected = f"{_short(least)} to {_short(most)} dB/km ({low:g} to {high:g} at 10 MHz, by the root of frequency)"
        advice = "check the units: dB/km, not dB/m, dB over the whole cable or Np/m; Hz, not MHz"
        raise _wrong(curve, f"attenuation_db_per_km at {hz:g} Hz", expected, f"{loss:g}", advice)


def _short(value: float) -> str:
    """Three digits without an exponent."""
    return f"{float(f'{value:.3g}'):g}"


def _time_constants(freq_hz: FloatArray) -> FloatArray:
    """Time constants of relaxations [s] from the lowest to somewhat above the highest frequency of a curve."""
    lowest, highest = 1 / (2 * np.pi * freq_hz[0]), 1 / (2 * np.pi * 3 * freq_hz[-1])
    return np.geomspace(lowest, highest, round(_PER_DECADE * np.log10(lowest / highest)) + 1)


def _mean_impedance(curve: MeasuredCurve) -> float | None:
    if curve.impedance_ohm is None:
        return None
    mean = float(np.exp(np.log(curve.impedance_ohm).mean()))
    near = np.abs(curve.impedance_ohm / mean - 1) <= IMPEDANCE_TOLERANCE
    advice = "leave out what is no characteristic impedance"
    _each(curve, IMPEDANCE_COLUMN, curve.impedance_ohm, near, f"within 50 % of the mean {mean:.3g}", advice)
    return mean


def _check_fit(curve: MeasuredCurve, gamma: ComplexArray, s: ComplexArray) -> None:
    speed = s.imag / gamma.imag / 1e6
    near = np.abs(speed / curve.velocity_m_per_us - 1) <= VELOCITY_TOLERANCE
    advice = "velocity and attenuation contradict causality, measure again"
    expected = "within 5 % of what a causal line with this attenuation can have"
    _each(curve, "velocity_m_per_us", curve.velocity_m_per_us, near, expected, advice)
    loss = gamma.real * DB_PER_NEPER * 1000
    near = np.abs(loss / curve.attenuation_db_per_km - 1) <= ATTENUATION_TOLERANCE
    advice = "smooth the curve or leave out what is noise"
    expected = "within 25 % of what a passive, causal line can have"
    _each(curve, "attenuation_db_per_km", curve.attenuation_db_per_km, near, expected, advice)


def _each(
    curve: MeasuredCurve, column: str, values: FloatArray, fine: NDArray[np.bool_], expected: str, advice: str
) -> None:
    bad = np.flatnonzero(~fine)
    if bad.size:
        row = int(bad[0])
        raise _wrong(curve, f"{column} at {curve.freq_hz[row]:g} Hz", expected, f"{values[row]:g}", advice)


def _wrong(curve: MeasuredCurve, field: str, expected: object, found: object, advice: str) -> InputError:
    return InputError(complaint(curve.where, field, expected=expected, found=found, advice=advice))


class _Table(NamedTuple):
    """Names of the columns, and (line of the file, fields) of every row."""

    header: list[str]
    rows: list[tuple[int, list[str]]]


def _read_table(path: Path) -> _Table:
    lines = _read_lines(path)
    if len(lines) < 2:
        raise InputError(complaint(path, "rows", expected="a header and a curve", found="none", advice="fill it"))
    (_, first), *rows = lines
    header = [name.strip() for name in first]
    if not set(COLUMNS) & set(header) and any(";" in name or "\t" in name for name in header):
        advice = "separate the fields by commas and write numbers with a point, 1.5"
        raise InputError(complaint(path, "header", expected="commas", found=repr(",".join(first)), advice=advice))
    if len(set(header)) < len(header):
        found = ", ".join(header)
        raise InputError(complaint(path, "header", expected="each name once", found=found, advice="rename a column"))
    for number, fields in rows:
        if len(fields) != len(header):
            expected = f"{len(header)} fields as in the header"
            advice = _field_advice(fields, len(header))
            raise InputError(complaint(path, f"line {number}", expected=expected, found=len(fields), advice=advice))
    return _Table(header, rows)


def _field_advice(fields: list[str], wanted: int) -> str:
    if any(";" in field for field in fields):
        return _COMMAS
    if len(fields) > wanted:
        return "a decimal comma? write 1.5, not 1,5; or a comma at the end?"
    return "complete the row"


def _number_advice(field: str) -> str:
    if ";" in field:
        return _COMMAS
    return "write 1.5, not 1,5" if "," in field else "correct it"


def _read_lines(path: Path) -> list[tuple[int, list[str]]]:
    """(line of the file, fields) of every line that is not empty."""
    if not path.is_file():
        found = "a folder" if path.is_dir() else "no file"
        advice = "`[cable] curve` names a file, which is looked for beside the scenario file"
        raise InputError(complaint(path, "curve", expected="a CSV file", found=found, advice=advice))
    try:
        if path.stat().st_size > _LARGEST_FILE:
            advice = "thin the curve out"
            raise InputError(complaint(path, "size", expected="at most 1 MiB", found="more", advice=advice))
        with path.open(encoding="utf-8-sig", newline="") as text:
            lines = csv.reader(text)
            return [(lines.line_num, fields) for fields in lines if any(field.strip() for field in fields)]
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        raise InputError(f"{path}: not readable as CSV: {error}") from None


def _numbers(path: Path, table: _Table, name: str) -> FloatArray:
    if name not in table.header:
        found = ", ".join(table.header)
        raise InputError(complaint(path, "header", expected=name, found=found, advice="name the columns so"))
    column = table.header.index(name)
    values = np.empty(len(table.rows))
    for place, (number, fields) in enumerate(table.rows):
        try:
            values[place] = float(fields[column])
        except ValueError:
            values[place] = np.nan
        if not np.isfinite(values[place]):
            found = fields[column]
            advice = _number_advice(found)
            raise InputError(
                complaint(path, f"line {number}, {name}", expected="a number", found=repr(found), advice=advice)
            )
    return values
