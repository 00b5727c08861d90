"""Drawn cables are passive, as wide as the trade knows them, and as narrow as a scenario wants them."""

from dataclasses import replace
from typing import get_args

import numpy as np
import pytest
from pydantic import ValidationError

from pdclass.errors import InputError
from pdclass.sim.cable import COPPER_OHM_M, line_constants, line_of
from pdclass.sim.cable_kinds import CONDUCTOR_MM, EXTRUDED_MM, XLPE, Kind, Materials
from pdclass.sim.drawn_cable import (
    CableRanges,
    FarEndKind,
    attenuation_spread,
    draw_cable,
    draw_far_end,
    draw_lines,
    draw_neighbour,
    draw_route,
    velocity_spread,
)
from pdclass.sim.network import far_admittance, reflection, route_length_m, shown_admittance, voltage_along

KINDS = get_args(Kind)
SWEEP = 2j * np.pi * np.geomspace(1e3, 60e6, 200)
TRADE_HZ = np.array([1e6, 10e6, 30e6])
COUNT = 500


@pytest.fixture(scope="module")
def decibels():
    """Attenuation of drawn cables at 1, 10 and 30 MHz: 10, 50 and 90 % of each kind [dB/km]."""
    draws = {
        kind: attenuation_spread(CableRanges(), kind, TRADE_HZ, 4 * COUNT, rng=np.random.default_rng(3))
        for kind in KINDS
    }
    return {kind: np.quantile(draw, [0.1, 0.5, 0.9], axis=0) for kind, draw in draws.items()}


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("seed", range(6))
def test_any_drawn_cable_is_passive(kind, seed):
    """Resistance, conductance, attenuation and the real part of the characteristic impedance are never negative."""
    cable = draw_cable(CableRanges(), kind, rng=np.random.default_rng(seed))
    constants, line = line_constants(cable, SWEEP), line_of(cable, SWEEP)
    for positive in (constants.impedance, constants.admittance, line.gamma, line.impedance):
        assert (positive.real > 0).all()
    assert cable.conductor_m <= cable.inner_m < cable.outer_m <= cable.screen_m


@pytest.mark.parametrize("kind", KINDS)
def test_any_drawn_cable_is_positive_real(kind):
    """In the whole right half plane series impedance and shunt admittance have positive real parts."""
    rng, angle = np.random.default_rng(13), np.linspace(-np.pi / 2, np.pi / 2, 25)
    s = (2 * np.pi * np.geomspace(1e3, 1e9, 19)[:, np.newaxis] * np.exp(1j * angle)).ravel()
    for _ in range(25):
        constants = line_constants(draw_cable(CableRanges(), kind, rng=rng), s)
        assert (constants.impedance.real > 0).all()
        assert (constants.admittance.real > 0).all()


def test_attenuation_of_xlpe(decibels):
    """10 to 90 % of drawn XLPE cables span 1-10 dB/km at 1 MHz and 10-60 at 10 MHz, and at most a factor 3 more.

    Ranges: orders of magnitude, from memory. The lower bound at 1 MHz lies below what smooth conductors of standard
    dimensions lose (1.9 dB/km for 240 mm2 in a copper tube, computed), so that the drawn cables begin there.
    """
    low, _, high = decibels["XLPE"]
    assert 1.0 < low[0] < 1.3 * 1.94
    assert 10.0 < high[0] < 30.0
    assert 10.0 / 3 < low[1] < 10.0
    assert 60.0 < high[1] < 180.0


@pytest.mark.parametrize("kind", ["paper", "belted"])
def test_attenuation_of_paper(decibels, kind):
    """10 to 90 % of drawn paper cables span 2 to 5 times the middle XLPE cable at 1 and 10 MHz (from memory).

    They may be up to a factor 3 wider at either end, which is what such orders of magnitude are good for.
    """
    low, _, high = decibels[kind] / decibels["XLPE"][1]
    assert (low[:2] > 2.0 / 3).all()
    assert (low[:2] < 2.1).all()
    assert (high[:2] > (4.9 if kind == "paper" else 4.4)).all()
    assert (high[:2] < 15.0).all()


def test_attenuation_of_epr(decibels):
    """10 to 90 % of drawn EPR cables span 1 to 10 times the middle XLPE cable at 10 MHz (from memory)."""
    low, _, high = decibels["EPR"][:, 1] / decibels["XLPE"][1, 1]
    assert 1 / 3 < low < 1.05
    assert 10.0 < high < 30.0


def test_attenuation_rises_with_frequency(decibels):
    """In the middle of every kind, and at either end, 30 MHz are attenuated more than 10, and these more than 1."""
    assert all((np.diff(quantiles, axis=1) > 0).all() for quantiles in decibels.values())


@pytest.mark.parametrize(
    ("kind", "slow", "fast"), [("XLPE", 160, 180), ("EPR", 150, 170), ("paper", 150, 165), ("belted", 150, 165)]
)
def test_velocities(kind, slow, fast):
    """At 10 MHz 10 to 90 % of drawn cables span the trade's velocities within 6 m/us, and reach 12 m/us beyond at most.

    XLPE 160-180 m/us, EPR 150-170, paper 150-165 (from memory).
    """
    hz = np.array([10e6])
    speed = velocity_spread(CableRanges(), kind, hz, COUNT, rng=np.random.default_rng(4))[:, 0]
    low, high = np.quantile(speed, [0.1, 0.9])
    assert slow - 12 < low < slow + 6
    assert fast - 6 < high < fast + 12


@pytest.mark.parametrize(("kind", "least", "most"), [("XLPE", 10, 40), ("belted", 10, 20)])
def test_impedances(kind, least, most):
    """2 to 98 % of drawn cables span 10-40 ohm (XLPE) and 10-20 ohm (belted), and half lie within (from memory)."""
    rng, s = np.random.default_rng(5), np.array([2j * np.pi * 10e6])
    ohm = np.array([np.abs(line_of(draw_cable(CableRanges(), kind, rng=rng), s).impedance[0]) for _ in range(COUNT)])
    low, high = np.quantile(ohm, [0.02, 0.98])
    assert 5 < low < least * 1.05
    assert most * 0.95 < high < 2 * most
    assert np.mean((ohm > least) & (ohm < most)) > 0.5


def test_a_known_circuit_is_narrow():
    """One area, one kind, one voltage, one metal and fixed materials make every drawn cable nearly the same."""
    known = CableRanges(
        kinds={"XLPE": 1},
        areas_mm2=(240,),
        copper_share=1.0,
        rated_kv={"12/20": 1},
        thickness_share=(1.0, 1.0),
        semicon_mm=(0.6, 0.6),
        tape_mm=(0.1, 0.1),
        semicon_s_per_m=(1.0, 1.0),
        semicon_permittivity=(100.0, 100.0),
        old_share=0.0,
        cole_cole_share=0.0,
        screens={"tape": 1},
        xlpe=Materials(
            permittivity=(2.3, 2.3), loss_tangent=(5e-4, 5e-4), excess_db_per_km=(3.0, 3.0), excess_power=(0.5, 0.5)
        ),
    )
    cables = [draw_cable(known, rng=np.random.default_rng(seed)) for seed in range(20)]
    assert [cable.outer_m - cable.inner_m for cable in cables] == pytest.approx([EXTRUDED_MM["12/20"] * 1e-3] * 20)
    assert {cable.conductor_ohm_m for cable in cables} == {COPPER_OHM_M}
    assert all(CONDUCTOR_MM[240][0] <= 2e3 * cable.conductor_m <= CONDUCTOR_MM[240][1] for cable in cables)
    spread = attenuation_spread(known, "XLPE", np.array([10e6]), 50, rng=np.random.default_rng(0))
    assert spread.max() < 1.15 * spread.min()


CURVE = "freq_hz,attenuation_db_per_km,velocity_m_per_us{}\n" + "".join(
    f"{hz:g},{8 * (hz / 1e6) ** 0.7:.6g},168{{}}\n" for hz in np.geomspace(1e5, 4e7, 15)
)


def test_a_measured_line_is_every_section(tmp_path):
    """With a curve every section is the measured cable, its impedance that of the file or else a drawn one."""
    s = 2j * np.pi * np.array([0.3e6, 1e6, 10e6])
    path = tmp_path / "feeder.csv"
    path.write_text(CURVE.format("", *[""] * 15), encoding="utf-8")
    ranges = CableRanges(curve=str(path), curve_ohm=(17.0, 17.0), sections={"3": 1})
    drawn = draw_route(ranges, 900.0, rng=np.random.default_rng(0), s=s)
    assert drawn.kind == "measured"
    gamma = drawn.lines[0].gamma
    assert all(section.line.gamma is gamma or (section.line.gamma == gamma).all() for section in drawn.route.sections)
    assert drawn.lines[0].impedance == pytest.approx(17.0)
    assert gamma.real * 8685.889638 == pytest.approx(8 * np.array([0.3, 1, 10]) ** 0.7, rel=0.1)
    assert s.imag / gamma.imag == pytest.approx(168e6, rel=0.05)
    with_ohm = tmp_path / "ohm.csv"
    with_ohm.write_text(CURVE.format(",impedance_ohm", *[",23"] * 15), encoding="utf-8")
    lines, _ = draw_lines(CableRanges(curve=str(with_ohm)), 1, rng=np.random.default_rng(0), s=s)
    assert lines[0].impedance == pytest.approx(23.0)


def test_an_absent_curve_is_an_error(tmp_path):
    """A curve that is not there is an error that names the file."""
    ranges = CableRanges(curve=str(tmp_path / "absent.csv"))
    with pytest.raises(InputError, match=r"absent\.csv"):
        draw_lines(ranges, 1, rng=np.random.default_rng(0), s=SWEEP)


@pytest.mark.parametrize("far", [*get_args(FarEndKind), None])
def test_any_drawn_route_is_passive(far):
    """Whatever is drawn takes power in, has its length, and stays finite along all of it."""
    s, rng = SWEEP, np.random.default_rng(7)
    for length_m in (60.0, 700.0, 5000.0):
        drawn = draw_route(CableRanges(), length_m, far, rng=rng, s=s)
        assert (shown_admittance(drawn.route).real > 0).all()
        assert (drawn.route.far_s.real >= 0).all()
        assert route_length_m(drawn.route) == pytest.approx(length_m)
        assert 1 <= len(drawn.lines) <= 3
        assert drawn.kind in KINDS
        for share in (0.0, 0.3, 1.0):
            assert np.isfinite(voltage_along(drawn.route, share * length_m)).all()


def test_any_drawn_route_scatters_no_power():
    """Against real references the scattering matrix of a drawn route is symmetric, its singular values at most one."""
    rng = np.random.default_rng(14)
    for ohm in (10.0, 20.0, 50.0):
        matched = np.full(SWEEP.shape, 1 / ohm + 0j)
        there = replace(draw_route(CableRanges(), 800.0, "open", rng=rng, s=SWEEP).route, far_s=matched)
        back = replace(there, sections=there.sections[::-1], joints=there.joints[::-1])
        first, last = (reflection(shown_admittance(way), np.full(SWEEP.shape, ohm + 0j)) for way in (there, back))
        onward = voltage_along(there, 800.0) * (1 + first)
        assert voltage_along(back, 800.0) * (1 + last) == pytest.approx(onward, rel=1e-9)
        matrix = np.moveaxis(np.array([[first, onward], [onward, last]]), -1, 0)
        assert np.linalg.svd(matrix, compute_uv=False).max() <= 1 + 1e-9


def test_sections_are_drawn_by_weight():
    """Of many routes as many have one line as the weights say; longer ones have joints at about their spacing."""
    s, rng = SWEEP[:3], np.random.default_rng(8)
    routes = [draw_route(CableRanges(), 3000.0, "open", rng=rng, s=s) for _ in range(400)]
    assert np.mean([len(drawn.lines) == 1 for drawn in routes]) == pytest.approx(0.55, abs=0.08)
    pieces = np.array([section.length_m for drawn in routes for section in drawn.route.sections])
    assert 200 < np.median(pieces) < 700
    assert all(len(drawn.route.joints) == len(drawn.route.sections) - 1 for drawn in routes)


def test_kinds_are_drawn_by_weight():
    """The first section's kind follows the weights; spliced sections of another kind occur."""
    rng = np.random.default_rng(9)
    kinds = [draw_lines(CableRanges(), 1, rng=rng, s=SWEEP[:3])[1] for _ in range(600)]
    assert kinds.count("XLPE") / 600 == pytest.approx(0.5, abs=0.07)
    assert kinds.count("belted") / 600 == pytest.approx(0.15, abs=0.05)


def test_a_neighbour_is_of_the_same_cable():
    """Another feeder reuses the lines of the circuit, and is a passive route of its own length."""
    s, rng = SWEEP, np.random.default_rng(10)
    lines, _ = draw_lines(CableRanges(), 2, rng=rng, s=s)
    lengths = []
    for _ in range(20):
        route = draw_neighbour(CableRanges(), lines, rng=rng, s=s)
        assert any(route.sections[0].line is line for line in lines)
        assert 1 <= len(route.sections) <= 3
        assert (shown_admittance(route).real > 0).all()
        lengths.append(route_length_m(route))
    assert max(lengths) > 3 * min(lengths)


def test_far_ends_are_what_they_are_called():
    """An open end is a capacitance; a ring has one route behind it, a busbar as many feeders as drawn."""
    ranges, s, rng = CableRanges(), SWEEP, np.random.default_rng(11)
    lines, _ = draw_lines(ranges, 1, rng=rng, s=s)
    opened = draw_far_end(ranges, "open", lines, rng=rng, s=s)
    assert far_admittance(opened, s) == pytest.approx(s * opened.stray_f)
    assert draw_far_end(ranges, "transformer", lines, rng=rng, s=s).busbar_f > 0
    assert len(draw_far_end(ranges, "ring", lines, rng=rng, s=s).onward) == 1
    feeders = {len(draw_far_end(ranges, "feeders", lines, rng=rng, s=s).onward) for _ in range(40)}
    assert feeders == {2, 3, 4, 5}


def test_same_seed_same_route():
    """The same ranges and seed give the same bytes."""
    one, other = (draw_route(CableRanges(), 1500.0, rng=np.random.default_rng(12), s=SWEEP) for _ in range(2))
    assert shown_admittance(one.route).tobytes() == shown_admittance(other.route).tobytes()
    assert one.kind == other.kind


def test_materials_complete_each_other():
    """A scenario that says one thing of a kind's materials keeps the base world's for the rest."""
    ranges = CableRanges.model_validate({"xlpe": {"excess_db_per_km": (4.0, 12.0)}})
    assert ranges.xlpe == XLPE.model_copy(update={"excess_db_per_km": (4.0, 12.0)})
    assert ranges.epr == CableRanges().epr


@pytest.mark.parametrize(
    ("field", "value", "message"),
    [
        ("kinds", {"PVC": 1.0}, "one of XLPE, EPR, paper, belted, not PVC"),
        ("sections", {"9": 1.0}, "one of 1, 2, 3, 4, not 9"),
        ("far_ends", {"cable": 1.0}, "one of open, transformer, ring, feeders, not cable"),
        ("rated_kv", {"18/30": 1.0}, "belted cables are made for"),
        ("feeders", (0, 2), "both lie between 1 and 50"),
        ("areas_mm2", (241,), "areas_mm2"),
        ("xlpe", {"permittivity": (2, 2), "loss_tangent": (1e-3, 1e-3), "excess_db_per_km": (1, 400)}, "not passive"),
        (
            "xlpe",
            {
                "permittivity": (2, 2),
                "loss_tangent": (1e-3, 1e-3),
                "excess_db_per_km": (1, 2),
                "excess_power": (0.5, 1),
            },
            "excess_power rises from",
        ),
    ],
)
def test_impossible_ranges_are_refused(field, value, message):
    """A name that is not known, or a loss that no passive line has, is refused where the scenario is read."""
    with pytest.raises(ValidationError, match=message):
        CableRanges.model_validate({field: value})
