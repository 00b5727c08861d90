"""The label of a source is where its charge enters, and nothing else."""

import numpy as np
import pytest

from pdclass.sim.circuit import draw_circuit
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.ranges import Scenario
from pdclass.sim.source import source_spectrum

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


@pytest.mark.parametrize("place", range(0, len(SOURCES), 9))
def test_responses_are_causal(place):
    """Nothing is heard before the nominal onset but a thousandth of the peak, and it begins after the source does."""
    source, s = SOURCES[place], laplace_grid()
    wave = np.abs(to_samples(source_spectrum(source.current, s) * source.response * np.exp(-s * LEAD_S), 250e6))
    before = int((source.delay_s - 0.1e-6) * 250e6)
    assert wave[:before].max() < 5e-3 * wave.max()
    travel_s = (source.distance_m or 0.0) / 299.792458e6
    assert source.delay_s > LEAD_S + travel_s - 6 * source.current.rise_s
