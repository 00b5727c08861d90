"""What the gallery cuts out of records."""

from dataclasses import replace

import numpy as np
import pytest
from gallery_samples import world

from pdclass.report.gallery_examples import gather_backdrops, gather_examples, group_of
from pdclass.sim.scenario import circuit_of

FIELDS = ("void", "aged_void", "interface", "surface", "floating")
TEMPLATE = circuit_of(world(), 1, seed=1).sources[0]


def source(label, way, distance_m=None, family="void"):
    return replace(TEMPLATE, label=label, family=family, way=way, distance_m=distance_m)


@pytest.mark.parametrize(
    ("of", "group"),
    [
        (source("cable", "cable", 50.0), "near"),
        (source("cable", "cable", 100.0), "middle"),
        (source("cable", "cable", 501.0), "far"),
        (source("cable", "cable", 900.0), "far end"),
        (source("cable", "neighbour"), "neighbour"),
        (source("local", "stress-cone", 0.0), "termination"),
        (source("local", "stress-cone", 3.0), "first metres"),
        (source("local", "box", 0.0), "box"),
        (source("switchgear", "equipment", 0.0), "equipment"),
        (source("interference", "far-end", 900.0, "arc"), "arc"),
    ],
)
def test_a_source_belongs_to_its_group(of, group):
    """Place and way decide the group of a discharge, the family that of interference."""
    assert group_of(of, 900.0) == group


@pytest.fixture(scope="module")
def examples():
    return gather_examples(world(), {"middle": "cable", "bus": "switchgear", "sferic": "interference"}, seed=3)


def test_an_example_begins_at_its_onset_and_stands_well_over_the_noise(examples):
    """Before the onset there is background only, the largest sample is one, its spectrum's largest value 0 dB."""
    for name in ("middle", "bus"):
        (example,) = examples[name]
        before = example.time_us < -0.1
        assert np.abs(example.wave[before]).max() < 0.15
        assert np.abs(example.wave).max() == pytest.approx(1.0)
        assert 25 < example.snr_db < 50
        assert example.level_db.max() == pytest.approx(0.0)
        assert np.median(example.floor_db) < -15
        assert example.mhz[-1] <= example.rate_hz / 2e6


def test_what_the_world_does_not_have_stays_empty(examples):
    """A family without a source on any circuit has no example."""
    assert examples["sferic"] == []


def test_a_background_shows_the_carrier_that_the_scenario_names():
    """The level rises at the frequency of a carrier far over its surroundings."""
    named = world()
    background = named.background.model_copy(update={"carriers_hz": (5e6,), "carriers": (0, 0)})
    (found,) = gather_backdrops(named.model_copy(update={"background": background}), seed=3)
    at = int(np.argmin(np.abs(found.mhz - 5.0)))
    assert found.level_db[at] > np.median(found.level_db[at - 30 : at + 30]) + 10
    assert found.carriers_mhz == (5.0,)


def limited(most_pc):
    """The examples of the same world where no kind of discharge has more charge than this."""
    named = world()
    charge = {"charge_pc": (0.01, most_pc)}
    kinds = {name: getattr(named.source, name).model_copy(update=charge) for name in FIELDS}
    little = named.model_copy(update={"source": named.source.model_copy(update=kinds)})
    return gather_examples(little, {"middle": "cable", "bus": "switchgear"}, seed=3)


@pytest.mark.parametrize("name", ["middle", "bus"])
def test_no_example_has_much_more_charge_than_its_kind(examples, name):
    """A faint named source keeps the limit of its kind, give or take the spread of widths, and is called faint."""
    (usual,) = examples[name]
    assert not usual.faint
    most_pc = usual.charge_pc * 10 ** (-(usual.snr_db - 16.0) / 20)
    (example,) = limited(most_pc)[name]
    assert example.faint
    assert 0.8 * most_pc < example.charge_pc < 1.3 * most_pc
    assert limited(most_pc / 10)[name] == []
