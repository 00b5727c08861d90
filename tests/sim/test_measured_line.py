"""A line from a measured curve is passive, causal, and the cable that was measured."""

from dataclasses import replace
from typing import get_args

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.sim.cable import (
    ALUMINIUM_OHM_M,
    COPPER_OHM_M,
    DB_PER_NEPER,
    LEAD_OHM_M,
    Cable,
    Relaxation,
    Semicon,
    line_of,
    nominal_impedance,
)
from pdclass.sim.cable_kinds import Kind
from pdclass.sim.drawn_cable import CableRanges, attenuation_spread, draw_lines
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.measured_line import (
    PLAUSIBLE_DB_PER_KM,
    FittedLine,
    MeasuredCurve,
    fit_line,
    measured_line,
    propagation_of,
    read_curve,
)
from pdclass.sim.ranges import read_scenario

XLPE = Cable(
    9.1e-3, 9.7e-3, 15.2e-3, 15.8e-3, 0.3e-3, ALUMINIUM_OHM_M, COPPER_OHM_M, 2.3, 1e-3, excess_db_per_km=12.0,
    excess_power=0.7,
)  # fmt: skip
SEMICON = replace(XLPE, semicon=(Semicon(0.05, 30, Relaxation(100, 1e-7, 0.3)), Semicon(0.1, 20)))
PAPER = Cable(
    8e-3, 8e-3, 12e-3, 12e-3, 1.5e-3, COPPER_OHM_M, LEAD_OHM_M, 3.2, 1e-2, relaxation=Relaxation(0.3, 4e-9, 0.4)
)
BAND_HZ = np.geomspace(50e3, 40e6, 40)


def curve_of(cable, hz=BAND_HZ, noise=0.0, seed=0):
    """What an instrument with some noise would show of a cable."""
    line = line_of(cable, 2j * np.pi * hz)
    rough = 1 + noise * np.random.default_rng(seed).standard_normal((2, hz.size))
    loss = line.gamma.real * 1000 * DB_PER_NEPER * rough[0]
    return MeasuredCurve("curve", hz, loss, 2e-6 * np.pi * hz / line.gamma.imag * (1 + (rough[1] - 1) / 20))


def written(path, text):
    """A CSV file of that text."""
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize("cable", [XLPE, SEMICON, PAPER], ids=["xlpe", "semicon", "paper"])
def test_a_computed_cable_comes_back(cable):
    """The fit to a computed cable has its attenuation to 3 % and its velocity to 0.3 % in the measured band."""
    fitted = fit_line(curve_of(cable))
    s = 2j * np.pi * np.geomspace(60e3, 35e6, 111)
    gamma, wanted = propagation_of(fitted, s), line_of(cable, s).gamma
    assert gamma.real == pytest.approx(wanted.real, rel=0.03)
    assert gamma.imag == pytest.approx(wanted.imag, rel=0.003)


@pytest.mark.parametrize("cable", [XLPE, SEMICON, PAPER], ids=["xlpe", "semicon", "paper"])
def test_a_pulse_comes_back(cable):
    """A 15 ns pulse after 1 km on the fitted line is within 2 % of its peak that on the cable itself."""
    s = laplace_grid()
    source = np.exp((s * 15e-9) ** 2 / 2 - s * LEAD_S)
    waves = [
        to_samples(source * np.exp(-gamma * 1000.0), 250e6)
        for gamma in (propagation_of(fit_line(curve_of(cable)), s), line_of(cable, s).gamma)
    ]
    assert waves[0] == pytest.approx(waves[1], abs=0.02 * waves[1].max())


def test_noise_does_not_make_it_active():
    """With 5 % of noise on the attenuation the line stays passive at every frequency, in the band and out of it."""
    s = 2j * np.pi * np.geomspace(1e2, 1e10, 300)
    for seed in range(10):
        gamma = propagation_of(fit_line(curve_of(SEMICON, noise=0.05, seed=seed)), s)
        assert (gamma.real > 0).all()
        assert (gamma.imag > s.imag / 299.792458e6 * (1 - 1e-12)).all()


def test_every_part_is_positive_real():
    """In the whole right half plane the fitted line attenuates more than light's delay would."""
    fitted = fit_line(curve_of(SEMICON, noise=0.05))
    angle = np.linspace(-np.pi / 2 + 1e-6, np.pi / 2 - 1e-6, 31)
    s = (np.geomspace(1e3, 1e11, 40)[:, np.newaxis] * np.exp(1j * angle)).ravel()
    assert (propagation_of(fitted, s).real >= s.real / 299.792458e6).all()


@pytest.mark.parametrize("cable", [SEMICON, PAPER], ids=["semicon", "paper"])
def test_phase_belongs_to_attenuation(cable):
    """The phase beyond the front's delay is the Hilbert transform of the attenuation (once subtracted, numerically)."""
    fitted = fit_line(curve_of(cable))
    for hz in (0.3e6, 3e6, 20e6):
        omega = 2 * np.pi * hz
        # x = omega e^u, an even number of points, so that none meets the removable pole at u = 0
        u = np.linspace(-40.0, 40.0, 400_000)
        x = omega * np.exp(u)
        here, there = (propagation_of(fitted, 1j * at).real for at in (np.array([omega]), x))
        integral = np.trapezoid((there - here) / (x**2 - omega**2) * x, u)
        found = propagation_of(fitted, np.array([1j * omega])).imag[0] - omega * fitted.delay_s_per_m
        assert 2 * omega / np.pi * integral == pytest.approx(found, rel=0.01)


def test_nothing_arrives_before_the_front():
    """Less than 1e-8 of a pulse's energy lies over 100 ns before the front's delay."""
    fitted, s = fit_line(curve_of(PAPER)), laplace_grid()
    wave = to_samples(np.exp((s * 15e-9) ** 2 / 2 - s * LEAD_S - propagation_of(fitted, s) * 2000.0), 250e6)
    front = int((LEAD_S + 2000.0 * fitted.delay_s_per_m - 100e-9) * 250e6)
    assert 1000 < front < int(np.argmax(wave))
    assert (wave[:front] ** 2).sum() < 1e-8 * (wave**2).sum()


def test_a_file_is_read(tmp_path):
    """A CSV with the three columns, in any order and with others beside, is the curve; the impedance is its mean."""
    rows = "".join(
        f"{x},{170 + i},{2 * 10 ** (i / 4)},{1e5 * 10 ** (i / 2)},{20 + i % 2}\n" for i, x in enumerate("abcdef")
    )
    head = "note,velocity_m_per_us,attenuation_db_per_km,freq_hz,impedance_ohm\n"
    curve = read_curve(written(tmp_path / "line.csv", head + rows))
    assert curve.freq_hz == pytest.approx(1e5 * 10 ** (np.arange(6) / 2))
    assert curve.velocity_m_per_us == pytest.approx(170.0 + np.arange(6))
    fitted = fit_line(curve)
    assert fitted.impedance_ohm == pytest.approx(np.sqrt(20 * 21))
    assert measured_line(fitted, laplace_grid()).impedance == pytest.approx(np.sqrt(20 * 21))


def test_the_impedance_has_to_come_from_somewhere():
    """Without the column an impedance is given, else it is an error that names the column."""
    fitted, s = fit_line(curve_of(XLPE)), laplace_grid()
    ohm = nominal_impedance(XLPE)
    line = measured_line(fitted, s, impedance_ohm=ohm)
    assert line.impedance == pytest.approx(ohm)
    assert line.gamma == pytest.approx(propagation_of(fitted, s))
    with pytest.raises(InputError, match="curve: impedance_ohm: expected a value, found none"):
        measured_line(fitted, s)


def bent(**columns):
    """The computed curve with columns replaced."""
    return replace(curve_of(XLPE), **columns)


GOOD = curve_of(XLPE)
HEAD = "freq_hz,attenuation_db_per_km,velocity_m_per_us\n"
WAVY = 1 + 0.6 * np.sin(np.arange(BAND_HZ.size) * 1.5)


@pytest.mark.parametrize(
    ("curve", "message"),
    [
        (MeasuredCurve("short", *(np.ones(3),) * 3), "short: rows: expected at least 6, found 3"),
        (bent(freq_hz=BAND_HZ[::-1]), "rising from above zero"),
        (bent(freq_hz=np.linspace(1e6, 5e6, 40)), "a span of a decade or more"),
        (bent(attenuation_db_per_km=-GOOD.attenuation_db_per_km), r"above zero \(passive\)"),
        (bent(velocity_m_per_us=np.full(40, 310.0)), "up to 299.792458, found 310"),
        (bent(attenuation_db_per_km=GOOD.attenuation_db_per_km * WAVY), "within 25 % of what a passive"),
        (bent(attenuation_db_per_km=60 / np.sqrt(BAND_HZ / 1e6)), "what a passive|with this attenuation"),
        (bent(velocity_m_per_us=np.linspace(185.0, 130.0, 40)), "contradict causality"),
        (bent(velocity_m_per_us=np.linspace(90.0, 185.0, 40)), "contradict causality"),
        (bent(impedance_ohm=np.linspace(5.0, 50.0, 40)), "within 50 % of the mean"),
        (bent(impedance_ohm=np.zeros(40)), "impedance_ohm at 50000 Hz: expected above zero"),
        (
            bent(attenuation_db_per_km=GOOD.attenuation_db_per_km / 1000),
            r"expected 0.\d+ to 2\d\d\d dB/km \(0.5 to 2000 at",
        ),
        (bent(attenuation_db_per_km=GOOD.attenuation_db_per_km * 1000), "found .*; check the units: dB/km, not dB/m"),
        (bent(freq_hz=BAND_HZ / 1e6), "check the units: .* Hz, not MHz"),
    ],
)
def test_impossible_curves_are_refused(curve, message):
    """What no passive, causal line can be is an error that says at which frequency and why."""
    with pytest.raises(InputError, match=message):
        fit_line(curve)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("freq_hz,attenuation_db_per_km\n1e5,2\n", "header: expected velocity_m_per_us"),
        ("freq_hz,attenuation_db_per_km,velocity_m_per_us\n1e5,two,170\n", "line 2, attenuation_db_per_km"),
        (HEAD + "1e5,2\n", "line 2: expected 3 fields as in the header, found 2; complete the row"),
        (HEAD + "\n1e5,2,170\n1e5,1,02,170,9\n", "line 4: expected 3 fields .*, found 5; a decimal comma"),
        (HEAD + "1e5;1,02;170,9\n", "line 2, freq_hz: .*; separate the fields by commas, not semicolons"),
        (HEAD + "1e5;1.02;170.9\n", "line 2: expected 3 fields .*; separate the fields by commas, not semicolons"),
        (HEAD + '1e5,"1,02",170\n', "line 2, attenuation_db_per_km: .*; write 1.5, not 1,5"),
        (HEAD.replace(",", ";") + "1e5;1,02;170,9\n", "header: expected commas, found 'freq_hz;.*with a point, 1.5"),
        ("freq_hz," + HEAD + "1,1e5,2,170\n", "header: expected each name once"),
        ("freq_hz,attenuation_db_per_km,velocity_m_per_us\n1e5,nan,170\n", "expected a number, found 'nan'"),
        ("", "rows: expected a header and a curve, found none"),
        (HEAD, "rows: expected a header and a curve, found none"),
        ("x" * (2 << 20), "at most 1 MiB"),
    ],
)
def test_broken_files_are_refused(tmp_path, text, message):
    """A file that is no curve is an error that names file and line."""
    path = written(tmp_path / "line.csv", text)
    with pytest.raises(InputError, match=message):
        read_curve(path)


def test_what_is_no_file_is_said(tmp_path):
    """A curve that is not there is looked for beside the scenario, and a folder (an empty name too) is none."""
    with pytest.raises(
        InputError, match=r"absent.csv: curve: expected a CSV file, found no file; .* beside the scenario"
    ):
        read_curve(tmp_path / "absent.csv")
    with pytest.raises(InputError, match="expected a CSV file, found a folder"):
        read_curve(tmp_path)
    (tmp_path / "binary.csv").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(InputError, match="not readable as CSV"):
        read_curve(tmp_path / "binary.csv")


def first_line(scenario):
    """The first line of the cable that a scenario file names."""
    return draw_lines(read_scenario(scenario).cable, 1, rng=np.random.default_rng(1), s=laplace_grid())[0][0]


@pytest.mark.parametrize("name", ["", ".", "gone.csv"])
def test_a_scenario_without_its_curve_is_refused(tmp_path, name):
    """An empty name, a folder or a file that is not there never becomes the base world's cable."""
    scenario = written(tmp_path / "own.toml", f'name = "own"\n[cable]\ncurve = "{name}"\n')
    with pytest.raises(InputError, match="curve"):
        first_line(scenario)


def test_spaces_about_names_and_numbers_do_no_harm(tmp_path):
    """Names of columns are stripped, and empty lines are passed over."""
    rows = "".join(f" {1e5 * 10 ** (i / 2)} , {2 * 10 ** (i / 4)} , {170 + i}\n\n" for i in range(6))
    curve = read_curve(written(tmp_path / "line.csv", HEAD.replace(",", " , ") + rows))
    assert curve.velocity_m_per_us == pytest.approx(170.0 + np.arange(6))


@pytest.mark.parametrize("kind", get_args(Kind))
def test_the_plausible_attenuations_hold_every_drawn_cable(kind):
    """Bounds that ask for the unit lie well outside the base world: three times from every drawn cable."""
    hz = np.array([1e6, 10e6, 40e6])
    drawn = attenuation_spread(CableRanges(), kind, hz, 100, rng=np.random.default_rng(1)) / np.sqrt(hz / 10e6)
    assert drawn.min() > 3 * PLAUSIBLE_DB_PER_KM[0]
    assert drawn.max() < PLAUSIBLE_DB_PER_KM[1] / 3


def test_a_line_of_one_part():
    """Delay, a power and a relaxation add up as they are written."""
    s = np.array([1e6j, 1e7 + 1e7j])
    line = FittedLine(5e-9, ((0.5, 1e-7),), ((1e-8, 1e-11),), None)
    assert propagation_of(line, s) == pytest.approx(s * 5e-9 + 1e-7 * np.sqrt(s) + 1e-11 * s / (1 + s * 1e-8))
