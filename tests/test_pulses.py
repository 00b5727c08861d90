"""The in-memory types: phase between and beyond marks, segments, tables."""

import dataclasses

import numpy as np
import pytest
from closed_form import as_capture

from pdclass.pulses import TABLE_COLUMNS, Chain, is_own_class, phase_deg, typed_table, with_texts


@pytest.fixture
def record():
    """Five seconds at 1 kS/s with a mark of phase 90 deg at sample 1000 and one a cycle later."""
    chain = Chain(1000.0, 1.0, 14, mains_hz=50.0)
    marks = np.array([[1000.0, 90.0], [1020.0, 450.0]])
    return as_capture(np.zeros(5000), chain=chain, phase_marks=marks)


def test_phase_is_interpolated_and_extrapolated_for_a_second(record):
    """Between marks linear, beyond them at the mains frequency, and unknown after a second."""
    found = phase_deg(record, np.array([1005, 1025, 995, 2019, 2025, 0]))
    assert found[:5] == pytest.approx([180.0, 180.0, 0.0, 72.0, np.nan], nan_ok=True)
    assert found[5] == pytest.approx(90.0)


def test_phase_is_unknown_far_from_the_marks_on_both_sides(record):
    """Between marks three seconds apart, more than a second from both, turns may have been lost: no phase."""
    wide = dataclasses.replace(record, phase_marks=np.array([[0.0, 0.0], [3000.0, 54000.0]]))
    found = phase_deg(wide, np.array([500, 1500, 2500]))
    assert np.isnan(found).tolist() == [False, True, False]


def test_without_marks_or_mains_there_is_no_phase(record):
    """No mark, no phase; with marks but without the mains frequency, none outside them."""
    assert np.isnan(phase_deg(dataclasses.replace(record, phase_marks=None), np.array([10]))).all()
    bare = dataclasses.replace(record, chain=Chain(1000.0, 1.0))
    assert np.isnan(phase_deg(bare, np.array([1005, 1025]))).tolist() == [False, True]


def test_a_typed_table_has_every_column_in_order():
    """What a table lacks is null, and every column has its type."""
    table = typed_table({"circuit": ["a", "b"], "snr_db": [1.0, 2.0]}, ["x", "y"])
    assert list(table.columns) == list(TABLE_COLUMNS)
    assert table["site"].isna().all()
    assert table["snr_db"].dtype == np.float32
    assert not table["clipped"].any()


@pytest.mark.parametrize("name", ["crane drive", "void_2", "Hohlraum-größer", "ab"])
def test_names_that_can_be_a_class(name):
    """Letters of any script, digits, spaces, underscores and hyphens make a class of one's own."""
    assert is_own_class(name)


@pytest.mark.parametrize(
    "name",
    ["", "a", "cable", "undecided", "pulses", "echoes", "none", "a|b", "a,b", "=a", " ab", "ab ", "a\nb", "a" * 41],
)
def test_names_that_cannot_be_a_class(name):
    """Our labels, words of our tables, and what could not stand in a column name, a list or a cell are refused."""
    assert not is_own_class(name)


def test_texts_are_replaced_as_the_contract_has_them():
    """Whatever is no text becomes None, and the column stays one of objects."""
    table = with_texts(
        typed_table({"label": ["cable", None, "local"]}, ["a", "b", "c"]), label=["x1", float("nan"), None]
    )
    assert table["label"].tolist() == ["x1", None, None]
    assert table["label"].dtype == object
