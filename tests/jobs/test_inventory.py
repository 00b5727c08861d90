"""The account of what labelled pulses there are."""

import pandas as pd
import pytest

from pdclass.jobs.inventory import inventory, inventory_lines
from pdclass.pulses import typed_table


@pytest.fixture
def table():
    """Six pulses of three circuits, one an echo, two unlabelled."""
    rows = {
        "circuit": ["A", "A", "B", "C", "C", "C"],
        "session": ["one"] * 6,
        "sensor": ["HF1"] * 6,
        "label": ["cable", "local", "cable", None, "cable", None],
        "basis": ["expert", "dissected", None, None, "expert", None],
        "snr_db": [10.0, 50.0, 20.0, 20.0, float("nan"), 3.0],
        "echo_of": [None, None, None, None, None, "p0"],
    }
    return typed_table(pd.DataFrame(rows), [f"p{place}" for place in range(6)])


def test_every_division_adds_up_to_the_pulses(table):
    """Each kind of division counts each pulse that is no echo once."""
    whole = inventory(table, 100e6)
    assert set(whole.groupby("kind")["pulses"].sum()) == {5}
    assert list(whole["kind"].unique()) == ["label", "basis", "circuit", "site", "session", "sensor", "snr", "rate"]


def test_counts_are_those_of_the_table(table):
    """Pulses and circuits of a label, and of a band of height, are counted."""
    whole = inventory(table, [1e8, 1e8, 2e8, 1e8, 1e8, 1e8])
    by = whole.set_index(["kind", "value", "label"])
    assert by.loc[("label", "cable", "cable")].tolist() == [3, 3]
    assert by.loc[("snr", "below 12 dB", "cable"), "pulses"] == 1
    assert by.loc[("snr", "not known", "cable"), "pulses"] == 1
    assert by.loc[("rate", "200 MS/s", "cable"), "pulses"] == 1
    assert by.loc[("basis", "not stated", "cable"), "pulses"] == 1


def test_lines_say_it_shortly(table):
    """The lines begin with the sum, and a long list of circuits is cut."""
    lines = inventory_lines(table, 1e8)
    assert lines[0] == "5 pulses, 3 of them labelled, 1 echoes besides".replace("3 of", "4 of")
    assert "  labelled by snr: below 12 dB 1, 18 to 24 dB 1, from 40 dB 1, not known 1" in lines
    many = pd.concat([table.assign(circuit=f"C{number:02d}") for number in range(9)])
    assert any("labelled by circuit" in line and line.endswith("3 more") for line in inventory_lines(many, 1e8))
