"""Verdicts in words: the reasons of a label, and the doubt that is left."""

from __future__ import annotations

import bisect
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import pandas as pd

from pdclass.features import why_missing
from pdclass.features.clearness import how_blurred
from pdclass.features.feature import Feature
from pdclass.pulses import LABELS, FloatArray, IntArray

REASONS = 3
#: Percentiles between these count as the middle of the reference pulses.
_MIDDLE = (40.0, 60.0)

#: What is left open when these labels, and no others, cannot be ruled out.
_SETS: Mapping[frozenset[str], str] = {
    frozenset({"local", "switchgear"}): "near end: termination or switchgear",
    frozenset({"cable", "local"}): "cable nearby or termination",
    frozenset({"cable", "switchgear"}): "cable or switchgear",
    frozenset({"cable", "interference"}): "cable, or interference that came along it",
    frozenset({"local", "interference"}): "termination or interference",
    frozenset({"switchgear", "interference"}): "switchgear or interference",
    frozenset({"cable", "local", "switchgear"}): "a discharge, but where is open: cable, termination or switchgear",
    frozenset({"local", "switchgear", "interference"}): "not the cable: termination, switchgear or interference",
    frozenset({"cable", "switchgear", "interference"}): "not the termination: cable, switchgear or interference",
    frozenset({"cable", "local", "interference"}): "not the switchgear: cable, termination or interference",
    frozenset(LABELS): "nothing can be ruled out",
}
_PLACES = {"local": "termination"}

CABLE_NOTE = (
    "cable is a path, not an asset: from one sensor a neighbour's cable cannot be told from this one, "
    "nor air corona far away from a distant discharge"
)
LATER_ECHO_NOTE = "later echo not excluded: the window stands alone"
MAYBE_ECHO_NOTE = "may be an echo of an earlier pulse, so the labels open to that one stay open here"


#: A share or ratio smaller than this is not worth its digits.
SMALLEST = 0.001


def three_digits(value: float) -> str:
    """A number at three significant digits, without an exponent between 0.0001 and a million."""
    if value == 0 or not math.isfinite(value):
        return "0" if value == 0 else "unknown" if math.isnan(value) else "infinite"
    rounded = float(f"{value:.3g}")
    size = math.floor(math.log10(abs(rounded)))
    if not -4 <= size < 6:
        return f"{value:.2e}"
    return f"{rounded:.{max(0, 2 - size)}f}"


def quantity(value: float, unit: str) -> str:
    """A number at three significant digits with its unit; without a unit whole numbers are counts, tiny ones say so."""
    if not unit and float(value).is_integer() and abs(value) < 1e6:
        return f"{value:.0f}"
    if not unit and abs(value) < SMALLEST:
        return f"under {SMALLEST:g}" if value > 0 else f"above -{SMALLEST:g}"
    return f"{three_digits(value)} {unit}".rstrip()


@dataclass(frozen=True)
class ReferenceRanks:
    """Where feature values lie among the reference pulses of each label.

    Attributes
    ----------
    measured : per class and feature, the sorted values that could be measured.
    missing : (classes, features) share of reference pulses without the value, NaN without any pulse.
    """

    measured: tuple[tuple[list[float], ...], ...]
    missing: FloatArray

    def percentile(self, place: int, feature: int, value: float) -> float:
        """Percentage of a label's reference pulses below a value (ties count half), NaN without any."""
        known = self.measured[place][feature]
        if not known or math.isnan(value):
            return math.nan
        return 50.0 * (bisect.bisect_left(known, value) + bisect.bisect_right(known, value)) / len(known)


def reference_ranks(reference: pd.DataFrame, classes: Sequence[str], names: Sequence[str]) -> ReferenceRanks:
    """Sort a bundle's reference pulses (feature columns and `label`) once for many sentences."""
    measured, missing = [], np.full((len(classes), len(names)), np.nan)
    for place, label in enumerate(classes):
        rows = reference.loc[reference["label"] == label, list(names)].to_numpy(np.float64)
        if len(rows):
            missing[place] = np.isnan(rows).mean(axis=0)
        measured.append(tuple(np.sort(column[~np.isnan(column)]).tolist() for column in rows.T))
    return ReferenceRanks(tuple(measured), missing)


@dataclass(frozen=True)
class Wording:
    """What the sentences of one bundle draw on.

    Attributes
    ----------
    classes : labels in the bundle's order.
    features : declarations in the bundle's order.
    ranks : the bundle's reference pulses.
    """

    classes: tuple[str, ...]
    features: tuple[Feature, ...]
    ranks: ReferenceRanks


class Seen(NamedTuple):
    """How well a pulse was seen, which decides what of it can be measured.

    Attributes
    ----------
    snr_db : measured peak over noise, carriers reduced [dB]; NaN = unknown.
    reach_hz : highest frequency that the chain carries [Hz].
    """

    snr_db: float
    reach_hz: float


def strongest_reasons(shares: FloatArray, likeliest: int, against: int) -> tuple[IntArray, FloatArray]:
    """Features in order of their share of the log-odds, largest size first, zero shares left out.

    Parameters
    ----------
    shares : (classes, features) of one pulse [natural log].
    likeliest, against : the two classes whose log-odds are shared out.

    Returns
    -------
    Places of the features and the shares of all features.
    """
    difference = shares[likeliest] - shares[against]
    order = np.argsort(-np.abs(difference), kind="stable")
    return order[difference[order] != 0].astype(np.int64), difference


def reason_sentences(
    values: FloatArray,
    shares: FloatArray,
    pair: tuple[int, int],
    wording: Wording,
    *,
    seen: Seen | None = None,
    count: int = REASONS,
) -> list[str]:
    """The strongest reasons of one pulse as sentences; reasons against the label begin with "against:".

    Parameters
    ----------
    values : (features,) of the pulse; NaN = unmeasurable.
    shares : (classes, features) calibrated shares of the pulse [natural log].
    pair : the likeliest class, and the one that it is held against.
    seen : how well the pulse was seen; None = nothing is said of it.
    count : how many at most, >= 0.
    """
    order, difference = strongest_reasons(shares, *pair)
    return [
        reason_sentence(place, float(values[place]), float(difference[place]), pair, wording, seen)
        for place in order[:count].tolist()
    ]


def reason_sentence(
    place: int, value: float, share: float, pair: tuple[int, int], wording: Wording, seen: Seen | None = None
) -> str:
    """One reason: value, where it lies among the reference pulses of both labels, share of the log-odds.

    A missing value says why it is missing, a value that noise blurs says so.

    Parameters
    ----------
    place : of the feature in the bundle's order.
    value : in the feature's unit; NaN = unmeasurable.
    share : of the log-odds of the first of the pair over the second [natural log].
    seen : how well the pulse was seen; None = nothing is said of it.
    """
    feature = wording.features[place]
    if math.isnan(value):
        found = f"{feature.meaning}: {_cause(feature, seen)}; {_absence(place, pair, wording)}"
    else:
        stated = feature.sentence.format(value=quantity(value, feature.unit))
        stated += f", {feature.below_zero}" if value < 0 and feature.below_zero else ""
        blur = how_blurred(feature.name, seen.snr_db) if seen else None
        found = f"{stated}{f' ({blur})' if blur else ''}: {_standing(place, value, pair, wording)}"
    towards = wording.classes[pair[0] if share > 0 else pair[1]]
    sentence = f"{found}; +{_share(abs(share))} towards {towards} ({_factor(abs(share))} times the odds)"
    return sentence if share > 0 else f"against: {sentence}"


def _cause(feature: Feature, seen: Seen | None) -> str:
    """Why a value is missing: the noise, the chain, or what its absence means."""
    cause = why_missing(feature, *seen) if seen else None
    if cause is None:
        return feature.absent
    return cause if cause.startswith("not measurable") else f"not measurable, {cause}"


def _standing(place: int, value: float, pair: tuple[int, int], wording: Wording) -> str:
    feature, (likeliest, against) = wording.features[place], pair
    first = _rank_words(wording.ranks.percentile(against, place, value), feature)
    second = _rank_words(wording.ranks.percentile(likeliest, place, value), feature)
    return f"{first} {wording.classes[against]} reference pulses, {second} {wording.classes[likeliest]} ones"


def _rank_words(percent: float, feature: Feature) -> str:
    if math.isnan(percent):
        return "not comparable with"
    if _MIDDLE[0] <= percent <= _MIDDLE[1]:
        return "near the middle of"
    word, beaten = (feature.more, percent) if percent > _MIDDLE[1] else (feature.less, 100.0 - percent)
    share = "all" if beaten == 100.0 else f"{min(math.floor(beaten), 99)} % of"
    return f"{word} than {share}"


def _absence(place: int, pair: tuple[int, int], wording: Wording) -> str:
    likeliest, against = pair
    first, second = (_percent(wording.ranks.missing[label, place]) for label in (against, likeliest))
    return (
        f"missing in {first} of {wording.classes[against]} reference pulses "
        f"and {second} of {wording.classes[likeliest]} ones"
    )


def _percent(share: float) -> str:
    if math.isnan(share):
        return "an unknown share"
    return f"{100.0 * share:.0f} %" if share in (0.0, 1.0) else f"{min(max(100.0 * share, 1.0), 99.0):.0f} %"


def _share(size: float) -> str:
    return f"{size:.1f}" if size >= 0.95 else f"{size:.2g}" if size >= 0.001 else "<0.001"


def _factor(size: float) -> str:
    factor = math.exp(min(size, 700.0))
    if factor >= 1e6:
        return f"{factor:.0e}"
    return f"{factor:.0f}" if factor >= 3.5 else f"{factor:.1f}" if factor >= 1.1 else three_digits(factor)


def set_in_words(label_set: Sequence[str]) -> str:
    """What is open when exactly these labels cannot be ruled out."""
    if not label_set:
        return "unlike every label: none fits well enough to stay in the set"
    words = _SETS.get(frozenset(label_set))
    return words or " or ".join(_PLACES.get(label, label) for label in label_set)


def doubt_kind(row: Mapping[Any, Any]) -> str:
    """Why a verdict is undecided, in words that pulses with the same doubt share; "" if it is decided.

    Parameters
    ----------
    row : one verdict, with `decided`, `outside`, `unfamiliar`, `label_set` and `likeliest`.
    """
    if row["decided"]:
        return ""
    if row["outside"] is not None:
        return f"outside what the model was trained on: {_limits_named(row['outside'])}"
    if row["unfamiliar"]:
        return "unfamiliar: not like the pulses the model was trained on"
    members = list(row["label_set"])
    if len(members) == 1 and members[0] != row["likeliest"]:
        return f"contradictory: {row['likeliest']} is most probable, yet only {members[0]} stays in the set"
    return set_in_words(members)


def doubt_in_words(row: Mapping[Any, Any]) -> str:
    """Why this verdict is undecided, with every cause that holds; "" if it is decided."""
    if row["decided"]:
        return ""
    causes = []
    if row["outside"] is not None:
        causes.append(f"outside what the model was trained on: {row['outside']}")
    if row["unfamiliar"]:
        causes.append(
            f"unfamiliar (novelty {three_digits(float(row['novelty']))}): not like what the model was trained on"
        )
    members = list(row["label_set"])
    if not causes:
        return doubt_kind(row)
    causes.append(f"the waveform alone would say: {set_in_words(members)}")
    return "; ".join(causes)


def _limits_named(outside: str) -> str:
    """The limits broken, without the figures that differ from pulse to pulse."""
    return ", ".join(re.split(r" (?=-?\d)", cause, maxsplit=1)[0] for cause in outside.split("; "))


def standing_notes(row: Mapping[Any, Any]) -> list[str]:
    """What has to stand beside this verdict whatever its figures: cable is a path; echoes that may be missed.

    Parameters
    ----------
    row : one verdict; with `maybe_echo_of` (of the pulse table) also what that left open is said.
    """
    notes = []
    if row["label"] == "cable":
        notes.append(CABLE_NOTE)
    if row.get("capture") is None:
        notes.append(LATER_ECHO_NOTE)
    if row.get("maybe_echo_of") is not None and not row["decided"]:
        notes.append(MAYBE_ECHO_NOTE)
    return notes
