"""The gallery: one self-contained HTML page of what a synthetic world looks like, for an engineer to judge."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from pdclass.report.gallery_examples import (
    LEVEL_HZ,
    Backdrop,
    Example,
    gather_backdrops,
    gather_crossings,
    gather_examples,
)
from pdclass.report.gallery_physics import (
    CABLES,
    CHAINS,
    CHARGE_US,
    CYCLES,
    INJECTED_NS,
    KINDS,
    RINGS,
    STATIONS,
    TABLE_MHZ,
    Journey,
    Spread,
    bridge_patterns,
    chains,
    converter_intervals,
    journey,
    kinds_of,
    near_ends,
    phase_patterns,
    spread,
)
from pdclass.report.gallery_plots import (
    backdrop_figure,
    chain_figure,
    distance,
    example_figure,
    interval_figure,
    journey_figure,
    near_end_figure,
    pattern_figure,
    ring_figure,
    spread_figure,
)
from pdclass.report.gallery_words import CROSSING, GROUPS, PATTERN_WORDS, WAYS
from pdclass.report.plots import COLOURS, EDGE
from pdclass.report.summary import CAUTIONS, SHORT_CAUTION
from pdclass.report.templates import begin, drawn, template
from pdclass.sim.ranges import Scenario
from pdclass.sim.scenario import SIMULATOR_VERSION
from pdclass.verdict.sentences import three_digits


def gallery_page(scenario: Scenario, *, seed: int) -> str:
    """The gallery of a scenario as HTML, without scripts and without requests to outside; the same every time.

    Parameters
    ----------
    scenario : the synthetic world.
    seed : of the world, >= 0.
    """
    rngs = [np.random.default_rng(child) for child in np.random.SeedSequence(seed).spawn(5)]
    kinds = kinds_of(scenario.cable)
    travels = [journey(scenario.cable, kind, rng=rngs[0]) for kind in KINDS if kind in kinds]
    near = near_ends(scenario, rng=rngs[1])
    return template("gallery.html.j2").render(
        scenario=scenario.name,
        seed=seed,
        version=SIMULATOR_VERSION,
        facts=_facts(scenario),
        groups=_examples(scenario, seed),
        journeys=[_journey(one, place) for place, one in enumerate(travels)],
        spreads=[_spread(spread(scenario.cable, kind, seed=seed), f"v{at}") for at, kind in enumerate(kinds)],
        near_end=drawn(near_end_figure(near, name="n")),
        rings=drawn(ring_figure(near, name="q")),
        ring=_ring_words(near.ring_mhz, near.ring_q),
        chain=drawn(chain_figure(chains(scenario.chain, rng=rngs[2]), name="z")),
        patterns=_patterns(scenario, rngs[3]),
        backdrops=[_backdrop(one, f"b{at}") for at, one in enumerate(gather_backdrops(scenario, seed=seed))],
        counts={"cables": CABLES, "stations": STATIONS, "rings": RINGS, "chains": CHAINS, "cycles": CYCLES},
        injected_ns=INJECTED_NS,
        charge_us=CHARGE_US,
        table_mhz=TABLE_MHZ,
        level_khz=LEVEL_HZ / 1e3,
        cautions=CAUTIONS,
        short_caution=SHORT_CAUTION,
        colours=COLOURS,
        edge=EDGE,
    )


def _facts(scenario: Scenario) -> list[str]:
    """What the scenario is, in a few lines."""
    if scenario.circuit:
        names = ", ".join(entry.name for entry in scenario.circuit)
        return [f"circuits that the scenario names: {names}"]
    cable, near, chain = scenario.cable, scenario.near_end, scenario.chain
    kinds = ", ".join(f"{name} {weight:g}" for name, weight in cable.kinds.items() if weight > 0)
    rates = ", ".join(f"{rate / 1e6:g}" for rate in chain.rates_hz)
    panels = len(near.roles) or f"{near.panels[0]} to {near.panels[1]}"
    return [
        f"{scenario.circuits} circuits, each drawn for itself",
        f"cables of {cable.length_m[0]:g} to {cable.length_m[1]:g} m; kinds by weight: {kinds}",
        f"near ends of {panels} panels",
        f"sampled at {rates} MS/s with {min(chain.bits)} to {max(chain.bits)} bit",
        f"pulses of {scenario.snr_db[0]:g} to {scenario.snr_db[1]:g} dB over the noise, the same for every class",
    ]


def _examples(scenario: Scenario, seed: int) -> list[dict[str, Any]]:
    found = gather_examples(scenario, {group.name: group.label for group in GROUPS}, seed=seed)
    rows = [(group, found[group.name]) for group in GROUPS]
    rows.append((CROSSING, gather_crossings(scenario, seed=seed)))
    return [
        {"label": group.label, "title": group.title, "words": group.words, "rows": _rows(f"e{at}", examples)}
        for at, (group, examples) in enumerate(rows)
    ]


def _rows(name: str, examples: Sequence[Example]) -> list[dict[str, Any]]:
    return [
        {"figure": drawn(example_figure(example, name=f"{name}-{at}")), "caption": _caption(example)}
        for at, example in enumerate(examples)
    ]


def _caption(example: Example) -> str:
    low, high = example.band_hz
    circuit = example.circuit
    placed = example.distance_m is not None and example.label in ("cable", "local")
    place = f", {_place_words(example.distance_m or 0.0)}" if placed else ""
    way = f", {WAYS[example.way]}" if example.way else ""
    charge = "" if example.charge_pc is None else f", {_charge_words(example.charge_pc)}"
    return (
        f"{example.family}{way}{place}{charge}. Cable: {circuit['cable']}, {float(str(circuit['length_m'])):.0f} m; "
        f"{circuit['panels']} panels. Chain {three_digits(low / 1e6)} to {three_digits(high / 1e6)} MHz, "
        f"{example.rate_hz / 1e6:g} MS/s, {circuit['bits']} bit. Peak {three_digits(example.peak_mv)} mV, "
        f"{example.snr_db:.0f} dB over the noise."
    )


def _charge_words(charge_pc: float) -> str:
    return f"{three_digits(charge_pc)} pC" if charge_pc < 1000 else f"{three_digits(charge_pc / 1e3)} nC"


def _place_words(distance_m: float) -> str:
    return (
        "at the termination" if distance_m == 0 else f"{distance_m:.{0 if distance_m >= 10 else 1}f} m from the sensor"
    )


def _journey(found: Journey, place: int) -> dict[str, Any]:
    rows = [
        {
            "distance": distance(step.km),
            "peak": three_digits(step.peak_share),
            "rise": three_digits(step.rise_ns),
            "width": three_digits(step.width_ns),
            "charge": f"{100 * step.charge_share:.1f}",
        }
        for step in found.steps
    ]
    losses = [three_digits(loss) for loss in found.db_per_km]
    return {
        "kind": found.kind,
        "losses": losses,
        "figure": drawn(journey_figure(found, name=f"j{place}")),
        "rows": rows,
    }


def _spread(found: Spread, name: str) -> dict[str, Any]:
    rows = []
    for mhz in TABLE_MHZ:
        at = int(np.argmin(np.abs(found.mhz - mhz)))
        losses = [three_digits(value) for value in found.db_per_km[:, at]]
        rows.append(
            {"mhz": f"{mhz:g}", "losses": losses, "speeds": [f"{value:.0f}" for value in found.m_per_us[:, at]]}
        )
    return {"kind": found.kind, "figure": drawn(spread_figure(found, name=name)), "rows": rows}


def _ring_words(ring_mhz: Any, ring_q: Any) -> dict[str, list[str]]:
    return {
        "mhz": [f"{float(value):.2g}" for value in np.nanpercentile(ring_mhz, [10, 50, 90])],
        "q": [f"{float(value):.2g}" for value in np.nanpercentile(ring_q, [10, 50, 90])],
    }


def _patterns(scenario: Scenario, rng: np.random.Generator) -> list[dict[str, Any]]:
    patterns = [*phase_patterns(scenario, rng=rng), *bridge_patterns(scenario, rng=rng)]
    panels = [
        {"figure": drawn(pattern_figure(one, name=f"p{at}")), "caption": PATTERN_WORDS[one.pattern]}
        for at, one in enumerate(patterns)
    ]
    intervals = converter_intervals(scenario, rng=rng)
    if intervals is not None:
        caption = f"converter switching at {intervals.switching_hz / 1e3:.1f} kHz; dashed: one period"
        panels.append({"figure": drawn(interval_figure(intervals, name="i")), "caption": caption})
    return panels


def _backdrop(found: Backdrop, name: str) -> dict[str, Any]:
    carriers = ", ".join(three_digits(mhz) for mhz in found.carriers_mhz)
    heard = f"carriers at {carriers} MHz" if carriers else "no broadcast carriers"
    caption = f"{heard}; {found.communication}; {found.rate_hz / 1e6:g} MS/s"
    return {"figure": drawn(backdrop_figure(found, name=name)), "caption": f"{begin(caption)}."}
