"""Somebody else's pulses, one a row, into pulse sets: CSV, NPZ, HDF5 or Parquet, read as a map says."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass.capture.containers import ROW_LIMIT, Columns, columns_of, numbers_of
from pdclass.capture.fields import Fields, chain_of, is_name, shown
from pdclass.capture.maps import CHOICES, RATE_SLACK, TEXTS, TIME_UNITS, WAVE_UNITS, Map, nearest
from pdclass.capture.waves import WAVE_LIMIT_V, check_waves, peak_v, pretrigger_noise_v, signal_to_noise_db
from pdclass.digest import loose_pulse_id
from pdclass.errors import InputError, complaint
from pdclass.pulses import LABELS, Chain, FloatArray, PulseSet, WaveArray, onset_in_window, typed_table, window_samples

SAMPLE_LIMIT = 1_000_000


@dataclass(frozen=True)
class Rows:
    """The pulses of one file before their windows are cut.

    Attributes
    ----------
    where : the file, for messages.
    waves : (rows, samples) float32 [V]; NaN where a row has no sample.
    chain : the same for all rows.
    onsets : (rows,) place of the onset in each row, or None where it has to be found.
    columns : one value a row, by the names of the pulse table.
    own_classes : as in `PulseSet`.
    """

    where: str
    waves: WaveArray
    chain: Chain
    onsets: NDArray[np.int64] | None
    columns: Columns = field(default_factory=dict)
    own_classes: Mapping[str, str] = field(default_factory=dict)


def read_rows(path: Path, given: Map) -> Rows:
    """The pulses of a file of rows, in volts, as the map says.

    Raises
    ------
    InputError
        If the map is one of traces, the file is of no kind that is read, is damaged or too large, lacks a column, or
        if a value is out of bounds, a label not listed, the rate contradicted by the time axis, or a wave above 1 kV.
    MissingPartError
        If it is HDF5 and the extra is not installed.
    """
    where = str(path)
    if given.kind != "pulse-per-row":
        found, advice = f"'{given.kind}'", "give a trace to `extract` or `score` with the map"
        raise InputError(complaint(where, "kind of the map", expected="'pulse-per-row'", found=found, advice=advice))
    columns = columns_of(path, given)
    waves = _block(where, "wave", columns.pop("wave"))
    time = columns.pop("time", None)
    _check_lengths(where, len(waves), columns)
    chain = _chain(where, given, columns.pop("rate_hz", None), time)
    waves = _in_volts(where, waves, given)
    onsets = _onsets(where, given, columns, chain.rate_hz, waves.shape)
    columns = _fixed(given, len(waves)) | columns
    columns["label"] = _labels(where, given, columns.get("label"), len(waves))
    _check_values(where, columns)
    return Rows(where, waves, chain, onsets, columns, given.own_classes())


def pulses_of(rows: Rows, onsets: NDArray[np.int64]) -> tuple[PulseSet, list[str]]:
    """Pulses with windows of 20 us cut around the onsets of rows, and notes of one line each.

    A shorter row is NaN at the ends of its window, a longer one is cut. A row that stands twice (wave, circuit and
    session the same) is kept once, without a label if its labels disagree.

    Raises
    ------
    InputError
        If an onset lies outside of its row, or a window could not be one of a pulse.
    """
    samples = window_samples(rows.chain.rate_hz)
    waves = _windows(rows, onsets, samples)
    check_waves(rows.where, waves)
    noise, peak = pretrigger_noise_v(waves), peak_v(waves)
    derived = {"noise_v": noise, "peak_v": peak, "snr_db": signal_to_noise_db(peak, noise)}
    circuits, sessions = rows.columns["circuit"], rows.columns["session"]
    ids = [loose_pulse_id(*row) for row in zip(waves, circuits, sessions, strict=True)]
    kept, labels, notes = _once(rows, ids)
    columns = {name: column[kept] for name, column in {**rows.columns, **derived}.items()} | {"label": labels}
    columns["capture"] = np.full(len(kept), Path(rows.where).stem, object)
    table = typed_table(pd.DataFrame(columns), [ids[place] for place in kept])
    return PulseSet(waves[kept], (rows.chain,), table, rows.own_classes), notes


def _block(where: str, name: str, values: NDArray[Any]) -> NDArray[Any]:
    if values.ndim != 2 or not len(values) or not 4 <= values.shape[1] <= SAMPLE_LIMIT or len(values) > ROW_LIMIT:
        expected = f"1 to {ROW_LIMIT} rows of 4 to {SAMPLE_LIMIT} samples"
        found = f"an array of shape {values.shape}"
        raise InputError(complaint(where, name, expected=expected, found=found, advice="write one pulse a row"))
    if values.dtype.kind not in "iuf":
        found = f"type {values.dtype}"
        raise InputError(complaint(where, name, expected="numbers", found=found, advice="write samples as numbers"))
    return values


def _check_lengths(where: str, rows: int, columns: Columns) -> None:
    for name, column in columns.items():
        if len(column) == 1 and rows > 1:
            columns[name] = np.repeat(column, rows)
        elif len(column) != rows:
            expected = f"{rows} values, one a pulse, or one for all"
            advice = "write one value for each row of the waves"
            raise InputError(complaint(where, name, expected=expected, found=f"{len(column)} values", advice=advice))


def _chain(where: str, given: Map, rates: NDArray[Any] | None, time: NDArray[Any] | None) -> Chain:
    stated = given.fixed.rate_hz
    for field_name, found in (("rate_hz", _one_rate(where, rates)), ("time", time_rate_hz(where, given, time))):
        if found is None:
            continue
        if stated is not None and abs(found / stated - 1) > RATE_SLACK:
            advice = "correct fixed.rate_hz or units.time in the map"
            expected = f"{stated:g} samples a second as stated, within 0.1 %"
            raise InputError(complaint(where, field_name, expected=expected, found=f"{found:.6g}", advice=advice))
        stated = found if stated is None else stated
    if stated is None or not 0 < stated <= 1e12:
        raise InputError(complaint(where, "rate_hz", expected="a rate", found=shown(stated), advice="state it"))
    return map_chain(where, given, stated)


def map_chain(where: str, given: Map, rate_hz: float) -> Chain:
    """The chain that a map states, at a rate [Hz]; errors as of `chain_of`."""
    content = given.fixed.model_dump()
    content["band_hz"] = None if content["band_hz"] is None else list(content["band_hz"])
    return chain_of(Fields(where, content, "fixed."), "", rate_hz)


def _one_rate(where: str, rates: NDArray[Any] | None) -> float | None:
    if rates is None:
        return None
    found = np.unique(rates[~np.isnan(rates)])
    if len(found) != 1 or not found[0] > 0:
        words = " and ".join(f"{rate:g}" for rate in found[:4]) or "none"
        advice = "write one file for each rate"
        raise InputError(complaint(where, "rate_hz", expected="one rate a file", found=words, advice=advice))
    return float(found[0])


def time_rate_hz(where: str, given: Map, time: NDArray[Any] | None) -> float | None:
    """Samples a second by a time axis of one or many rows [Hz]; None without one.

    Raises
    ------
    InputError
        If the axis does not rise evenly (no step further than a tenth of one from the mean), or rows differ.
    """
    if time is None:
        return None
    rows = np.atleast_2d(numbers_of(where, "time", time)) * TIME_UNITS[given.units.time or "s"]
    if rows.shape[1] < 2 or not np.isfinite(rows).all():
        advice = "correct the time column, or leave it out and state fixed.rate_hz"
        raise InputError(complaint(where, "time", expected="a time for each sample", found="gaps", advice=advice))
    steps = (rows[:, -1] - rows[:, 0]) / (rows.shape[1] - 1)
    step = float(np.median(steps))
    if not step > 0 or np.abs(steps / step - 1).max() > RATE_SLACK or _has_gap(rows, step):
        apart = np.diff(rows, axis=1)
        advice = "cut the record where a stretch is missing, and check units.time"
        found = f"steps of {apart.min():.3g} to {apart.max():.3g} s"
        raise InputError(complaint(where, "time", expected="times that rise evenly", found=found, advice=advice))
    return 1.0 / step


def _has_gap(rows: FloatArray, step: float) -> bool:
    """Whether times leave out or repeat samples.

    Times that are printed with few digits stand still and jump: there a gap shows only where it is wider than a jump.
    """
    apart = np.diff(rows, axis=1)
    if (apart < 0).any():
        return True
    jump = float(np.quantile(apart[apart > 0], 0.99, method="lower"))
    if jump <= 1.2 * step:
        return bool((np.abs(apart - step) > 0.5 * step).any())
    ideal = rows[:, :1] + step * np.arange(rows.shape[1])
    return bool(np.abs(rows - ideal).max() > jump)


def _in_volts(where: str, waves: NDArray[Any], given: Map) -> WaveArray:
    scale = WAVE_UNITS[given.units.wave] or given.fixed.volts_per_count or 1.0
    with np.errstate(over="ignore"):
        volts = (waves * scale).astype(np.float32)
    high = np.abs(np.where(np.isnan(volts), np.float32(0), volts)).max(axis=1)
    if (high > WAVE_LIMIT_V).any():
        row = int(np.argmax(high > WAVE_LIMIT_V))
        advice = "correct units.wave in the map"
        found = f"{high[row]:g} V"
        raise InputError(complaint(where, f"wave, row {row}", expected="at most 1 kV", found=found, advice=advice))
    return volts


def _onsets(
    where: str, given: Map, columns: Columns, rate_hz: float, shape: tuple[int, ...]
) -> NDArray[np.int64] | None:
    """Places of the onsets in the rows, or None where the map does not say them."""
    rows, samples = shape
    stated = {
        name: columns.pop(name, None if fixed is None else np.full(rows, float(fixed)))
        for name, fixed in (("onset_sample", given.fixed.onset_sample), ("onset_ns", given.fixed.onset_ns))
    }
    places = stated["onset_sample"]
    if stated["onset_ns"] is not None:
        places = np.rint(stated["onset_ns"] * 1e-9 * rate_hz)
    if places is None:
        return None
    wrong = ~((places >= 0) & (places < samples) & (places == np.rint(places)))
    if wrong.any():
        row = int(np.argmax(wrong))
        expected = f"a place from 0 to {samples - 1} in the row, counted from its first sample"
        advice = "correct it; leave the column out to have onsets found"
        raise InputError(complaint(where, f"onset, row {row}", expected=expected, found=places[row], advice=advice))
    return places.astype(np.int64)


def _fixed(given: Map, rows: int) -> Columns:
    """The map's fixed words as columns."""
    words = {name: getattr(given.fixed, name) for name in (*TEXTS, "phase_deg")}
    return {
        name: np.full(rows, word, np.float64 if name == "phase_deg" else object)
        for name, word in words.items()
        if word is not None
    }


def _labels(where: str, given: Map, words: NDArray[Any] | None, rows: int) -> NDArray[Any]:
    labels = np.full(rows, None, object)
    for row, word in enumerate([] if words is None else words):
        try:
            labels[row] = given.label_of(word)
        except KeyError:
            known = list(given.labels) or [*LABELS, *given.classes]
            expected = "one of " + ", ".join(repr(name) for name in known[:12])
            advice = f'list it under [labels] in the map ("" = unlabelled){nearest(str(word), known)}'
            found = shown(word)
            raise InputError(
                complaint(where, f"label, row {row}", expected=expected, found=found, advice=advice)
            ) from None
    return labels


def _check_values(where: str, columns: Columns) -> None:
    for name in (name for name in TEXTS if name in columns and name != "label"):
        choices = CHOICES.get(name)
        for row, word in enumerate(columns[name]):
            if word is None and name not in ("circuit", "session"):
                continue
            if word is None or not is_name(word) or (choices is not None and word not in choices):
                expected = "one line of text" if choices is None else "one of " + ", ".join(choices)
                advice = "correct it"
                found = "nothing" if word is None else shown(word)
                raise InputError(complaint(where, f"{name}, row {row}", expected=expected, found=found, advice=advice))
    phase = columns.get("phase_deg", np.zeros(0))
    if ((phase < 0) | (phase > 360)).any():
        row = int(np.argmax((phase < 0) | (phase > 360)))
        found, advice = f"{phase[row]:g}", "write degrees, or leave it empty"
        raise InputError(complaint(where, f"phase_deg, row {row}", expected="0 to 360", found=found, advice=advice))
    if "phase_deg" in columns:
        columns["phase_deg"] = np.where(phase == 360.0, 0.0, phase)


def _windows(rows: Rows, onsets: NDArray[np.int64], samples: int) -> WaveArray:
    lead = onset_in_window(samples)
    held = rows.waves.shape[1]
    waves = np.full((len(rows.waves), samples), np.nan, np.float32)
    for row, onset in enumerate(onsets):
        begin, end = max(0, onset - lead), min(held, onset - lead + samples)
        waves[row, begin - onset + lead : end - onset + lead] = rows.waves[row, begin:end]
    return waves


def _once(rows: Rows, ids: Sequence[str]) -> tuple[NDArray[np.int64], NDArray[Any], list[str]]:
    """Places of the rows to keep, the label of each, and what is said of the others."""
    first: dict[str, int] = {}
    labels = rows.columns["label"].copy()
    doubles, quarrels = 0, set[int]()
    for row, name in enumerate(ids):
        former = first.setdefault(name, row)
        if former == row:
            continue
        doubles += 1
        mine, other = rows.columns["label"][row], labels[former]
        if mine is not None and other is not None and mine != other:
            quarrels.add(former)
        labels[former] = other if mine is None else mine
    labels[sorted(quarrels)] = None
    kept = np.array(sorted(first.values()), np.int64)
    notes = [f"{rows.where}: {doubles} rows hold a pulse that stands there already; kept once"] if doubles else []
    if quarrels:
        notes.append(f"{rows.where}: {len(quarrels)} pulses have two labels there; they are left unlabelled")
    return kept, labels[kept], notes
