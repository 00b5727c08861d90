"""`pdclass extract`: the pulses of captures as one pulse table."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from pdclass.capture import FillIns, open_capture, write_pulses
from pdclass.errors import InputError
from pdclass.extract import Extraction, ExtractSettings, extract
from pdclass.jobs.sheet import MOST_ASKED, MOST_SHOWN, Sheet, check_sheet_place, write_sheet
from pdclass.jobs.simulate import joined
from pdclass.jobs.talk import SILENT, Talk, each


@dataclass(frozen=True)
class Extracted:
    """What was found in each capture, in order, where the table is, and what could not be read."""

    out: Path
    names: tuple[str, ...]
    found: tuple[Extraction, ...]
    skipped: tuple[str, ...]
    sheet: Sheet | None = None


@dataclass(frozen=True)
class _Looked:
    """One capture that could be read."""

    name: str
    digest: str
    phase_reference: str | None
    found: Extraction


def extract_captures(
    captures: Sequence[Path],
    out: Path,
    *,
    fill: FillIns | None = None,
    settings: ExtractSettings | None = None,
    jobs: int = 1,
    sheet: Path | None = None,
    sheet_pulses: int = MOST_SHOWN,
    force: bool = False,
    talk: Talk = SILENT,
) -> Extracted:
    """Find the pulses of captures and write them as one pulse table, and a sheet to label them if one is asked for.

    A capture that cannot be read is reported and skipped; when none can be, nothing is written.

    Raises
    ------
    InputError
        If no capture is readable, captures differ in rate, the table exists and `force` is not given, or the
        sheet's folder holds something.
    """
    check_table_place(out, force=force)
    if not 1 <= sheet_pulses <= MOST_ASKED:
        raise InputError(f"--sheet-pulses: expected 1 to {MOST_ASKED}, found {sheet_pulses}; choose one between")
    if sheet is not None:
        check_sheet_place(sheet, force=force)
    calls = [(path, fill or FillIns(), settings or ExtractSettings()) for path in dict.fromkeys(captures)]
    made = _once(each(_pulses_of, calls, jobs=jobs, talk=talk, words="captures looked at"))
    read = [one for one in made if not isinstance(one, str)]
    skipped = tuple(one for one in made if isinstance(one, str))
    if not read:
        raise InputError("; ".join(skipped))
    _one_rate(read)
    whole = joined([one.found.pulses for one in read])
    write_pulses(out, whole)
    drawn = None
    if sheet is not None:
        references = {one.digest: one.phase_reference for one in read}
        drawn = write_sheet(whole, sheet, references, most=sheet_pulses, talk=talk)
    return Extracted(out, tuple(one.name for one in read), tuple(one.found for one in read), skipped, drawn)


def check_table_place(out: Path, *, force: bool) -> None:
    """Refuse a place where a pulse table cannot, or may not, be written.

    Raises
    ------
    InputError
        If the name has another ending, exists and `force` is not given, or its folder is not there.
    """
    if out.suffix != ".parquet":
        raise InputError(f"{out}: --out: expected a name that ends in .parquet; choose one")
    if out.exists() and not force:
        raise InputError(f"{out}: exists already; choose another name or --force")
    if not out.resolve().parent.is_dir():
        raise InputError(f"{out.resolve().parent}: no such folder; make it first")


def _once(made: Sequence[_Looked | str]) -> list[_Looked | str]:
    """The same without captures whose samples came before: a pulse has one name and stands there once."""
    holders: dict[str, str] = {}
    kept: list[_Looked | str] = []
    for one in made:
        if isinstance(one, str) or not len(one.found.pulses.table):
            kept.append(one)
            continue
        former = holders.get(one.digest)
        holders.setdefault(one.digest, one.name)
        kept.append(
            one if former is None else f"{one.name}: holds the same samples as {former}; give each recording once"
        )
    return kept


def _one_rate(read: Sequence[_Looked]) -> None:
    rates = {one.found.pulses.rate_hz: one.name for one in read}
    if len(rates) > 1:
        (first, one), (second, other) = list(rates.items())[:2]
        raise InputError(
            f"{other}: rate: expected {first / 1e6:g} MS/s as in {one}, found {second / 1e6:g} MS/s; "
            "extract captures of each rate into a table of their own"
        )


def _pulses_of(path: Path, fill: FillIns, settings: ExtractSettings) -> _Looked | str:
    """A capture with its pulses, or why it could not be read."""
    try:
        capture = open_capture(path, fill)
        return _Looked(capture.name, capture.digest, capture.phase_reference, extract(capture, settings))
    except InputError as error:
        return str(error)
