"""`pdclass import`: somebody else's pulses, one a row, as a pulse table of ours."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from pdclass.capture import Map, double_notes, pulses_of, read_map, read_rows, write_pulses
from pdclass.errors import InputError
from pdclass.extract.events import found_in, spans
from pdclass.extract.whiten import whitening_filter
from pdclass.jobs.extract import check_table_place
from pdclass.jobs.inventory import inventory_lines
from pdclass.jobs.simulate import joined
from pdclass.jobs.talk import SILENT, Talk
from pdclass.pulses import FloatArray, PulseSet, WaveArray, with_texts

#: Samples of one periodogram of the rows' background, and how many past ones predict the next.
PIECE_SAMPLES, ORDER = 256, 32


@dataclass(frozen=True)
class Imported:
    """The table, its pulses in words, what should be said, and which files could not be read."""

    out: Path
    pulses: int
    lines: tuple[str, ...]
    notes: tuple[str, ...]
    skipped: tuple[str, ...]


def import_pulses(
    files: Sequence[Path], map_path: Path, out: Path, *, force: bool = False, talk: Talk = SILENT
) -> Imported:
    """Read files of pulses as a map says and write them as one pulse table.

    A file that cannot be read is reported and skipped; when none can be, nothing is written. A pulse that stands in
    two files (wave, circuit and session the same) is kept once.

    Raises
    ------
    InputError
        If the map or no file is usable, files differ in rate, or the table exists and `force` is not given.
    MissingPartError
        If a file is HDF5 and the extra is not installed.
    """
    check_table_place(out, force=force)
    given = read_map(map_path)
    calls = list(dict.fromkeys(files))
    made = [_of_file(path, given) for path in talk.track(calls, "files read", len(calls))]
    read = [one for one in made if not isinstance(one, str)]
    skipped = tuple(one for one in made if isinstance(one, str))
    if not read:
        raise InputError("; ".join(skipped))
    _one_rate(calls, made)
    whole, notes = _each_once(joined([pulses for pulses, _ in read]))
    notes = [*(note for _, own in read for note in own), *notes, *double_notes([whole])]
    write_pulses(out, whole)
    lines = tuple(inventory_lines(whole.table, [whole.rate_hz]))
    return Imported(out, len(whole.table), lines, tuple(notes), skipped)


def _of_file(path: Path, given: Map) -> tuple[PulseSet, list[str]] | str:
    """The pulses of a file with notes, or why it cannot be read."""
    try:
        rows = read_rows(path, given)
        if rows.onsets is not None:
            return pulses_of(rows, rows.onsets)
        pulses, notes = pulses_of(rows, found_onsets(rows.waves, rows.chain.rate_hz))
    except InputError as error:
        return str(error)
    said = "the map does not say where the onset lies: found in each whitened row; look at some before you trust them"
    return pulses, [f"{path}: onset: {said}", *notes]


def found_onsets(waves: WaveArray, rate_hz: float) -> NDArray[np.int64]:
    """The place of the onset in each row, found as extraction finds it in a record.

    The rows are whitened by one prediction-error filter fitted to the median spectrum of all of them; the event
    looked for is the one whose energy first reaches half of the row's greatest.

    Parameters
    ----------
    waves : (rows, samples), NaN at the ends where a row has no sample.
    rate_hz : sampling rate [Hz].
    """
    taps = _whitening(waves)
    return np.array([_found_onset(row, taps, rate_hz) for row in waves], np.int64)


def _whitening(waves: WaveArray) -> FloatArray:
    samples = waves.shape[1]
    piece = min(PIECE_SAMPLES, samples)
    flat = np.ascontiguousarray(waves).reshape(-1)
    starts = (np.arange(len(waves))[:, None] * samples + np.arange(samples // piece) * piece).reshape(-1)
    whole = np.array([np.isfinite(flat[start : start + piece]).all() for start in starts])
    order = min(ORDER, piece // 4)
    if not whole.any() or order < 2:
        return np.array([1.0])
    pieces = flat[starts[whole][:, None] + np.arange(piece)]
    powers = np.abs(scipy.fft.rfft((pieces - pieces.mean(axis=1, keepdims=True)) * np.hanning(piece))) ** 2
    return whitening_filter(np.median(powers, axis=0), order).astype(np.float64)


def _found_onset(row: WaveArray, taps: FloatArray, rate_hz: float) -> int:
    known = np.flatnonzero(np.isfinite(row))
    if not len(known):
        # the windows are checked later, and say which row it is
        return 0
    first = int(known[0])
    wave = row[first : int(known[-1]) + 1].astype(np.float64)
    wave = np.nan_to_num(wave - np.nanmedian(wave))
    white = np.convolve(wave, taps)[: len(wave)]
    # the filter has no past before the first sample
    white[: len(taps) - 1] = 0.0
    noise = float(np.median(np.abs(white[len(taps) - 1 :]))) / 0.6744898 or float(np.abs(white).max()) or 1.0
    held = (white / noise).astype(np.float32)
    attack, _, reach = spans(rate_hz)
    energy = np.convolve(held.astype(np.float64) ** 2, np.ones(attack))[: held.size]
    place = int(np.argmax(energy >= 0.5 * energy.max()))
    piece = [0, max(0, place - reach), min(held.size, place + reach), held.size, 0]
    starts = found_in(held, np.array(piece, np.int64), rate_hz)[0][:, 0]
    return first + int(min(starts, key=lambda start: abs(start - place)))


def _one_rate(files: Sequence[Path], made: Sequence[tuple[PulseSet, list[str]] | str]) -> None:
    rates: dict[float, Path] = {}
    for path, one in zip(files, made, strict=True):
        if not isinstance(one, str):
            rates.setdefault(one[0].rate_hz, path)
    if len(rates) > 1:
        (first, one_file), (second, other) = list(rates.items())[:2]
        raise InputError(
            f"{other}: rate: expected {first / 1e6:g} MS/s as in {one_file}, found {second / 1e6:g} MS/s; "
            "import files of each rate into a table of their own"
        )


def _each_once(pulses: PulseSet) -> tuple[PulseSet, list[str]]:
    """The pulses of several files, each once; without a label where two files have two."""
    table = pulses.table
    again = table.index.duplicated()
    if not again.any():
        return pulses, []
    labels = table["label"].groupby(table.index).nunique()
    contrary = table.index.isin(labels[labels > 1].index)
    first = table["label"].groupby(table.index).transform("first")
    fresh = with_texts(table, label=[None if bad else word for bad, word in zip(contrary, first, strict=True)])
    notes = [f"{int(again.sum())} pulses stand in two files; kept once"]
    notes += [f"{int((labels > 1).sum())} of them with two labels; left unlabelled"] if contrary.any() else []
    kept = PulseSet(pulses.waves, pulses.chains, fresh, pulses.own_classes)
    return kept.take(~again), notes
