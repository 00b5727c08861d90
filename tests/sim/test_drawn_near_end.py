"""Drawn near ends keep to their ranges, can be one known station, and ring in a broad range."""

from typing import get_args

import numpy as np
import pytest
from pydantic import ValidationError

from pdclass.sim.drawn_near_end import LOSS_HZ, NearEndRanges, Role, draw_near_end
from pdclass.sim.elements import capacitance_admittance, lead_impedance
from pdclass.sim.grid import LEAD_S, band_end, laplace_grid, to_samples
from pdclass.sim.nearend import bus_node, equipment_node, strap_transfer

RANGES = NearEndRanges()
LOSS = 2j * np.pi * np.array([LOSS_HZ])


def _near(seed, **changes):
    return draw_near_end(NearEndRanges(**changes), rng=np.random.default_rng(seed))


def _within(values, bounds, *, scale=1.0, rel=1e-9):
    low, high = min(values) * scale, max(values) * scale
    return bounds[0] * (1 - rel) <= low <= high <= bounds[1] * (1 + rel)


@pytest.fixture(scope="module")
def drawn():
    return [_near(seed) for seed in range(200)]


def test_the_same_seed_draws_the_same_near_end():
    """A near end follows from ranges and seed alone."""
    assert _near(7) == _near(7)
    assert _near(7) != _near(8)


def test_ladders_have_every_size_and_the_own_panel_every_place(drawn):
    """Two to nine panels, the own one first, last or between."""
    assert {len(near.panels) for near in drawn} == set(range(2, 10))
    places = [near.own / (len(near.panels) - 1) for near in drawn]
    assert min(places) == 0
    assert max(places) == 1
    assert 0.35 < np.mean(places) < 0.65


def test_the_own_panel_holds_no_other_cable(drawn):
    """Other cables and transformers leave other panels, as often as their weights say."""
    assert not any(near.panels[near.own].feeders or near.panels[near.own].transformer for near in drawn)
    others = sum(len(near.panels) - 1 for near in drawn)
    assert sum(near.feeders for near in drawn) / others == pytest.approx(0.5, abs=0.06)
    winding = sum(panel.transformer is not None for near in drawn for panel in near.panels)
    assert winding / others == pytest.approx(0.2, abs=0.05)


def test_elements_keep_to_their_ranges(drawn):
    """Capacitances lie within the stated ranges, leads within those of length times inductance per length."""
    assert _within([near.termination.cone.farad for near in drawn], RANGES.cone_farad)
    assert _within([near.box.farad for near in drawn], RANGES.box_farad)
    assert _within([near.termination.grading.ohm for near in drawn], RANGES.grading_ohm)
    assert _within([near.sheath.soil_ohm_m for near in drawn], RANGES.soil_ohm_m)
    assert _within([near.sheath.outer_m - near.sheath.inner_m for near in drawn], RANGES.sheath_wall_mm, scale=1e3)
    for lead, length_m in (("strap", RANGES.strap_m), ("tail", RANGES.tail_m)):
        henries = [getattr(getattr(near, lead), "lead", getattr(near, lead)).henry for near in drawn]
        assert _within(henries, [a * b for a, b in zip(length_m, RANGES.lead_henry_per_m, strict=True)])
    lowest, highest = RANGES.open_farad[0], RANGES.equipment_farad[1] + RANGES.voltage_transformer_farad[1]
    assert _within([panel.equipment.farad for near in drawn for panel in near.panels], (lowest, highest))


def test_losses_are_those_that_are_stated(drawn):
    """At 10 MHz leads have the drawn quality factor and capacitances the drawn loss tangent."""
    for near in drawn[:20]:
        leads = (near.tail, near.panels[0].dropper, near.panels[-1].section)
        losses = np.array([lead_impedance(lead, LOSS)[0].real - lead.ohm for lead in leads])
        quality = 2 * np.pi * LOSS_HZ * np.array([lead.henry for lead in leads]) / losses
        assert _within(quality, RANGES.lead_q, rel=0.01)
        assert quality == pytest.approx(np.full(3, quality[0]), rel=1e-9)
        assert _within([lead.ohm for lead in leads], RANGES.contact_ohm)
        parts = [near.box, *[panel.equipment for panel in near.panels], *[panel.busbar for panel in near.panels]]
        ohms = [1 / capacitance_admittance(part, LOSS)[0] for part in parts]
        tangents = [-ohm.real / ohm.imag for ohm in ohms]
        assert _within(tangents, RANGES.loss_tangent)


def test_the_sensor_adds_to_its_own_strap_alone():
    """The inserted resistance stands in the own strap; the other straps have their leads' losses only."""
    ranges = NearEndRanges(roles=("own", "feeder"))
    near = draw_near_end(ranges, sensor_ohm=50.0, rng=np.random.default_rng(3))
    other = near.feeder_list[0].strap.lead
    assert near.strap.lead.ohm > 50
    assert other.ohm < 10


def _known():
    """Ranges of no width, at the middle of the default ones."""
    roles = ("feeder", "own", "transformer", "open", "measuring")
    fixed = {"roles": roles}
    for name in NearEndRanges.model_fields:
        bounds = getattr(RANGES, name)
        if name not in {"roles", "other_panels", "panels"}:
            middle = sum(bounds) / 2
            fixed[name] = (middle, middle)
    return fixed


def test_a_known_station_is_always_the_same():
    """With the same number twice in every range and its roles written out, every seed draws the same station."""
    assert _near(1, **_known()) == _near(2, **_known())
    near = _near(1, **_known())
    assert (len(near.panels), near.own, near.feeders) == (5, 1, 1)
    assert near.panels[0].feeders
    assert near.panels[2].transformer is not None
    assert near.panels[3].equipment.farad < near.panels[0].equipment.farad < near.panels[4].equipment.farad


@pytest.mark.parametrize(
    ("changes", "wanted"),
    [
        ({"roles": ("feeder", "open")}, "exactly one of roles is 'own'"),
        ({"roles": ("own", "own")}, "exactly one of roles is 'own'"),
        ({"roles": ("own", "cupboard")}, "Input should be"),
        ({"panels": (0, 3)}, "both lie between 1 and 50"),
        ({"own_place": (0.5, 1.5)}, "both lie between 0 and 1"),
        ({"other_panels": {"feeder": 1.0, "spare": 1.0}}, "not spare"),
        ({"other_panels": {"own": 1.0}}, "not own"),
        ({"strap_m": (1.0, 0.5)}, "the lower bound stands first"),
        ({"strap_m": (0.0, 0.5)}, "both lie between 0.001 and"),
    ],
)
def test_impossible_stations_are_refused(changes, wanted):
    """What cannot be built is refused where it is read."""
    with pytest.raises(ValidationError, match=wanted):
        NearEndRanges(**changes)


def test_every_range_is_explained():
    """Every field stands in the docstring, and every role is drawn for some panel."""
    for name in NearEndRanges.model_fields:
        assert f"{name} :" in NearEndRanges.__doc__ or f"{name}, " in NearEndRanges.__doc__
    assert set(get_args(Role)) == {"own", *RANGES.other_panels}


def test_rings_are_broad_random_variables():
    """Seen from the own equipment and busbar the strongest ring lies at a few to some tens of MHz, Q some to some tens.

    Ring frequency and quality factor are broad random variables (common practice, no source).
    """
    figures = np.array([_rings(seed) for seed in range(50)])
    ring_hz, ring_q = figures[..., 0].ravel(), figures[..., 1].ravel()
    low, middle, high = np.percentile(ring_hz, [5, 50, 95])
    assert 1.5e6 < low < 8e6
    assert 8e6 < middle < 25e6
    assert 20e6 < high < 55e6
    low, middle, high = np.percentile(ring_q, [5, 50, 95])
    assert 1 < low < 4
    assert 5 < middle < 15
    assert 15 < high < 50


def _rings(seed):
    near, s = _near(seed), laplace_grid()
    feeders_s = [np.full(s.size, 1 / 22 + 0j)] * near.feeders
    transfer = strap_transfer(near, np.full(s.size, 1 / 20 + 0j), feeders_s, s)
    return [_strongest_ring(transfer.from_node[node(near.own)]) for node in (equipment_node, bus_node)]


def _strongest_ring(response):
    """Frequency [Hz] and quality factor of the highest line in the 6 us after the pulse itself."""
    s, size = laplace_grid(), 16384
    wave = to_samples(response * band_end() * np.exp(-s * LEAD_S), 250e6)[525:2025]
    spectrum = np.abs(np.fft.rfft(wave * np.hanning(2 * wave.size)[wave.size :], size))
    hz = np.fft.rfftfreq(size, 4e-9)
    spectrum[hz < 0.5e6] = 0
    top = int(np.argmax(spectrum))
    above = spectrum > spectrum[top] / np.sqrt(2)
    right = top + int(np.argmin(above[top:]))
    left = top - int(np.argmin(above[top::-1]))
    return hz[top], hz[top] / (hz[right] - hz[left])
