"""Annotations of a capture carried to its pulses."""

from __future__ import annotations

from typing import Any

import numpy as np

from pdclass.pulses import Annotation, Capture, IntArray

LABEL_REACH_S = 0.5e-6
_COLUMNS = ("label", "basis", "labelled_by", "family", "distance_m", "charge_pc")


def carried_labels(capture: Capture, onsets: IntArray, echoes: set[int]) -> tuple[dict[str, list[Any]], list[str]]:
    """Annotations carried to the pulse nearest within 0.5 us, the nearest one first; echoes get none.

    Parameters
    ----------
    capture : with its annotations.
    onsets : of its events, in order.
    echoes : rows of `onsets` that are echoes.

    Returns
    -------
    columns of the table; notes: two labels that disagree give none, what finds no pulse is counted.
    """
    given = [note for note in capture.annotations if note.label is not None]
    if not given:
        return {}, _foreign(capture)
    rows = np.array([row for row in range(len(onsets)) if row not in echoes], np.int64)
    nearest, apart = _nearest(onsets[rows], np.array([note.onset_sample for note in given], np.int64))
    reach = LABEL_REACH_S * capture.chain.rate_hz
    said: dict[int, Annotation | None] = {}
    notes = []
    for k in np.argsort(apart, kind="stable")[: np.count_nonzero(apart <= reach)].tolist():
        row = int(rows[nearest[k]])
        former = said.setdefault(row, given[k])
        if former is not None and former.label != given[k].label:
            where = f"{capture.name}: sample {onsets[row]}"
            notes.append(f"{where}: two labels for one pulse; it is left unlabelled")
            said[row] = None
    lost = [note for note, distance in zip(given, apart, strict=True) if distance > reach]
    notes += [_lost(capture, lost, len(given))] if lost else []
    notes += _foreign(capture)
    return _columns([said.get(row) for row in range(len(onsets))]), notes


def _nearest(onsets: IntArray, wanted: IntArray) -> tuple[IntArray, Any]:
    """Place of the onset nearest to each wanted sample (the earlier of two), and how far it is."""
    if not len(onsets):
        return np.zeros(len(wanted), np.int64), np.full(len(wanted), np.inf)
    after = np.clip(np.searchsorted(onsets, wanted), 0, len(onsets) - 1)
    before = np.maximum(after - 1, 0)
    earlier = np.abs(onsets[before] - wanted) <= np.abs(onsets[after] - wanted)
    nearest = np.where(earlier, before, after)
    return nearest, np.abs(onsets[nearest] - wanted).astype(np.float64)


def _lost(capture: Capture, lost: list[Annotation], given: int) -> str:
    first = min(note.onset_sample for note in lost)
    return f"{capture.name}: {len(lost)} of {given} labels found no pulse within 0.5 us, the first at sample {first}"


def _foreign(capture: Capture) -> list[str]:
    foreign = sum((note.comment or "").startswith("label: ") for note in capture.annotations)
    said = f"{capture.name}: {foreign} annotations carry labels that pdclass does not know; they are not used"
    return [said] if foreign else []


def _columns(chosen: list[Annotation | None]) -> dict[str, list[Any]]:
    return {name: [getattr(note, name) if note else None for note in chosen] for name in _COLUMNS}
