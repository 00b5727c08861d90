"""Near end and cable against a general circuit simulator: ngspice, which steps through time.

Its elements do not depend on frequency, so the skin terms, the grading layer and the sheath in the soil are left out
here; its lossy line has a constant resistance, inductance and capacitance per metre.
"""

import shutil
import subprocess
from dataclasses import fields, is_dataclass, replace

import numpy as np
import pytest
from scipy.constants import speed_of_light

from pdclass.sim.cable import Line
from pdclass.sim.drawn_near_end import NearEndRanges, draw_near_end
from pdclass.sim.elements import Lead, StressCone
from pdclass.sim.grid import laplace_grid, to_samples
from pdclass.sim.nearend import CORE, SCREEN, bus_node, equipment_node, feeder_core_node, strap_transfer
from pdclass.sim.network import Joint, Route, Section, shown_admittance, voltage_along

pytestmark = pytest.mark.skipif(shutil.which("ngspice") is None, reason="ngspice is not installed")

START_S, SIGMA_S, RATE_HZ = 0.5e-6, 15e-9, 250e6
CABLE_OHM, FEEDER_OHM = 20.0, 28.0
R_PER_M, L_PER_M, C_PER_M = 0.02, 111e-9, 285e-12
PULSE = f"exp(-((time-{START_S})^2)/(2*{SIGMA_S}^2))"


def _wave(response):
    """Samples of a response to a Gaussian current of 1 A."""
    s = laplace_grid()
    current = SIGMA_S * np.sqrt(2 * np.pi) * np.exp(0.5 * (SIGMA_S * s) ** 2 - s * START_S)
    return to_samples(response * current, RATE_HZ)


def _model(name, length_m):
    """The simulator's lossy line."""
    return f".model {name} LTRA(R={R_PER_M} L={L_PER_M} C={C_PER_M} G=0 LEN={length_m})"


def _source(begin, end):
    """A Gaussian current of 1 A that flows through the source from one node to another."""
    return f"B_{begin}_{end} {begin} {end} I={PULSE}"


def _simulate(lines, wanted, folder, *, stop_s=3e-6, step_s=1e-9):
    """What ngspice computes for some vectors, at our own sampling times, (vectors, samples)."""
    (folder / "circuit.cir").write_text(
        "\n".join(
            [
                "* written by a test",
                *lines,
                ".options reltol=1e-5 method=trap",
                f".tran {step_s} {stop_s} 0 {step_s}",
                ".control",
                "run",
                f"wrdata result.txt {' '.join(wanted)}",
                "quit",
                ".endc",
                ".end\n",
            ]
        )
    )
    command = ["ngspice", "-b", "circuit.cir"]
    ran = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=60, check=False)
    result = folder / "result.txt"
    assert result.exists(), ran.stdout + ran.stderr
    columns = np.loadtxt(result)
    assert columns[-1, 0] == pytest.approx(stop_s, rel=1e-3)
    time_s = np.arange(round(stop_s * RATE_HZ)) / RATE_HZ
    return np.array([np.interp(time_s, columns[:, 0], columns[:, 2 * place + 1]) for place in range(len(wanted))])


def _difference(ours, theirs):
    """Largest difference as a share of the peak."""
    return np.abs(ours[: theirs.size] - theirs).max() / np.abs(theirs).max()


def _constant(part):
    """A near end without skin effect and grading layer."""
    if isinstance(part, Lead):
        return replace(part, skin=0.0)
    if isinstance(part, tuple):
        return tuple(_constant(one) for one in part)
    if not is_dataclass(part):
        return part
    plain = replace(part, **{one.name: _constant(getattr(part, one.name)) for one in fields(part)})
    return replace(plain, grading=None) if isinstance(plain, StressCone) else plain


class Netlist:
    """One copy of a near end in the simulator's words; `name` keeps the nodes of copies apart.

    A pulse of 1 V stands in series with the lead `raised`, against the current that leaves its begin.
    """

    def __init__(self, name, near, raised=None):
        self.name, self.near, self.raised, self.lines = name, near, raised, []
        core, screen = self.node(CORE), self.node(SCREEN)
        self.capacitance(core, screen, near.termination.cone)
        self.capacitance(core, "0", near.box)
        self.lead(core, self.node(bus_node(near.own)), near.tail)
        self.lines.append(f"Vstrap{name} {screen} {name}sense 0")
        self.lead(f"{name}sense", "0", near.strap.lead)
        self.shunt(screen, near.strap.stray_farad, near.soil)
        feeders = iter(range(near.feeders))
        for number, panel in enumerate(near.panels):
            self.panel(number, panel)
            for feeder in panel.feeders:
                self.feeder(self.node(bus_node(number)), feeder_core_node(near, next(feeders)), feeder)

    def node(self, number):
        return f"{self.name}n{number}"

    def add(self, kind, begin, end, value):
        self.lines.append(f"{kind}{self.name}x{len(self.lines)} {begin} {end} {value!r}")

    def chain(self, begin, end, *parts):
        """Elements in series."""
        places = [begin, *[f"{self.name}m{len(self.lines)}x{number}" for number in range(len(parts) - 1)], end]
        for (kind, value), one, other in zip(parts, places[:-1], places[1:], strict=True):
            self.add(kind, one, other, float(value))

    def lead(self, begin, end, lead):
        if lead is self.raised:
            self.lines.append(f"B{self.name} {begin} {self.name}raised V={PULSE}")
            begin = f"{self.name}raised"
        place = len(self.lines)
        self.chain(begin, end, ("R", lead.ohm), ("L", lead.henry))
        self.add("R", f"{self.name}m{place}x0", end, float(lead.bridge_ohm))

    def capacitance(self, begin, end, part):
        self.chain(begin, end, ("R", part.ohm), ("C", part.farad))

    def shunt(self, screen, stray_farad, soil):
        self.add("C", screen, "0", float(stray_farad))
        place, delay_s = len(self.lines), soil.building_m / speed_of_light
        self.lines.append(f"T{self.name}x{place} {screen} 0 {screen}far 0 Z0={soil.building_ohm} TD={delay_s}")
        self.add("R", f"{screen}far", "0", float(soil.end_ohm))

    def panel(self, number, panel):
        bus, equipment = self.node(bus_node(number)), self.node(equipment_node(number))
        self.capacitance(bus, "0", panel.busbar)
        self.lead(bus, equipment, panel.dropper)
        self.capacitance(equipment, "0", panel.equipment)
        if panel.transformer is not None:
            self.lead(bus, f"{bus}winding", panel.transformer.lead)
            self.capacitance(f"{bus}winding", "0", panel.transformer.capacitance)
        if number + 1 < len(self.near.panels):
            self.lead(bus, self.node(bus_node(number + 1)), panel.section)

    def feeder(self, bus, place, feeder):
        core, screen = self.node(place), self.node(place + 1)
        self.lead(bus, core, feeder.tail)
        self.capacitance(core, "0", feeder.box)
        self.capacitance(core, screen, feeder.cone)
        self.add("R", core, screen, FEEDER_OHM)
        self.lead(screen, "0", feeder.strap.lead)
        self.shunt(screen, feeder.strap.stray_farad, feeder.soil)


def _station(seed):
    roles = ("transformer", "feeder", "own", "open", "feeder", "measuring")
    drawn = draw_near_end(NearEndRanges(roles=roles), rng=np.random.default_rng(seed))
    return replace(_constant(drawn), sheath=None)


def _feeders_s(near):
    return [np.full(laplace_grid().size, 1 / FEEDER_OHM + 0j)] * near.feeders


@pytest.mark.parametrize("seed", [1, 2])
def test_strap_current_of_a_pulse_into_any_node(seed, tmp_path):
    """A pulse into core, screen, busbars, equipment and another cable: the strap current within 1 % of its peak."""
    near, s = _station(seed), laplace_grid()
    core = feeder_core_node(near, 1)
    switchgear = [node(panel) for panel in (2, 5) for node in (bus_node, equipment_node)]
    places = [CORE, SCREEN, *switchgear, core, core + 1]
    copies = [Netlist(f"c{place}", near) for place in places]
    lines = []
    for copy, place in zip(copies, places, strict=True):
        copy.add("R", copy.node(CORE), copy.node(SCREEN), CABLE_OHM)
        lines += [*copy.lines, _source("0", copy.node(place))]
    theirs = _simulate(lines, [f"i(Vstrap{copy.name})" for copy in copies], tmp_path)
    transfer = strap_transfer(near, np.full(s.size, 1 / CABLE_OHM + 0j), _feeders_s(near), s)
    for place, wave in zip(places, theirs, strict=True):
        assert _difference(_wave(transfer.from_node[place]), wave) < 0.01


def test_strap_current_of_a_voltage_in_a_loop(tmp_path):
    """A pulse of voltage in the strap's loop, a neighbour's and the tail's: the strap current within 1 % of peak."""
    near, s = _station(3), laplace_grid()
    leads = {"own": near.strap.lead, "other": near.feeder_list[0].strap.lead, "tail": near.tail}
    copies = [Netlist(name, near, lead) for name, lead in leads.items()]
    for copy in copies:
        copy.add("R", copy.node(CORE), copy.node(SCREEN), CABLE_OHM)
    lines = [line for copy in copies for line in copy.lines]
    theirs = _simulate(lines, [f"i(Vstrap{name})" for name in leads], tmp_path)
    transfer = strap_transfer(near, np.full(s.size, 1 / CABLE_OHM + 0j), _feeders_s(near), s)
    ours = [transfer.from_emf, transfer.from_feeder_emf[0], transfer.from_tail_emf]
    for response, wave in zip(ours, theirs, strict=True):
        assert _difference(_wave(response), wave) < 0.01


def _line(s, ohm_per_m=R_PER_M):
    series, shunt = np.sqrt(ohm_per_m + s * L_PER_M), np.sqrt(s * C_PER_M)
    return Line(series * shunt, series / shunt)


@pytest.mark.parametrize(("near_ohm", "far_ohm"), [(50.0, 1e3), (5.0, 8.0), (300.0, 2.0)])
def test_pulse_through_a_line_with_mismatched_ends(near_ohm, far_ohm, tmp_path):
    """A pulse 180 m along 300 m of lossy line, every echo: the voltage at the near end within 1 % of its peak."""
    s, length_m, place_m = laplace_grid(), 300.0, 180.0
    route = Route((Section(_line(s), length_m),), (), np.full(s.size, 1 / far_ohm + 0j))
    lines = [
        f"Rnear n 0 {near_ohm}",
        "O1 n 0 m 0 first",
        _model("first", place_m),
        _source("0", "m"),
        "O2 m 0 f 0 second",
        _model("second", length_m - place_m),
        f"Rfar f 0 {far_ohm}",
    ]
    ours = _wave(voltage_along(route, place_m) / (shown_admittance(route) + 1 / near_ohm))
    (theirs,) = _simulate(lines, ["v(n)"], tmp_path, stop_s=7e-6, step_s=2e-9)
    assert _difference(ours, theirs) < 0.01


def test_pulse_along_a_spliced_cable_into_a_station(tmp_path):
    """A pulse behind a joint of a cable with an open end: the strap current of the whole network within 1 %."""
    near, s = _station(4), laplace_grid()
    joint = Joint(0.4e-6, 60e-12, 0.3)
    sections = (Section(_line(s), 120.0), Section(_line(s), 200.0))
    route = Route(sections, (joint,), s * 100e-12)
    copy = Netlist("a", near)
    copy.chain("j", "k", ("R", joint.ohm / 2), ("L", joint.henry / 2))
    copy.chain("k", "m", ("R", joint.ohm / 2), ("L", joint.henry / 2))
    lines = [
        *copy.lines,
        # the second port's reference is free: a line carries what stands between its conductors only
        f"O1 {copy.node(CORE)} {copy.node(SCREEN)} j 0 first",
        _model("first", 120.0),
        f"Ck k 0 {joint.farad}",
        "O2 m 0 p 0 second",
        _model("second", 80.0),
        _source("0", "p"),
        "O3 p 0 f 0 third",
        _model("third", 120.0),
        "Cfar f 0 100e-12",
    ]
    (theirs,) = _simulate(lines, ["i(Vstrapa)"], tmp_path, stop_s=4e-6, step_s=2e-9)
    transfer = strap_transfer(near, shown_admittance(route), _feeders_s(near), s)
    ours = _wave((transfer.from_node[CORE] - transfer.from_node[SCREEN]) * voltage_along(route, 200.0))
    assert _difference(ours, theirs) < 0.01
