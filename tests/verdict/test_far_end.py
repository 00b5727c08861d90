"""Far-end echoes of near-end discharges are not taken for discharges out along the cable."""

import pytest

from pdclass.extract import extract
from pdclass.features import feature_digests, feature_table
from pdclass.jobs.score import base_bundle
from pdclass.model.bundle import read_bundle
from pdclass.sim.scenario import Scenario, simulate_capture
from pdclass.verdict.score import score


@pytest.fixture(scope="module")
def model():
    return read_bundle(base_bundle(), feature_digests())


@pytest.mark.parametrize("length_m", [600.0, 2000.0])
@pytest.mark.parametrize("label", ["local", "switchgear"])
def test_echoes_of_near_pulses_are_not_scored_as_cable(model, label, length_m):
    """Of what follows near pulses on an open cable hardly any stands alone, and none is decided `cable`."""
    source = {"label": label, "pulses_per_cycle": 30.0, "snr_db": [30.0, 44.0], "pattern": "void"}
    if label == "local":
        source["distance_m"] = 0.0
    line = {"name": "Quay Road", "sensor": "strap", "length_m": length_m, "far_end": "open", "sources": [source]}
    world = {
        "name": "echoes",
        "snr_db": [30.0, 44.0],
        "capture": {"duration_ms": 20.0},
        "chain": {"rates_hz": [100e6], "bits": [14], "mains_hz": [50.0]},
        "circuit": [line],
    }
    followers = alone = cable = 0
    for seed in range(3):
        capture = simulate_capture(Scenario.model_validate(world), 1, seed=seed)
        pulses = extract(capture).pulses
        planted = pulses.table["label"].notna()
        free = ~planted & pulses.table["echo_of"].isna()
        verdicts = score(pulses, feature_table(pulses, model.features), model).table
        followers += int((~planted).sum())
        alone += int((free & pulses.table["maybe_echo_of"].isna()).sum())
        cable += int((verdicts.loc[free[free].index, "label"] == "cable").sum())
    assert followers > 10
    # joints send back small copies too, some of them too deformed to be told from new pulses
    assert alone <= max(2, 0.1 * followers)
    assert cable == 0
