"""Commands about bundles: train, evaluate."""

from __future__ import annotations

from pathlib import Path

import typer

from pdclass.cli.talking import CLASSES, FORCE, JSON, LABELS, Terminal, result, shares


def train(
    pulses: list[Path] = typer.Argument(help="Labelled pulse tables (.parquet) or verdict folders.", metavar="PULSES"),
    out: Path = typer.Option(..., "--out", help="Folder of the bundle to write."),
    error_rate: float = typer.Option(0.10, "--error-rate", help="How often a label set may miss the truth."),
    mix: str = typer.Option(None, "--mix", help="Class mix of the probabilities: cable=0.1,local=0.2,..."),
    group: str = typer.Option(None, "--group", help="'circuit': the weaker split where sites leave too few groups."),
    labels: Path = LABELS,
    classes: str = CLASSES,
    private: bool = typer.Option(False, "--private", help="Leave the training pulses' features out of the bundle."),
    seed: int = typer.Option(0, "--seed", min=0, help="Of the sharing-out of groups and of the trees."),
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Fit a bundle on labelled pulses, calibrated on circuits that its trees have not seen."""
    from pdclass.jobs import train as job

    done = job.train_bundle(
        pulses,
        out,
        error_rate=error_rate,
        mix=shares(mix, "--mix"),
        group=group,
        labels=labels,
        classes=own_classes(classes),
        private=private,
        seed=seed,
        force=force,
        talk=Terminal(),
    )
    lines = [*done.notes, f"bundle: {out}, digest {done.digest[:16]}", f"card: {out / 'card.md'}"]
    lines.append(f"next: pdclass evaluate {out} OTHER-PULSES.parquet --out evaluation")
    content = {"bundle": out, "digest": done.digest, "notes": done.notes, "pulses": done.pulses}
    result(lines, content, as_json=as_json)


def evaluate(
    bundle: Path = typer.Argument(help="The bundle.", metavar="BUNDLE"),
    pulses: list[Path] = typer.Argument(
        help="Labelled pulse tables of circuits that the bundle has not seen.", metavar="PULSES"
    ),
    out: Path = typer.Option(..., "--out", help="Folder for the figures."),
    labels: Path = LABELS,
    classes: str = CLASSES,
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Say how well a bundle does on labelled pulses: confusion, calibration, coverage, by SNR and distance."""
    from pdclass.jobs import evaluate as job

    done = job.evaluate_bundle(
        bundle, pulses, out, labels=labels, classes=own_classes(classes), force=force, talk=Terminal()
    )
    result([*done.lines, f"figures: {done.page}"], done.figures, as_json=as_json)


def own_classes(text: str | None) -> dict[str, str]:
    """Own classes from an option: `crane drive=interference,void`."""
    from pdclass.capture import parse_classes

    return {} if text is None else parse_classes(text)
