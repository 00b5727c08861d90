"""The elements of a near end: leads, lossy capacitances, stress cones, straps and a screen's way through the soil."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.constants import epsilon_0, mu_0, speed_of_light

from pdclass.sim.grid import ComplexArray


@dataclass(frozen=True)
class Lead:
    """An inductance with its losses: R + k sqrt(s) + sL || Rb, not zero altogether.

    Attributes
    ----------
    ohm : resistance of contacts [ohm], >= 0.
    henry : inductance [H], >= 0.
    skin : k of the skin effect in conductor and enclosure [ohm s^0.5], >= 0.
    bridge_ohm : resistance beside the inductance, for eddy currents and radiation [ohm], > 0.
    """

    ohm: float
    henry: float
    skin: float = 0.0
    bridge_ohm: float = np.inf


@dataclass(frozen=True)
class LossyCapacitance:
    """A capacitance with a resistance in series [F], [ohm]."""

    farad: float
    ohm: float


@dataclass(frozen=True)
class Grading:
    """The stress-grading layer of a termination, open at its end: a lossy ladder along the core.

    Attributes
    ----------
    farad : capacitance between layer and core, in all [F], >= 0.
    ohm : resistance along the layer, in all [ohm], > 0.
    layer_farad : capacitance along the layer (a layer of high permittivity), in all [F], >= 0.
    """

    farad: float
    ohm: float
    layer_farad: float = 0.0


@dataclass(frozen=True)
class StressCone:
    """What stands between core and screen at the termination: the cone's capacitance, and its grading layer."""

    cone: LossyCapacitance
    grading: Grading | None = None


@dataclass(frozen=True)
class Strap:
    """An earth strap with the stray capacitance beside it, from the screen's end to earth [F]."""

    lead: Lead
    stray_farad: float


@dataclass(frozen=True)
class Sheath:
    """The metal screens of a station's cables against the soil round their outer sheaths, as a line.

    Attributes
    ----------
    inner_m, outer_m : radii of the outer sheath [m], rising.
    permittivity : of the outer sheath, relative, >= 1.
    soil_ohm_m : resistivity of the soil [ohm m], > 0.
    soil_permittivity : of the soil, relative, >= 1.
    """

    inner_m: float
    outer_m: float
    permittivity: float
    soil_ohm_m: float
    soil_permittivity: float


@dataclass(frozen=True)
class SoilWay:
    """A screen's own way to earth beside its strap: through the building in air, then through the soil.

    Attributes
    ----------
    building_ohm : surge impedance of the cable over the building's floor [ohm], > 0.
    building_m : length of that stretch [m], >= 0; waves travel it at the speed of light.
    soil_m : sheath in the soil as far as the next earthed point [m], > 0; without effect without a sheath.
    end_ohm : resistance to earth at that point [ohm], > 0.
    """

    building_ohm: float
    building_m: float
    soil_m: float
    end_ohm: float


class SheathLine(NamedTuple):
    """Propagation constant [1/m] and surge impedance [ohm] of a screen against soil, each (frequencies,)."""

    gamma: ComplexArray
    impedance: ComplexArray


def lead_impedance(lead: Lead, s: ComplexArray, root: ComplexArray | None = None) -> ComplexArray:
    """Impedance of a lead [ohm], (frequencies,); whoever has the square root of s already hands it over."""
    inductive = s * lead.henry
    if np.isfinite(lead.bridge_ohm):
        inductive /= 1 + inductive / lead.bridge_ohm
    inductive += lead.ohm
    if lead.skin:
        inductive += (np.sqrt(s) if root is None else root) * lead.skin
    return inductive


def capacitance_admittance(part: LossyCapacitance, s: ComplexArray) -> ComplexArray:
    """Admittance of a lossy capacitance [S], (frequencies,)."""
    charging = s * part.farad
    return np.asarray(charging / (1 + charging * part.ohm))


def grading_admittance(grading: Grading, s: ComplexArray) -> ComplexArray:
    """Admittance of a stress-grading layer from its earthed edge to the core [S], (frequencies,).

    A uniform ladder of series admittance R || C and shunt capacitance, open at its end: sqrt(Y1 Y2) tanh sqrt(Y2/Y1).
    """
    along, across = 1 / grading.ohm + s * grading.layer_farad, s * grading.farad
    return np.asarray(np.sqrt(along) * np.sqrt(across) * np.tanh(np.sqrt(across / along)))


def cone_admittance(cone: StressCone, s: ComplexArray) -> ComplexArray:
    """Admittance of a termination between core and screen [S], (frequencies,)."""
    charging = capacitance_admittance(cone.cone, s)
    return charging if cone.grading is None else charging + grading_admittance(cone.grading, s)


def sheath_line(sheath: Sheath, s: ComplexArray) -> SheathLine:
    """A metal screen with the soil as its return.

    Series impedance: the field in the outer sheath, and that in the soil, (s mu0/2 pi) ln(1 + 1/(g r)) with
    g = sqrt(s mu0 (1/rho + s eps)), the logarithmic approximation of the integral for a buried wire (E. Petrache,
    F. Rachidi, M. Paolone, C. A. Nucci, V. A. Rakov, M. A. Uman, IEEE Trans. Electromagn. Compat. 47(3), 2005, from
    memory). Shunt admittance: that of the outer sheath, which is far smaller than that of the soil behind it.
    """
    soil = np.sqrt(s * mu_0 * (1 / sheath.soil_ohm_m + s * (epsilon_0 * sheath.soil_permittivity)))
    wall = np.log(sheath.outer_m / sheath.inner_m)
    series = s * (mu_0 / (2 * np.pi)) * (wall + np.log(1 + 1 / (soil * sheath.outer_m)))
    shunt = s * (2 * np.pi * epsilon_0 * sheath.permittivity / wall)
    series_root, shunt_root = np.sqrt(series), np.sqrt(shunt)
    return SheathLine(np.asarray(series_root * shunt_root), np.asarray(series_root / shunt_root))


def soil_admittance(way: SoilWay, line: SheathLine | None, s: ComplexArray) -> ComplexArray:
    """Admittance of a screen's own way to earth [S], (frequencies,)."""
    # decaying exponentials only, so that nothing overflows however long the way
    forth: ComplexArray | float = way.end_ohm
    back: ComplexArray | float = 1.0
    if line is not None:
        reflected = (way.end_ohm - line.impedance) / (way.end_ohm + line.impedance)
        reflected = reflected * np.exp(-2 * way.soil_m * line.gamma)
        forth, back = line.impedance * (1 + reflected), 1 - reflected
    behind = (forth - way.building_ohm * back) / (forth + way.building_ohm * back)
    behind = behind * np.exp(s * (-2 * way.building_m / speed_of_light))
    return np.asarray((1 - behind) / (1 + behind) / way.building_ohm)
