"""`pdclass evaluate`: how well a bundle does on labelled pulses of circuits that it has not seen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Literal

from pdclass.features import feature_digests
from pdclass.jobs.simulate import fresh_folder
from pdclass.jobs.talk import SILENT, Talk
from pdclass.jobs.train import labelled_tables, measured, own_classes_of
from pdclass.model.bundle import Bundle, read_bundle
from pdclass.pulses import PulseSet, with_texts
from pdclass.training.card import evaluation_text, spoken
from pdclass.training.evaluate import evaluate
from pdclass.training.groups import group_names
from pdclass.writing import write_text


@dataclass(frozen=True)
class Evaluated:
    """The figures, the page that holds them all, and the lines worth printing."""

    figures: dict[str, Any]
    page: Path
    lines: tuple[str, ...]


def evaluate_bundle(
    bundle: Path,
    pulses: Sequence[Path],
    out: Path,
    *,
    labels: Path | None = None,
    classes: Mapping[str, str] | None = None,
    force: bool = False,
    talk: Talk = SILENT,
) -> Evaluated:
    """Evaluate a bundle and write `evaluation.md`.

    `labels` and `classes` are as for `train_bundle`. A label that the bundle does not know is judged as the label
    that it is a kind of, where that is stated and known.

    Raises
    ------
    TooFewError
        If no pulse is labelled.
    """
    model = read_bundle(bundle, feature_digests())
    sets, notes = labelled_tables(pulses, labels, classes)
    sets, judged_as = _as_known(sets, model.classes)
    values, together = measured(sets, model.features)
    talk.say(f"{len(together.table)} pulses measured")
    seen = _seen(model, together)
    found = evaluate(model, values, together)
    fresh_folder(out, force=force)
    write_text(out / "evaluation.md", evaluation_text(found, title=f"Bundle {model.digest[:16]}", warnings=seen))
    lines = (*notes, *judged_as, *seen, *spoken(found.figures))
    return Evaluated(found.figures, out / "evaluation.md", lines)


def _as_known(sets: Sequence[PulseSet], known: Sequence[str]) -> tuple[list[PulseSet], list[str]]:
    """The pulse sets with own classes that a bundle does not know turned into what they are a kind of."""
    kinds = {
        name: kind for one in sets for name, kind in one.own_classes.items() if name not in known and kind in known
    }
    count = {name: sum(int((one.table["label"] == name).sum()) for one in sets) for name in kinds}
    changed = [
        replace(one, table=with_texts(one.table, label=[kinds.get(name, name) for name in one.table["label"]]))
        for one in sets
    ]
    notes = [
        f"'{name}' is judged as {kinds[name]}, which it is a kind of: {number} pulses"
        for name, number in sorted(count.items())
        if number
    ]
    notes += [
        f"warning: '{name}' is a kind of interference; the dangerous cell counts 'interference' alone"
        for name, kind in sorted(own_classes_of(sets).items())
        if kind == "interference" and name in known
    ]
    return changed, notes


def _seen(model: Bundle, pulses: PulseSet) -> tuple[str, ...]:
    """A warning where groups of the evaluation were trained on: such figures are too good."""
    by: tuple[Literal["circuit-and-site", "circuit"], ...] = ("circuit-and-site", "circuit")
    shared = {name for how in by for name in group_names(pulses.table, how)} & set(model.reference["group"])
    if not shared:
        return ()
    return (f"warning: {len(shared)} groups were trained on, as {min(shared)}; figures are too good",)
