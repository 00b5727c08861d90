"""The verdict folder: written beside its place, synced, renamed; continued after a kill; read back."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import pyarrow.parquet as pq

from pdclass.capture import read_pulses, write_pulses
from pdclass.digest import canonical_json, file_digest, json_digest
from pdclass.errors import InputError, RefusedError, complaint
from pdclass.pulses import PulseSet
from pdclass.verdict.score import Verdicts
from pdclass.verdict.tables import (
    csv_text,
    read_table,
    read_verdict_table,
    write_reason_table,
    write_verdict_table,
)
from pdclass.writing import flush, put_in_place, settle, write_text

#: 1 = this layout. A changed layout gets the next number, and the reader of the old one stays.
FORMAT = 1
#: What a verdict folder may hold; anything else belongs to somebody and is never removed.
_PARTS = ("run.json", "verdicts", "reasons", "pulses", "bundle", "report.html", "verdicts.csv")
_SHARDED = ("verdicts", "reasons", "pulses")


@dataclass(frozen=True)
class Shard:
    """All that one capture, or one pulse table, adds to a verdict folder.

    Attributes
    ----------
    name : of the capture or table, without folder and ending.
    capture_digest : sha256 of the sample file (of the table's file), 64 hex digits.
    pulses : every pulse, echoes among them.
    verdicts : the verdicts on those that are no echoes.
    record : the capture's entry in `run.json`, see `capture_record`.
    """

    name: str
    capture_digest: str
    pulses: PulseSet
    verdicts: Verdicts
    record: Mapping[str, Any]

    @property
    def file(self) -> str:
        """Name of the shard's files."""
        return shard_file(self.name, self.capture_digest)


def shard_file(name: str, capture_digest: str) -> str:
    """Name of a capture's files in the folder: its own name and the first 8 digits of its digest."""
    if not name or Path(name).name != name:
        raise InputError(f"{name!r}: name: expected a plain file name; rename the capture or table")
    return f"{name}-{capture_digest[:8]}.parquet"


def capture_record(
    *,
    name: str,
    capture_digest: str,
    circuit: str | None,
    sensor: str | None,
    session: str | None,
    found: int,
    echoes: int,
    site: str | None = None,
    start_utc: pd.Timestamp | None = None,
    duration_s: float | None = None,
    detection_limit_v: float | None = None,
    phase_reference: str | None = None,
    unchecked: Sequence[str] = (),
    notes: Sequence[str] = (),
) -> dict[str, Any]:
    """A capture's entry in `run.json`; None = unknown, as for a pulse table.

    Parameters
    ----------
    found : pulses found, echoes left out.
    duration_s : recorded time [s].
    detection_limit_v : peak at which about three in four pulses are found, nearly all from 1.3 times it on [V].
    unchecked : what could not be checked against the bundle's limits, one line each.
    notes : further remarks of reading and extraction, one line each.
    """
    return {
        "capture": name,
        "capture_digest": capture_digest,
        "circuit": circuit,
        "site": site,
        "sensor": sensor,
        "session": session,
        "start_utc": None if start_utc is None or pd.isna(start_utc) else start_utc.isoformat(),
        "duration_s": duration_s,
        "pulses_found": found,
        "echoes": echoes,
        "detection_limit_mv": None if detection_limit_v is None else detection_limit_v * 1e3,
        "phase_reference": phase_reference,
        "not_checked": list(unchecked),
        "notes": list(notes),
    }


def begin_folder(out: Path, plan: Mapping[str, Any], *, force: bool = False) -> Path:
    """The sibling folder in which a run is put together; that of a killed run with the same plan is kept.

    Parameters
    ----------
    out : where the verdict folder is to stand.
    plan : what decides the result: inputs as given, settings, digests of bundle and catalogue, versions.
    force : replace a verdict folder of another plan; strangers' files in it stay. A folder that holds anything but
        an earlier run is never replaced.

    Raises
    ------
    RefusedError
        If `out` is not empty and not a verdict folder of the same plan, without `force`.
    InputError
        If `out` is a file or cannot be made.
    """
    out = out.resolve()
    settle(out, _PARTS)
    if out.exists() and not out.is_dir():
        raise InputError(complaint(out, "--out", expected="a folder", found="a file", advice="name another"))
    if out.exists() and Path.cwd().is_relative_to(out):
        advice = "name a folder inside it, or one elsewhere"
        raise InputError(complaint(out, "--out", expected="a folder of its own", found="where you are", advice=advice))
    standing = _plan_digest_of(out) if out.exists() and any(out.iterdir()) else json_digest(dict(plan))
    if standing is None or (not force and standing != json_digest(dict(plan))):
        raise RefusedError(
            complaint(
                out,
                "--out",
                expected="an empty folder or a verdict folder of the same run",
                found="files of another kind" if standing is None else "verdicts of another run",
                advice="choose another folder"
                if standing is None
                else "choose another folder, or --force to replace the verdicts in it",
            )
        )
    staging = out.parent / f".{out.name}.{json_digest(dict(plan))[:16]}.part"
    try:
        for part in ("records", *_SHARDED):
            (staging / part).mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(f"{staging}: cannot be made: {error.strerror}; choose a folder you may write") from None
    return staging


def is_done(staging: Path, name: str, capture_digest: str) -> bool:
    """Whether a shard stands complete in the folder under way, so that a continued run may skip it."""
    return _record_path(staging, shard_file(name, capture_digest)).is_file()


def write_shard(staging: Path, shard: Shard) -> None:
    """Write a shard's three tables, then the record that makes it count; each appears whole or not at all."""
    write_verdict_table(staging / "verdicts" / shard.file, shard.verdicts)
    write_reason_table(staging / "reasons" / shard.file, shard.verdicts)
    write_pulses(staging / "pulses" / shard.file, shard.pulses)
    write_text(_record_path(staging, shard.file), canonical_json(dict(shard.record)))


def run_record(staging: Path, plan: Mapping[str, Any], inputs: Sequence[Mapping[str, Any]]) -> dict[str, Any]:
    """What `run.json` holds but for the files' digests: plan, what became of each input, captures.

    Parameters
    ----------
    inputs : per input `given`, `digest` (or None) and `state` ("scored", or why it was skipped).
    """
    records = [json.loads(path.read_text(encoding="utf-8")) for path in sorted((staging / "records").glob("*.json"))]
    return {
        "format": FORMAT,
        "plan": dict(plan),
        "inputs": [dict(item) for item in inputs],
        "captures": records,
    }


def finish_folder(
    staging: Path,
    out: Path,
    run: Mapping[str, Any],
    *,
    bundle: Path,
    report_html: str | None = None,
    as_csv: bool = False,
) -> Path:
    """Add bundle, report and `run.json`, then put the folder in its place; returns where it stands.

    Parameters
    ----------
    run : from `run_record`.
    bundle : folder of the bundle that scored, copied whole.
    report_html : the report, or None for none.
    as_csv : also write `verdicts.csv`, safe to open in a spreadsheet.
    """
    out = out.resolve()
    _clear(staging, {record_file(record) for record in run["captures"]})
    shutil.copytree(bundle, staging / "bundle")
    if report_html is not None:
        write_text(staging / "report.html", report_html)
    if as_csv:
        write_text(staging / "verdicts.csv", csv_text(read_verdicts(staging)))
    files = {
        path.relative_to(staging).as_posix(): file_digest(path)
        for path in sorted(staging.rglob("*"))
        if path.is_file() and path.parent.name != "records"
    }
    write_text(staging / "run.json", canonical_json({**run, "files": files}))
    for folder in sorted({path.parent for path in staging.rglob("*")}):
        flush(folder)
    shutil.rmtree(staging / "records")
    put_in_place(staging, out, _PARTS)
    return out


def drop_folder(staging: Path) -> None:
    """Remove a folder under way that is not to be finished."""
    shutil.rmtree(staging)


def record_file(record: Mapping[str, Any]) -> str:
    """Name of the files of a capture's record."""
    return shard_file(record["capture"], record["capture_digest"])


def read_run(folder: Path) -> dict[str, Any]:
    """The content of a verdict folder's `run.json`.

    Raises
    ------
    InputError
        If there is none, or it is not readable.
    RefusedError
        If its format is another than this program writes.
    """
    path = folder / "run.json"
    try:
        run = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, json.JSONDecodeError) as error:
        raise InputError(f"{path}: not readable as a run: {error}; give a folder that `score` has written") from None
    found = run.get("format") if isinstance(run, dict) else None
    if found != FORMAT:
        raise RefusedError(
            complaint(path, "format", expected=FORMAT, found=found, advice="use the version that wrote it")
        )
    return dict(run)


def read_verdicts(folder: Path) -> pd.DataFrame:
    """Every verdict of a folder, indexed by `pulse_id`, shard by shard in order of their names.

    Raises
    ------
    InputError
        If there are no verdicts, or a file is not readable.
    """
    return pd.concat([read_verdict_table(path) for path in shard_paths(folder, "verdicts")])


def read_pulse_tables(folder: Path) -> pd.DataFrame:
    """The pulse tables of a folder without the waves, echoes among them, indexed by `pulse_id`.

    The column `shard` names the file that holds the wave.

    Raises
    ------
    InputError
        If there are none, or a file is not readable.
    """
    tables = []
    for path in shard_paths(folder, "pulses"):
        names = [name for name in pq.read_schema(path).names if name != "wave"]
        tables.append(read_table(path, names).to_pandas().assign(shard=path.name))
    table: pd.DataFrame = pd.concat(tables, ignore_index=True).set_index("pulse_id")
    return table


def read_shard_pulses(folder: Path, file: str) -> PulseSet:
    """The pulses of one shard with their waves."""
    return read_pulses(folder / "pulses" / file)[0]


def shard_paths(folder: Path, kind: str) -> list[Path]:
    """The files of `verdicts`, `reasons` or `pulses` in order of their names.

    Raises
    ------
    InputError
        If the folder has none.
    """
    paths = sorted((folder / kind).glob("*.parquet"))
    if not paths:
        raise InputError(f"{folder / kind}: no verdict files; give a folder that `score` has written")
    return paths


def _record_path(staging: Path, file: str) -> Path:
    return staging / "records" / f"{file.removesuffix('.parquet')}.json"


def _plan_digest_of(folder: Path) -> str | None:
    if not (folder / "run.json").is_file():
        return None
    return json_digest(read_run(folder).get("plan"))


def _clear(staging: Path, wanted: Iterable[str]) -> None:
    """Take out what a killed run may have left: half-written files, and shards that no record names."""
    keep = set(wanted)
    for part in _SHARDED:
        for path in (staging / part).iterdir():
            if path.name not in keep:
                path.unlink()
    for path in staging.iterdir():
        if path.is_file():
            path.unlink()
    shutil.rmtree(staging / "bundle", ignore_errors=True)
