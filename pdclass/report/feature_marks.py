"""Marks on the drawings of features: waves, arrows, words, and what was read off."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pdclass.features import BY_NAME
from pdclass.pulses import FloatArray
from pdclass.report.feature_examples import FeatureExample
from pdclass.report.plots import COLOURS, EDGE, Panel
from pdclass.verdict.sentences import quantity

SMALL = 7.5
#: What keeps words readable over a line.
_BEHIND = {"boxstyle": "square,pad=0.1", "fc": "white", "ec": "none", "alpha": 0.8}


def reading(axes: Panel, names: Sequence[str], examples: Sequence[FeatureExample]) -> None:
    """What was read off the pulses: a line a feature."""
    axes.set_axis_off()
    axes.set_xlim(0, 1)
    axes.set_ylim(max(len(names), 11) + 0.5, -0.5)
    right = np.linspace(1.0, 0.72, len(examples)) if len(examples) > 1 else [1.0]
    for place, example in zip(right[::-1], examples, strict=True):
        axes.text(place, 0, example.label, ha="right", fontsize=8, color=COLOURS[example.label], fontweight="bold")
    for row, name in enumerate(names, start=1):
        axes.text(0.0, row, name, fontsize=7.5, va="center")
        for place, example in zip(right[::-1], examples, strict=True):
            value = example.values[name]
            words = "–" if np.isnan(value) else quantity(value, BY_NAME[name].unit)
            axes.text(place, row, words, ha="right", fontsize=7.5, va="center")


def draw_wave(axes: Panel, example: FeatureExample, span_us: tuple[float, float], *, scale: float = 1.0) -> None:
    """The wave over a span [µs], its onset marked; times are drawn times a scale."""
    shown = (example.time_us >= span_us[0]) & (example.time_us <= span_us[1])
    axes.axhline(0, color="#999999", lw=0.6)
    axes.plot(example.time_us[shown] * scale, example.wave[shown], color=COLOURS[example.label], lw=1.5)
    axes.axvline(0, color=EDGE, lw=0.7, ls="--")
    axes.set_xlim(span_us[0] * scale, span_us[1] * scale)
    axes.set_title(example.title, fontsize=8.5, loc="left")
    axes.set_ylabel("over the peak")


def said(example: FeatureExample, name: str) -> str:
    """A feature's name and value, or nothing where the catalogue has no such feature."""
    if name not in example.values:
        return ""
    value = example.values[name]
    return f"{name} = " + ("–" if np.isnan(value) else quantity(value, BY_NAME[name].unit))


def arrow(
    axes: Panel, first: float, last: float, level: float, words: str, *, below: bool = False, align: str = "center"
) -> None:
    """A double arrow from one place to another with its words."""
    if not np.isfinite([first, last]).all():
        return
    axes.annotate(
        "", (first, level), (last, level), arrowprops={"arrowstyle": "<->", "lw": 1.0, "shrinkA": 0, "shrinkB": 0}
    )
    place = {"center": (first + last) / 2, "right": last, "left": first}[align]
    axes.annotate(
        words,
        (place, level),
        xytext=(0, -3 if below else 3),
        textcoords="offset points",
        ha=align,
        va="top" if below else "bottom",
        fontsize=SMALL,
        bbox=_BEHIND,
    )


def words_at(axes: Panel, place: float, level: float, words: str, *, below: bool = False) -> None:
    """Words beside a place."""
    axes.annotate(
        words,
        (place, level),
        xytext=(3, -2 if below else 2),
        textcoords="offset points",
        va="top" if below else "bottom",
        fontsize=SMALL,
    )


def dots(axes: Panel, places: Sequence[float] | FloatArray, levels: Sequence[float] | FloatArray) -> None:
    """Dots where something was read off."""
    axes.plot(places, levels, ls="none", marker="o", ms=4.5, mfc="white", mec=EDGE, mew=0.9, zorder=5)
