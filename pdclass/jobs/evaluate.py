"""`pdclass evaluate`: how well a bundle does on labelled pulses of circuits that it has not seen."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from pdclass.features import feature_digests
from pdclass.jobs.simulate import fresh_folder
from pdclass.jobs.talk import SILENT, Talk
from pdclass.jobs.train import measured, read_tables
from pdclass.model.bundle import Bundle, read_bundle
from pdclass.pulses import PulseSet
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
    bundle: Path, pulses: Sequence[Path], out: Path, *, force: bool = False, talk: Talk = SILENT
) -> Evaluated:
    """Evaluate a bundle and write `evaluation.md`.

    Raises
    ------
    TooFewError
        If no pulse is labelled.
    """
    model = read_bundle(bundle, feature_digests())
    sets, notes = read_tables(pulses)
    values, together = measured(sets, model.features)
    talk.say(f"{len(together.table)} pulses measured")
    seen = _seen(model, together)
    found = evaluate(model, values, together)
    fresh_folder(out, force=force)
    write_text(out / "evaluation.md", evaluation_text(found, title=f"Bundle {model.digest[:16]}", warnings=seen))
    lines = (*notes, *seen, *spoken(found.figures))
    return Evaluated(found.figures, out / "evaluation.md", lines)


def _seen(model: Bundle, pulses: PulseSet) -> tuple[str, ...]:
    """A warning where groups of the evaluation were trained on: such figures are too good."""
    by: tuple[Literal["circuit-and-site", "circuit"], ...] = ("circuit-and-site", "circuit")
    shared = {name for how in by for name in group_names(pulses.table, how)} & set(model.reference["group"])
    if not shared:
        return ()
    return (f"warning: {len(shared)} groups were trained on, as {min(shared)}; figures are too good",)
