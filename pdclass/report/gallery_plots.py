"""The figures of the gallery: what is on each of their panels."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from pdclass.pulses import FloatArray
from pdclass.report.gallery_curve import CurveFit
from pdclass.report.gallery_examples import AFTER_US, BAND_MHZ, BEFORE_US, Backdrop, Example
from pdclass.report.gallery_physics import DISTANCES_KM, Chains, Intervals, Journey, NearEnds, PhasePattern, Spread
from pdclass.report.gallery_quoted import QUOTED_DB_PER_KM, QUOTED_M_PER_US
from pdclass.report.plots import COLOURS, EDGE, MARKERS, Panel, cased, envelope, log_axis, panels_figure

_FIRST_US = 2.5
_LOWEST_DB = -70.0
_WHOLE_POINTS = 300
_MANY = "#8f8bb5"
_DECADES = (0.01, 0.1, 1.0, 10.0, 100.0, 1000.0)
#: From the source to 5 km: dark to light, told apart by dashes as well.
_SHADES = ("#222222", "#332288", "#4f44a0", "#6f68b4", "#908cc8", "#a9a6d6", "#c0bee3")
_DASHES: tuple[tuple[float, ...], ...] = ((), (), (6, 1.5), (4, 1.5), (2.5, 1.2), (1.2, 1.2), (6, 1.5, 1.2, 1.5))


def example_figure(example: Example, *, name: str) -> str:
    """The first microseconds, the whole window and the spectrum of an example."""

    def draw(panels: Sequence[Panel]) -> None:
        first, whole, spectrum = panels
        _wave(first, example.time_us, example.wave, example.label, (-0.4, _FIRST_US))
        _wave(whole, *envelope(example.time_us, example.wave, _WHOLE_POINTS), example.label, (-BEFORE_US, AFTER_US))
        first.set_xticks([0, 1, 2])
        whole.set_xticks([-5, 0, 5, 10, 15])
        first.set_ylabel("over the peak")
        first.set_xlabel("time from onset [µs]")
        whole.set_xlabel("time from onset [µs]")
        whole.tick_params(labelleft=False)
        cased(spectrum, example.mhz, example.level_db, example.label)
        # on top: where the pulse has sunk into the background both lines are one
        spectrum.plot(example.mhz, example.floor_db, color=EDGE, lw=0.7, dashes=(3, 2))
        log_axis(spectrum, BAND_MHZ)
        spectrum.set_ylim(_LOWEST_DB, 4)
        spectrum.set_yticks([-60, -40, -20, 0])
        spectrum.set_ylabel("[dB]")

    title = f"{example.label}, {example.family}: first microseconds, whole window, spectrum"
    return panels_figure(name, title, (9.2, 1.75), draw, (1.0, 1.25, 1.0))


def journey_figure(journey: Journey, *, name: str) -> str:
    """Waves after each distance, each over its own peak and moved to its arrival."""

    def draw(panels: Sequence[Panel]) -> None:
        for axes, span in zip(panels, ((-25.0, 150.0), (-100.0, 2000.0)), strict=True):
            shown = (journey.time_ns >= span[0]) & (journey.time_ns <= span[1])
            for km, wave, shade, dashes in zip(DISTANCES_KM, journey.waves, _SHADES, _DASHES, strict=True):
                axes.plot(journey.time_ns[shown], wave[shown], color=shade, lw=1.4, dashes=dashes, label=distance(km))
            axes.set_xlim(span)
            axes.set_xlabel("time from a tenth of the peak [ns]")
        panels[0].set_ylabel("over the peak")
        panels[1].legend(frameon=False, fontsize=8, handlelength=3.2, loc="center left", bbox_to_anchor=(1.0, 0.5))

    return panels_figure(name, f"a pulse after 0 to 5 km of {journey.kind} cable", (9.2, 2.5), draw, (1.0, 1.3))


def spread_figure(spread: Spread, *, name: str) -> str:
    """Attenuation and velocity of drawn cables, with the ranges quoted in the trade."""

    def draw(panels: Sequence[Panel]) -> None:
        for axes, (low, middle, high) in zip(panels, (spread.db_per_km, spread.m_per_us), strict=True):
            axes.fill_between(spread.mhz, low, high, color="#dcdaf0", lw=0)
            axes.plot(spread.mhz, middle, color=COLOURS["cable"], lw=1.5)
            log_axis(axes, (0.1, 50.0))
        loss, speed = panels
        for mhz, bounds in QUOTED_DB_PER_KM.get(spread.kind, {}).items():
            loss.plot([mhz, mhz], bounds, color=EDGE, lw=1.2, marker="_", ms=9, mew=1.4)
        quoted = QUOTED_M_PER_US.get(spread.kind)
        if quoted is not None:
            for bound in quoted:
                speed.axhline(bound, color=EDGE, lw=1.0, ls="--")
        loss.set_yscale("log")
        loss.set_ylim(0.2, 1500)
        loss.set_yticks([1, 10, 100, 1000], ["1", "10", "100", "1000"])
        loss.set_ylabel("[dB/km]")
        speed.set_ylim(90, 200)
        speed.set_ylabel("[m/µs]")

    return panels_figure(name, f"attenuation and velocity of drawn {spread.kind} cables", (9.2, 2.2), draw, (1.0, 1.0))


def curve_figure(fit: CurveFit, *, name: str) -> str:
    """Measured points against the line fitted to them: attenuation and velocity."""

    def draw(panels: Sequence[Panel]) -> None:
        pairs = ((fit.points_db_per_km, fit.db_per_km), (fit.points_m_per_us, fit.m_per_us))
        for axes, (points, line) in zip(panels, pairs, strict=True):
            axes.plot(fit.mhz, line, color=COLOURS["cable"], lw=1.5)
            axes.plot(fit.points_mhz, points, ls="none", marker="o", mfc="white", mec=EDGE, mew=0.9, ms=4)
            log_axis(axes, (float(fit.mhz[0]), float(fit.mhz[-1])))
        loss, speed = panels
        loss.set_yscale("log")
        marks = [mark for mark in _DECADES if fit.db_per_km[0] / 10 < mark < fit.db_per_km[-1] * 10]
        loss.set_yticks(marks, [f"{mark:g}" for mark in marks])
        loss.minorticks_off()
        loss.set_ylabel("[dB/km]")
        # never so near that rounding of the points looks like a misfit
        low, high = float(fit.m_per_us.min()), float(fit.m_per_us.max())
        room = max(0.1 * (high - low), 3.0)
        speed.set_ylim(low - room, high + room)
        speed.set_ylabel("[m/µs]")

    return panels_figure(name, f"attenuation and velocity of the {fit.name}", (9.2, 2.2), draw, (1.0, 1.0))


def near_end_figure(found: NearEnds, *, name: str) -> str:
    """Strap current per current at three places."""

    def draw(panels: Sequence[Panel]) -> None:
        places = (("busbar", found.bus), ("core to screen at the termination", found.core), ("screen", found.screen))
        for axes, (place, gains) in zip(panels, places, strict=True):
            _bundle(axes, found.mhz, 20 * np.log10(gains))
            axes.set_title(place, fontsize=8.5)
            log_axis(axes, (0.1, 60.0))
            axes.set_ylim(-50, 25)
        panels[0].set_ylabel("[dB]")

    return panels_figure(name, "strap current per current, near ends drawn", (9.2, 2.3), draw, (1.0, 1.0, 1.0))


def ring_figure(found: NearEnds, *, name: str) -> str:
    """Histograms of the strongest ring of many near ends."""

    def draw(panels: Sequence[Panel]) -> None:
        known = np.isfinite(found.ring_q)
        _histogram(panels[0], found.ring_mhz[known], np.geomspace(1, 60, 19))
        log_axis(panels[0], (1.0, 60.0), "strongest ring [MHz]")
        panels[0].set_xticks([1, 3, 10, 30], ["1", "3", "10", "30"])
        panels[0].minorticks_off()
        _histogram(panels[1], found.ring_q[known], np.linspace(0, 40, 21))
        panels[1].set_xlabel("its Q")
        panels[0].set_ylabel("near ends")

    return panels_figure(name, "strongest ring of drawn near ends: frequency and Q", (9.2, 1.9), draw, (1.0, 1.0))


def chain_figure(found: Chains, *, name: str) -> str:
    """Transfer impedance of drawn chains."""

    def draw(panels: Sequence[Panel]) -> None:
        axes = panels[0]
        for gain in found.ohm:
            axes.plot(found.mhz, gain, color=_MANY, lw=0.9)
        log_axis(axes, (0.01, 100.0))
        axes.set_yscale("log")
        axes.set_ylim(0.02, 40)
        axes.set_yticks([0.1, 1, 10], ["0.1", "1", "10"])
        axes.set_ylabel("[V/A]")

    return panels_figure(name, "transfer impedance of drawn chains", (6.0, 2.6), draw)


def pattern_figure(pattern: PhasePattern, *, name: str) -> str:
    """Pulses of fifty cycles over the phase, with the voltage drawn in."""

    def draw(panels: Sequence[Panel]) -> None:
        axes = panels[0]
        label = "interference" if pattern.pattern not in ("void", "surface", "floating") else ""
        sine = np.linspace(0, 360, 73)
        axes.plot(sine, np.sin(np.deg2rad(sine)), color="#bbbbbb", lw=1.2)
        axes.axhline(0, color="#999999", lw=0.6)
        face, marker = COLOURS.get(label, "#ffffff"), MARKERS.get(label, "o")
        style: dict[str, Any] = {"mfc": face, "mec": EDGE, "mew": 0.45, "ms": 3.0}
        axes.plot(pattern.phase_deg, pattern.size, linestyle="none", marker=marker, **style)
        axes.set_xlim(0, 360)
        axes.set_ylim(-1.15, 1.15)
        axes.set_xticks([0, 90, 180, 270, 360])
        axes.set_xlabel("phase [deg]")
        axes.set_ylabel("over the largest")

    return panels_figure(name, f"{pattern.pattern}: pulses over the phase", (3.0, 2.1), draw)


def interval_figure(found: Intervals, *, name: str) -> str:
    """Times between the pulses of a converter."""

    def draw(panels: Sequence[Panel]) -> None:
        period = 1e6 / found.switching_hz
        _histogram(panels[0], found.interval_us, np.linspace(0, 1.1 * period, 45))
        panels[0].axvline(period, color=EDGE, lw=0.9, ls="--")
        panels[0].set_xlabel("time to the next pulse [µs]")
        panels[0].set_ylabel("pulses")

    return panels_figure(name, "times between the pulses of a converter", (3.0, 2.1), draw)


def backdrop_figure(found: Backdrop, *, name: str) -> str:
    """Spectrum, a short stretch, and what is below 0.6 MHz over a mains cycle."""

    def draw(panels: Sequence[Panel]) -> None:
        level, stretch, slow = panels
        cased(level, found.mhz, found.level_db, "interference")
        log_axis(level, (0.03, 50.0))
        level.set_ylabel("[dB over 1 µV]")
        stretch.plot(*envelope(found.time_us, found.wave_mv, 700), color=EDGE, lw=0.5)
        stretch.set_xlabel("time [µs]")
        stretch.set_ylabel("[mV]")
        slow.plot(found.slow_ms, found.slow_mv, color=EDGE, lw=0.8)
        slow.set_ylim(0, None)
        slow.set_xlabel("time [ms]")
        slow.set_ylabel("below 0.6 MHz [mV]")

    return panels_figure(name, "background: spectrum, stretch, slow part", (9.2, 1.9), draw, (1.2, 1.2, 0.9))


def distance(km: float) -> str:
    """A distance in words."""
    return "at the source" if km == 0 else f"{km * 1e3:g} m" if km < 1 else f"{km:g} km"


def _wave(axes: Panel, time_us: FloatArray, wave: FloatArray, label: str, span: tuple[float, float]) -> None:
    shown = (time_us >= span[0]) & (time_us <= span[1])
    axes.axhline(0, color="#999999", lw=0.5)
    cased(axes, time_us[shown], wave[shown], label)
    axes.set_xlim(span)
    axes.set_ylim(-1.12, 1.12)


def _bundle(axes: Panel, x: FloatArray, rows: FloatArray) -> None:
    """Many lines, one of them (the first) dark so that a single course can be followed."""
    for row in rows[1:]:
        axes.plot(x, row, color=_MANY, lw=0.6)
    axes.plot(x, rows[0], color=EDGE, lw=1.2)


def _histogram(axes: Panel, values: FloatArray, edges: FloatArray) -> None:
    axes.hist(np.clip(values, edges[0], edges[-1]), bins=edges.tolist(), color="#dcdaf0", ec=EDGE, lw=0.6)
