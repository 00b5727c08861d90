"""Label files: what people say about pulses, read with care and joined to pulses by name, else by place."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass.capture.delimited import read_columns, read_header
from pdclass.capture.fields import is_name, shown
from pdclass.capture.maps import nearest
from pdclass.digest import array_digest
from pdclass.errors import InputError, complaint
from pdclass.pulses import BASES, LABELS, FloatArray, PulseSet, with_texts

#: Columns of a label file, in order.
LABEL_COLUMNS = (*("pulse_id", "capture_digest", "sensor", "onset_sample", "label", "basis", "labelled_by", "comment"),)
REACH_S = 0.5e-6
ROW_LIMIT = 5_000_000
#: So many of a kind are listed one by one.
MOST_LISTED = 5
_FORMULA = ("=", "+", "-", "@", "\t")
_DIGEST = re.compile(r"[0-9a-f]{64}")
_COMMENT_LIMIT = 2000


@dataclass(frozen=True)
class LabelFile:
    """The rows of a label file that name a pulse, checked.

    Attributes
    ----------
    where : the file, for messages.
    rows : (rows,) objects for each of `LABEL_COLUMNS`, None where nothing stands; `onset_sample` float64, NaN likewise.
    notes : what should be said of the file, a line each.
    """

    where: str
    rows: Mapping[str, NDArray[Any]]
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class Joined:
    """Pulse sets with the labels of a file.

    Attributes
    ----------
    sets : the same pulses.
    notes : what became of the labels, a line each.
    lost : rows of the file (counted from 0) that found no pulse.
    conflicting : names of pulses for which the file has two labels; they are left unlabelled.
    """

    sets: tuple[PulseSet, ...]
    notes: tuple[str, ...]
    lost: tuple[int, ...] = ()
    conflicting: tuple[str, ...] = ()


def read_labels(path: Path, own_classes: Iterable[str] = ()) -> LabelFile:
    """A label file: CSV with the columns of `LABEL_COLUMNS`; needed are `label` and a name or a place of the pulse.

    Raises
    ------
    InputError
        If it cannot be read, lacks a column, or a label, basis, digest or onset is none; the line is named.
    """
    where = str(path)
    opened = read_header(path)
    known = [name for name in LABEL_COLUMNS if name in opened.names]
    opened.place("label", of="header")
    if "pulse_id" not in known and not {"capture_digest", "onset_sample"} <= set(known):
        advice = "write pulse_id, or capture_digest and onset_sample"
        raise opened.wrong("header", "columns that name the pulse", ", ".join(opened.names)[:100], advice)
    numbers = [name for name in known if name == "onset_sample"]
    columns = {
        name: column if name in numbers else _unquoted(column)
        for name, column in read_columns(opened, numbers, [name for name in known if name not in numbers]).items()
    }
    count = len(columns["label"])
    if count > ROW_LIMIT:
        raise opened.wrong("rows", f"at most {ROW_LIMIT}", count, "split the file")
    nothing = {name: np.full(count, np.nan if name == "onset_sample" else None) for name in LABEL_COLUMNS}
    rows = {**nothing, **columns}
    _check_rows(where, rows, (*LABELS, *own_classes))
    strange = [name for name in opened.names if name not in LABEL_COLUMNS]
    notes = [f"{where}: columns not known and left out: {', '.join(strange)[:200]}"] if strange else []
    return LabelFile(where, rows, tuple(notes))


def labels_text(rows: pd.DataFrame) -> str:
    """A label file's text; cells that a spreadsheet would take for a formula are quoted with an apostrophe."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(LABEL_COLUMNS)
    for row in rows.reindex(columns=list(LABEL_COLUMNS)).itertuples(index=False):
        writer.writerow(["" if pd.isna(cell) else _safe(cell) for cell in row])
    return text.getvalue()


def join_labels(sets: Sequence[PulseSet], labels: LabelFile) -> Joined:
    """Pulse sets labelled by a file: by `pulse_id`, else by the nearest onset of that capture within 0.5 us.

    What the file says of a pulse replaces what the table said, an empty label too. A pulse for which it has two
    labels is left unlabelled; of two equal ones the one of the stronger basis counts.
    """
    table = pd.concat([pulses.table for pulses in sets])
    rates = np.concatenate([np.full(len(pulses.table), pulses.rate_hz) for pulses in sets])
    places, lost = _places(labels, table, rates)
    said, conflicting = _said(labels, places)
    label, basis, by = (table[name].astype("object").to_numpy(copy=True) for name in ("label", "basis", "labelled_by"))
    former = label.copy()
    for place, row in said.items():
        label[place], basis[place], by[place] = row
    replaced = [place for place in said if isinstance(former[place], str) and former[place] != label[place]]
    labelled, first = [], 0
    for pulses in sets:
        span = slice(first, first + len(pulses.table))
        fresh = with_texts(pulses.table, label=label[span], basis=basis[span], labelled_by=by[span])
        labelled.append(replace(pulses, table=fresh))
        first = span.stop
    echoes = [
        str(table.index[place])
        for place in said
        if isinstance(label[place], str) and isinstance(table["echo_of"].iloc[place], str)
    ]
    wrong = tuple(str(table.index[place]) for place in conflicting)
    notes = [
        *labels.notes,
        f"{labels.where}: {len(places)} of {len(labels.rows['label'])} rows name a pulse of the tables",
        *_listed(labels.where, "rows found no pulse (no such name, no onset within 0.5 us)", _lost_words(labels, lost)),
        *_listed(labels.where, "pulses have two labels in it and are left unlabelled", wrong),
        *_listed(labels.where, "labels of the tables replaced", [str(table.index[place]) for place in replaced]),
        *_listed(labels.where, "labelled pulses are echoes, which neither teach nor test", echoes),
    ]
    return Joined(tuple(labelled), tuple(notes), tuple(lost), wrong)


def double_notes(sets: Sequence[PulseSet]) -> list[str]:
    """What is said of labelled pulses whose wave stands under another name too, and of those with another label."""
    first: dict[str, tuple[str, Any]] = {}
    doubles: list[str] = []
    contrary: list[str] = []
    for pulses in sets:
        labels = pulses.table["label"].to_numpy()
        for place in np.flatnonzero(pulses.table["label"].notna().to_numpy()).tolist():
            name = str(pulses.table.index[place])
            former, label = first.setdefault(array_digest(pulses.waves[place]), (name, labels[place]))
            if former != name:
                doubles.append(name)
                contrary += [name] if label != labels[place] else []
    return [
        *_listed("labels", "labelled pulses hold a wave that stands under another name too", doubles),
        *_listed("labels", "of these have another label there, one of the two is wrong", contrary),
    ]


def _check_rows(where: str, rows: Mapping[str, NDArray[Any]], classes: Sequence[str]) -> None:
    onset = rows["onset_sample"]
    rules: list[tuple[str, Any, str]] = [
        ("label", lambda word: word in classes, "one of " + ", ".join(classes)),
        ("basis", lambda word: word in BASES, "one of " + ", ".join(BASES)),
        ("capture_digest", lambda word: _DIGEST.fullmatch(word) is not None, "64 hex digits"),
        ("pulse_id", is_name, "the name of a pulse"),
        ("sensor", is_name, "one line of text"),
        ("labelled_by", is_name, "one line of text"),
        ("comment", lambda word: len(word) <= _COMMENT_LIMIT, f"at most {_COMMENT_LIMIT} characters"),
    ]
    for name, fits, expected in rules:
        for row, word in enumerate(rows[name]):
            if word is not None and not fits(word):
                near = nearest(word, classes) if name == "label" else ""
                advice = "correct it, or leave it empty"
                raise InputError(
                    complaint(where, f"{name}, row {row}", expected=expected, found=shown(word), advice=advice + near)
                )
    wrong = ~np.isnan(onset) & ((onset < 0) | (onset != np.rint(onset)) | (onset > 2**53))
    if wrong.any():
        row = int(np.argmax(wrong))
        expected, advice = "a whole number from 0", "correct it, or leave it empty"
        raise InputError(
            complaint(where, f"onset_sample, row {row}", expected=expected, found=onset[row], advice=advice)
        )


def _places(labels: LabelFile, table: pd.DataFrame, rates: FloatArray) -> tuple[dict[int, int], list[int]]:
    """Place of the pulse that each row names, and the rows that name none."""
    by_name = {str(name): place for place, name in enumerate(table.index)}
    captures = _by_capture(table)
    found, lost = {}, []
    digests, sensors, onsets = (labels.rows[name] for name in ("capture_digest", "sensor", "onset_sample"))
    for row, (name, label) in enumerate(zip(labels.rows["pulse_id"], labels.rows["label"], strict=True)):
        place = by_name.get(str(name))
        if place is None:
            place = _nearest_onset((digests[row], sensors[row]), float(onsets[row]), captures, rates)
        if place is not None:
            found[row] = place
        elif label is not None:
            lost.append(row)
    return found, lost


def _by_capture(table: pd.DataFrame) -> dict[tuple[str, str | None], tuple[Any, Any]]:
    """Onsets in rising order and their places, of every capture and sensor, and of every capture with any sensor."""
    onsets = table["onset_sample"].to_numpy(np.int64)
    members: dict[tuple[str, str | None], list[int]] = {}
    for place, (digest, sensor) in enumerate(zip(table["capture_digest"], table["sensor"], strict=True)):
        if isinstance(digest, str):
            members.setdefault((digest, None), []).append(place)
            if isinstance(sensor, str):
                members.setdefault((digest, sensor), []).append(place)
    order = {key: np.array(sorted(places, key=lambda p: onsets[p])) for key, places in members.items()}
    return {key: (onsets[places], places) for key, places in order.items()}


def _nearest_onset(
    key: tuple[Any, Any], onset: float, captures: Mapping[tuple[str, str | None], tuple[Any, Any]], rates: FloatArray
) -> int | None:
    if key not in captures or np.isnan(onset):
        return None
    onsets, places = captures[key]
    after = int(np.searchsorted(onsets, onset))
    near = [at for at in (after - 1, after) if 0 <= at < len(onsets)]
    best = min(near, key=lambda at: abs(onsets[at] - onset))
    place = int(places[best])
    return place if abs(float(onsets[best]) - onset) <= REACH_S * rates[place] else None


def _said(labels: LabelFile, places: Mapping[int, int]) -> tuple[dict[int, tuple[Any, Any, Any]], list[int]]:
    """Label, basis and labeller of each pulse that the file names, and those with two labels."""
    said: dict[int, tuple[Any, Any, Any]] = {}
    conflicting: list[int] = []
    for row, place in places.items():
        label, basis, by = (labels.rows[name][row] for name in ("label", "basis", "labelled_by"))
        mine = (label, basis, by) if label is not None else (None, None, None)
        former = said.get(place)
        if former is None or former[0] is None:
            said[place] = mine
        elif label is not None and label != former[0]:
            conflicting.append(place)
        elif label is not None and _strength(basis) < _strength(former[1]):
            said[place] = mine
    conflicting = sorted(set(conflicting))
    return said | dict.fromkeys(conflicting, (None, None, None)), conflicting


def _strength(basis: Any) -> int:
    return BASES.index(basis) if basis in BASES else len(BASES)


def _lost_words(labels: LabelFile, lost: Sequence[int]) -> list[str]:
    names = labels.rows["pulse_id"]
    return [f"row {row}" + (f" ({names[row]})" if names[row] is not None else "") for row in lost]


def _listed(where: str, words: str, items: Sequence[str]) -> list[str]:
    if not items:
        return []
    more = f" and {len(items) - MOST_LISTED} more" if len(items) > MOST_LISTED else ""
    return [f"{where}: {len(items)} {words}: {', '.join(items[:MOST_LISTED])}{more}"]


def _unquoted(words: NDArray[Any]) -> NDArray[Any]:
    """Words without the apostrophe that `_safe` has put before them."""
    plain = np.empty(len(words), object)
    plain[:] = [w[1:] if w is not None and w.startswith("'") and w[1:].startswith(_FORMULA) else w for w in words]
    return plain


def _safe(cell: Any) -> str:
    text = f"{cell:.0f}" if isinstance(cell, float) else str(cell)
    return f"'{text}" if text.startswith(_FORMULA) else text
