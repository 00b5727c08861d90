"""`pdclass extract`: the pulses of captures as one pulse table."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from pdclass.capture import FillIns, open_capture, write_pulses
from pdclass.errors import InputError
from pdclass.extract import Extraction, ExtractSettings, extract
from pdclass.jobs.simulate import joined
from pdclass.jobs.talk import SILENT, Talk, each


@dataclass(frozen=True)
class Extracted:
    """What was found in each capture, in order, where the table is, and what could not be read."""

    out: Path
    names: tuple[str, ...]
    found: tuple[Extraction, ...]
    skipped: tuple[str, ...]


def extract_captures(
    captures: Sequence[Path],
    out: Path,
    *,
    fill: FillIns | None = None,
    settings: ExtractSettings | None = None,
    jobs: int = 1,
    force: bool = False,
    talk: Talk = SILENT,
) -> Extracted:
    """Find the pulses of captures and write them as one pulse table.

    A capture that cannot be read is reported and skipped; when none can be, nothing is written.

    Raises
    ------
    InputError
        If no capture is readable, captures differ in rate, or the table exists and `force` is not given.
    """
    check_table_place(out, force=force)
    calls = [(path, fill or FillIns(), settings or ExtractSettings()) for path in dict.fromkeys(captures)]
    made = _once(each(_pulses_of, calls, jobs=jobs, talk=talk, words="captures looked at"))
    read = [one for one in made if not isinstance(one, str)]
    skipped = tuple(one for one in made if isinstance(one, str))
    if not read:
        raise InputError("; ".join(skipped))
    _one_rate(read)
    write_pulses(out, joined([extraction.pulses for _, extraction in read]))
    return Extracted(out, tuple(name for name, _ in read), tuple(extraction for _, extraction in read), skipped)


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


def _once(made: Sequence[tuple[str, Extraction] | str]) -> list[tuple[str, Extraction] | str]:
    """The same without captures whose samples came before: a pulse has one name and stands there once."""
    holders: dict[str, str] = {}
    kept: list[tuple[str, Extraction] | str] = []
    for one in made:
        if isinstance(one, str) or not len(one[1].pulses.table):
            kept.append(one)
            continue
        digest = str(one[1].pulses.table["capture_digest"].iloc[0])
        former = holders.get(digest)
        holders.setdefault(digest, one[0])
        kept.append(
            one if former is None else f"{one[0]}: holds the same samples as {former}; give each recording once"
        )
    return kept


def _one_rate(read: Sequence[tuple[str, Extraction]]) -> None:
    rates = {extraction.pulses.rate_hz: name for name, extraction in read}
    if len(rates) > 1:
        (first, one), (second, other) = list(rates.items())[:2]
        raise InputError(
            f"{other}: rate: expected {first / 1e6:g} MS/s as in {one}, found {second / 1e6:g} MS/s; "
            "extract captures of each rate into a table of their own"
        )


def _pulses_of(path: Path, fill: FillIns, settings: ExtractSettings) -> tuple[str, Extraction] | str:
    """Name and pulses of a capture, or why it could not be read."""
    try:
        capture = open_capture(path, fill)
        return capture.name, extract(capture, settings)
    except InputError as error:
        return str(error)
