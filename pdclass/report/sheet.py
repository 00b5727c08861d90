"""The labelling sheet: one self-contained HTML page of numbered pulses, for somebody who knows pulses to name."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
import scipy.fft
import scipy.signal

from pdclass.capture import LABEL_COLUMNS
from pdclass.pulses import BASES, LABELS, FloatArray, PulseSet, onset_in_window
from pdclass.report.plots import (
    COLOURS,
    EDGE,
    Panel,
    envelope,
    log_axis,
    panels_figure,
    thinned_places,
    with_numbered_ids,
)
from pdclass.report.sheet_choice import Chosen
from pdclass.report.summary import CAUTIONS, MEANING, NOT_STATED, SHORT_CAUTION, phase_words
from pdclass.report.templates import drawn, template
from pdclass.verdict.sentences import quantity

#: What each basis means, strongest first.
BASIS_WORDS: Mapping[str, str] = {
    "dissected": "the part was opened and the defect seen",
    "isolated": "the source went or stayed when a part was switched out",
    "located": "the place was measured from both ends or on the route",
    "cross-checked": "another kind of sensor agreed",
    "expert": "somebody who knows pulses looked at the picture",
    "simulated": "planted by a simulator; never yours to fill in",
}
_FIRST_US = 2.5
_BAND_MHZ = (0.1, 40.0)
_SPECTRUM_POINTS = 90
_LOWEST_DB = -70.0
_MOST_POINTS = 100


def sheet_rows(pulses: PulseSet, chosen: Sequence[Chosen]) -> pd.DataFrame:
    """Rows of the label file that goes with a sheet; labels that the pulses have already are filled in."""
    table = pulses.table.iloc[[one.place for one in chosen]]
    rows = pd.DataFrame({name: table.get(name) for name in LABEL_COLUMNS}, index=table.index)
    return rows.assign(pulse_id=table.index)


def sheet_entry(pulses: PulseSet, one: Chosen, number: int, reference: str | None) -> dict[str, Any]:
    """One numbered picture with its words, for `sheet_page`.

    Parameters
    ----------
    pulses : the pulses of the sheet's captures.
    one : the pulse.
    number : of the picture, from 1.
    reference : phase reference of its capture, None = not stated.
    """
    row = pulses.table.iloc[one.place]
    figure = _figure(pulses, one.place, reference, f"s{number}")
    return {
        "number": number,
        "pulse": str(pulses.table.index[one.place]),
        "where": _where(row),
        "measured": _measured(row),
        "label": row["label"] if isinstance(row["label"], str) else "",
        "stands_for": one.stands_for,
        "phase": phase_words(reference) if not pd.isna(row["phase_deg"]) else "phase not known",
        "figure": drawn(figure),
    }


def sheet_page(entries: Sequence[Mapping[str, Any]], *, found: int, most: int) -> str:
    """The page as HTML, without scripts and without requests to outside; the same every time.

    Parameters
    ----------
    entries : from `sheet_entry`, in order of their numbers.
    found : pulses of the captures, echoes left out.
    most : the most that were to be shown.
    """
    return template("sheet.html.j2").render(
        entries=entries,
        found=found,
        most=most,
        columns=LABEL_COLUMNS,
        labels=[(name, MEANING[name]) for name in LABELS],
        bases=[(name, BASIS_WORDS[name]) for name in BASES],
        first_us=_FIRST_US,
        most_points=_MOST_POINTS,
        cautions=CAUTIONS,
        short_caution=SHORT_CAUTION,
        colours=COLOURS,
        edge=EDGE,
    )


def _where(row: pd.Series[Any]) -> str:
    parts = [str(row["circuit"]), f"sensor {row['sensor'] or NOT_STATED}", f"session {row['session']}"]
    if isinstance(row["capture"], str):
        parts.append(f"capture {row['capture']}")
    if not pd.isna(row["onset_s"]):
        parts.append(f"at {row['onset_s'] * 1e3:.4f} ms")
    return ", ".join(parts)


def _measured(row: pd.Series[Any]) -> str:
    figures = (
        ("peak", row["peak_v"] * 1e3, "mV"),
        ("signal to noise", row["snr_db"], "dB"),
        ("phase", row["phase_deg"], "deg"),
        ("length", row["duration_us"], "µs"),
    )
    known = [f"{word} {quantity(float(value), unit)}" for word, value, unit in figures if not pd.isna(value)]
    return ", ".join([*known, "clipped"] if row["clipped"] else known)


def _figure(pulses: PulseSet, place: int, reference: str | None, name: str) -> str:
    """First microseconds, whole window, spectrum, and the pulse among those of its capture over the phase."""
    wave = pulses.waves[place].astype(np.float64)
    onset = onset_in_window(wave.size)
    before = wave[:onset][np.isfinite(wave[:onset])]
    wave_mv = (wave - (np.median(before) if before.size else np.nanmedian(wave))) * 1e3
    time_us = (np.arange(wave.size) - onset) / pulses.rate_hz * 1e6
    known = np.isfinite(wave_mv)
    time_us, wave_mv = time_us[known], wave_mv[known]
    mhz, level, floor = _spectrum(time_us, wave_mv, pulses.rate_hz)
    phase = _phases(pulses, place)
    offset_known = reference not in (None, "low-voltage-socket")

    def draw(panels: Sequence[Panel]) -> None:
        first, whole, spectrum, pattern = panels
        _draw_waves(first, whole, time_us, wave_mv)
        spectrum.plot(mhz, level, color=EDGE, lw=1.1)
        spectrum.plot(mhz, floor, color=EDGE, lw=0.7, dashes=(3, 2))
        log_axis(spectrum, (_BAND_MHZ[0], float(mhz[-1])))
        spectrum.set_ylim(_LOWEST_DB, 4)
        spectrum.set_ylabel("[dB]")
        _draw_pattern(pattern, phase, offset_known=offset_known)

    title = f"pulse {name[1:]}: first microseconds, whole window, spectrum, phase pattern"
    return with_numbered_ids(panels_figure(name, title, (11.0, 1.8), draw, (1.0, 1.2, 1.0, 1.0)))


def _draw_waves(first: Panel, whole: Panel, time_us: FloatArray, wave_mv: FloatArray) -> None:
    near = (time_us >= -0.4) & (time_us <= _FIRST_US)
    for axes, (x, y), span in (
        (first, envelope(time_us[near], wave_mv[near], 150), (-0.4, _FIRST_US)),
        (whole, envelope(time_us, wave_mv, 200), (-5.0, 15.0)),
    ):
        axes.axhline(0, color="#999999", lw=0.5)
        axes.axvline(0, color=EDGE, lw=0.6, ls="--")
        axes.plot(x, y, color=EDGE, lw=1.1)
        axes.set_xlim(span)
        axes.set_xlabel("time from onset [µs]")
    first.set_ylabel("[mV]")


def _draw_pattern(axes: Panel, phase: tuple[FloatArray, FloatArray, int], *, offset_known: bool) -> None:
    degrees, peaks_mv, own = phase
    axes.set_xlim(0, 360)
    axes.set_xticks([0, 90, 180, 270, 360])
    axes.set_xlabel("phase [deg]" if offset_known else "phase, offset unknown [deg]")
    axes.set_ylabel("peak [mV]")
    if not np.isfinite(degrees[own]):
        axes.text(0.5, 0.5, "phase not known", transform=axes.transAxes, ha="center")
        return
    limit = 1.1 * max(float(np.nanmax(np.abs(peaks_mv))), 1e-6)
    if offset_known:
        sine = np.linspace(0, 360, 73)
        axes.plot(sine, 0.8 * limit * np.sin(np.deg2rad(sine)), color="#cccccc", lw=1.2)
    there = np.flatnonzero(np.isfinite(degrees))
    shown = there[thinned_places(peaks_mv[there], _MOST_POINTS)]
    axes.plot(degrees[shown], peaks_mv[shown], ls="none", marker=".", ms=3.0, mfc="#999999", mec="#999999")
    axes.plot([degrees[own]], [peaks_mv[own]], ls="none", marker="D", ms=6.0, mfc="white", mec=EDGE, mew=1.3)
    axes.set_ylim(-limit, limit)


def _phases(pulses: PulseSet, place: int) -> tuple[FloatArray, FloatArray, int]:
    """Phase [deg] and peak [mV] of the pulses of the same capture, and the place of this one among them."""
    digests = pulses.table["capture_digest"].to_numpy()
    members = np.flatnonzero((digests == digests[place]) & pulses.table["echo_of"].isna().to_numpy())
    members = members if place in members else np.array([place])
    degrees = pulses.table["phase_deg"].to_numpy(np.float64)[members]
    return degrees, pulses.table["peak_v"].to_numpy(np.float64)[members] * 1e3, int(np.flatnonzero(members == place)[0])


def _spectrum(time_us: FloatArray, wave_mv: FloatArray, rate_hz: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Power after the onset and that of the pre-trigger [dB over the highest of the first] at log-spaced [MHz]."""
    own, before = wave_mv[time_us >= -0.3], wave_mv[time_us < -0.3]
    mhz = np.geomspace(_BAND_MHZ[0], min(_BAND_MHZ[1], rate_hz / 2e6), _SPECTRUM_POINTS)
    lines = 4 * wave_mv.size
    level = _on_scale(own, lines, rate_hz, mhz)
    reference = max(float(level.max()), 1e-300)
    floor = np.full(mhz.size, np.nan)
    if before.size >= 64:
        # the same number of samples would hold so much noise
        floor = _on_scale(before, lines, rate_hz, mhz) * own.size / before.size
    with np.errstate(divide="ignore"):
        return mhz, 10 * np.log10(level / reference), 10 * np.log10(floor / reference)


def _on_scale(wave: FloatArray, lines: int, rate_hz: float, mhz: FloatArray) -> FloatArray:
    """Power of a stretch at points of a logarithmic scale: the mean of the lines within half a step about each."""
    # flat over the pulse, fading at both ends so that nothing leaks
    shape = scipy.signal.windows.tukey(wave.size, 0.04)
    power = np.abs(scipy.fft.rfft((wave - wave.mean()) * shape, lines)) ** 2
    hz = np.arange(power.size) * rate_hz / lines
    half = float(np.sqrt(mhz[1] / mhz[0]))
    total = np.concatenate([[0.0], np.cumsum(power)])
    first, last = (np.searchsorted(hz, mhz * 1e6 * edge) for edge in (1 / half, half))
    between = np.interp(mhz * 1e6, hz, power)
    return np.asarray(np.where(last > first, (total[last] - total[first]) / np.maximum(last - first, 1), between))
