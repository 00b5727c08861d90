"""Which sources a scenario has at all."""

import pytest

from pdclass.report.gallery_world import families_of, patterns_of
from pdclass.sim.ranges import Scenario


def named(*sources, **parts):
    """A world of one circuit with these sources."""
    common = {"pulses_per_cycle": 1.0, "snr_db": [20.0, 30.0]}
    circuit = {"name": "A", "sensor": "s", "length_m": 300.0, "sources": [{**common, **one} for one in sources]}
    return Scenario.model_validate({"name": "w", "circuit": [circuit], **parts})


def drawn(**parts):
    """A drawn world."""
    return Scenario.model_validate({"name": "w", **parts})


NO_INTERFERENCE = {"mix": {"interference": 0.0}}
ONLY_INTERFERENCE = {"mix": {"cable": 0.0, "local": 0.0, "switchgear": 0.0}}
NEGATIVE = {"line_corona": {"current": {"polarities": {"negative": 1.0}}}}


@pytest.mark.parametrize(
    ("world", "families", "patterns"),
    [
        (named(), set(), set()),
        (named({"label": "local", "kind": "aged-void"}), set(), {"void"}),
        (named({"label": "local", "kind": "void", "pattern": "surface"}), set(), {"surface"}),
        (named({"label": "local"}, source={"kinds": {"surface": 1.0}}), set(), {"surface"}),
        (named({"label": "interference", "family": "arc"}), {"arc"}, set()),
        (
            named({"label": "interference"}, interference={"families": {"line-corona": 1.0, "arc": 0.0}, **NEGATIVE}),
            {"line-corona"},
            {"corona"},
        ),
        (drawn(**NO_INTERFERENCE), set(), {"void", "surface", "floating"}),
        (drawn(**ONLY_INTERFERENCE, interference={"families": {"converter": 2.0}}), {"converter"}, set()),
    ],
)
def test_a_world_has_what_it_names_or_draws(world, families, patterns):
    """Families and patterns follow from named sources, else from the weights of what is drawn."""
    assert families_of(world) == families
    assert patterns_of(world) == patterns
