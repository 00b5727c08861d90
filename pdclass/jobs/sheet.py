"""`pdclass extract --sheet`: numbered pictures of pulses, and the label file to fill in."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from pdclass.capture import labels_text
from pdclass.errors import InputError
from pdclass.jobs.simulate import fresh_folder
from pdclass.jobs.talk import SILENT, Talk
from pdclass.pulses import PulseSet
from pdclass.writing import write_text

PAGE, LABELS = "pulses.html", "labels.csv"
#: So many pulses are shown unless another number is asked for, and never more than the second.
MOST_SHOWN, MOST_ASKED = 200, 2000


@dataclass(frozen=True)
class Sheet:
    """Where a sheet is, and how many of the pulses it shows."""

    page: Path
    labels: Path
    shown: int
    found: int


def check_sheet_place(out: Path, *, force: bool) -> None:
    """Refuse a folder that holds anything, unless told otherwise, or a label file, whatever one is told.

    Raises
    ------
    InputError
        If the folder cannot be used.
    """
    if (out / LABELS).exists():
        raise InputError(
            f"{out / LABELS}: somebody may have filled it in, it is never replaced; choose another --sheet"
        )
    fresh_folder(out, force=force)


def write_sheet(
    pulses: PulseSet, out: Path, references: Mapping[str, str | None], *, most: int = MOST_SHOWN, talk: Talk = SILENT
) -> Sheet:
    """Write `pulses.html` and `labels.csv` on at most `most` pulses into a folder that has been checked.

    Parameters
    ----------
    pulses : the pulses found.
    out : an existing folder.
    references : phase reference of each capture by its digest, None = not stated.
    most : pulses to show.
    """
    # drawing is loaded only where something is drawn
    from pdclass.report.sheet import sheet_entry, sheet_page, sheet_rows  # noqa: PLC0415
    from pdclass.report.sheet_choice import chosen_pulses  # noqa: PLC0415

    chosen = chosen_pulses(pulses, most)
    digests = pulses.table["capture_digest"].tolist()
    entries = [
        sheet_entry(pulses, one, number, references.get(str(digests[one.place])))
        for number, one in enumerate(talk.track(chosen, "pulses drawn", len(chosen)), start=1)
    ]
    found = int(pulses.table["echo_of"].isna().sum())
    write_text(out / PAGE, sheet_page(entries, found=found, most=most))
    write_text(out / LABELS, labels_text(sheet_rows(pulses, chosen)))
    return Sheet(out / PAGE, out / LABELS, len(chosen), found)
