"""More circuits and families left out: the studies compare trainings on the same tested circuits."""

import numpy as np
import pandas as pd
import pytest
from blobs import DIGESTS, NAMES, QUICK, blobs

from pdclass.training.evaluate import clear_figures, judge
from pdclass.training.fit import train
from pdclass.training.study import CLEAR_DB, Family, Measured, clear, learning_curve, left_out


def _trained(values, pulses):
    return train(values, NAMES, DIGESTS, pulses, QUICK)


def _each(sets):
    return [_trained(one.values, one.pulses) for one in sets]


def _measured(circuits, seed, prefix):
    values, pulses = blobs(circuits, seed=seed, prefix=prefix)
    names = list(dict.fromkeys(pulses.table["circuit"]))
    kinds = ["paper" if number % 3 == 0 else "XLPE" for number in range(len(names))]
    family = np.where(np.arange(len(values)) % 8 == 3, "arc", "other")
    table = pulses.table.assign(family=np.where(pulses.table["label"] == "interference", family, "void"))
    traits = pd.DataFrame({"cable": kinds}, index=pd.Index(names, name="circuit"))
    return Measured(values, type(pulses)(pulses.waves, pulses.chains, table), traits)


@pytest.fixture(scope="module")
def taught():
    return _measured(48, 0, "C")


@pytest.fixture(scope="module")
def tested():
    return _measured(18, 50, "E")


def test_more_circuits_do_not_harm(taught, tested):
    """The curve has a row for each number of circuits, and all of them do better than a few."""
    curve = learning_curve(taught, tested, [12, 48], _each)
    assert curve["circuits"].tolist() == [12, 48]
    assert curve["balanced_accuracy"].iloc[1] > curve["balanced_accuracy"].iloc[0] - 0.02
    assert curve["coverage_least_class"].between(0.6, 1).all()


def test_the_last_point_is_the_whole_training(taught, tested):
    """Taught with all circuits the curve is what the bundle itself shows."""
    parts = _trained(taught.values, taught.pulses)
    curve = learning_curve(taught, tested, [48], _each)
    assert curve.drop(columns="circuits").iloc[0].to_dict() == clear(judge(parts, tested.values, tested.pulses))


def test_a_family_left_out_is_scored_where_it_is_met(taught, tested):
    """Circuits of a left-out kind are the only ones scored; a left-out kind of pulse takes its circuits along."""
    full = _trained(taught.values, taught.pulses)
    families = (
        Family("paper", circuits=lambda traits: traits["cable"] == "paper"),
        Family("arc", pulses="arc"),
    )
    rows = left_out(taught, tested, families, _each, full)
    assert rows[["family", "training"]].to_numpy().tolist() == [
        ["paper", "known"], ["paper", "left out"], ["arc", "known"], ["arc", "left out"],
    ]  # fmt: skip
    assert rows["circuits"].tolist() == [6, 6, 18, 18]


def test_nothing_of_a_left_out_family_is_taught(taught, tested):
    """The training without a family sees neither its circuits nor its pulses, and all the rest."""
    seen = []

    def spying(sets):
        seen.extend(one.pulses.table for one in sets)
        return _each(sets)

    full = _trained(taught.values, taught.pulses)
    families = (Family("paper", circuits=lambda traits: traits["cable"] == "paper"), Family("arc", pulses="arc"))
    left_out(taught, tested, families, spying, full)
    assert set(taught.traits.loc[seen[0]["circuit"], "cable"]) == {"XLPE"}
    assert len(seen[0]) == 32 * 24
    assert "arc" not in set(seen[1]["family"])
    assert len(seen[1]) == (taught.pulses.table["family"] != "arc").sum()


def test_clear_pulses_are_the_high_ones(tested, taught):
    """Figures of clear pulses are those of the pulses above the bound alone."""
    judged = judge(_trained(taught.values, taught.pulses), tested.values, tested.pulses)
    high = judged.snr_db >= CLEAR_DB
    assert 0 < high.sum() < high.size
    assert clear(judged) == clear_figures(judged.where(high))


def test_merging_the_near_end_only_adds(taught, tested):
    """Merged, more is decided and no accuracy is lost but by classes' weights."""
    found = clear(judge(_trained(taught.values, taught.pulses), tested.values, tested.pulses))
    assert found["decided_near_end_merged"] >= found["decided"]
    assert found["decided_wrongly"] == pytest.approx(found["decided"] * (1 - found["accuracy_decided"]))
