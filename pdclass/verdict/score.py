"""From pulses and their features to verdicts: label, probabilities, label set, doubt, exact reasons."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from pdclass.errors import InputError
from pdclass.features import CATALOGUE
from pdclass.features.feature import Feature
from pdclass.model.bundle import Bundle
from pdclass.model.decision import BoolArray, Decisions, broken_limits, decide, stated_by
from pdclass.model.manifest import Validity
from pdclass.model.reasons import calibrated_reasons
from pdclass.pulses import UNDECIDED, FloatArray, IntArray, PulseSet
from pdclass.verdict.sentences import REASONS, Seen, Wording, reason_sentences, reference_ranks

#: Columns that a verdict takes over from the pulse table.
PULSE_COLUMNS = (
    "capture",
    "capture_digest",
    "circuit",
    "site",
    "sensor",
    "session",
    "onset_s",
    "phase_deg",
    "snr_db",
)

#: Field of the validity limits, its word, the unit in print, and how many of the basic unit make one.
_LIMITS = (
    ("rate_hz", "rate", "MS/s", 1e6),
    ("low_hz", "lower corner", "kHz", 1e3),
    ("high_hz", "upper corner", "MHz", 1e6),
    ("adc_bits", "resolution", "bit", 1.0),
    ("snr_db", "signal-to-noise ratio", "dB", 1.0),
)


@dataclass(frozen=True)
class Verdicts:
    """Verdicts on the pulses of one capture or table that are no echoes, in the pulses' order.

    Attributes
    ----------
    table : one row a pulse, indexed by `pulse_id`; the columns of a verdict file.
    values : (pulses, features) feature values in the bundle's order; NaN = unmeasurable.
    base : (classes,) calibrated log-odds before any feature speaks [natural log].
    shares : (pulses, classes, features) calibrated shares [natural log]; base plus a pulse's shares, class
        less class, is its log-odds.
    """

    table: pd.DataFrame
    values: FloatArray
    base: FloatArray
    shares: FloatArray


def score(
    pulses: PulseSet,
    values: FloatArray,
    bundle: Bundle,
    *,
    catalogue: Sequence[Feature] = CATALOGUE,
    seen: Sequence[Seen] | None = None,
) -> Verdicts:
    """Give every pulse that is no echo its verdict with reasons.

    Parameters
    ----------
    pulses : the pulses, echoes among them: they get no verdict of their own.
    values : (pulses, features) in the bundle's order of features; NaN = unmeasurable.
    bundle : the model.
    catalogue : where the words of the bundle's features stand.
    seen : how well each pulse was seen, for the words of what is missing or blurred; nothing is said by default.

    Raises
    ------
    InputError
        If the values do not fit the pulses and the bundle, or no feature of that name is declared.
    PdclassError
        If the reasons of a pulse do not add up to its log-odds: a defect of the program.
    """
    _check_shape(pulses, values, bundle)
    decisions = decide(bundle, np.ascontiguousarray(values, np.float64), pulses)
    alone = np.flatnonzero(pulses.table["echo_of"].isna().to_numpy())
    scored, own = pulses.take(alone), np.ascontiguousarray(values[alone], np.float64)
    reasons = calibrated_reasons(bundle, own)
    # stable: among equals the earlier class comes first, as in the decision
    order = np.argsort(-decisions.probabilities, axis=1, kind="stable")
    against = held_against(order, decisions.sets)
    seen_alone = [seen[place] if seen else None for place in alone.tolist()]
    pairs = list(zip(order[:, 0].tolist(), against.tolist(), strict=True))
    columns = {
        **_names(decisions, order, against, reasons.log_odds, bundle.classes),
        **_doubt(decisions, limits_broken(scored, bundle.validity), bundle.classes),
        **_sentences(own, reasons.shares, pairs, wording_of(bundle, catalogue), seen_alone),
        "bundle_digest": [bundle.digest] * len(scored.table),
    }
    table = scored.table[list(PULSE_COLUMNS)].assign(
        **{name: _series(columns[name], scored.table.index) for name in _order(bundle.classes)}
    )
    return Verdicts(table, own, reasons.base, reasons.shares)


def wording_of(bundle: Bundle, catalogue: Sequence[Feature] = CATALOGUE) -> Wording:
    """What the sentences of a bundle draw on: its labels, the words of its features, its reference pulses."""
    known = {feature.name: feature for feature in catalogue}
    strange = [name for name in bundle.features if name not in known]
    if strange:
        raise InputError(f"bundle {bundle.digest[:16]}: feature '{strange[0]}' is not in the catalogue")
    features = tuple(known[name] for name in bundle.features)
    ranks = reference_ranks(bundle.reference, bundle.classes, bundle.features)
    return Wording(tuple(bundle.classes), features, ranks)


def held_against(order: IntArray, sets: BoolArray) -> IntArray:
    """The class each likeliest label is held against.

    The most probable one outside the label set other than the likeliest; where there is none, the runner-up.

    Parameters
    ----------
    order : (pulses, classes) classes from most to least probable.
    sets : (pulses, classes) label sets.
    """
    excluded = ~np.take_along_axis(sets, order, axis=1)
    excluded[:, 0] = False
    first = np.where(excluded.any(axis=1), excluded.argmax(axis=1), 1)
    return np.take_along_axis(order, first[:, None], axis=1)[:, 0]


def limits_broken(pulses: PulseSet, validity: Validity) -> list[str | None]:
    """Per pulse, the validity limits that its chain or its signal-to-noise ratio breaks, or None."""
    of_chain = ["; ".join(_broken(stated_by(chain), validity)) for chain in pulses.chains]
    chains = pulses.table["chain"].tolist()
    ratios = pulses.table["snr_db"].astype(float).tolist()
    found = []
    for chain, snr_db in zip(chains, ratios, strict=True):
        causes = [of_chain[chain], *_broken({"snr_db": snr_db}, validity)]
        found.append("; ".join(cause for cause in causes if cause) or None)
    return found


def not_checked(pulses: PulseSet, validity: Validity) -> list[str]:
    """Limits that could not be checked, because chain or bundle do not state the figure, one line each."""
    lines = []
    for name, word, unit, scale in _LIMITS:
        span = getattr(validity, name)
        stated = [stated_by(chain).get(name, 0.0) for chain in pulses.chains]
        if span is None:
            lines.append(f"{word} not checked: the bundle does not know what it was trained on")
        elif None in stated:
            words = f"{span[0] / scale:.3g} to {span[1] / scale:.3g} {unit}"
            lines.append(f"{word} not checked: the capture does not state it (trained on {words})")
    if validity.snr_db is not None and pulses.table["snr_db"].isna().any():
        lines.append("signal-to-noise ratio not checked for some pulses: their noise is unknown")
    return lines


def _check_shape(pulses: PulseSet, values: FloatArray, bundle: Bundle) -> None:
    expected = (len(pulses.table), len(bundle.features))
    if values.shape != expected:
        raise InputError(
            f"bundle {bundle.digest[:16]}: features: expected values of shape {expected}, found "
            f"{values.shape}; measure the features that the bundle names, for every pulse"
        )


def _broken(stated: Mapping[str, float | None], validity: Validity) -> list[str]:
    causes = []
    broken = broken_limits(validity, stated)
    for name, word, unit, scale in (limit for limit in _LIMITS if limit[0] in broken):
        value, (low, high) = float(stated[name] or 0.0), getattr(validity, name)
        side, limit = ("below", low) if value < low else ("above", high)
        found, bound = _apart(value / scale, limit / scale)
        causes.append(f"{word} {found} {unit} is {side} {bound} {unit}")
    return causes


def _apart(value: float, limit: float) -> tuple[str, str]:
    """Two different numbers in three significant digits, or as many as it takes to tell them apart."""
    for digits in range(3, 17):
        pair = tuple(f"{float(f'{number:.{digits}g}'):.12g}" for number in (value, limit))
        if pair[0] != pair[1]:
            break
    return pair[0], pair[1]


def _names(
    decisions: Decisions, order: IntArray, against: IntArray, log_odds: FloatArray, classes: Sequence[str]
) -> dict[str, Any]:
    names, rows = np.array(classes, dtype=object), np.arange(len(order))
    return {
        "likeliest": names[order[:, 0]],
        "runner_up": names[order[:, 1]],
        "against": names[against],
        "label_set": [names[row].tolist() for row in decisions.sets],
        **{f"p_{label}": decisions.probabilities[:, place] for place, label in enumerate(classes)},
        "log_odds": log_odds[rows, order[:, 0]] - log_odds[rows, against],
    }


def _doubt(decisions: Decisions, outside: list[str | None], classes: Sequence[str]) -> dict[str, Any]:
    likeliest = np.array(classes, dtype=object)[decisions.likeliest]
    return {
        "label": np.where(decisions.decided, likeliest, UNDECIDED),
        "decided": decisions.decided,
        "novelty": decisions.novelty,
        "unfamiliar": decisions.unfamiliar,
        "outside": outside,
    }


def _sentences(
    values: FloatArray,
    shares: FloatArray,
    pairs: Sequence[tuple[int, int]],
    wording: Wording,
    seen: Sequence[Seen | None],
) -> dict[str, list[str | None]]:
    columns: dict[str, list[str | None]] = {f"reason_{place + 1}": [] for place in range(REASONS)}
    for row, pair in enumerate(pairs):
        sentences = reason_sentences(values[row], shares[row], pair, wording, seen=seen[row])
        for place, column in enumerate(columns.values()):
            column.append(sentences[place] if place < len(sentences) else None)
    return columns


def _order(classes: Sequence[str]) -> list[str]:
    return [
        *("label", "likeliest", "runner_up", "against", "decided", "label_set"),
        *(f"p_{label}" for label in classes),
        *("log_odds", "novelty", "unfamiliar", "outside"),
        *(f"reason_{place + 1}" for place in range(REASONS)),
        "bundle_digest",
    ]


def _series(column: Any, index: pd.Index[str]) -> pd.Series[Any]:
    numbers = isinstance(column, np.ndarray) and column.dtype != object
    return pd.Series(column, index=index, dtype=column.dtype if numbers else "object")
