"""Commands about synthetic worlds: demo, simulate."""

from __future__ import annotations

from pathlib import Path

import typer

from pdclass.cli.talking import FORCE, JOBS, JSON, Terminal, result


def demo(
    out: Path = typer.Option(Path("port-ferrow-demo"), "--out", help="Folder for captures, verdicts and report."),
    jobs: int = JOBS,
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Show the main job: simulate a harbour district, score it with the shipped bundle, write the report.

    The district, Port Ferrow, is fictional; what was planted in it is compared with the verdicts.
    """
    from pdclass.jobs import demo as job

    done = job.demo(out, jobs=jobs, force=force, talk=Terminal())
    result(
        job.demo_lines(done),
        {"out": done.out, "report": done.report, "compared": done.comparison.to_dict("index")},
        as_json=as_json,
    )


def simulate(
    scenario: str = typer.Argument(
        help="Scenario file (TOML), or a shipped one: base, port-ferrow, tiny.", metavar="SCENARIO"
    ),
    out: Path = typer.Option(..., "--out", help="Folder for the captures and pulses.parquet."),
    seed: int = typer.Option(1, "--seed", min=0, help="Draws another world from the same distributions."),
    captures: int = typer.Option(
        None, "--captures", min=1, max=100_000, help="Captures; by default the scenario's number."
    ),
    pulses: int = typer.Option(None, "--pulses", min=0, max=100_000, help="Planted pulses a capture."),
    gallery: bool = typer.Option(False, "--gallery", help="Also write gallery.html: what this world looks like."),
    jobs: int = JOBS,
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Write captures of a synthetic world with their truth, and the labelled pulses found in them."""
    from pdclass.jobs import simulate as job

    done = job.simulate(
        scenario,
        out,
        seed=seed,
        captures=captures,
        pulses=pulses,
        jobs=jobs,
        gallery=gallery,
        force=force,
        talk=Terminal(),
    )
    lines = [f"{len(done.captures)} captures in {out}, {done.pulses} pulses found in them"]
    lines += [f"pulses: {path}" for path in done.pulse_tables]
    if done.gallery is not None:
        lines.append(f"gallery: {done.gallery}")
    lines.append(f"next: pdclass score {done.captures[0]} --out verdicts")
    content = {
        "captures": done.captures,
        "pulse_tables": done.pulse_tables,
        "pulses": done.pulses,
        "gallery": done.gallery,
    }
    result(lines, content, as_json=as_json)
