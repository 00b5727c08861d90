"""The card of a bundle: what it was trained on, how well it does, what it must not be used for."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from pdclass.model.bundle import BundleParts
from pdclass.training.evaluate import Evaluation

_UNTESTED = (
    "**Not tested on groups it has not seen: nothing is known of how often it calls switchgear interference, or of any "
    "other error.** Evaluate it on labelled pulses of other circuits before trusting it."
)
_UNSEEN = "Tested on groups that it has not seen."
_MUST_NOT = """\
- It is advisory only, from the waveforms of one sensor; it is not a permit to work and not proof that equipment is
  healthy or safe. High voltage kills: sensors are fitted and equipment is entered only by authorised persons under
  the utility's own safety rules and local codes.
- Decisions to dig, switch or leave in service rest with licensed, competent staff.
- Do not read severity, charge or remaining life from it, and do not read `interference` as absence of discharge.
- From one sensor a neighbour's cable cannot be told from this one, nor air corona far away from a distant discharge:
  `cable` is a path, not an asset.
- Pulses of one source err together: many equal labels are not many proofs, and the share of a label is not its
  probability.
- Do not use it beyond the validity limits below, nor where its figures were not measured."""


#: The figures at the head of a card, in words.
HEADLINES: Mapping[str, str] = {
    "balanced accuracy of the likeliest label": "balanced_accuracy",
    "the same with local and switchgear merged": "balanced_accuracy_near_end_merged",
    "share undecided": "share_undecided",
    "accuracy among the decided": "accuracy_decided",
    "balanced accuracy among the decided": "balanced_accuracy_decided",
    "coverage of the label sets, mean over groups": "coverage_mean",
    "coverage, 10th percentile of groups": "coverage_10th_percentile",
    "coverage, worst group": "coverage_worst_group",
    "mean size of the label sets": "set_size_mean",
    "expected calibration error (10 bins)": "calibration_error",
    "share unfamiliar": "share_unfamiliar",
    "pulses": "pulses",
    "groups": "groups",
    "groups are made by": "groups_by",
}


def with_card(
    parts: BundleParts,
    evaluation: Evaluation | None,
    *,
    title: str,
    tested_on: str = "",
    trained_on: str = "",
    studies: Sequence[str] = (),
) -> BundleParts:
    """The parts with their card, and the figures in the manifest as `metrics`; arguments as for `card_text`."""
    card = card_text(parts, evaluation, title=title, tested_on=tested_on, trained_on=trained_on, studies=studies)
    metrics = None if evaluation is None else dict(evaluation.figures)
    return replace(parts, card=card, account={**parts.account, "metrics": metrics})


def card_text(
    parts: BundleParts,
    evaluation: Evaluation | None,
    *,
    title: str,
    tested_on: str = "",
    trained_on: str = "",
    studies: Sequence[str] = (),
) -> str:
    """The card as Markdown, figures to three significant digits, the dangerous cell first.

    Parameters
    ----------
    parts : the trained classifier.
    evaluation : on groups that it has not seen; None = not tested, which the card then says.
    title : first heading.
    tested_on, trained_on : one sentence each: which pulses, from where.
    studies : further sections behind the figures, in Markdown.
    """
    sections = [
        f"# {title}",
        *([_UNTESTED] if evaluation is None else _figures(evaluation, tested_on or _UNSEEN)),
        *studies,
        "## What it was trained on",
        *([trained_on] if trained_on else []),
        _trained(parts),
        "## What it must not be used for",
        _MUST_NOT,
        "## Validity limits",
        _validity(parts),
    ]
    return "\n\n".join(sections) + "\n"


def evaluation_text(evaluation: Evaluation, *, title: str, warnings: Sequence[str] = ()) -> str:
    """An evaluation as Markdown: what the card has of it, and each group and the calibration as well.

    Parameters
    ----------
    title : first heading.
    warnings : lines that stand before every figure.
    """
    sections = [
        f"# {title}",
        *(f"**{line}**" for line in warnings),
        *_figures(evaluation, ""),
        "### Calibration of the likeliest label",
        markdown(_held(evaluation.tables["calibration"])),
        "### By group",
        markdown(evaluation.tables["by_group"].reset_index()),
        "## Cautions",
        _MUST_NOT,
    ]
    return "\n\n".join(sections) + "\n"


def _figures(evaluation: Evaluation, tested_on: str) -> list[str]:
    return [
        _dangerous(evaluation.figures),
        "## How well it does",
        *([tested_on] if tested_on else []),
        _headline(evaluation.figures),
        "### By label",
        markdown(evaluation.tables["by_class"].reset_index()),
        "### Decided as (counts)",
        markdown(evaluation.tables["confusion"].reset_index()),
        "### By SNR",
        markdown(_held(evaluation.tables["by_snr"])),
        "### Cable by distance",
        _half(evaluation.figures["cable_half_distance_m"]),
        markdown(_held(evaluation.tables["by_distance"])),
        "### Label sets",
        markdown(evaluation.tables["sets"].head(8)),
    ]


def _dangerous(figures: Mapping[str, Any]) -> str:
    share = figures["switchgear_as_interference_share"]
    if share is None:
        return "**Switchgear decided as interference: not measured, the test pulses held no switchgear.**"
    count, pulses = figures["switchgear_as_interference_count"], figures["switchgear_pulses"]
    low, high = figures["switchgear_as_interference_low"], figures["switchgear_as_interference_high"]
    return (
        f"**Switchgear decided as interference: {count} of {pulses} pulses, in "
        f"{figures['switchgear_as_interference_groups']} of {figures['switchgear_groups']} groups; "
        f"{three(100 * share)} % over groups** (95 % interval {three(100 * low)} to {three(100 * high)} %, each "
        "group counted as one trial). This is the error that leaves a failing panel live."
    )


def _headline(figures: Mapping[str, Any]) -> str:
    rows = [{"figure": word, "value": figures[name]} for word, name in HEADLINES.items()]
    return markdown(pd.DataFrame(rows, dtype=object))


def spoken(figures: Mapping[str, Any]) -> list[str]:
    """The figures as lines for a terminal, the dangerous one first."""
    lines = [f"{word}: {three(figures[name])}" for word, name in HEADLINES.items() if figures[name] is not None]
    return [_dangerous(figures).replace("**", ""), *lines]


def _half(distance_m: float | None) -> str:
    if distance_m is None:
        return "Recall of cable does not pass one half at any distance tested."
    return f"Recall of cable passes one half at about {three(distance_m)} m; nearer cable pulses mostly look near-end."


def _held(bands: pd.DataFrame) -> pd.DataFrame:
    """The bands that hold pulses."""
    return bands[bands["pulses"] > 0]


def _trained(parts: BundleParts) -> str:
    account = parts.account
    counts = ", ".join(f"{count} {name}" for name, count in account["pulses"].items())
    mix = ", ".join(f"{name} {three(share)}" for name, share in parts.mix.items())
    shared = ", ".join(f"{part} {held['groups']}" for part, held in account["groups"]["parts"].items())
    lines = [
        f"- pulses: {counts}",
        f"- groups (by {account['groups']['by']}): {account['groups']['total']}; shared out: {shared}",
        f"- {account['how']}",
        (
            f"- {account['rounds']} rounds of trees on {len(parts.features)} features, "
            f"temperature {three(parts.temperature)}"
        ),
        f"- probabilities are stated for the class mix {mix}",
        f"- error rate of the label sets: {three(parts.error_rate)}, as an average over groups, never for one circuit",
        *(f"- note: {note}" for note in account["notes"]),
    ]
    return "\n".join(lines)


def _validity(parts: BundleParts) -> str:
    units = {
        "rate_hz": ("rate", "MS/s", 1e6), "low_hz": ("lower corner", "MHz", 1e6),
        "high_hz": ("upper corner", "MHz", 1e6), "adc_bits": ("resolution", "bit", 1.0), "snr_db": ("SNR", "dB", 1.0),
    }  # fmt: skip
    lines = ["Smallest and largest value among the training pulses; beyond them the verdict is `undecided`."]
    for name, (word, unit, scale) in units.items():
        ends = getattr(parts.validity, name)
        span = (
            "not known, not checked" if ends is None else f"{three(ends[0] / scale)} to {three(ends[1] / scale)} {unit}"
        )
        lines.append(f"- {word}: {span}")
    return lines[0] + "\n\n" + "\n".join(lines[1:])


def three(value: Any) -> str:
    """A number to three significant digits, whole numbers whole, a dash for what cannot be said."""
    if value is None or (isinstance(value, float | np.floating) and np.isnan(value)):
        return "–"
    if isinstance(value, str | int | np.integer) and not isinstance(value, bool):
        return str(value)
    if np.isinf(value):
        return "∞" if value > 0 else "-∞"
    return f"{float(value):.3g}" if abs(value) < 1000 else f"{float(f'{float(value):.3g}'):.0f}"


def markdown(table: pd.DataFrame) -> str:
    """A table in Markdown, numbers to three significant digits."""
    head = "| " + " | ".join(str(name).replace("_", " ") for name in table.columns) + " |"
    rule = "|" + " --- |" * len(table.columns)
    rows = ["| " + " | ".join(_cell(value) for value in row) + " |" for row in table.itertuples(index=False)]
    return "\n".join([head, rule, *rows])


def _cell(value: Any) -> str:
    return three(value).replace("|", " + ")
