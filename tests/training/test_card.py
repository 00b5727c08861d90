"""The card of a bundle."""

import numpy as np
import pandas as pd
import pytest
from blobs import DIGESTS, blobs

from pdclass.model.bundle import read_bundle, write_bundle
from pdclass.training.card import card_text, evaluation_text, markdown, three, with_card
from pdclass.training.evaluate import evaluate


@pytest.fixture(scope="module")
def card(parts):
    values, pulses = blobs(12, seed=60, prefix="E")
    evaluation = evaluate(parts, values, pulses)
    return evaluation, card_text(parts, evaluation, title="Base", tested_on="Fresh circuits.", trained_on="Old ones.")


def test_the_dangerous_cell_comes_first(card):
    """Before any other figure stands switchgear decided as interference, with count, groups and interval."""
    evaluation, text = card
    count, pulses = (evaluation.figures[name] for name in ("switchgear_as_interference_count", "switchgear_pulses"))
    assert text.splitlines()[0] == "# Base"
    assert text.splitlines()[2].startswith(f"**Switchgear decided as interference: {count} of {pulses} pulses, in ")


def test_the_card_says_what_its_user_needs(card, parts):
    """Figures, what it was trained on, what it must not be used for, limits: all there."""
    evaluation, text = card
    for needed in (
        "Fresh circuits.", "Old ones.", "near end merged", "By SNR", "Cable by distance", "worst group",
        "accuracy among the decided", "must not be used for", "High voltage kills", "SNR: ", "shared out: conform",
        "calibration error",
        "62.5 to 100 MS/s", three(evaluation.figures["balanced_accuracy"]), three(parts.temperature),
    ):  # fmt: skip
        assert needed in text
    assert " nan " not in text.lower()


def test_missing_switchgear_is_said(parts):
    """A test without switchgear does not claim that nothing was missed."""
    values, pulses = blobs(6, seed=53, labels=("cable", "local"))
    text = card_text(parts, evaluate(parts, values, pulses), title="T", tested_on="", trained_on="")
    assert "not measured" in text.splitlines()[2]


def test_card_and_figures_travel_in_the_bundle(parts, card, tmp_path):
    """The manifest holds the figures as metrics, unchanged by the journey to disk; without a test it holds null."""
    evaluation, text = card
    done = with_card(parts, evaluation, title="Base", tested_on="Fresh circuits.", trained_on="Old ones.")
    write_bundle(tmp_path / "b", done)
    assert (tmp_path / "b" / "card.md").read_text() == text
    assert read_bundle(tmp_path / "b", DIGESTS).manifest["account"]["metrics"] == evaluation.figures
    assert with_card(parts, None, title="T").account["metrics"] is None


def test_an_evaluation_lists_every_group_and_warns_first(card):
    """Warnings stand before the figures, every group has its row."""
    text = evaluation_text(card[0], title="Bundle 12ab", warnings=["3 groups were trained on"])
    assert text.splitlines()[:3] == ["# Bundle 12ab", "", "**3 groups were trained on**"]
    assert all(f"| {group} |" in text for group in card[0].tables["by_group"].index)
    assert "has not seen" not in text


def test_an_untested_bundle_says_so(parts):
    """Without an evaluation the card opens with what is not known, and shows no figure of it."""
    text = card_text(parts, None, title="T")
    assert text.splitlines()[2].startswith("**Not tested")
    assert "balanced accuracy" not in text
    assert "must not be used for" in text


def test_three_significant_digits():
    """Small, large, whole, unknown and infinite numbers."""
    values = [0.12345, 12345.6, 7, None, np.nan, np.inf, 0.0, "word", np.int64(4)]
    assert [three(value) for value in values] == ["0.123", "12300", "7", "–", "–", "∞", "0", "word", "4"]


def test_a_bar_in_a_cell_does_not_break_the_table():
    """Label sets are joined by a plus in the card."""
    text = markdown(pd.DataFrame({"label_set": ["local|switchgear"], "share": [0.5]}))
    assert text.splitlines() == ["| label set | share |", "| --- | --- |", "| local + switchgear | 0.5 |"]
