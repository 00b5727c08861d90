"""Reasons and doubt in words."""

import dataclasses
import math

import numpy as np
import pandas as pd
import pytest

from pdclass.features import BY_NAME, CATALOGUE, clearness
from pdclass.features.feature import Feature
from pdclass.verdict.sentences import (
    CABLE_NOTE,
    LATER_ECHO_NOTE,
    MAYBE_ECHO_NOTE,
    Seen,
    Wording,
    doubt_in_words,
    doubt_kind,
    quantity,
    reason_sentence,
    reason_sentences,
    reference_ranks,
    set_in_words,
    standing_notes,
    three_digits,
)

CLASSES = ("cable", "switchgear")
RISE = Feature("rise_ns", "ns", "10-90 % rise time", "rise {value}", "slower", "faster", (0, 1e4), 1.0, "none")
SWINGS = Feature("swings", "", "changes of sign", "{value} swings", "more", "fewer", (0, 100), 1.0, "none")


@pytest.fixture
def wording():
    """Cable rises 400-500 ns (one in four unmeasurable), switchgear 1-100 ns; swings are 2 for all."""
    cable = [*np.linspace(400, 500, 75), *[math.nan] * 25]
    rows = {"rise_ns": [*cable, *range(1, 101)], "swings": [2.0] * 200}
    reference = pd.DataFrame({**rows, "label": ["cable"] * 100 + ["switchgear"] * 100})
    return Wording(CLASSES, (RISE, SWINGS), reference_ranks(reference, CLASSES, ("rise_ns", "swings")))


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (412.3, "412"),
        (0.05, "0.0500"),
        (1234567.0, "1.23e+06"),
        (1234.0, "1230"),
        (-9.999, "-10.0"),
        (0.0, "0"),
        (3e-7, "3.00e-07"),
        (math.nan, "unknown"),
        (math.inf, "infinite"),
    ],
)
def test_numbers_have_three_significant_digits(value, text):
    """A number is printed at three significant digits, whatever its size."""
    assert three_digits(value) == text


def test_a_count_is_a_whole_number_and_a_measure_has_its_unit():
    """Whole numbers without a unit carry no decimals; a unit follows after a space."""
    assert quantity(8.0, "") == "8"
    assert quantity(0.25, "") == "0.250"
    assert quantity(8.0, "ns") == "8.00 ns"


def test_a_reason_says_value_place_and_share(wording):
    """The sentence gives value and unit, its place among both labels' reference pulses, share and factor."""
    sentence = reason_sentence(0, 450.0, 1.4, (0, 1), wording)
    assert sentence == (
        "rise 450 ns: slower than all switchgear reference pulses, near the middle of cable ones; "
        "+1.4 towards cable (4 times the odds)"
    )


def test_a_reason_against_the_label_is_marked(wording):
    """A negative share is told as a share towards the other label and begins with "against:"."""
    sentence = reason_sentence(0, 97.2, -0.7, (0, 1), wording)
    assert sentence == (
        "against: rise 97.2 ns: slower than 97 % of switchgear reference pulses, faster than all cable ones; "
        "+0.7 towards switchgear (2.0 times the odds)"
    )


def test_an_unmeasurable_feature_says_so(wording):
    """NaN is no value: the sentence says that it could not be measured, and how often that happens."""
    sentence = reason_sentence(0, math.nan, 0.5, (0, 1), wording)
    assert sentence == (
        "10-90 % rise time: not measurable here; missing in 0 % of switchgear reference pulses and 25 % of cable ones; "
        "+0.5 towards cable (1.6 times the odds)"
    )


def _alone(name):
    """What the sentences draw on when a bundle has one feature of the catalogue."""
    reference = pd.DataFrame({name: [1.0, 2.0], "label": list(CLASSES)})
    return Wording(CLASSES, (BY_NAME[name],), reference_ranks(reference, CLASSES, (name,)))


def test_what_the_noise_hides_says_how_much_it_needs():
    """A feature that asks for more than the pulse has names both ratios."""
    feature = dataclasses.replace(RISE, needs_snr_db=9.0)
    reference = pd.DataFrame({"rise_ns": [1.0, 2.0], "label": list(CLASSES)})
    wording = Wording(CLASSES, (feature,), reference_ranks(reference, CLASSES, ("rise_ns",)))
    sentence = reason_sentence(0, math.nan, 0.5, (0, 1), wording, Seen(6.2, 40e6))
    assert sentence.startswith("10-90 % rise time: not measurable at 6 dB, needs 9 dB; missing in 0 % of switchgear")


def test_what_the_chain_does_not_carry_says_where_the_chain_ends():
    """A band beyond the chain is not measurable because of the chain, however clear the pulse."""
    wide = max(CATALOGUE, key=lambda feature: feature.needs_hz)
    sentence = reason_sentence(0, math.nan, 0.5, (0, 1), _alone(wide.name), Seen(40.0, 14e6))
    ends = f"{wide.meaning}: not measurable, the chain ends at 14 MHz, needs {wide.needs_hz / 1e6:g} MHz; missing in"
    assert sentence.startswith(ends)


def test_a_copy_that_is_not_there_is_no_failure_to_measure():
    """Where neither noise nor chain forbids it, a missing value says what its absence means."""
    absences = {
        "copy_1_delay_us": "no later copy stands out",
        "copy_1_level_5_9_db": "no later copy stands out, or too little power in this band",
        "copy_2_ratio": "no second copy stands out",
        "copy_delay_ratio": "no second copy stands out",
    }
    for name, absence in absences.items():
        sentence = reason_sentence(0, math.nan, 0.5, (0, 1), _alone(name), Seen(40.0, 40e6))
        assert sentence.startswith(f"{BY_NAME[name].meaning}: {absence}; missing in 0 % of")


def test_what_a_negative_value_means_is_said_behind_it():
    """A copy that is turned over is called so, and ranks as lower than upright ones, not as smaller."""
    turned, upright = (
        reason_sentence(0, value, 0.5, (0, 1), _alone("copy_2_ratio"), Seen(60.0, 40e6)) for value in (-0.708, 0.3)
    )
    assert turned.startswith("height of the second copy -0.708 times the pulse, turned over: lower than all switchgear")
    assert upright.startswith("height of the second copy 0.300 times the pulse: lower than all switchgear")


def test_a_value_that_noise_blurs_says_so(monkeypatch, wording):
    """Below the ratio from which a feature is clear the sentence says so beside the value, above it does not."""
    monkeypatch.setattr(clearness, "CLEAR_SNR_DB", {"rise_ns": 14.0, "swings": math.inf})
    blurred = reason_sentence(0, 450.0, 1.4, (0, 1), wording, Seen(10.4, 40e6))
    assert blurred.startswith("rise 450 ns (noise blurs it at 10 dB; clear from 14 dB): slower than all switchgear")
    assert "blurs" not in reason_sentence(0, 450.0, 1.4, (0, 1), wording, Seen(14.0, 40e6))
    assert "not clear up to 40 dB" in reason_sentence(1, 2.0, 0.2, (0, 1), wording, Seen(30.0, 40e6))
    assert "blurs" not in reason_sentence(1, 2.0, 0.2, (0, 1), wording, Seen(45.0, 40e6))
    assert "blurs" not in reason_sentence(0, 450.0, 1.4, (0, 1), wording)


def test_ties_lie_in_the_middle(wording):
    """A value that every reference pulse shares is near the middle of both."""
    assert "near the middle of switchgear reference pulses, near the middle of cable ones" in reason_sentence(
        1, 2.0, 0.2, (0, 1), wording
    )


def test_a_percentage_below_all_is_never_rounded_up_to_all(wording):
    """99.5 % is told as 99 %, not as 100 %."""
    assert "slower than 99 % of switchgear" in reason_sentence(0, 99.9999, 1.0, (0, 1), wording)


def test_reasons_come_by_size_of_share_and_zero_is_none(wording):
    """The largest share in size comes first, whichever way it points; a feature without share is no reason."""
    shares = np.array([[0.3, 0.0], [0.0, 1.0]])
    first, second = reason_sentences(np.array([450.0, 2.0]), shares, (0, 1), wording)
    assert first.startswith("against: 2 swings")
    assert second.startswith("rise 450 ns")
    assert reason_sentences(np.array([450.0, 2.0]), np.zeros((2, 2)), (0, 1), wording) == []


def test_a_label_without_reference_pulses_is_not_compared():
    """Where a label has no reference pulses the sentence does not pretend to a rank."""
    reference = pd.DataFrame({"rise_ns": [1.0, 2.0], "swings": [1.0, 1.0], "label": ["cable", "cable"]})
    wording = Wording(CLASSES, (RISE, SWINGS), reference_ranks(reference, CLASSES, ("rise_ns", "swings")))
    assert "not comparable with switchgear reference pulses" in reason_sentence(0, 9.0, 1.0, (0, 1), wording)


@pytest.mark.parametrize(
    ("members", "words"),
    [
        (["local", "switchgear"], "near end: termination or switchgear"),
        (["cable", "local"], "cable nearby or termination"),
        (["cable", "local", "switchgear", "interference"], "nothing can be ruled out"),
        (["cable", "interference"], "cable, or interference that came along it"),
        ([], "unlike every label: none fits well enough to stay in the set"),
    ],
)
def test_sets_have_words(members, words):
    """What a label set leaves open is said in the words of the trade."""
    assert set_in_words(members) == words


def _row(**changes):
    usual = {"decided": False, "outside": None, "unfamiliar": False, "novelty": 0.5, "label": "undecided"}
    return {**usual, "label_set": ["local", "switchgear"], "likeliest": "local", "capture": "one", **changes}


def test_doubt_names_every_cause():
    """A pulse that is outside and unfamiliar says both, and what the waveform alone would say."""
    words = doubt_in_words(_row(outside="rate 40 MS/s is below 62.5 MS/s", unfamiliar=True, novelty=7.125))
    assert "rate 40 MS/s is below 62.5 MS/s" in words
    assert "novelty 7.12" in words
    assert words.endswith("near end: termination or switchgear")
    assert doubt_in_words(_row()) == "near end: termination or switchgear"
    assert doubt_in_words(_row(decided=True)) == ""


def test_pulses_outside_the_same_limit_share_one_kind():
    """The figures of a broken limit differ from pulse to pulse; its name does not."""
    kinds = {doubt_kind(_row(outside=f"signal-to-noise ratio {snr} dB is below 6 dB")) for snr in (-1.5, 3, 5.2)}
    assert kinds == {"outside what the model was trained on: signal-to-noise ratio"}


def test_a_single_label_that_is_not_the_likeliest_is_a_contradiction():
    """One label in the set that is not the most probable one is doubt, and said to be."""
    assert doubt_kind(_row(label_set=["switchgear"])).startswith("contradictory: local is most probable")


def test_standing_notes_follow_the_verdict():
    """Cable carries its note; a lone window and a possible echo carry theirs."""
    assert standing_notes(_row(label="cable")) == [CABLE_NOTE]
    assert standing_notes(_row(capture=None, maybe_echo_of="abc")) == [LATER_ECHO_NOTE, MAYBE_ECHO_NOTE]
    assert standing_notes(_row(label="local")) == []
