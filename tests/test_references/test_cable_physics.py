"""The simulated cable against published formulas and values.

Values marked "computed" were computed once, by an independent implementation of the published formulas.
"""

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import epsilon_0
from scipy.optimize import brentq
from scipy.special import erf

from pdclass.sim.cable import (
    ALUMINIUM_OHM_M,
    COPPER_OHM_M,
    Cable,
    Semicon,
    conductor_impedance,
    excess_impedance,
    insulation_admittance,
    line_constants,
    line_of,
    nominal_impedance,
    semicon_admittance,
)
from pdclass.sim.grid import LEAD_S, band_end, laplace_grid, to_samples
from pdclass.sim.network import Route, Section, voltage_along

DB_PER_NEPER = 8.685889638
SKIN_DB_PER_KM = 7.0
#: 12/20 kV, 240 mm2 aluminium, copper tube of 0.5 mm, perfect radial contacts (computed).
REFERENCE = Cable(9.1e-3, 9.7e-3, 15.2e-3, 15.8e-3, 0.5e-3, ALUMINIUM_OHM_M, COPPER_OHM_M, 2.3, 5e-4)


def _iec_skin_factor(resistance_ohm_per_m):
    """Skin effect factor of IEC 60287-1-1 at 50 Hz for k_s = 1 and x_s <= 2.8."""
    x4 = (8 * np.pi * 50 / resistance_ohm_per_m * 1e-7) ** 2
    return x4 / (192 + 0.8 * x4)


@pytest.mark.parametrize(
    ("area_mm2", "hot_ohm_per_m", "printed", "exact"),
    [
        (240, 0.096143e-3, 0.008835, 0.0088351),  # copper
        (240, 0.160263e-3, 0.003194, 0.0031941),  # aluminium
        (630, 0.0360853e-3, 0.060124, 0.060139),  # copper
        (1000, 0.0373091e-3, 0.056420, 0.056432),  # aluminium
        (1000, 0.0224418e-3, 0.144437, 0.144661),  # copper
    ],
)
def test_skin_effect_at_50_hz(area_mm2, hot_ohm_per_m, printed, exact):
    """The Bessel conductor at 90 degrees has the skin effect factor of IEC 60287-1-1.

    Formula of IEC 60287-1-1, resistances of IEC 60228 (both as published); exact values computed.
    """
    radius = np.sqrt(area_mm2 * 1e-6 / np.pi)
    impedance = conductor_impedance(radius, hot_ohm_per_m * area_mm2 * 1e-6, np.array([2j * np.pi * 50]))
    found = impedance.real[0] / hot_ohm_per_m - 1
    assert _iec_skin_factor(hot_ohm_per_m) == pytest.approx(printed, rel=2e-4)
    assert found == pytest.approx(exact, rel=2e-4)
    assert found == pytest.approx(printed, rel=2e-3)


@pytest.mark.parametrize(("permittivity", "computed"), [(2.3, 0.3795), (2.4, 0.3960), (2.5, 0.4125)])
def test_capacitance_of_a_published_cable(permittivity, computed):
    """18/30 kV, 1000 mm2 aluminium (HD 620 10C / VDE 0276-620 type): data sheet 0.39 uF/km (published)."""
    cable = replace(REFERENCE, inner_m=19.95e-3, outer_m=27.95e-3, permittivity=permittivity, loss_tangent=1e-9)
    s = np.array([2j * np.pi * 50])
    per_km_uf = insulation_admittance(cable, s).imag[0] / (2 * np.pi * 50) * 1e9
    assert per_km_uf == pytest.approx(computed, abs=1e-4)
    if permittivity < 2.45:
        assert per_km_uf == pytest.approx(0.39, rel=0.05)


@pytest.mark.parametrize(
    ("hz", "r_mohm", "l_nh", "c_pf", "db_per_km", "v_m_per_us", "z_ohm"),
    [
        (100e3, 2.688, 114.63, 284.9, 0.59, 175.0, 20.06 - 0.37j),
        (1e6, 8.492, 111.70, 284.9, 1.94, 177.3, 19.80 - 0.11j),
        (3e6, 14.693, 111.13, 284.9, 3.46, 177.7, 19.75 - 0.06j),
        (10e6, 26.807, 110.77, 284.9, 6.67, 178.0, 19.72 - 0.03j),
        (30e6, 46.415, 110.59, 284.9, 12.53, 178.2, 19.70 - 0.02j),
    ],
)
def test_reference_cable(hz, r_mohm, l_nh, c_pf, db_per_km, v_m_per_us, z_ohm):
    """Line constants of the reference cable (computed from Schelkunoff 1934 and Ametani et al. 2004)."""
    s = np.array([2j * np.pi * hz])
    line = line_constants(REFERENCE, s)
    gamma, impedance = (part[0] for part in line_of(REFERENCE, s))
    assert line.impedance.real[0] * 1e3 == pytest.approx(r_mohm, rel=0.005)
    assert line.impedance.imag[0] / (2 * np.pi * hz) * 1e9 == pytest.approx(l_nh, rel=0.005)
    assert line.admittance.imag[0] / (2 * np.pi * hz) * 1e12 == pytest.approx(c_pf, rel=0.005)
    # the table gives two decimals of the attenuation
    assert gamma.real * DB_PER_NEPER * 1e3 == pytest.approx(db_per_km, rel=0.005, abs=0.005)
    assert 2 * np.pi * hz / gamma.imag / 1e6 == pytest.approx(v_m_per_us, rel=0.005)
    assert abs(impedance - z_ohm) < 0.005 * abs(z_ohm)


@pytest.mark.parametrize(
    ("sigma", "permittivity", "at_10_mhz", "at_30_mhz"),
    [(1.0, 100, 7.12, 16.44), (0.1, 100, 10.08, 23.07), (0.01, 200, 7.02, 12.87), (1e-3, 1000, 6.67, 12.53)],
)
def test_reference_cable_with_semiconducting_screens(sigma, permittivity, at_10_mhz, at_30_mhz):
    """Attenuation in dB/km with lossy screens of conductivity sigma (computed; Ametani et al. 2004, Eq. 14, 15)."""
    lossy = replace(REFERENCE, semicon=(Semicon(sigma, permittivity), Semicon(sigma, permittivity)))
    found = line_of(lossy, 2j * np.pi * np.array([10e6, 30e6])).gamma.real * DB_PER_NEPER * 1e3
    assert found == pytest.approx([at_10_mhz, at_30_mhz], rel=0.005)


def _way(cable, distance_m, s):
    """Transfer over a distance on a long cable with a matched far end."""
    line = line_of(cable, s)
    return voltage_along(Route((Section(line, 1e4),), (), 1 / line.impedance, s), distance_m)


def _arrival(cable, distance_m):
    """A Gaussian of 5 ns after a distance between matched ends: time [s] and current per charge."""
    s = laplace_grid()
    spectrum = np.exp((s * 5e-9) ** 2 / 2 - s * LEAD_S) * _way(cable, distance_m, s) * band_end()
    wave = to_samples(spectrum, 250e6)
    return np.arange(wave.size) / 250e6, wave


@pytest.mark.parametrize("distance_m", [100.0, 500.0, 1000.0, 2000.0, 4000.0])
def test_charge_arrives_whole(distance_m):
    """Area is conserved to 0.2 % over 0.1-4 km (computed): the gain of a matched line at 0 Hz is one.

    The area is the transform at 0 Hz. Within 52 us the record lacks the tail of the skin effect, for a line with
    transfer exp(-K sqrt(s)) the share erf(K / (2 sqrt(t))).
    """
    way = _way(REFERENCE, distance_m, np.array([0.01 + 0j]))
    assert way.real[0] == pytest.approx(1.0, abs=0.002)
    time_s, wave = _arrival(REFERENCE, distance_m)
    k = 6.67 / DB_PER_NEPER * distance_m / 1000 / np.sqrt(np.pi * 10e6)
    heard = time_s < 52e-6
    passed_s = 50e-6 - distance_m / 178e6
    assert wave[heard].sum() / 250e6 == pytest.approx(1 - erf(k / (2 * np.sqrt(passed_s))), abs=0.01)


@pytest.mark.parametrize(
    ("distance_m", "peak", "rise_ns", "width_ns", "fall_ns"),
    [
        (500.0, 0.560, 10.1, 15.0, 20.7),
        (1000.0, 0.334, 11.9, 20.0, 44.8),
        (2000.0, 0.141, 16.9, 39.9, 126.0),
        (4000.0, 0.043, 33.3, 124.0, 442.0),
    ],
)
def test_effect_of_distance(distance_m, peak, rise_ns, width_ns, fall_ns):
    """A Gaussian of 5 ns on the reference cable, ends matched (computed): height and edges after a distance.

    The table has a permittivity and a loss tangent that do not change with frequency, which no passive material
    can have. With them the simulator's conductors give the table; with the causal insulation of the simulator
    the same loss comes with dispersion, and the rise differs by up to a sixth, the width by up to a tenth.
    """
    hz = np.maximum(np.arange(40_001) * 5e3, 1.0)
    s = 2j * np.pi * hz
    line = line_constants(REFERENCE, s)
    fixed = s * 2 * np.pi * epsilon_0 * 2.3 * (1 - 5e-4j) / np.log(15.2 / 9.7)
    wanted = [peak, rise_ns, width_ns, fall_ns]
    assert _shape(s, np.sqrt(line.impedance * fixed), distance_m) == pytest.approx(wanted, rel=0.03)
    assert _shape(s, line_of(REFERENCE, s).gamma, distance_m) == pytest.approx(wanted, rel=0.18)


@pytest.mark.parametrize(
    ("distance_m", "peak", "rise_ns", "width_ns", "fall_ns"),
    [
        (100.0, 0.814, 8.9, 12.8, 12.3),
        (500.0, 0.385, 10.8, 21.3, 41.3),
        (1000.0, 0.185, 14.8, 43.8, 80.5),
        (2000.0, 0.083, 31.6, 86.3, 184.0),
        (4000.0, 0.033, 66.2, 180.0, 518.0),
    ],
)
def test_effect_of_distance_with_semiconducting_screens(distance_m, peak, rise_ns, width_ns, fall_ns):
    """The same with screens of 0.1 S/m and permittivity 100 (computed), the insulation's constants again fixed."""
    s = 2j * np.pi * np.maximum(np.arange(40_001) * 5e3, 1.0)
    fixed = s * 2 * np.pi * epsilon_0 * 2.3 * (1 - 5e-4j) / np.log(15.2 / 9.7)
    layer = Semicon(0.1, 100.0)
    within = semicon_admittance(layer, REFERENCE.conductor_m, REFERENCE.inner_m, s)
    around = semicon_admittance(layer, REFERENCE.outer_m, REFERENCE.screen_m, s)
    shunt = 1 / (1 / fixed + 1 / within + 1 / around)
    gamma = np.sqrt(line_constants(REFERENCE, s).impedance * shunt)
    assert _shape(s, gamma, distance_m) == pytest.approx([peak, rise_ns, width_ns, fall_ns], rel=0.03)


def _shape(s, gamma, distance_m):
    """Height over the source's, rise, width, fall [ns] of a 5 ns Gaussian after a distance."""
    spectrum = np.exp((s * 5e-9) ** 2 / 2 - gamma * distance_m + s * (distance_m / 178e6 - 5e-6))
    # 0.625 ns a sample, so that interpolated crossings are good to a hundredth of the shortest edge
    wave = np.fft.irfft(spectrum, 320_000) * 1600e6
    top = int(np.argmax(wave))
    height = wave / wave[top]

    def crossing_ns(level, way):
        beyond = top + way * int(np.argmax(height[top::way] < level))
        return np.interp(level, height[[beyond, beyond - way]], [0.625 * beyond, 0.625 * (beyond - way)])

    rise = crossing_ns(0.9, -1) - crossing_ns(0.1, -1)
    width = crossing_ns(0.5, 1) - crossing_ns(0.5, -1)
    return [wave[top] * 5e-9 * np.sqrt(2 * np.pi), rise, width, crossing_ns(0.1, 1) - crossing_ns(0.9, 1)]


def test_skin_effect_line_step_response():
    """t10 : t50 : t90 = 0.184806 : 1.099055 : 31.66406 K^2 (Wigington, Nahman, Proc. IRE 45, 1957, from memory).

    The line has the simulator's own skin-effect impedance k sqrt(s) as its only loss; times x 4 for twice the length.
    """
    once, twice = (np.array(_step_times(length_m)) for length_m in (1000.0, 2000.0))
    k = SKIN_DB_PER_KM / DB_PER_NEPER / np.sqrt(np.pi * 10e6)  # K = alpha l / sqrt(pi f) of 1 km at 10 MHz
    assert once / k**2 == pytest.approx([0.184806, 1.099055, 31.66406], rel=0.001)
    assert twice == pytest.approx(4 * once, rel=0.001)


def test_skin_effect_line_impulse_response():
    """The impulse response peaks at K^2/6 and is 0.45013 K^2 wide at half its height (same source, computed)."""
    k = SKIN_DB_PER_KM / DB_PER_NEPER / np.sqrt(np.pi * 10e6)
    time_s = np.linspace(0.02, 1.2, 4000) * k**2
    wave = np.array([_talbot(lambda s: _skin_way(s, 1000.0), at) for at in time_s])
    assert time_s[np.argmax(wave)] / k**2 == pytest.approx(1 / 6, abs=0.001)
    above = time_s[wave > wave.max() / 2]
    assert (above[-1] - above[0]) / k**2 == pytest.approx(0.45013, abs=0.001)


def _skin_way(s, length_m):
    """Transfer over a line of the reference cable's impedance that has an excess of skin effect as its only loss."""
    skin = excess_impedance(replace(REFERENCE, excess_db_per_km=SKIN_DB_PER_KM, excess_power=0.5), s)
    return np.exp(-skin / (2 * nominal_impedance(REFERENCE)) * length_m)


def _step_times(length_m):
    """10, 50 and 90 % times [s] of the step response of such a line."""

    def missing(time_s, level):
        return _talbot(lambda s: _skin_way(s, length_m) / s, time_s) - level

    return [brentq(missing, 1e-10, 1e-2, args=(level,), xtol=1e-15, rtol=1e-9) for level in (0.1, 0.5, 0.9)]


def _talbot(transform, time_s, terms=32):
    """Inverse Laplace transform at one time (fixed Talbot contour; J. Abate, W. Whitt 2006, from memory)."""
    angle = np.pi * np.arange(1, terms) / terms
    cotangent = 1 / np.tan(angle)
    delta = np.append(2 * terms / 5 + 0j, 2 * np.pi * np.arange(1, terms) / 5 * (cotangent + 1j))
    weight = np.append(0.5 + 0j, 1 + 1j * angle * (1 + cotangent**2) - 1j * cotangent) * np.exp(delta)
    return 2 / (5 * time_s) * (weight * transform(delta / time_s)).real.sum()


def test_velocity_from_the_data_sheet():
    """With L' of the metal radii and C' of the data sheet: 174.5 m/us and 14.7 ohm (form of Wagenaars et al. 2010)."""
    inductance, capacitance = 84.2e-9, 0.39e-9
    cable = replace(
        REFERENCE,
        conductor_m=19.05e-3,
        inner_m=19.95e-3,
        outer_m=27.95e-3,
        screen_m=19.05e-3 * np.exp(inductance / 2e-7),
        permittivity=capacitance * np.log(27.95 / 19.95) / (2 * np.pi * epsilon_0),
    )
    s = np.array([2j * np.pi * 30e6])
    line = line_of(cable, s)
    assert s.imag[0] / line.gamma.imag[0] / 1e6 == pytest.approx(174.5, rel=0.005)
    assert line.impedance.real[0] == pytest.approx(14.7, rel=0.005)


@pytest.mark.parametrize(("length_m", "window_us"), [(1200.0, 15.0), (1700.0, 20.0)])
def test_first_echo_in_the_window(length_m, window_us):
    """The first echo of 1.2 km is back within 15 us, that of 1.7 km within 20 us (common practice, no source)."""
    s = laplace_grid()
    line = line_of(REFERENCE, s)
    there_and_back = np.exp((s * 20e-9) ** 2 / 2 - s * LEAD_S - 2 * line.gamma * length_m)
    arrived_s = np.argmax(to_samples(there_and_back, 250e6)) / 250e6 - LEAD_S
    assert 0.85 * window_us < arrived_s * 1e6 < window_us
