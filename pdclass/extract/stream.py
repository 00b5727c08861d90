"""The whole way from a capture to its pulses: background, events, echoes, windows, table."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from pdclass import digest
from pdclass.errors import InputError
from pdclass.extract import cut
from pdclass.extract.background import ExtractSettings, detection_limit_counts, measure_background
from pdclass.extract.echoes import find_echoes
from pdclass.extract.labels import carried_labels
from pdclass.extract.noise import noise_beside
from pdclass.extract.walk import BLOCK_SAMPLES, Events, segment_events
from pdclass.pulses import (
    Capture,
    FloatArray,
    PulseSet,
    WaveArray,
    global_index,
    onset_in_window,
    phase_deg,
    typed_table,
)

LARGEST_V = 1000.0


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
    block_samples : samples a block of the pass over the record, rounded up to whole sub-blocks of 4096; does not
        change the result.

    Raises
    ------
    InputError
        If the size of a count is unknown or the record is shorter than two windows.
    """
    settings = settings or ExtractSettings()
    if capture.chain.volts_per_count is None:
        raise InputError(f"{capture.name}: volts_per_count: unknown; state it with --volts-per-count")
    background = measure_background(capture, settings)
    parts: list[Events] = []
    echo_of: dict[int, int] = {}
    maybe_of: dict[int, int] = {}
    before = 0
    for bounds in capture.segment_bounds():
        part = segment_events(capture, background, bounds, block_samples)
        echoes, maybes = _echoes(part, capture.chain.rate_hz, settings.longest_echo_us * 1e-6)
        echo_of |= {child + before: parent + before for child, parent in echoes.items()}
        maybe_of |= {child + before: parent + before for child, parent in maybes.items()}
        before += len(part.places)
        parts.append(part)
    places, feet = (np.concatenate([getattr(part, name) for part in parts]) for name in ("places", "feet"))
    pulses, notes = _pulse_set(capture, places, feet, echo_of, maybe_of)
    notes += cut.clipping_note(capture, sum(part.clipped for part in parts))
    limit = detection_limit_counts(background, capture.chain.rate_hz) * capture.chain.volts_per_count
    return Extraction(pulses, len(places), len(echo_of), limit, capture.duration_s, tuple(notes))


def _echoes(part: Events, rate_hz: float, longest_s: float) -> tuple[dict[int, int], dict[int, int]]:
    lengths = part.places[:, 1] - part.places[:, 0]
    return find_echoes(part.places[:, 0], part.shapes, lengths, rate_hz, longest_s)


def _pulse_set(
    capture: Capture, places: Any, feet: FloatArray, echo_of: dict[int, int], maybe_of: dict[int, int]
) -> tuple[PulseSet, list[str]]:
    rate_hz = capture.chain.rate_hz
    onsets, lengths = places[:, 0], places[:, 1] - places[:, 0]
    ids = [digest.pulse_id(capture.digest, capture.sensor, onset) for onset in onsets.tolist()]
    waves = cut.windows(capture, onsets)
    _check_volts(capture, waves)
    noise_v = noise_beside(capture, places)
    peak_v = cut.signed_peaks(waves, lengths, onset_in_window(waves.shape[1]))
    with np.errstate(divide="ignore", invalid="ignore"):
        snr_db = 20 * np.log10(np.abs(peak_v) / noise_v)
    labels, notes = carried_labels(capture, onsets, set(echo_of))
    # the refined instant, on the digitiser's clock
    onset_s = (global_index(capture, onsets) - capture.segments[0, 1] + feet[:, 0]) / rate_hz
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
        "onset_std_ns": feet[:, 1] / rate_hz * 1e9,
        "time_utc": _times(capture, onset_s),
        "phase_deg": phase_deg(capture, onsets),
        "noise_v": noise_v,
        "peak_v": peak_v,
        "snr_db": snr_db,
        "duration_us": lengths / rate_hz * 1e6,
        "clipped": cut.clipped(capture, waves, places),
        "window_mates": cut.window_mates(capture, onsets),
        "echo_of": _named(echo_of, ids),
        "maybe_echo_of": _named(maybe_of, ids),
        **labels,
    }
    simulated = any(note.family is not None for note in capture.annotations)
    return PulseSet(waves, (capture.chain,), typed_table(rows, ids, simulated=simulated)), notes


def _named(parents: dict[int, int], ids: list[str]) -> list[str | None] | None:
    """The name of each event's parent; None where no event has one."""
    return [ids[parents[row]] if row in parents else None for row in range(len(ids))] if parents else None


def _check_volts(capture: Capture, waves: WaveArray) -> None:
    """Refuse waves that no sensor gives: the size of a count must be wrong."""
    if cut.any_beyond(waves, LARGEST_V):
        raise InputError(
            f"{capture.name}: volts_per_count: expected waves of at most {LARGEST_V:g} V, found "
            f"{np.nanmax(np.abs(waves)):.3g} V; correct it in the metadata, or with --volts-per-count where the "
            "file does not state it"
        )


def _times(capture: Capture, onset_s: FloatArray) -> Any:
    if capture.start_utc is None:
        return None
    return pd.DatetimeIndex(capture.start_utc + pd.to_timedelta(np.rint(onset_s * 1e9).astype(np.int64), unit="ns"))
