"""`pdclass score`: verdicts with reasons on captures or pulse tables, as a verdict folder with a report."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import pandas as pd

from pdclass import __version__
from pdclass.capture import HDF5_ENDINGS, NPZ_ENDINGS, FillIns, check_name, open_capture, read_pulses
from pdclass.digest import file_digest
from pdclass.errors import InputError, PdclassError
from pdclass.extract import ExtractSettings, extract
from pdclass.features import feature_digests, measured
from pdclass.jobs.talk import SILENT, Talk, each
from pdclass.model.bundle import Bundle, read_bundle
from pdclass.pulses import Capture, PulseSet
from pdclass.report.summary import morning_lines
from pdclass.settings import shipped
from pdclass.verdict import batch
from pdclass.verdict.score import not_checked, score
from pdclass.verdict.sentences import Seen

_TABLE = ".parquet"
#: Captures that a folder is searched for beside SigMF; a CSV could be anything, and is named.
ARRAYS = (*NPZ_ENDINGS, *HDF5_ENDINGS)


@dataclass(frozen=True)
class Truth:
    """What was planted in simulated captures: label by pulse id, and how many of each label there were."""

    labels: pd.Series[Any]
    planted: dict[str, int]


@dataclass(frozen=True)
class Scored:
    """Where the verdicts are, and what became of each input."""

    out: Path
    report: Path | None
    run: dict[str, Any]
    classes: tuple[str, ...]
    skipped: tuple[str, ...]


def base_bundle() -> Path:
    """The shipped bundle.

    Raises
    ------
    InputError
        If the installation lacks it.
    """
    path = shipped("models") / "base"
    if not path.is_dir():
        raise InputError(f"{path}: the shipped bundle is missing; name one with --bundle")
    return path


def score_inputs(
    inputs: Sequence[Path],
    out: Path,
    *,
    bundle: Path | None = None,
    fill: FillIns | None = None,
    settings: ExtractSettings | None = None,
    jobs: int = 1,
    as_csv: bool = False,
    report: bool = True,
    force: bool = False,
    truth: Truth | None = None,
    talk: Talk = SILENT,
) -> Scored:
    """Score captures or pulse tables into a verdict folder.

    An input that cannot be read is reported and skipped; when none can be, nothing is written.

    Parameters
    ----------
    inputs : captures (SigMF), pulse tables (Parquet), or folders of them.
    out : the verdict folder.
    bundle : the model; the shipped one by default.
    fill : what captures lack.
    jobs : processes; does not change the result.
    as_csv : also write the verdicts as CSV.
    report : write `report.html`.
    force : replace another verdict folder.
    truth : what was planted, where the captures are simulated, for comparison in the report.

    Raises
    ------
    InputError
        If no input can be read.
    RefusedError
        If the bundle is not safe or not intact, or the folder is not to be replaced.
    """
    bundle_path = bundle or base_bundle()
    model = read_bundle(bundle_path, feature_digests())
    paths = list(dict.fromkeys(path for given in inputs for path in _expanded(given, talk)))
    _check_apart(out, paths)
    chosen, fill = settings or ExtractSettings(), fill or FillIns()
    given = [{"given": str(path), **_identity(path)} for path in paths]
    plan = {
        "inputs": given,
        "extract": chosen.model_dump(),
        "fill_ins": fill.model_dump(exclude_none=True),
        "bundle_digest": model.digest,
        "catalogue_digest": str(model.manifest["catalogue_digest"]),
        "versions": {name: version(name) for name in ("numpy", "scipy", "numba", "pandas", "pyarrow")}
        | {"pdclass": __version__},
    }
    staging = batch.begin_folder(out, plan, force=force)
    twice = _same_samples(given)
    calls = [
        (path, item, staging, bundle_path, fill, chosen)
        for path, item in zip(paths, given, strict=True)
        if str(path) not in twice
    ]
    done = iter(each(_score_one, calls, jobs=jobs, talk=talk, words="inputs looked at"))
    states = [twice.get(str(path)) or next(done) for path in paths]
    skipped = tuple(state for state in states if state != "scored")
    if len(skipped) == len(paths):
        batch.drop_folder(staging)
        raise InputError("; ".join(skipped))
    run = batch.run_record(staging, plan, [item | {"state": state} for item, state in zip(given, states, strict=True)])
    page = _report(staging, run, model, truth) if report else None
    where = batch.finish_folder(staging, out, run, bundle=bundle_path, report_html=page, as_csv=as_csv)
    return Scored(where, where / "report.html" if report else None, run, model.classes, skipped)


def score_lines(done: Scored) -> list[str]:
    """What to print: counts by circuit, what stays open, where the report is, what to do next."""
    verdicts, pulses = batch.read_verdicts(done.out), batch.read_pulse_tables(done.out)
    return morning_lines(verdicts, pulses, done.run, done.classes, done.out)


def _report(staging: Path, run: dict[str, Any], model: Bundle, truth: Truth | None) -> str:
    # drawing is slow to import: it comes in only where a report is wanted
    from pdclass.report.page import batch_report  # noqa: PLC0415

    if truth is None:
        return batch_report(staging, run, model)
    return batch_report(staging, run, model, truth=truth.labels, planted=truth.planted)


def _check_apart(out: Path, paths: Sequence[Path]) -> None:
    """Refuse an output folder that holds an input: it would be replaced."""
    inside = [path for path in paths if path.resolve().is_relative_to(out.resolve())]
    if inside:
        raise InputError(f"{out}: --out: expected a folder without inputs, found {inside[0]} in it; choose another")


def _expanded(given: Path, talk: Talk) -> list[Path]:
    """The inputs a path stands for: itself, or what a folder holds."""
    if not given.is_dir():
        return [given]
    captures_there = [*given.glob("*.sigmf-meta"), *(path for ending in ARRAYS for path in given.glob(f"*{ending}"))]
    found = sorted([*captures_there, *given.glob("*.parquet")])
    if (given / "run.json").is_file():
        found = sorted((given / "pulses").glob("*.parquet"))
    if not found:
        raise InputError(
            f"{given}: no captures (.sigmf-meta, .npz, .h5) or pulse tables (.parquet) in this folder; name another"
        )
    captures = [path for path in found if path.suffix != _TABLE]
    if captures and len(captures) < len(found):
        talk.say(f"{given}: its {len(captures)} captures are scored; name its pulse tables to score those")
    return captures or found


def _same_samples(given: Sequence[Mapping[str, str | None]]) -> dict[str, str]:
    """Why inputs are skipped that hold the samples of an earlier one: its pulses would be counted twice."""
    first: dict[str, Mapping[str, str | None]] = {}
    skipped = {}
    for item in given:
        digest, name = item["digest"], str(item["given"])
        former = first.setdefault(digest, item) if digest else item
        if former is not item:
            same = former.get("meta_digest") == item.get("meta_digest")
            what = "the same recording" if same else "the same samples with other metadata; correct one of them"
            skipped[name] = f"{name}: holds the samples of {former['given']}: {what}"
    return skipped


def _identity(path: Path) -> dict[str, str | None]:
    """Digests of an input's samples and metadata, None where it cannot be read (why is said when it is opened)."""
    if not path.suffix.startswith(".sigmf"):
        return {"digest": _digest(path)}
    return {"digest": _digest(path.with_suffix(".sigmf-data")), "meta_digest": _digest(path.with_suffix(".sigmf-meta"))}


def _digest(path: Path) -> str | None:
    try:
        return file_digest(path)
    except OSError:
        return None


def _score_one(
    path: Path, item: dict[str, Any], staging: Path, bundle: Path, fill: FillIns, settings: ExtractSettings
) -> str:
    """Score one input into the folder under way; the reason in words if it has to be skipped."""
    try:
        model = read_bundle(bundle, feature_digests())
        if path.suffix == _TABLE:
            name, digest = path.stem, str(item["digest"])
        else:
            capture = open_capture(path, fill)
            name, digest = capture.name, capture.digest
        if batch.is_done(staging, name, digest):
            return "scored"
        if path.suffix == _TABLE:
            shard = _table_shard(path, digest, fill, model)
        else:
            shard = _capture_shard(capture, settings, model)
    except PdclassError as error:
        if error.exit_code not in {2, 3}:
            raise
        return str(error)
    # what cannot be written is no fault of the input: it ends the run, which the same command continues
    batch.write_shard(staging, shard)
    return "scored"


def _capture_shard(capture: Capture, settings: ExtractSettings, model: Bundle) -> batch.Shard:
    found = extract(capture, settings)
    record = batch.capture_record(
        name=capture.name,
        capture_digest=capture.digest,
        circuit=capture.circuit,
        site=capture.site,
        sensor=capture.sensor,
        session=capture.session,
        start_utc=capture.start_utc,
        duration_s=found.duration_s,
        found=found.found - found.echoes,
        echoes=found.echoes,
        detection_limit_v=found.detection_limit_v,
        phase_reference=capture.phase_reference,
        unchecked=not_checked(found.pulses, model.validity),
        notes=[*found.notes, *_chain_notes(capture)],
    )
    return _shard(capture.name, capture.digest, found.pulses, model, record)


def _table_shard(path: Path, digest: str, fill: FillIns, model: Bundle) -> batch.Shard:
    check_name(path)
    pulses, notes = read_pulses(path, fill)
    echoes = int(pulses.table["echo_of"].notna().sum())
    record = batch.capture_record(
        name=path.stem,
        capture_digest=digest,
        found=len(pulses.table) - echoes,
        echoes=echoes,
        unchecked=not_checked(pulses, model.validity),
        notes=notes,
        circuit=_only(pulses, "circuit"),
        site=_only(pulses, "site"),
        sensor=_only(pulses, "sensor"),
        session=_only(pulses, "session"),
    )
    return _shard(path.stem, digest, pulses, model, record)


def _shard(name: str, digest: str, pulses: PulseSet, model: Bundle, record: dict[str, Any]) -> batch.Shard:
    found = measured(pulses, model.features)
    seen = list(map(Seen, found.snr_db.tolist(), found.reach_hz.tolist()))
    verdicts = score(pulses, found.values, model, seen=seen)
    return batch.Shard(name, digest, pulses, verdicts, record)


def _only(pulses: PulseSet, column: str) -> str | None:
    """The one value of a column, None where a table holds several."""
    values = pulses.table[column].dropna().unique()
    return str(values[0]) if len(values) == 1 else None


def _chain_notes(capture: Capture) -> list[str]:
    chain, name = capture.chain, capture.name
    notes = []
    if chain.response is None:
        notes.append(f"{name}: no frequency response of the chain: one first-order corner at each end is assumed")
    if chain.mains_hz is None:
        notes.append(f"{name}: mains frequency unknown: the false-event rate is stated for a cycle of 20 ms")
    if capture.phase_marks is None:
        notes.append(f"{name}: no phase reference: pulses have no phase")
    return notes
