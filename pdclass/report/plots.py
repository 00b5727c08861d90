"""Every drawing of the reports, as SVG text to be put inline; the same input gives the same bytes."""

from __future__ import annotations

import io
import re
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure

from pdclass.pulses import UNDECIDED, FloatArray, IntArray

#: Paul Tol's "muted" colour-blind-safe set (P. Tol, "Colour Schemes", SRON/EPS/TN/09-002).
COLOURS: Mapping[str, str] = {
    "cable": "#332288",
    "local": "#CC6677",
    "switchgear": "#44AA99",
    "interference": "#DDCC77",
    UNDECIDED: "#888888",
}
MARKERS: Mapping[str, str] = {"cable": "o", "local": "^", "switchgear": "s", "interference": "D", UNDECIDED: "X"}
EDGE = "#222222"
#: One panel of a figure, as a drawing function of another module gets it.
Panel = Axes
#: A panel draws at most so many pulses, evenly chosen by size, so that a page stays light.
MOST_POINTS = 400

_PLACES = re.compile(r' (?:d|x|y)="[^"]*"')
_HASHED = re.compile(r"(?<=-)[a-zA-Z]+[0-9a-f]{10}(?=[\")])")
_LONG_NUMBER = re.compile(r"-?\d+\.\d{2,}")
_IDLE = (
    (re.compile(r'<g id="[^"]*"'), "<g"),
    (re.compile(r' transform="rotate\(-0 [^"]*"'), ""),
    (re.compile(r'(<use [^>]*) style="stroke: #000000; stroke-width: 0\.8"'), r"\1"),
    (re.compile(r"\s*\n\s*"), " "),
)
_STYLE: Mapping[str, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 8.5,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": "#555555",
    "axes.grid": True,
    "grid.color": "#e4e4e4",
    "grid.linewidth": 0.6,
    "axes.axisbelow": True,
    "svg.fonttype": "path",
    "path.simplify": True,
    "text.usetex": False,
}


def thinned_places(peak_mv: FloatArray, most: int = MOST_POINTS) -> IntArray:
    """Places of at most `most` pulses, evenly spread over the order of size, the largest always among them."""
    order = np.argsort(np.abs(peak_mv), kind="stable")
    if len(order) <= most:
        return np.arange(len(order))
    chosen = np.linspace(0, len(order) - 1, most).round().astype(np.int64)
    return np.sort(order[chosen]).astype(np.int64)


def phase_scatter(
    phase_deg: FloatArray, peak_mv: FloatArray, label: str, *, limit_mv: float, offset_known: bool, name: str
) -> str:
    """Signed peak [mV] of pulses with one label against phase [deg], over a faint sine.

    Parameters
    ----------
    phase_deg, peak_mv : (pulses,)
    limit_mv : half the height of the panel, shared by the panels of a circuit [mV], > 0.
    offset_known : whether phase 0 is known to be a zero crossing of a known voltage; the sine is drawn only then.
    name : keeps the panel's ids apart from those of others on the page.
    """
    with _style(name):
        figure, axes = _panel(2.3, 1.9)
        if offset_known:
            sine = np.linspace(0, 360, 73)
            axes.plot(sine, 0.8 * limit_mv * np.sin(np.deg2rad(sine)), color="#cccccc", lw=1.2)
        axes.axhline(0, color="#999999", lw=0.6)
        _points(axes, phase_deg, peak_mv, label)
        axes.set_xlim(0, 360)
        axes.set_ylim(-limit_mv, limit_mv)
        axes.set_xticks([0, 90, 180, 270, 360])
        axes.set_xlabel("phase [deg]" if offset_known else "phase, offset unknown [deg]")
        axes.set_ylabel("peak [mV]")
        return _svg(figure, name, f"{label}: peak in mV against phase in degrees, {len(peak_mv)} pulses")


def pulse_figure(edges: Mapping[str, Any], label: str, *, name: str) -> str:
    """One whole pulse in the analysis band [mV over us], from onset to end, with its peak.

    Parameters
    ----------
    edges : from `measured_edges`: `time_us`, `wave_v`, `height_v`, crossings [us], `peak`, `end`.
    label : decides the colour.
    name : keeps the figure's ids apart from those of others on the page.
    """
    with _style(name):
        figure, axes = _panel(5.2, 1.9)
        end_us = float(edges["end"])
        axes.axvspan(0, end_us, color="#f1efe6", lw=0)
        _draw_wave(axes, edges, label, _whole_span(edges))
        for at, word in ((0.0, "onset"), (end_us, "end")):
            _draw_limit(axes, at, word)
        _mark(axes, float(edges["peak"]), float(edges["height_v"]) * 1e3, "o")
        axes.set_xlabel("time from onset [µs]")
        return _svg(figure, name, f"pulse labelled {label}, from onset to end")


def edge_figure(edges: Mapping[str, Any], label: str, *, name: str) -> str:
    """The flanks of one pulse [mV over ns] with the measured crossings at 10, 50 and 90 % of its peak.

    Parameters
    ----------
    edges, label, name : as in `pulse_figure`.
    """
    with _style(name):
        figure, axes = _panel(5.2, 1.9)
        in_ns = {**edges, "time_us": np.asarray(edges["time_us"], np.float64) * 1e3}
        _draw_wave(axes, in_ns, label, _edge_span(edges))
        height_mv = float(edges["height_v"]) * 1e3
        for percent, marker in ((10, "v"), (50, "D"), (90, "^")):
            axes.axhline(height_mv * percent / 100, color="#999999", lw=0.6, ls=":")
            for side in ("rise", "fall"):
                _mark(axes, float(edges[f"{side}_{percent}"]) * 1e3, height_mv * percent / 100, marker)
        _mark(axes, float(edges["peak"]) * 1e3, height_mv, "o")
        _draw_limit(axes, 0.0, "onset")
        axes.set_xlabel("time from onset [ns]")
        return _svg(figure, name, f"flanks of the pulse labelled {label}, with the 10, 50 and 90 % crossings")


def panels_figure(
    name: str,
    title: str,
    size: tuple[float, float],
    draw: Callable[[Sequence[Panel]], None],
    widths: Sequence[float] = (1.0,),
) -> str:
    """Panels side by side, light enough for a page with a hundred of them: text as text, 0.1 pt resolved.

    Parameters
    ----------
    name : keeps the figure's ids apart from those of others on the page.
    title : what a screen reader says.
    size : width and height of the figure [inch].
    draw : is given the panels, one for each of `widths`.
    widths : of the panels, relative to each other.
    """
    with _style(name), mpl.rc_context({"svg.fonttype": "none"}):
        figure = Figure(figsize=size, layout="constrained")
        FigureCanvasSVG(figure)
        panels = figure.subplots(1, len(widths), squeeze=False, width_ratios=list(widths))
        draw(list(panels[0]))
        return _lightened(_svg(figure, name, title))


def cased(axes: Panel, x: FloatArray, y: FloatArray, label: str) -> None:
    """A line in the colour of its label with a dark edge."""
    axes.plot(x, y, color=EDGE, lw=1.6)
    axes.plot(x, y, color=COLOURS.get(label, EDGE), lw=1.0)


def log_axis(axes: Panel, span: tuple[float, float], words: str = "frequency [MHz]") -> None:
    """A logarithmic scale from and to the given ends, marked at decades only."""
    axes.set_xscale("log")
    axes.set_xlim(span)
    marks = [mark for mark in (0.01, 0.1, 1.0, 10.0, 100.0) if span[0] <= mark <= span[1]]
    axes.set_xticks(marks, [f"{mark:g}" for mark in marks])
    axes.minorticks_off()
    axes.set_xlabel(words)


def envelope(x: FloatArray, y: FloatArray, steps: int) -> tuple[FloatArray, FloatArray]:
    """Least and most within each of about so many steps, in the order in which they come; short series as they are."""
    size = -(-y.size // steps)
    if size < 3:
        return x, y
    # the last value again, to fill the last step
    blocks = np.pad(y, (0, -y.size % size), mode="edge").reshape(-1, size)
    places = np.sort(np.stack([blocks.argmin(axis=1), blocks.argmax(axis=1)], axis=1), axis=1)
    flat = np.minimum((places + size * np.arange(len(blocks))[:, None]).ravel(), y.size - 1)
    return x[flat], y[flat]


def with_numbered_ids(figure: str) -> str:
    """The same drawing with its ids counted in their order.

    Those of the drawing library hash places to the last digit, which the layout does not always give alike.
    """
    numbers = {name: f"i{place}" for place, name in enumerate(dict.fromkeys(_HASHED.findall(figure)))}
    return _HASHED.sub(lambda found: numbers[found[0]], figure)


def _lightened(svg: str) -> str:
    """The same drawing to 0.1 pt, without ids that nothing refers to, spaces, and what says nothing."""
    short = _PLACES.sub(_rounded, svg)
    for idle, instead in _IDLE:
        short = idle.sub(instead, short)
    return short


def _rounded(place: re.Match[str]) -> str:
    return _LONG_NUMBER.sub(lambda number: f"{float(number[0]):.1f}".removesuffix(".0"), place[0])


def _style(name: str) -> Any:
    """The look of every figure, for as long as it is drawn; the salt makes ids the same every time."""
    settings: Any = {**_STYLE, "svg.hashsalt": name}
    return mpl.rc_context(settings)


def _panel(width: float, height: float) -> tuple[Figure, Axes]:
    figure = Figure(figsize=(width, height), layout="constrained")
    FigureCanvasSVG(figure)
    return figure, figure.add_subplot()


def _points(axes: Axes, phase_deg: FloatArray, peak_mv: FloatArray, label: str) -> None:
    shown = thinned_places(peak_mv)
    axes.plot(
        phase_deg[shown],
        peak_mv[shown],
        linestyle="none",
        marker=MARKERS.get(label, "o"),
        markersize=4.2,
        markerfacecolor=COLOURS.get(label, EDGE),
        markeredgecolor=EDGE,
        markeredgewidth=0.5,
        alpha=0.85,
    )


def _draw_wave(axes: Axes, edges: Mapping[str, Any], label: str, span: tuple[float, float]) -> None:
    time, wave_mv = np.asarray(edges["time_us"], np.float64), np.asarray(edges["wave_v"], np.float64) * 1e3
    # a margin of samples beside the span, so that the line runs to the rim
    step = time[1] - time[0]
    shown = (time >= span[0] - step) & (time <= span[1] + step)
    axes.axhline(0, color="#999999", lw=0.6)
    axes.plot(time[shown], wave_mv[shown], color=EDGE, lw=1.9)
    axes.plot(time[shown], wave_mv[shown], color=COLOURS.get(label, EDGE), lw=1.2)
    axes.set_xlim(span)
    axes.margins(y=0.12)
    axes.set_ylabel("[mV]")


def _draw_limit(axes: Axes, at: float, word: str) -> None:
    axes.axvline(at, color=EDGE, lw=0.8, ls="--")
    place: dict[str, Any] = {"xycoords": ("data", "axes fraction"), "xytext": (2, -1), "textcoords": "offset points"}
    axes.annotate(word, (at, 1.0), va="top", fontsize=7.5, annotation_clip=True, **place)


def _mark(axes: Axes, at: float, level_mv: float, marker: str) -> None:
    if np.isfinite(at):
        axes.plot([at], [level_mv], marker=marker, ms=5, mfc="white", mec=EDGE, mew=0.9, ls="none", zorder=5)


def _whole_span(edges: Mapping[str, Any]) -> tuple[float, float]:
    """From a little before the onset to a little past the end, but within the record [us]."""
    time_us, end = np.asarray(edges["time_us"], np.float64), max(float(edges["end"]), 0.3)
    return max(-0.15 * end, float(time_us[0])), min(1.15 * end, float(time_us[-1]))


def _edge_span(edges: Mapping[str, Any]) -> tuple[float, float]:
    """From before the foot of the rise to past the foot of the fall, as far as they could be measured [ns]."""
    places = [float(edges[name]) for name in ("rise_10", "rise_50", "peak", "fall_50", "fall_10")]
    known = [place * 1e3 for place in places if np.isfinite(place)] + [0.0]
    room = max(0.35 * (max(known) - min(known)), 40.0)
    return min(known) - room, max(known) + room


def _svg(figure: Figure, name: str, title: str) -> str:
    """The figure as an SVG element that scales with the page and whose ids no other figure shares."""
    text = io.StringIO()
    figure.savefig(text, format="svg", metadata={"Date": None, "Creator": None})
    body = text.getvalue()
    body = body[body.index("<svg") :]
    body = re.sub(r"\s*<metadata>.*?</metadata>", "", body, flags=re.DOTALL)
    body = re.sub(r'(\bid="|url\(#|xlink:href="#)', rf"\g<1>{name}-", body)
    width, height = (72 * size for size in figure.get_size_inches())
    head = f'<svg class="figure" role="img" viewBox="0 0 {width:g} {height:g}" style="max-width:{width * 4 / 3:g}px"'
    namespaces = ' xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink"'
    return f"{head}{namespaces}><title>{title}</title>{body[body.index('>') + 1 :]}"
