"""The whole way from a capture to its pulses: background, events, echoes, windows, table."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass import digest
from pdclass.errors import InputError
from pdclass.extract import bank
from pdclass.extract.background import (
    Background,
    ExtractSettings,
    detection_limit_counts,
    flagged_runs,
    measure_background,
    scanned,
)
from pdclass.extract.echoes import SHAPE_S, Event, find_echoes
from pdclass.extract.events import ATTACK_S, event_end, event_starts, mad_noise
from pdclass.pulses import (
    ONSET_SHARE,
    Annotation,
    Capture,
    FloatArray,
    IntArray,
    PulseSet,
    WaveArray,
    global_index,
    onset_in_window,
    phase_deg,
    typed_table,
    window_samples,
)

#: A wide box flags up to half its width before and after its cause; what lies nearer is one cluster.
JOIN_S = 1.3e-6
MARGIN_S = 4e-6
LONGEST_CLUSTER_S = 400e-6
BLOCK_SAMPLES = 1 << 16
NOISE_REACH_S = 1e-3
NOISE_STRIDE = 31
LABEL_REACH_S = 0.5e-6
LARGEST_V = 1000.0
_GOLDEN = 0.6180339887498949


@dataclass(frozen=True)
class Extraction:
    """The pulses of one capture, echoes among them, and how they were found.

    Attributes
    ----------
    pulses : every event, echoes marked by `echo_of`.
    found, echoes : events in all, and those that are echoes.
    detection_limit_v : peak of the smallest Gaussian pulse of 50 ns that would be found [V].
    duration_s : recorded time [s].
    notes : what should be said about the capture, a line each.
    """

    pulses: PulseSet
    found: int
    echoes: int
    detection_limit_v: float
    duration_s: float
    notes: tuple[str, ...]


def extract(
    capture: Capture, settings: ExtractSettings | None = None, *, block_samples: int = BLOCK_SAMPLES
) -> Extraction:
    """Find the pulses of a capture.

    The record is whitened by a prediction-error filter fitted to its median spectrum, a bank of box sums is
    held against the threshold of a stated false-event rate, events are parted and their onsets refined, echoes
    are told from pulses, and windows are cut from the raw record.

    Parameters
    ----------
    capture : needs `volts_per_count`.
    settings : how pulses are found.
    block_samples : samples a block of the pass over the record; does not change the result.

    Raises
    ------
    InputError
        If the size of a count is unknown or the record is shorter than two windows.
    """
    settings = settings or ExtractSettings()
    if capture.chain.volts_per_count is None:
        raise InputError(f"{capture.name}: volts_per_count: unknown; state it with --volts-per-count")
    background = measure_background(capture, settings)
    events: list[tuple[int, int]] = []
    echo_of: dict[int, int] = {}
    maybe_of: dict[int, int] = {}
    for bounds in capture.segment_bounds():
        waves = _segment_events(capture, background, bounds, block_samples)
        echoes, maybes = find_echoes(waves, capture.chain.rate_hz, settings.longest_echo_us * 1e-6)
        echo_of |= {child + len(events): parent + len(events) for child, parent in echoes.items()}
        maybe_of |= {child + len(events): parent + len(events) for child, parent in maybes.items()}
        events += [(event.onset, event.end) for event in waves]
    places = np.array(events, np.int64).reshape(-1, 2)
    pulses, notes = _pulse_set(capture, places, echo_of, maybe_of)
    limit = detection_limit_counts(background, capture.chain.rate_hz) * capture.chain.volts_per_count
    return Extraction(pulses, len(places), len(echo_of), limit, capture.duration_s, tuple(notes))


def _segment_events(
    capture: Capture, background: Background, bounds: tuple[int, int], block_samples: int
) -> list[Event]:
    rate_hz = capture.chain.rate_hz
    runs = flagged_runs(capture.counts, background, bounds)
    events: list[Event] = []
    longest = round(LONGEST_CLUSTER_S * rate_hz)
    for first, last in bank.joined_runs(runs, round(JOIN_S * rate_hz)).tolist():
        # a long burst is looked at piece by piece, counted from its own start; a cut is no new beginning
        for begin in range(first, last, longest):
            inside = (begin, min(begin + longest, last))
            events += _cluster_events(capture, background, bounds, inside, continued=begin > first)
    return _in_order(events, max(2, round(ATTACK_S * rate_hz)))


def _cluster_events(
    capture: Capture, background: Background, bounds: tuple[int, int], inside: tuple[int, int], *, continued: bool
) -> list[Event]:
    rate_hz = capture.chain.rate_hz
    margin, window = round(MARGIN_S * rate_hz), window_samples(rate_hz)
    begin, end = max(bounds[0], inside[0] - margin), min(bounds[1], inside[1] + window)
    white, _ = scanned(capture.counts, background, bounds, begin, end)
    starts = event_starts(white, rate_hz, (inside[0] - begin, inside[1] - begin), continued=continued)
    limits = [*starts[1:], white.size]
    ends = [event_end(white, start, limit, rate_hz) for start, limit in zip(starts, limits, strict=False)]
    shape = round(SHAPE_S * rate_hz)
    return [
        Event(start + begin, stop + begin, white[start : min(stop, start + shape)].copy())
        for start, stop in zip(starts, ends, strict=True)
    ]


def _in_order(events: list[Event], apart: int) -> list[Event]:
    """Events by onset; one that a neighbouring cluster found again is dropped, an end stops at the next onset."""
    kept: list[Event] = []
    for event in sorted(events, key=lambda event: event.onset):
        if kept and event.onset < kept[-1].end:
            if event.onset - kept[-1].onset < apart:
                continue
            former = kept.pop()
            length = event.onset - former.onset
            kept.append(Event(former.onset, event.onset, former.wave[:length]))
        kept.append(event)
    return kept


def _pulse_set(
    capture: Capture, places: IntArray, echo_of: dict[int, int], maybe_of: dict[int, int]
) -> tuple[PulseSet, list[str]]:
    rate_hz = capture.chain.rate_hz
    onsets, ends = places[:, 0], places[:, 1]
    ids = [digest.pulse_id(capture.digest, capture.sensor, int(onset)) for onset in onsets]
    waves = _windows(capture, onsets)
    noise_v = _noise_beside(capture, places)
    _check_volts(capture, waves)
    peak_v = _signed_peaks(waves, ends - onsets)
    with np.errstate(divide="ignore", invalid="ignore"):
        snr_db = 20 * np.log10(np.abs(peak_v) / noise_v)
    labels, notes = _labels(capture, onsets, set(echo_of))
    onset_s = (global_index(capture, onsets) - capture.segments[0, 1]) / rate_hz
    rows: dict[str, Any] = {
        "capture": capture.name,
        "capture_digest": capture.digest,
        "circuit": capture.circuit,
        "site": capture.site,
        "sensor": capture.sensor,
        "conductor": capture.conductor,
        "session": capture.session,
        "chain": 0,
        "onset_sample": onsets,
        "onset_s": onset_s,
        "time_utc": _times(capture, onset_s),
        "phase_deg": phase_deg(capture, onsets),
        "noise_v": noise_v,
        "peak_v": peak_v,
        "snr_db": snr_db,
        "duration_us": (ends - onsets) / rate_hz * 1e6,
        "clipped": _clipped(capture, places),
        "window_mates": _window_mates(onsets, window_samples(rate_hz)),
        "echo_of": [ids[echo_of[row]] if row in echo_of else None for row in range(len(ids))],
        "maybe_echo_of": [ids[maybe_of[row]] if row in maybe_of else None for row in range(len(ids))],
        **labels,
    }
    simulated = any(note.family is not None for note in capture.annotations)
    table = typed_table(pd.DataFrame(rows, index=range(len(ids))), ids, simulated=simulated)
    return PulseSet(waves, (capture.chain,), table), notes


def _check_volts(capture: Capture, waves: WaveArray) -> None:
    """Refuse waves that no sensor gives: the size of a count must be wrong."""
    largest = float(np.nanmax(np.abs(waves))) if waves.size else 0.0
    if not largest <= LARGEST_V:
        raise InputError(
            f"{capture.name}: volts_per_count: expected waves of at most {LARGEST_V:g} V, found {largest:.3g} V; "
            "correct it in the metadata, or with --volts-per-count where the file does not state it"
        )


def _times(capture: Capture, onset_s: FloatArray) -> Any:
    if capture.start_utc is None:
        return pd.Series([pd.NaT] * len(onset_s), dtype="datetime64[ns, UTC]")
    return pd.Series(capture.start_utc + pd.to_timedelta(np.rint(onset_s * 1e9).astype(np.int64), unit="ns"))


def _windows(capture: Capture, onsets: IntArray) -> WaveArray:
    """(pulses, samples) float32 [V]; what lies beyond the pulse's segment is NaN."""
    samples = window_samples(capture.chain.rate_hz)
    waves = np.full((len(onsets), samples), np.nan, np.float32)
    lead = onset_in_window(samples)
    for row, onset in enumerate(onsets):
        first, last = _segment_of(capture, int(onset))
        begin, end = max(first, onset - lead), min(last, onset - lead + samples)
        piece = np.asarray(capture.counts[begin:end], np.float32) * np.float32(capture.chain.volts_per_count)
        waves[row, begin - onset + lead : end - onset + lead] = piece
    return waves


def _segment_of(capture: Capture, sample: int) -> tuple[int, int]:
    bounds = capture.segment_bounds()
    return bounds[int(np.searchsorted([first for first, _ in bounds], sample, side="right")) - 1]


def _noise_beside(capture: Capture, places: IntArray) -> WaveArray:
    """Noise level of the recorded samples within 1 ms of each pulse, found pulses cut out [V]."""
    reach = round(NOISE_REACH_S * capture.chain.rate_hz)
    scale = float(capture.chain.volts_per_count or 1.0)
    levels = np.empty(len(places), np.float32)
    for row, (onset, _) in enumerate(places):
        first, last = _segment_of(capture, int(onset))
        begin, end = max(first, int(onset) - reach), min(last, int(onset) + reach)
        # a fixed comb of samples, the same whatever the blocks
        comb = np.arange(-(-begin // NOISE_STRIDE) * NOISE_STRIDE, end, NOISE_STRIDE)
        inside = np.searchsorted(places[:, 0], comb, side="right") - 1
        quiet = (inside < 0) | (comb >= places[np.maximum(inside, 0), 1])
        levels[row] = scale * mad_noise(_smoothed(capture.counts, comb[quiet]))
    return levels


def _smoothed(counts: NDArray[Any], places: IntArray) -> FloatArray:
    """Samples of a record, whole numbers spread evenly over the width of a count by their place."""
    samples = np.asarray(counts[places], np.float64)
    if np.issubdtype(counts.dtype, np.integer):
        samples += np.mod(places * _GOLDEN, 1.0) - 0.5
    return samples


def _signed_peaks(waves: WaveArray, lengths: IntArray) -> WaveArray:
    """Largest excursion of each pulse's own samples from the median of its pre-trigger [V], with its sign."""
    lead = onset_in_window(waves.shape[1])
    peaks = np.empty(len(waves), np.float32)
    for row, (wave, length) in enumerate(zip(waves, lengths, strict=True)):
        before = wave[:lead][np.isfinite(wave[:lead])]
        own = wave[lead : lead + max(int(length), 1)] - (np.median(before) if before.size else 0.0)
        peaks[row] = own[np.nanargmax(np.abs(own))]
    return peaks


def _clipped(capture: Capture, places: IntArray) -> list[bool]:
    """Whether a pulse holds samples at the end of the digitiser's range (of the type's where that is unknown)."""
    if not np.issubdtype(capture.counts.dtype, np.integer):
        return [False] * len(places)
    bits = capture.chain.adc_bits or np.iinfo(capture.counts.dtype).bits
    top, bottom = (1 << (bits - 1)) - 1, -(1 << (bits - 1))
    own = [np.asarray(capture.counts[onset:end], np.int64) for onset, end in places]
    return [bool(np.any((piece >= top) | (piece <= bottom))) for piece in own]


def _window_mates(onsets: IntArray, samples: int) -> IntArray:
    """How many other events share each pulse's window."""
    lead = round(ONSET_SHARE * samples)
    first = np.searchsorted(onsets, onsets - lead, side="left")
    last = np.searchsorted(onsets, onsets - lead + samples, side="left")
    return np.asarray(last - first - 1, np.int64)


def _labels(capture: Capture, onsets: IntArray, echoes: set[int]) -> tuple[dict[str, list[Any]], list[str]]:
    """Annotations carried to the pulse nearest within 0.5 us, the nearest one first.

    Two that disagree give none; what finds no pulse is counted. Both are said in a note.
    """
    reach = LABEL_REACH_S * capture.chain.rate_hz
    given = [note for note in capture.annotations if note.label is not None]
    foreign = sum((note.comment or "").startswith("label: ") for note in capture.annotations)
    said_foreign = f"{capture.name}: {foreign} annotations carry labels that pdclass does not know; they are not used"
    rows = np.array([row for row in range(len(onsets)) if row not in echoes], np.int64)
    if not len(rows):
        notes = [_lost(capture, given, len(given))] if given else []
        notes += [said_foreign] if foreign else []
        return _label_columns([None] * len(onsets)), notes
    apart = [np.abs(onsets[rows] - note.onset_sample) for note in given]
    nearest = [int(rows[np.argmin(distance)]) for distance in apart]
    order = sorted(range(len(given)), key=lambda k: int(apart[k].min()))
    said: dict[int, Annotation | None] = {}
    notes = []
    for k in (k for k in order if apart[k].min() <= reach):
        former = said.setdefault(nearest[k], given[k])
        if former is not None and former.label != given[k].label:
            where = f"{capture.name}: sample {onsets[nearest[k]]}"
            notes.append(f"{where}: two labels for one pulse; it is left unlabelled")
            said[nearest[k]] = None
    lost = [given[k] for k in range(len(given)) if apart[k].min() > reach]
    notes += [_lost(capture, lost, len(given))] if lost else []
    notes += [said_foreign] if foreign else []
    return _label_columns([said.get(row) for row in range(len(onsets))]), notes


def _lost(capture: Capture, lost: list[Annotation], given: int) -> str:
    first = min(note.onset_sample for note in lost)
    return f"{capture.name}: {len(lost)} of {given} labels found no pulse within 0.5 us, the first at sample {first}"


def _label_columns(chosen: list[Annotation | None]) -> dict[str, list[Any]]:
    names = ("label", "basis", "labelled_by", "family", "distance_m", "charge_pc")
    return {name: [getattr(note, name) if note else None for note in chosen] for name in names}
