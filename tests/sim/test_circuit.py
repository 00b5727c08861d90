"""The label of a source is where its charge enters, and nothing else."""

from collections import Counter

import numpy as np
import pytest
from scipy import stats

from pdclass.errors import InputError
from pdclass.sim.circuit import draw_circuit
from pdclass.sim.drawn_source import most_charge_pc
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.ranges import Scenario
from pdclass.sim.receiver import saturated
from pdclass.sim.source import half_width_s, source_spectrum

WORLD = Scenario(name="world", circuits=40)
CIRCUITS = [draw_circuit(WORLD, index, rng=np.random.default_rng([3, index])) for index in range(40)]
SOURCES = [source for circuit in CIRCUITS for source in circuit.sources]


def test_every_circuit_has_every_class():
    """One to three sources of each class on each circuit."""
    for circuit in CIRCUITS:
        labels = [source.label for source in circuit.sources]
        assert all(1 <= labels.count(label) <= 3 for label in ("cable", "local", "switchgear", "interference"))


def test_places_belong_to_their_class():
    """Cable sources lie beyond 10 m or on a neighbour's cable, local ones within, switchgear at the sensor."""
    places = {label: [s.distance_m for s in SOURCES if s.label == label] for label in ("cable", "local", "switchgear")}
    neighbours = [place for place in places["cable"] if place is None]
    assert 0 < len(neighbours) < 0.3 * len(places["cable"])
    places["cable"] = [place for place in places["cable"] if place is not None]
    assert min(places["cable"]) >= 10 >= max(places["local"])
    assert set(places["switchgear"]) == {0.0}
    assert max(places["cable"]) > 1000
    stray = [source.distance_m for source in SOURCES if source.label == "interference"]
    assert None in stray


def test_discharges_have_one_law():
    """Widths of the source currents do not differ between cable, local and switchgear by more than chance."""
    widths = [
        np.log([source.current.rise_s for source in SOURCES if source.label == label])
        for label in ("cable", "local", "switchgear")
    ]
    error = np.sqrt(sum(width.var() / width.size for width in widths))
    assert max(width.mean() for width in widths) - min(width.mean() for width in widths) < 3 * error


def test_the_kind_of_a_discharge_tells_nothing_of_its_place():
    """Kinds are as frequent in cable, local and switchgear: what is too weak to be heard is so whatever its label."""
    count = {
        label: Counter(s.family for s in SOURCES if s.label == label) for label in ("cable", "local", "switchgear")
    }
    kinds = sorted(set().union(*count.values()))
    table = np.array([[held[kind] for kind in kinds] for held in count.values()])
    assert stats.chi2_contingency(table).pvalue > 1e-3


def test_drawn_discharges_have_charges_that_their_kind_has():
    """At the middle of the heights hardly any needs more charge than its kind has."""
    too_much = [
        circuit.noise_v * 10 ** (np.mean(source.snr_db) / 20) / source.volts_per_coulomb * 1e12
        > most_charge_pc(WORLD.source, source.family)
        for circuit in CIRCUITS
        for source in circuit.sources
        if source.label != "interference"
    ]
    assert np.mean(too_much) < 0.03


@pytest.mark.parametrize("place", range(0, len(SOURCES), 9))
def test_responses_are_causal(place):
    """Nothing is heard well before the nominal onset, where "well" is a width of the source, and none is too early."""
    source, s = SOURCES[place], laplace_grid()
    wave = np.abs(to_samples(source_spectrum(source.current, s) * source.response * np.exp(-s * LEAD_S), 250e6))
    before = int((source.delay_s - max(0.1e-6, 2 * half_width_s(source.current))) * 250e6)
    assert source.current.shape == "packet" or wave[:before].max() < 1e-2 * wave.max()
    travel_s = (source.distance_m or 0.0) / 299.792458e6
    assert source.delay_s > LEAD_S + travel_s - 6 * max(source.current.rise_s, source.current.fall_s)


def test_the_mains_current_in_the_strap_only_raises_the_low_corner():
    """With a saturated core the chain loses at 30 kHz and nothing at 10 MHz."""
    for circuit in CIRCUITS:
        hz = laplace_grid().imag / (2 * np.pi)
        lost = np.abs(saturated(circuit.sensitivity, 0.5))
        assert lost[np.argmin(np.abs(hz - 30e3))] < 0.95
        assert lost[np.argmin(np.abs(hz - 10e6))] == pytest.approx(1, abs=0.05)


def test_every_way_and_family_turns_up():
    """Forty circuits hold every way of a discharge, and most families of interference."""
    ways = {source.way for source in SOURCES if source.label != "interference"}
    assert ways == {"cable", "neighbour", "stress-cone", "box", "bus", "equipment"}
    assert len({source.family for source in SOURCES if source.label == "interference"}) >= 6


def test_traits_tell_what_a_circuit_is_like():
    """Cable, size of the station and band of the chain are told as they were drawn."""
    for circuit in CIRCUITS:
        assert circuit.traits["cable"] in {"XLPE", "EPR", "paper", "belted"}
        assert 2 <= circuit.traits["panels"] <= 9
        assert circuit.traits["low_hz"] < circuit.traits["high_hz"] <= circuit.receiver.rate_hz / 2


def _named_world(source, **near_end):
    return Scenario.model_validate({
        "name": "named",
        "near_end": near_end,
        "circuit": [{"name": "Mole End", "sensor": "s", "length_m": 800.0, "sources": [
            {"pulses_per_cycle": 5.0, "snr_db": [20.0, 30.0], **source}
        ]}],
    })  # fmt: skip


def test_what_a_named_source_does_not_say_is_drawn():
    """Way and place of a named source are drawn as in the mix, unless it says them."""
    drawn = [
        draw_circuit(_named_world({"label": "local"}), 0, rng=np.random.default_rng(seed)).sources[0]
        for seed in range(24)
    ]
    assert {source.way for source in drawn} == {"stress-cone", "box"}
    assert len({source.distance_m for source in drawn}) > 3
    said = draw_circuit(_named_world({"label": "cable", "distance_m": 300.0}), 0, rng=np.random.default_rng(1))
    assert (said.sources[0].way, said.sources[0].distance_m) == ("cable", 300.0)


@pytest.mark.parametrize(
    "source", [{"label": "cable", "way": "neighbour"}, {"label": "interference", "path": "feeder"}]
)
def test_a_named_neighbour_must_be_there(source):
    """A source on a neighbour's cable of a station without one is refused, naming the circuit."""
    with pytest.raises(InputError, match=r"Mole End.*another cable on the busbar"):
        draw_circuit(_named_world(source, roles=("own",)), 0, rng=np.random.default_rng(1))
