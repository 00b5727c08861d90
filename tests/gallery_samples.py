"""A world of one circuit, for tests of the gallery."""

from pdclass.sim.ranges import Scenario


def world():
    """One named circuit with a source of each class."""
    common = {"pulses_per_cycle": 10.0, "snr_db": [20.0, 30.0]}
    sources = [
        {"label": "cable", "distance_m": 300.0, **common},
        {"label": "local", "distance_m": 0.0, "way": "stress-cone", **common},
        {"label": "switchgear", "way": "bus", **common},
        {"label": "interference", "family": "converter", "path": "screen", **common},
    ]
    circuit = {"name": "A <b>1", "sensor": "strap", "length_m": 900.0, "sources": sources}
    narrow = {"chain": {"rates_hz": [62.5e6]}, "cable": {"kinds": {"XLPE": 1.0}}}
    return Scenario.model_validate({"name": "one", "circuit": [circuit], **narrow})
