"""Drawing a receiving chain: corners and transfer are drawn, the elements follow from them."""

from __future__ import annotations

from typing import Annotated, Self

import numpy as np
from pydantic import AfterValidator, Field, model_validator

from pdclass.sim.draw import (
    Farads,
    Ohms,
    Pair,
    Ranges,
    Some,
    Weights,
    Whole,
    chosen,
    even,
    known_names,
    log_even,
    whole,
    within,
)
from pdclass.sim.receiver import WIDEST_HZ, AntiAlias, FilterKind, Receiver, SensorLead, transformer_of

_RATES_HZ = (40e6, 62.5e6, 100e6, 125e6, 200e6, 250e6)
_FILTERS: dict[str, FilterKind] = {"butterworth": "butterworth", "bessel": "bessel"}
_LEAD_LOSS_HZ = 10e6


def _known_rates(rates: tuple[float, ...]) -> tuple[float, ...]:
    if not set(rates) <= set(_RATES_HZ):
        raise ValueError(f"a rate is one of {', '.join(f'{rate / 1e6:g}e6' for rate in _RATES_HZ)} Hz")
    return rates


Rates = Annotated[tuple[float, ...], Field(min_length=1), AfterValidator(_known_rates)]
LeadOhms = Annotated[tuple[Annotated[float, Field(ge=1, le=1000)], ...], Field(min_length=1)]


class ChainRanges(Ranges):
    """Sensors, leads and digitisers (common practice where no source is named).

    Attributes
    ----------
    rates_hz : samples a second [Hz], each as often as it stands here.
    bits : resolution [bit].
    mains_hz : mains frequency [Hz].
    transfer_ohm : mid-band transfer impedance [V/A].
    low_corner_hz, high_corner_hz : of the transformer without mains current, into a resistive input [Hz].
    turns : of its winding; fewer where the transfer impedance leaves no other choice.
    high_corner_quality : of the pair of poles at the upper corner.
    winding_ohm : resistance of the winding [ohm].
    saturation : share of its inductance that the core loses at the peaks of the mains current.
    lead_m : length of the coaxial lead [m].
    lead_ohm : its characteristic impedance [ohm], each as often as it stands here.
    lead_loss_db : attenuation of 100 m of it at 10 MHz [dB].
    input_ohm, input_farad : input of the digitiser [ohm, F].
    filters : kinds of anti-alias filter.
    filter_order : its order.
    filter_share : its -3 dB corner over the rate; at most 48 MHz.
    jitter_s : standard deviation of the sampling instants [s].
    """

    rates_hz: Rates = (62.5e6, 100e6, 125e6, 200e6, 250e6)
    bits: Annotated[tuple[Annotated[int, Field(ge=8, le=16)], ...], Field(min_length=1)] = (8, 10, 12, 14, 16)
    mains_hz: Annotated[tuple[Annotated[float, Field(gt=10, lt=100)], ...], Field(min_length=1)] = (50.0, 60.0)
    transfer_ohm: Annotated[Pair, within(1e-3, 1e3, "V/A")] = (1.0, 15.0)
    low_corner_hz: Annotated[Pair, within(100.0, 1e7, "Hz")] = (30e3, 300e3)
    high_corner_hz: Annotated[Pair, within(1e5, 1e9, "Hz")] = (8e6, 80e6)
    turns: Some = (2, 25)
    high_corner_quality: Annotated[Pair, within(0.05, 20.0)] = (0.3, 1.1)
    winding_ohm: Ohms = (0.1, 2.0)
    saturation: Annotated[Pair, within(0.0, 0.99)] = (0.0, 0.6)
    lead_m: Annotated[Pair, within(0.01, 300.0, "m")] = (1.0, 30.0)
    lead_ohm: LeadOhms = (50.0, 50.0, 50.0, 50.0, 50.0, 75.0)
    lead_loss_db: Annotated[Pair, within(0.01, 100.0, "dB")] = (2.0, 7.0)
    input_ohm: Annotated[Pair, within(1.0, 1e7, "ohm")] = (47.5, 52.5)
    input_farad: Farads = (5e-12, 50e-12)
    filters: Annotated[Weights, known_names(*_FILTERS)] = Field(default={"butterworth": 0.6, "bessel": 0.4})
    filter_order: Annotated[Whole, within(2, 5)] = (2, 5)
    filter_share: Annotated[Pair, within(0.1, 0.499)] = (0.35, 0.45)
    jitter_s: Annotated[Pair, within(1e-15, 1e-8, "s")] = (1e-12, 100e-12)

    @model_validator(mode="after")
    def _sensors_can_be_built(self) -> Self:
        if self.transfer_ohm[1] > self.input_ohm[0]:
            raise ValueError("transfer_ohm stays below input_ohm, which a single turn would give")
        if self.low_corner_hz[1] >= self.high_corner_hz[0]:
            raise ValueError("low_corner_hz stays below high_corner_hz")
        return self


def draw_receiver(ranges: ChainRanges, *, rng: np.random.Generator) -> Receiver:
    """A current transformer with its lead and digitiser."""
    rate_hz = float(rng.choice(ranges.rates_hz))
    lead = _draw_lead(ranges, rng=rng)
    transfer_ohm = log_even(ranges.transfer_ohm, rng=rng)
    band_hz = (log_even(ranges.low_corner_hz, rng=rng), log_even(ranges.high_corner_hz, rng=rng))
    most = max(1, min(ranges.turns[1], int(lead.input_ohm / transfer_ohm)))
    transformer = transformer_of(
        transfer_ohm,
        band_hz,
        turns=whole((min(ranges.turns[0], most), most), rng=rng),
        quality=log_even(ranges.high_corner_quality, rng=rng),
        winding_ohm=log_even(ranges.winding_ohm, rng=rng),
        input_ohm=lead.input_ohm,
    )
    return Receiver(
        rate_hz=rate_hz,
        bits=int(rng.choice(ranges.bits)),
        mains_hz=float(rng.choice(ranges.mains_hz)),
        transformer=transformer,
        lead=lead,
        anti_alias=_draw_anti_alias(ranges, rate_hz, rng=rng),
        saturation=even(ranges.saturation, rng=rng),
        strap_lag_deg=even((0.0, 360.0), rng=rng),
        jitter_s=log_even(ranges.jitter_s, rng=rng),
    )


def _draw_lead(ranges: ChainRanges, *, rng: np.random.Generator) -> SensorLead:
    neper_per_m = log_even(ranges.lead_loss_db, rng=rng) / (100 * 20 * np.log10(np.e))
    return SensorLead(
        length_m=log_even(ranges.lead_m, rng=rng),
        impedance_ohm=float(rng.choice(ranges.lead_ohm)),
        # the real part of sqrt(s) is sqrt(pi f)
        skin_s=float(neper_per_m / np.sqrt(np.pi * _LEAD_LOSS_HZ)),
        input_ohm=even(ranges.input_ohm, rng=rng),
        input_farad=log_even(ranges.input_farad, rng=rng),
    )


def _draw_anti_alias(ranges: ChainRanges, rate_hz: float, *, rng: np.random.Generator) -> AntiAlias:
    kind = _FILTERS[chosen(ranges.filters, rng=rng)]
    order = whole(ranges.filter_order, rng=rng)
    return AntiAlias(kind, order, min(even(ranges.filter_share, rng=rng) * rate_hz, WIDEST_HZ))
