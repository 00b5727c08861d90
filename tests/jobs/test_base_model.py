"""The studies that stand in the base bundle's card."""

import numpy as np
import pandas as pd
import pytest
from blobs import DIGESTS, NAMES, blobs

from pdclass.jobs.base_model import FAMILIES, _studies
from pdclass.jobs.talk import SILENT
from pdclass.training.fit import train
from pdclass.training.settings import TrainSettings
from pdclass.training.study import Measured

FAST = TrainSettings(max_trees=5, max_leaf_nodes=4, min_samples_leaf=5, reference_rows=60)
INTERFERENCE = ("converter", "arc", "switch-mode")


def _trained(values, pulses):
    return train(values, NAMES, DIGESTS, pulses, FAST)


def _each(sets):
    return [_trained(one.values, one.pulses) for one in sets]


def _measured(circuits, seed, prefix):
    """Circuits of every kind that the studies leave out, none of them all of one kind."""
    values, pulses = blobs(circuits, 12, seed=seed, prefix=prefix)
    names = list(dict.fromkeys(pulses.table["circuit"]))
    number = np.arange(len(names))
    kinds = np.array(["XLPE", "EPR", "paper", "belted"], object)[number % 4]
    traits = {"cable": kinds, "panels": 2 + number % 7, "high_hz": np.where(number % 3 == 0, 10e6, 25e6)}
    # one family a circuit, so that leaving one out leaves circuits that have not met it
    family = np.array(INTERFERENCE, object)[np.repeat(number, 12) % 3]
    table = pulses.table.assign(family=np.where(pulses.table["label"] == "interference", family, "void"))
    found = type(pulses)(pulses.waves, pulses.chains, table)
    return Measured(values, found, pd.DataFrame(traits, index=pd.Index(names, name="circuit")))


@pytest.fixture(scope="module")
def studied():
    taught, tested = _measured(64, 0, "C"), _measured(12, 50, "E")
    parts = _trained(taught.values, taught.pulses)
    return parts, taught, tested, _studies(parts, taught, tested, SILENT, _each, least=64)


def _rows(table):
    """Cells of a table in Markdown, without its rule."""
    lines = [line for line in table.splitlines() if line.startswith("|")]
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in (lines[0], *lines[2:])]


def test_the_card_has_every_study_in_its_order(studied):
    """Clear pulses, the pairs that fail, the learning curve, the families left out: heading, words, table."""
    sections = studied[3]
    headings = [line.lstrip("# ") for line in sections if line.startswith("#")]
    assert headings == [
        "Clear pulses: 15 dB and more over the noise",
        "Which pairs fail",
        "More circuits",
        "Families left out of training",
    ]
    assert sum(line.startswith("|") for line in sections) == len(headings)


def test_the_tables_have_their_rows(studied):
    """A row for each true label, for an eighth, a quarter, half and all circuits, two for each family left out."""
    parts, _, _, sections = studied
    figures, pairs, curve, families = (_rows(line) for line in sections if line.startswith("|"))
    assert "balanced accuracy" in [row[0] for row in figures]
    assert pairs[0] == ["truth", *parts.classes]
    assert [row[0] for row in pairs[1:]] == list(parts.classes)
    assert [row[0] for row in curve[1:]] == ["8", "16", "32", "64"]
    assert [row[0] for row in families[1:]] == [family.name for family in FAMILIES for _ in range(2)]
    assert [row[1] for row in families[1:]] == ["known", "left out"] * len(FAMILIES)


def test_a_small_world_has_no_studies(studied):
    """Below the bound of circuits the card says nothing of them."""
    parts, taught, tested, _ = studied
    assert _studies(parts, taught, tested, SILENT, _each) == []
