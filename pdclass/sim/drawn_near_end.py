"""Drawing a near end: what a utility does not know of a termination, its strap and its switchgear is random here."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, Literal, Self, get_args

import numpy as np
from pydantic import Field, model_validator

from pdclass.sim.draw import (
    Farads,
    Henries,
    Metres,
    Ohms,
    Positive,
    Range,
    Ranges,
    Shares,
    Weights,
    Whole,
    chosen,
    even,
    known_names,
    log_even,
    whole,
    within,
)
from pdclass.sim.elements import Grading, Lead, LossyCapacitance, Sheath, SoilWay, Strap, StressCone
from pdclass.sim.nearend import Feeder, NearEnd, Panel, Winding

#: What a panel is for: the cable with the sensor, another cable, a power transformer, voltage transformers for the
#: busbar, or nothing, its breaker open.
Role = Literal["own", "feeder", "transformer", "measuring", "open"]
#: Frequency at which losses are stated [Hz].
LOSS_HZ = 10e6


class NearEndRanges(Ranges):
    """Terminations, straps and switchgear; elements are drawn evenly in their logarithm.

    A station that is known has the same number twice in every range, and its `roles` written out.
    Orders of magnitude throughout; where no other source stands, common practice, no source.

    Attributes
    ----------
    roles : the role of every panel in order, exactly one of them `own`; empty: drawn from the next three.
    panels : number of panels in the ladder, at least one.
    own_place : place of the own panel in the ladder, from 0 (first) to 1 (last), drawn evenly.
    other_panels : how often another panel is `feeder`, `transformer`, `measuring` or `open`.
    lead_henry_per_m : inductance of straps, tails, droppers, busbars over the enclosure [H/m]; a straight wire of
        0.2-3 m has 0.6-1.3 uH/m (from memory).
    lead_q : quality factor at 10 MHz of every lead of the station without its contacts; half of the loss is skin
        effect in copper and steel, half, as a resistance beside the inductance, eddy currents and radiation.
    contact_ohm : contacts of every lead, constant [ohm].
    loss_tangent : of every capacitance at 10 MHz, as a resistance in series.
    strap_m : length of an earth strap [m].
    strap_farad : stray capacitance beside a strap, from the screen's end to earth [F].
    tail_m : conductor from a termination to the busbar of its panel [m].
    section_m : busbar from panel to panel [m].
    dropper_m : from the busbar to the equipment [m].
    busbar_farad : capacitance of a panel's busbar to its enclosure [F].
    equipment_farad : of bushings and current transformers to earth [F].
    voltage_transformer_farad : of the voltage transformers that a `measuring` panel has besides [F].
    open_farad : of the near side of an open breaker [F].
    winding_m : lead to a power transformer [m].
    winding_farad : capacitance of its winding to earth [F].
    cone_farad : capacitance of a termination from core to screen [F].
    grading_farad : from core to stress-grading layer, in all [F].
    grading_ohm : along the layer, in all [ohm].
    grading_layer_farad : along the layer, in all [F].
    box_farad : from core to cable box [F].
    building_ohm : surge impedance of a cable's screen over the floor on its way to the soil [ohm]; a wire of 5 cm
        at a height of 0.1-1 m has 125-265 ohm (from memory).
    building_m : length of that way [m].
    sheath_radius_mm : outer radius of the metal screen [mm].
    sheath_wall_mm : thickness of the outer sheath [mm] (from memory).
    sheath_permittivity : relative, polyethylene to PVC (from memory).
    soil_ohm_m : resistivity of the soil, wet clay to dry sand [ohm m] (from memory).
    soil_permittivity : relative, dry to wet (from memory).
    soil_m : sheath in the soil as far as its next earthed point [m].
    soil_end_ohm : resistance to earth there [ohm].
    loop_share : voltage of a radiated field in a neighbour's strap loop over that in the own one, drawn evenly.
    tail_share : the same for the loop of the tail.
    """

    roles: tuple[Role, ...] = ()
    panels: Annotated[Whole, within(1, 50)] = (2, 9)
    own_place: Shares = (0.0, 1.0)
    other_panels: Annotated[Weights, known_names("feeder", "transformer", "measuring", "open")] = Field(
        default={"feeder": 0.5, "transformer": 0.2, "measuring": 0.15, "open": 0.15}
    )
    lead_henry_per_m: Henries = (0.6e-6, 1.2e-6)
    lead_q: Positive = (15.0, 200.0)
    contact_ohm: Ohms = (1e-3, 50e-3)
    loss_tangent: Positive = (0.002, 0.05)
    strap_m: Metres = (0.2, 1.5)
    strap_farad: Farads = (10e-12, 100e-12)
    tail_m: Metres = (0.3, 3.0)
    section_m: Metres = (0.35, 1.2)
    dropper_m: Metres = (0.2, 2.0)
    busbar_farad: Farads = (20e-12, 120e-12)
    equipment_farad: Farads = (30e-12, 300e-12)
    voltage_transformer_farad: Farads = (50e-12, 500e-12)
    open_farad: Farads = (5e-12, 40e-12)
    winding_m: Metres = (0.5, 6.0)
    winding_farad: Farads = (0.3e-9, 3e-9)
    cone_farad: Farads = (20e-12, 150e-12)
    grading_farad: Farads = (10e-12, 60e-12)
    grading_ohm: Ohms = (1e3, 1e8)
    grading_layer_farad: Farads = (0.1e-12, 3e-12)
    box_farad: Farads = (5e-12, 30e-12)
    building_ohm: Ohms = (60.0, 250.0)
    building_m: Metres = (1.0, 15.0)
    sheath_radius_mm: Positive = (12.0, 35.0)
    sheath_wall_mm: Positive = (1.8, 3.5)
    sheath_permittivity: Positive = (2.3, 5.0)
    soil_ohm_m: Positive = (20.0, 2000.0)
    soil_permittivity: Positive = (5.0, 30.0)
    soil_m: Metres = (30.0, 3000.0)
    soil_end_ohm: Ohms = (1.0, 50.0)
    loop_share: Range = (-0.5, 1.0)
    tail_share: Range = (-1.0, 1.0)

    @model_validator(mode="after")
    def _one_panel_is_the_own(self) -> Self:
        if self.roles and self.roles.count("own") != 1:
            raise ValueError("exactly one of roles is 'own'")
        return self


def draw_near_end(ranges: NearEndRanges, *, sensor_ohm: float = 0.0, rng: np.random.Generator) -> NearEnd:
    """Termination, strap and switchgear at the sensor; its property `feeders` says how many other cables it needs.

    Parameters
    ----------
    ranges : of the elements.
    sensor_ohm : resistance that the sensor inserts into its own strap, >= 0 [ohm].
    """
    roles = ranges.roles or _draw_roles(ranges, rng=rng)
    draw = _Elements(ranges, log_even(ranges.lead_q, rng=rng), rng)
    sheath = _draw_sheath(ranges, rng=rng)
    return NearEnd(
        tail=draw.lead(ranges.tail_m),
        termination=StressCone(draw.capacitance(ranges.cone_farad), draw.grading()),
        box=draw.capacitance(ranges.box_farad),
        strap=draw.strap(sensor_ohm),
        soil=draw.soil(),
        panels=tuple(draw.panel(role) for role in roles),
        own=roles.index("own"),
        sheath=sheath,
        tail_share=even(ranges.tail_share, rng=rng),
    )


def _draw_roles(ranges: NearEndRanges, *, rng: np.random.Generator) -> tuple[Role, ...]:
    count = whole(ranges.panels, rng=rng)
    own = min(int(even(ranges.own_place, rng=rng) * count), count - 1)
    known: dict[str, Role] = {name: name for name in get_args(Role)}
    others = [known[chosen(ranges.other_panels, rng=rng)] for _ in range(count - 1)]
    if others and not {"feeder", "transformer"} & set(others):
        # a station that neither takes power from elsewhere nor gives any is not in service
        others[int(rng.integers(len(others)))] = "feeder"
    return (*others[:own], "own", *others[own:])


def _draw_sheath(ranges: NearEndRanges, *, rng: np.random.Generator) -> Sheath:
    inner = log_even(ranges.sheath_radius_mm, rng=rng) * 1e-3
    return Sheath(
        inner_m=inner,
        outer_m=inner + log_even(ranges.sheath_wall_mm, rng=rng) * 1e-3,
        permittivity=log_even(ranges.sheath_permittivity, rng=rng),
        soil_ohm_m=log_even(ranges.soil_ohm_m, rng=rng),
        soil_permittivity=log_even(ranges.soil_permittivity, rng=rng),
    )


class _Elements:
    """The elements of one station: it has one quality of leads."""

    def __init__(self, ranges: NearEndRanges, lead_q: float, rng: np.random.Generator) -> None:
        self._ranges, self._lead_q, self._rng = ranges, lead_q, rng

    def lead(self, length_m: tuple[float, float]) -> Lead:
        ranges, rng = self._ranges, self._rng
        henry = log_even(length_m, rng=rng) * log_even(ranges.lead_henry_per_m, rng=rng)
        reactance = 2 * np.pi * LOSS_HZ * henry
        half = reactance / self._lead_q / 2
        # k sqrt(j w) has the real part k sqrt(w / 2); a resistance beside takes X^2 / R
        skin = half / np.sqrt(np.pi * LOSS_HZ)
        return Lead(log_even(ranges.contact_ohm, rng=rng), henry, float(skin), reactance**2 / half)

    def capacitance(self, farad: tuple[float, float]) -> LossyCapacitance:
        drawn = log_even(farad, rng=self._rng)
        return LossyCapacitance(
            drawn, log_even(self._ranges.loss_tangent, rng=self._rng) / (2 * np.pi * LOSS_HZ * drawn)
        )

    def grading(self) -> Grading:
        ranges, rng = self._ranges, self._rng
        farad, ohm = log_even(ranges.grading_farad, rng=rng), log_even(ranges.grading_ohm, rng=rng)
        return Grading(farad, ohm, log_even(ranges.grading_layer_farad, rng=rng))

    def strap(self, sensor_ohm: float) -> Strap:
        bare = self.lead(self._ranges.strap_m)
        return Strap(replace(bare, ohm=bare.ohm + sensor_ohm), log_even(self._ranges.strap_farad, rng=self._rng))

    def soil(self) -> SoilWay:
        ranges, rng = self._ranges, self._rng
        return SoilWay(
            building_ohm=log_even(ranges.building_ohm, rng=rng),
            building_m=log_even(ranges.building_m, rng=rng),
            soil_m=log_even(ranges.soil_m, rng=rng),
            end_ohm=log_even(ranges.soil_end_ohm, rng=rng),
        )

    def feeder(self) -> Feeder:
        ranges = self._ranges
        return Feeder(
            tail=self.lead(ranges.tail_m),
            box=self.capacitance(ranges.box_farad),
            cone=self.capacitance(ranges.cone_farad),
            strap=self.strap(0.0),
            soil=self.soil(),
            loop_share=even(ranges.loop_share, rng=self._rng),
        )

    def panel(self, role: Role) -> Panel:
        ranges = self._ranges
        winding = role == "transformer"
        return Panel(
            busbar=self.capacitance(ranges.busbar_farad),
            section=self.lead(ranges.section_m),
            dropper=self.lead(ranges.dropper_m),
            equipment=self._equipment(role),
            feeders=(self.feeder(),) if role == "feeder" else (),
            transformer=Winding(self.lead(ranges.winding_m), self.capacitance(ranges.winding_farad))
            if winding
            else None,
        )

    def _equipment(self, role: Role) -> LossyCapacitance:
        if role == "open":
            return self.capacitance(self._ranges.open_farad)
        bushings = self.capacitance(self._ranges.equipment_farad)
        if role != "measuring":
            return bushings
        beside = self.capacitance(self._ranges.voltage_transformer_farad)
        farad = bushings.farad + beside.farad
        # the mean of both loss tangents, weighted by capacitance
        lost = bushings.ohm * bushings.farad**2 + beside.ohm * beside.farad**2
        return LossyCapacitance(farad, lost / farad**2)
