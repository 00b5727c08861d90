"""The dimensions of cables are those of real ones."""

import numpy as np
import pytest

from pdclass.sim.cable_kinds import BELTED, BELTED_MM, CONDUCTOR_MM, EPR, EXTRUDED_MM, PAPER, PAPER_MM, SECTOR, XLPE


@pytest.mark.parametrize(("area_mm2", "bounds_mm"), CONDUCTOR_MM.items())
def test_a_conductor_holds_its_area(area_mm2, bounds_mm):
    """The circle around a compacted conductor is filled to between 75 and 110 % by its nominal area.

    Nominal areas are names for resistances (IEC 60228): the metal may be somewhat less.
    """
    filled = [area_mm2 / (np.pi * mm**2 / 4) for mm in bounds_mm]
    assert 0.75 < filled[1] < filled[0] < 1.1


def test_thickness_rises_with_voltage():
    """A higher rated voltage has more insulation, in every kind of cable; paper needs no more than plastic."""
    for table in (EXTRUDED_MM, PAPER_MM, {name: sum(parts) for name, parts in BELTED_MM.items()}):
        assert (np.diff(list(table.values())) > 0).all()
    assert all(PAPER_MM[name] <= EXTRUDED_MM[name] for name in PAPER_MM)


def test_a_sector_has_a_longer_circumference():
    """A third of a disc of area 1 measured on its outline: two radii and a third of the circle."""
    radius = np.sqrt(3 / np.pi)
    outline = 2 * radius + 2 * np.pi * radius / 3
    assert pytest.approx(outline / np.sqrt(4 * np.pi)) == SECTOR


def test_kinds_differ_as_they_should():
    """Paper has the highest permittivity and a relaxation, XLPE the lowest loss; filled EPR may lose most."""
    assert PAPER.permittivity[0] > EPR.permittivity[1] - 1e-9 > XLPE.permittivity[1]
    assert PAPER.relaxation_step[0] > 0 < BELTED.relaxation_step[0]
    assert XLPE.relaxation_step == EPR.relaxation_step == (0.0, 0.0)
    assert XLPE.loss_tangent[1] < PAPER.loss_tangent[1] < EPR.loss_tangent[1]
