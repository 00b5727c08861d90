"""Kinds of cable: dimensions of standards, and what is drawn of each kind's materials."""

from __future__ import annotations

from typing import Annotated, Literal, Self

import numpy as np
from pydantic import model_validator
from scipy.constants import c as light_m_per_s

from pdclass.sim.cable import inductance_share
from pdclass.sim.draw import Nanoseconds, Pair, Range, Ranges, within

Kind = Literal["XLPE", "EPR", "paper", "belted"]
Area = Literal[50, 70, 95, 120, 150, 185, 240, 300, 400, 500, 630]

#: Diameters of compacted conductors by area [mm2: mm] (IEC 60228 Annex C, least and most, from memory).
CONDUCTOR_MM: dict[Area, tuple[float, float]] = {
    50: (7.7, 8.6),
    70: (9.3, 10.2),
    95: (11.0, 12.0),
    120: (12.3, 13.5),
    150: (13.7, 15.0),
    185: (15.3, 16.8),
    240: (17.6, 19.2),
    300: (19.7, 21.6),
    400: (22.3, 24.6),
    500: (25.3, 27.6),
    630: (28.7, 32.5),
}
#: Insulation by rated voltage U0/U [kV: mm]: extruded after IEC 60502-2 (8.0 published, others from memory), paper
#: around a screened core (from memory, orders of magnitude).
EXTRUDED_MM = {"3.6/6": 2.5, "6/10": 3.4, "8.7/15": 4.5, "12/20": 5.5, "18/30": 8.0}
PAPER_MM = {"3.6/6": 2.2, "6/10": 2.8, "8.7/15": 3.8, "12/20": 5.0, "18/30": 7.5}
#: Insulation on each core and belt over all of belted cables (from memory, orders of magnitude).
BELTED_MM = {"3.6/6": (1.5, 0.8), "6/10": (2.3, 1.2), "8.7/15": (3.2, 1.8)}
#: Circumference of a sector of 120 degrees over that of the circle of its area.
SECTOR = (2 + 2 * np.pi / 3) / np.sqrt(4 * np.pi**2 / 3)
#: Rated voltages for which each kind is made.
RATED_KV: dict[str, tuple[str, ...]] = {
    "XLPE": tuple(EXTRUDED_MM),
    "EPR": tuple(EXTRUDED_MM),
    "paper": tuple(PAPER_MM),
    "belted": tuple(BELTED_MM),
}


class Materials(Ranges):
    """What is drawn of one kind of cable besides its dimensions.

    Attributes
    ----------
    permittivity : of the insulation, relative, at 1 MHz, without its relaxation.
    loss_tangent : of the insulation, without its relaxation; the same at every frequency.
    relaxation_step : Cole-Cole step of its permittivity towards low frequency; 0 = none.
    relaxation_ns : time constant of that step [ns].
    excess_db_per_km : attenuation added at 10 MHz to that of smooth conductors [dB/km], evenly in its logarithm; stated
        for the impedance without loss, 0.9 to 1.08 of it comes out.
    excess_power : power of frequency with which that rises: 0.5 for wires and strands alone; large losses rise faster,
        or they would dull pulses below 1 MHz as no cable does.
    joint_spacing_m : length of cable between two joints [m].
    """

    permittivity: Annotated[Pair, within(1.0, 20.0)]
    loss_tangent: Annotated[Pair, within(1e-6, 1.0)]
    relaxation_step: Annotated[Pair, within(0.0, 20.0)] = (0.0, 0.0)
    relaxation_ns: Nanoseconds = (1.0, 30.0)
    excess_db_per_km: Annotated[Pair, within(1e-6, 1e4, "dB/km")]
    excess_power: Range = (0.6, 0.95)
    joint_spacing_m: Annotated[Pair, within(10.0, 1e5, "m")] = (300.0, 1000.0)

    @model_validator(mode="after")
    def _power_of_a_passive_loss(self) -> Self:
        if not 0.5 <= self.excess_power[0] <= self.excess_power[1] < 1:
            raise ValueError("excess_power rises from 0.5 at least to below 1")
        most = self.excess_db_per_km[1]
        share = inductance_share(most, self.excess_power[1], light_m_per_s / np.sqrt(self.permittivity[0]))
        if share >= 1:
            raise ValueError(
                f"{most:g} dB/km of excess are not passive with the highest excess_power; lower one of them"
            )
        return self


#: Materials of the wide base world (values: orders of magnitude, from memory).
XLPE = Materials(permittivity=(2.2, 2.4), loss_tangent=(2e-4, 1.5e-3), excess_db_per_km=(0.4, 92.0))
EPR = Materials(
    permittivity=(2.4, 3.0), loss_tangent=(1e-3, 0.1), excess_db_per_km=(0.5, 345.0), excess_power=(0.8, 0.875)
)
PAPER = Materials(
    permittivity=(3.0, 3.5),
    loss_tangent=(2e-3, 1.5e-2),
    relaxation_step=(0.03, 0.6),
    relaxation_ns=(0.5, 30.0),
    excess_db_per_km=(1.0, 110.0),
    joint_spacing_m=(150.0, 500.0),
)
BELTED = Materials(
    permittivity=(3.0, 3.5),
    loss_tangent=(3e-3, 1.5e-2),
    relaxation_step=(0.05, 0.6),
    relaxation_ns=(0.5, 30.0),
    excess_db_per_km=(2.0, 110.0),
    joint_spacing_m=(150.0, 400.0),
)
