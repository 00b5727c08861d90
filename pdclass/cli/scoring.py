"""Commands from captures to verdicts: extract, import, score."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import typer

from pdclass.cli.talking import (
    BAND,
    CIRCUIT,
    COUNT,
    FORCE,
    JOBS,
    JSON,
    MAINS,
    MAP,
    RATE,
    SENSOR,
    SESSION,
    SITE,
    Terminal,
    pair,
    result,
)

if TYPE_CHECKING:
    from pdclass.capture import FillIns


def extract(
    captures: list[Path] = typer.Argument(help="Captures (SigMF, .npz, .h5, or .csv with a map).", metavar="CAPTURE"),
    out: Path = typer.Option(..., "--out", help="Pulse table to write (.parquet)."),
    sheet: Path = typer.Option(None, "--sheet", help="Folder for pictures to label and labels.csv.", metavar="DIR"),
    sheet_pulses: int = typer.Option(200, "--sheet-pulses", min=1, max=2000, help="Most pulses that it shows."),
    map_path: Path = MAP,
    rate_hz: float = RATE,
    volts_per_count: float = COUNT,
    circuit: str = CIRCUIT,
    site: str = SITE,
    sensor: str = SENSOR,
    session: str = SESSION,
    band_hz: str = BAND,
    mains_hz: float = MAINS,
    jobs: int = JOBS,
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Find the pulses of captures and write them as a pulse table."""
    from pdclass.jobs import extract as job

    talk = Terminal()
    fill = _fill_ins(map_path, rate_hz, volts_per_count, circuit, site, sensor, session, band_hz, mains_hz)
    done = job.extract_captures(
        captures, out, fill=fill, jobs=jobs, sheet=sheet, sheet_pulses=sheet_pulses, force=force, talk=talk
    )
    lines, rows = [], []
    for name, found in zip(done.names, done.found, strict=True):
        limit_mv, pulses = found.detection_limit_v * 1e3, found.found - found.echoes
        lines.append(
            f"{name}: {pulses} pulses and {found.echoes} echoes in {found.duration_s * 1e3:.3g} ms; "
            f"smallest findable 50 ns pulse {limit_mv:.3g} mV"
        )
        lines += found.notes
        rows.append({"capture": name, "pulses": pulses, "echoes": found.echoes, "limit_mv": limit_mv})
    lines += [f"pulses: {out}"]
    if done.sheet is not None:
        shown = f"{done.sheet.shown} of {done.sheet.found} pulses"
        lines += [f"sheet: {done.sheet.page} ({shown}); fill in {done.sheet.labels}"]
        lines += [f"next: pdclass train {out} MORE.parquet --labels {done.sheet.labels} --out own-bundle"]
    else:
        lines += [f"next: pdclass score {out} --out verdicts"]
    result(
        lines,
        {"out": out, "sheet": done.sheet and done.sheet.page, "captures": rows, "skipped": done.skipped},
        as_json=as_json,
    )
    _say_skipped(done.skipped, talk)


def import_pulses(
    files: list[Path] = typer.Argument(help="Files of pulses, one a row: .csv, .npz, .h5, .parquet.", metavar="FILE"),
    map_path: Path = typer.Option(..., "--map", help="What their columns, units and labels are (TOML)."),
    out: Path = typer.Option(..., "--out", help="Pulse table to write (.parquet)."),
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Bring somebody else's pulses into a pulse table."""
    from pdclass.jobs import import_pulses as job

    talk = Terminal()
    done = job.import_pulses(files, map_path, out, force=force, talk=talk)
    lines = [*done.notes, *done.lines, f"pulses: {out}", f"next: pdclass score {out} --out verdicts"]
    content = {"out": out, "pulses": done.pulses, "notes": done.notes, "skipped": done.skipped}
    result(lines, content, as_json=as_json)
    _say_skipped(done.skipped, talk)


def score(
    inputs: list[Path] = typer.Argument(
        help="Captures (SigMF, .npz, .h5, .csv with a map), pulse tables, or folders of them.", metavar="INPUT"
    ),
    out: Path = typer.Option(..., "--out", help="Folder for the verdicts."),
    bundle: Path = typer.Option(None, "--bundle", help="Model; the shipped base bundle by default."),
    map_path: Path = MAP,
    rate_hz: float = RATE,
    volts_per_count: float = COUNT,
    circuit: str = CIRCUIT,
    site: str = SITE,
    sensor: str = SENSOR,
    session: str = SESSION,
    band_hz: str = BAND,
    mains_hz: float = MAINS,
    csv: bool = typer.Option(False, "--csv", help="Also write verdicts.csv."),
    report: bool = typer.Option(True, "--report/--no-report", help="Write report.html."),
    jobs: int = JOBS,
    force: bool = FORCE,
    as_json: bool = JSON,
) -> None:
    """Give every pulse of captures or pulse tables its verdict with reasons, and write a report."""
    from pdclass.jobs import score as job

    fill = _fill_ins(map_path, rate_hz, volts_per_count, circuit, site, sensor, session, band_hz, mains_hz)
    talk = Terminal()
    done = job.score_inputs(
        inputs, out, bundle=bundle, fill=fill, jobs=jobs, as_csv=csv, report=report, force=force, talk=talk
    )
    content = {"out": done.out, "report": done.report, "captures": done.run["captures"], "skipped": done.skipped}
    result(job.score_lines(done), content, as_json=as_json)
    _say_skipped(done.skipped, talk)


def _say_skipped(skipped: tuple[str, ...], talk: Terminal) -> None:
    from pdclass.errors import SkippedInputsError

    for line in skipped:
        talk.say(f"skipped: {line}")
    if skipped:
        count = "one input was" if len(skipped) == 1 else f"{len(skipped)} inputs were"
        raise SkippedInputsError(f"{count} skipped, see above; the rest is done")


def _fill_ins(
    map_path: Path | None,
    rate_hz: float | None,
    volts_per_count: float | None,
    circuit: str | None,
    site: str | None,
    sensor: str | None,
    session: str | None,
    band_hz: str | None,
    mains_hz: float | None,
) -> FillIns:
    from pdclass.capture import FillIns, read_map

    return FillIns(
        map=None if map_path is None else read_map(map_path),
        rate_hz=rate_hz,
        volts_per_count=volts_per_count,
        circuit=circuit,
        site=site,
        sensor=sensor,
        session=session,
        band_hz=pair(band_hz, "--band-hz"),
        mains_hz=mains_hz,
    )
