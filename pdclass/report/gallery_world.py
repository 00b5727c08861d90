"""Which sources a scenario has at all, drawn or named, so that the gallery shows no others."""

from __future__ import annotations

from collections.abc import Mapping

from pdclass.sim.drawn_source import CORONA_PATTERNS, KIND_PATTERNS
from pdclass.sim.phase import Pattern
from pdclass.sim.ranges import Scenario


def families_of(scenario: Scenario) -> frozenset[str]:
    """Families of interference that a world can have."""
    drawn = _weighed(scenario.interference.families)
    if not scenario.circuit:
        return drawn if scenario.mix.interference > 0 else frozenset()
    wishes = [wish for entry in scenario.circuit for wish in entry.sources if wish.label == "interference"]
    return frozenset[str]().union(*(drawn if wish.family is None else {wish.family} for wish in wishes))


def patterns_of(scenario: Scenario) -> frozenset[Pattern]:
    """Patterns in the cycle that discharges and points in air of a world can have."""
    found = _discharges(scenario)
    if "line-corona" in families_of(scenario):
        polarities = _weighed(scenario.interference.line_corona.current.polarities)
        found |= {pattern for polarity, pattern in CORONA_PATTERNS.items() if polarity in polarities}
    return found


def _discharges(scenario: Scenario) -> frozenset[Pattern]:
    kinds = _weighed(scenario.source.kinds)
    drawn = frozenset(pattern for kind, pattern in KIND_PATTERNS.items() if kind in kinds)
    if not scenario.circuit:
        return drawn if scenario.mix.cable + scenario.mix.local + scenario.mix.switchgear > 0 else frozenset()
    found: set[Pattern] = set()
    for wish in (wish for entry in scenario.circuit for wish in entry.sources if wish.label != "interference"):
        if wish.pattern is not None:
            found.add(wish.pattern)
        else:
            found |= drawn if wish.kind is None else {KIND_PATTERNS[wish.kind]}
    return frozenset(found)


def _weighed(weights: Mapping[str, float]) -> frozenset[str]:
    return frozenset(name for name, weight in weights.items() if weight > 0)
