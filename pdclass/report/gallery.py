"""The gallery: one self-contained HTML page of what a synthetic world looks like, for an engineer to judge."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from pdclass.report.gallery_curve import CurveFit, Misfit, curve_fit, curve_journey, curve_name
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
    curve_figure,
    distance,
    example_figure,
    interval_figure,
    journey_figure,
    near_end_figure,
    pattern_figure,
    ring_figure,
    spread_figure,
)
from pdclass.report.gallery_quoted import beside_quoted
from pdclass.report.gallery_words import CROSSING, CURRENTS, GROUPS, PATTERN_WORDS, WAYS
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
    kinds, curve = kinds_of(scenario.cable), scenario.cable.curve
    travels = [journey(scenario.cable, kind, rng=rngs[0]) for kind in kinds]
    travels += [] if curve is None else [curve_journey(curve)]
    shown = _examples(scenario, seed)
    patterns = _patterns(scenario, rngs[3])
    near = near_ends(scenario, rng=rngs[1])
    return template("gallery.html.j2").render(
        scenario=scenario.name,
        seed=seed,
        version=SIMULATOR_VERSION,
        facts=_facts(scenario),
        groups=[group for group in shown if group["rows"]],
        missing=[group["title"] for group in shown if not group["rows"]],
        journeys=[_journey(one, place) for place, one in enumerate(travels)],
        spreads=[_spread(spread(scenario.cable, kind, seed=seed), f"v{at}") for at, kind in enumerate(kinds)],
        curve=None if curve is None else _curve(scenario, curve_fit(curve)),
        near_end=drawn(near_end_figure(near, name="n")),
        rings=drawn(ring_figure(near, name="q")),
        ring=_ring_words(near.ring_mhz, near.ring_q),
        chain=drawn(chain_figure(chains(scenario.chain, rng=rngs[2]), name="z")),
        patterns=list(patterns.values()),
        missing_patterns=[words for name, words in PATTERN_WORDS.items() if name not in patterns],
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
    chain, panels = scenario.chain, scenario.near_end.panels
    rates = ", ".join(f"{rate / 1e6:g}" for rate in chain.rates_hz)
    own = len(scenario.near_end.roles)
    return [
        *_circuit_facts(scenario),
        f"near ends of {own or _span(*panels)} panels",
        f"sampled at {rates} MS/s with {_span(min(chain.bits), max(chain.bits))} bit",
    ]


def _circuit_facts(scenario: Scenario) -> list[str]:
    lines = _line_words(scenario)
    if scenario.circuit:
        names = ", ".join(entry.name for entry in scenario.circuit)
        return [f"circuits that the scenario names: {names}", f"cables: {lines}"]
    count = f"{scenario.circuits} circuits, each drawn for itself" if scenario.circuits > 1 else "one circuit, drawn"
    return [
        count,
        f"cables of {_span(*scenario.cable.length_m)} m: {lines}",
        f"pulses of {_span(*scenario.snr_db)} dB over the noise, the same for every class",
    ]


def _line_words(scenario: Scenario) -> str:
    cable = scenario.cable
    if cable.curve is not None:
        return curve_name(cable.curve)
    kinds = {name: weight for name, weight in cable.kinds.items() if weight > 0}
    if len(kinds) == 1:
        return f"{next(iter(kinds))}"
    return f"kinds by weight: {', '.join(f'{name} {weight:g}' for name, weight in kinds.items())}"


def _span(low: float, high: float) -> str:
    """A range in words; a known value by itself."""
    return f"{low:g}" if low == high else f"{low:g} to {high:g}"


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
    faint = " A faint one: the largest charge of its kind is not seen better here." if example.faint else ""
    return (
        f"{CURRENTS.get(example.family, example.family)}{way}{place}{charge}. "
        f"Cable: {circuit['cable']}, {float(str(circuit['length_m'])):.0f} m; {circuit['panels']} panels. "
        f"Chain {three_digits(low / 1e6)} to {three_digits(high / 1e6)} MHz, "
        f"{example.rate_hz / 1e6:g} MS/s, {circuit['bits']} bit. Peak {three_digits(example.peak_mv)} mV, "
        f"{example.snr_db:.0f} dB over the noise.{faint}"
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
    return {
        "kind": found.kind,
        "figure": drawn(spread_figure(found, name=name)),
        "rows": rows,
        "beside": beside_quoted(found),
    }


def _curve(scenario: Scenario, fit: CurveFit) -> dict[str, Any]:
    ohm = fit.impedance_ohm
    drawn_ohm = f"{_span(*scenario.cable.curve_ohm)} ohm, drawn: the curve has none"
    return {
        "name": fit.name,
        "figure": drawn(curve_figure(fit, name="c")),
        "span": f"{len(fit.points_mhz)} points from {fit.points_mhz[0]:.3g} to {fit.points_mhz[-1]:.3g} MHz",
        "loss": _misfit_words(fit.attenuation),
        "speed": _misfit_words(fit.velocity),
        "impedance": drawn_ohm if ohm is None else f"{three_digits(ohm)} ohm, the mean of the curve's",
    }


def _misfit_words(misfit: Misfit) -> str:
    side = "above" if misfit.share > 0 else "below"
    return f"{100 * abs(misfit.share):.2g} % {side} the measured one (at {misfit.mhz:.3g} MHz)"


def _ring_words(ring_mhz: Any, ring_q: Any) -> dict[str, list[str]]:
    return {
        "mhz": [f"{float(value):.2g}" for value in np.nanpercentile(ring_mhz, [10, 50, 90])],
        "q": [f"{float(value):.2g}" for value in np.nanpercentile(ring_q, [10, 50, 90])],
    }


def _patterns(scenario: Scenario, rng: np.random.Generator) -> dict[str, list[dict[str, Any]]]:
    """Panels of each pattern that the world has, by its name."""
    panels: dict[str, list[dict[str, Any]]] = {}
    for at, one in enumerate([*phase_patterns(scenario, rng=rng), *bridge_patterns(scenario, rng=rng)]):
        panel = {"figure": drawn(pattern_figure(one, name=f"p{at}")), "caption": PATTERN_WORDS[one.pattern]}
        panels.setdefault(one.pattern, []).append(panel)
    intervals = converter_intervals(scenario, rng=rng)
    if intervals is not None:
        caption = f"converter switching at {intervals.switching_hz / 1e3:.1f} kHz; dashed: one period"
        panels["converter"] = [{"figure": drawn(interval_figure(intervals, name="i")), "caption": caption}]
    return panels


def _backdrop(found: Backdrop, name: str) -> dict[str, Any]:
    carriers = ", ".join(three_digits(mhz) for mhz in found.carriers_mhz)
    heard = f"carriers at {carriers} MHz" if carriers else "no broadcast carriers"
    caption = f"{heard}; {found.communication}; {found.rate_hz / 1e6:g} MS/s"
    return {"figure": drawn(backdrop_figure(found, name=name)), "caption": f"{begin(caption)}."}
