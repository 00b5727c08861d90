"""What the gallery shows of a measured curve."""

import numpy as np
import pytest

from pdclass.report.gallery_curve import curve_fit, curve_journey, curve_name
from pdclass.report.gallery_plots import curve_figure
from pdclass.sim.cable import DB_PER_NEPER

# attenuation a sqrt(f) and the velocity that belongs to it beyond a delay of 5.5 ns/m: beta = alpha for a power of 1/2
HZ = np.geomspace(50e3, 40e6, 12)
NEPER_PER_M = 2e-3 * np.sqrt(HZ / 10e6)
M_PER_US = 2e-6 * np.pi * HZ / (NEPER_PER_M + 2 * np.pi * HZ * 5.5e-9)
DB_PER_KM = NEPER_PER_M * 1e3 * DB_PER_NEPER


def written(path, losses, speeds):
    """A curve file of attenuations and velocities."""
    rows = "".join(f"{f},{a},{v}\n" for f, a, v in zip(HZ, losses, speeds, strict=True))
    path.write_text("freq_hz,attenuation_db_per_km,velocity_m_per_us\n" + rows, encoding="utf-8")
    return str(path)


def test_an_exact_curve_is_fitted_without_misfit(tmp_path):
    """A line of skin effect alone (closed form) comes back, between and at its points."""
    fit = curve_fit(written(tmp_path / "line.csv", DB_PER_KM, M_PER_US))
    assert fit.name == "measured curve line.csv"
    assert abs(fit.attenuation.share) < 1e-3
    assert abs(fit.velocity.share) < 1e-4
    assert np.interp(10.0, fit.mhz, fit.db_per_km) == pytest.approx(2 * DB_PER_NEPER, rel=2e-3)
    assert fit.impedance_ohm is None
    assert (fit.mhz[0], fit.mhz[-1]) == pytest.approx((0.05, 50.0))


def test_the_largest_misfit_is_found_with_its_sign_and_place(tmp_path):
    """A point ten per cent too high is where the line lies below the curve."""
    bumped = DB_PER_KM * np.where(np.arange(12) == 7, 1.1, 1.0)
    fit = curve_fit(written(tmp_path / "line.csv", bumped, M_PER_US))
    assert fit.attenuation.mhz == pytest.approx(HZ[7] / 1e6)
    assert -0.1 < fit.attenuation.share < -0.05


def test_a_pulse_travels_along_the_fitted_line(tmp_path):
    """Its losses are those of the curve, and skin effect leaves less of the peak the farther it goes."""
    path = written(tmp_path / "line.csv", DB_PER_KM, M_PER_US)
    found = curve_journey(path)
    assert found.kind == curve_name(path)
    assert found.db_per_km[1] == pytest.approx(2 * DB_PER_NEPER, rel=2e-3)
    peaks = [step.peak_share for step in found.steps]
    assert peaks == sorted(peaks, reverse=True)


def test_a_curve_is_drawn_with_all_its_points(tmp_path):
    """Each of the twelve points has its circle in both panels."""
    figure = curve_figure(curve_fit(written(tmp_path / "line.csv", DB_PER_KM, M_PER_US)), name="c")
    assert "attenuation and velocity of the measured curve line.csv" in figure
    assert len([use for use in figure.split("<use ")[1:] if "fill: #ffffff" in use]) == 24
