"""Every feature drawn on an example pulse, a figure a family, with what was read off it beside."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence

import numpy as np

from pdclass.features import FAMILIES
from pdclass.report.feature_examples import (
    GRAM_US,
    LEAD_US,
    FeatureExample,
    FirstArrival,
    bands,
    echogram,
    energy_so_far,
    first_arrival,
    levels_db,
    scale_shares,
    strongest_mode,
)
from pdclass.report.feature_marks import SMALL, arrow, dots, draw_wave, reading, said, words_at
from pdclass.report.plots import COLOURS, EDGE, Panel, panels_figure

_GREY = "#777777"
#: Drawing of one family: panels, and the examples (a pulse that came along a cable first, one of the near end next).
Draw = Callable[[Sequence[Panel], Sequence[FeatureExample]], None]
_NUMBERS = r"([0-9]+(?:p[0-9]+)?)_([0-9]+(?:p[0-9]+)?)"


def family_figure(family: str, examples: Sequence[FeatureExample]) -> str:
    """The figure of a family: its features on one or two pulses, and their values beside."""
    draw, widths = _DRAWINGS.get(family, (_plain, (1.0,)))
    names = [feature.name for feature in FAMILIES[family][0]]

    def panels(each: Sequence[Panel]) -> None:
        draw(each[:-1], examples)
        reading(each[-1], names, examples)

    height = max(3.0, 0.165 * (len(names) + 2) + 0.35)
    title = f"features of the family {family} on simulated pulses of the base world"
    return _with_plain_ids(panels_figure(f"features-{family}", title, (12.0, height), panels, (*widths, 0.95)))


def _with_plain_ids(svg: str) -> str:
    """The same drawing with its ids numbered: those made from the last bits of the layout differ from run to run."""
    found = list(dict.fromkeys(re.findall(r"-([pm][0-9a-f]{10})\b", svg)))
    return re.sub(r"-([pm][0-9a-f]{10})\b", lambda one: f"-{found.index(one[1])}", svg)


def _edges(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    flanks, whole = panels
    example = examples[0]
    at = {name: value * 1e3 for name, value in example.at.items()}
    span = float(np.nanmax([at["fall_10"], at["fall_50"], 100.0]))
    draw_wave(flanks, example, (-0.35 * span / 1e3, 1.75 * span / 1e3), scale=1e3)
    for level in (0.1, 0.5, 0.9, 1.0):
        flanks.axhline(level, color="#bbbbbb", lw=0.6, ls=":")
    flanks.set_yticks([0, 0.1, 0.5, 0.9, 1.0], ["base 0", "10 %", "50 %", "90 %", "peak"])
    for name, first, last, level in (
        ("width_50_ns", at["rise_50"], at["fall_50"], 0.5),
        ("width_10_ns", at["foot_10"], at["fall_10"], 0.1),
    ):
        arrow(flanks, first, last, level, "")
        words_at(flanks, last, level, said(example, name))
    for name, first, last, rising in (
        ("rise_ns", at["rise_10"], at["rise_90"], True),
        ("fall_ns", at["fall_90"], at["fall_10"], False),
    ):
        levels = (0.1, 0.9) if rising else (0.9, 0.1)
        for place, level in zip((first, last), levels, strict=True):
            flanks.plot([place, place], [level, 1.08], color="#bbbbbb", lw=0.7)
        dots(flanks, [first, last], levels)
        arrow(flanks, first, last, 1.08, said(example, name), align="right" if rising else "left")
    flanks.set_ylim(-0.3, 1.28)
    flanks.set_xlabel("time from onset [ns]")
    _tail(whole, example)


def _tail(axes: Panel, example: FeatureExample) -> None:
    """From the peak until nine tenths of the energy have passed."""
    peak, tail_us = example.at["peak"], example.values.get("tail_ns", np.nan) / 1e3
    time, passed = energy_so_far(example)
    right = np.nanmax([peak + tail_us, 0.5]) * 1.15
    draw_wave(axes, example, (-0.1 * right, right))
    axes.plot(time, passed, color=EDGE, lw=1.1, ls="--", label="energy passed")
    axes.axhline(0.9, color="#bbbbbb", lw=0.6, ls=":")
    arrow(axes, peak, peak + tail_us, 1.1, said(example, "tail_ns"))
    axes.plot([peak + tail_us] * 2, [0.9, 1.1], color="#bbbbbb", lw=0.7)
    axes.set_title("")
    axes.set_ylim(-0.45, 1.28)
    axes.set_xlabel("time from onset [µs]")
    axes.legend(frameon=False, fontsize=SMALL, loc="center right")


def _spectrum(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    (shares,), example = panels, examples[0]
    values = example.values
    for each in reversed(examples):
        mhz, level, noise = levels_db(each)
        shares.plot(mhz, level, color=COLOURS[each.label], lw=1.5, label=each.label)
    mhz, level, noise = levels_db(example)
    shares.plot(mhz, noise, color=_GREY, lw=0.9, ls="--", label="noise beside the first pulse")
    for number, (name, low, high) in enumerate(bands(values, f"share_{_NUMBERS}_mhz")):
        shares.axvspan(low, high, color="#f1efe6" if number % 2 else "#faf9f4", lw=0)
        percent = 100 * values[name]
        words = "–" if np.isnan(percent) else "<0.1 %" if percent < 0.1 else f"{percent:.2g} %"
        shares.text((low * high) ** 0.5, 3, words, ha="center", fontsize=SMALL)
    for name, line, height in (("centroid_mhz", "-", -53), ("rolloff_85_mhz", ":", -58), ("rolloff_95_mhz", "-.", -63)):
        if np.isfinite(values.get(name, np.nan)):
            shares.axvline(values[name], color=EDGE, lw=0.9, ls=line)
            words_at(shares, values[name], height, name)
    shares.set_xscale("log")
    shares.set_xlim(0.1, 25)
    shares.set_ylim(-66, 11)
    shares.set_xticks([0.1, 0.3, 1, 3, 10, 25], ["0.1", "0.3", "1", "3", "10", "25"])
    shares.minorticks_off()
    shares.set_xlabel("frequency [MHz]; share of the power by band above")
    shares.set_ylabel("level [dB]")
    shares.legend(frameon=False, fontsize=SMALL, loc="lower left", bbox_to_anchor=(-0.02, 1.0), ncols=3)


def _scales(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    (axes,) = panels
    for number, example in enumerate(examples):
        level, share = scale_shares(example)
        place = level + (number - 0.5) * 0.38
        words = f"{example.label}: {said(example, 'scale_evenness')}, ▲ {said(example, 'scale_mean_level')}"
        axes.bar(place, share, 0.36, color=COLOURS[example.label], edgecolor=EDGE, lw=0.6, label=words)
        centre = example.values.get("scale_mean_level", np.nan)
        axes.plot([centre], [-0.035], marker="^", ms=8, mfc=COLOURS[example.label], mec=EDGE, clip_on=False)
    level, _ = scale_shares(examples[0])
    axes.set_xticks(level, [f"level {k:.0f}\n{50 / 2**k:.2g}-{100 / 2**k:.2g} MHz" for k in level])
    axes.set_ylim(-0.07, None)
    axes.set_ylabel("share of the energy")
    axes.legend(frameon=False, fontsize=SMALL, loc="lower left", bbox_to_anchor=(-0.02, 1.0), ncols=2)


def _ringing(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    (axes,), example = panels, examples[-1]
    limit = max(0.08, 3 * example.noise)
    inside = (example.time_us >= 0) & (example.time_us < example.at["end"])
    time, wave = example.time_us[inside], example.wave[inside]
    strong = np.flatnonzero(np.abs(wave) > limit)
    draw_wave(axes, example, (-0.15, float(time[strong[-1]]) + 0.4))
    axes.axhspan(-limit, limit, color="#f1efe6", lw=0)
    turns = strong[1:][np.diff(np.sign(wave[strong])) != 0]
    before = strong[:-1][np.diff(np.sign(wave[strong])) != 0]
    places = (time[turns] + time[before]) / 2
    dots(axes, places, np.zeros(places.size))
    for number, place in enumerate(places, start=1):
        axes.text(place, 0.05, f"{number}", ha="center", va="bottom", fontsize=SMALL)
    arrow(
        axes,
        float(time[strong[0]]),
        float(time[strong[-1]]),
        -0.98,
        f"{said(example, 'swings')}, {said(example, 'swings_per_us')}",
    )
    peak = example.at["peak"]
    after, ahead = time > peak, time < peak
    for name, side in (("overshoot", after), ("undershoot_before", ahead)):
        if side.any() and example.values.get(name, 0.0) > 0:
            place = time[side][np.argmin(wave[side])]
            axes.annotate("", (place, -example.values[name]), (place, 0), arrowprops={"arrowstyle": "<->", "lw": 1.0})
            words_at(axes, place, -example.values[name] - 0.02, said(example, name), below=True)
    axes.text(0.99, 0.95, "shaded: too small a swing to count", transform=axes.transAxes, ha="right", fontsize=SMALL)
    axes.set_ylim(-1.1, 1.12)
    axes.set_xlabel("time from onset [µs]")


def _spread(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    _energy(panels[0], examples[0])
    _late(panels[1], examples[0])


def _energy(axes: Panel, example: FeatureExample) -> None:
    """Energy that has passed, over the wave: what lies before the peak, how late the rest comes."""
    time, passed = energy_so_far(example)
    peak, values = example.at["peak"], example.values
    axes.plot(example.time_us, example.wave, color="#c9c7d8", lw=1.2)
    axes.plot(time, passed, color=COLOURS[example.label], lw=1.7, label="energy passed")
    early = values.get("energy_before_peak", np.nan)
    dots(axes, [peak], [early])
    axes.annotate(
        said(example, "energy_before_peak"),
        (peak, early),
        (peak + 0.5, 0.16),
        fontsize=SMALL,
        arrowprops={"arrowstyle": "-", "lw": 0.6, "color": _GREY},
    )
    arrow(axes, 0.0, peak, 1.1, said(example, "onset_to_peak_ns"), align="left")
    centre = float(np.sum(time[1:] * np.diff(passed)))
    length = values.get("equivalent_length_ns", np.nan) / 1e3
    arrow(axes, centre - length, centre + length, -0.14, "± " + said(example, "equivalent_length_ns"), below=True)
    rms = 1 / values.get("crest_factor", np.nan)
    axes.plot([0, 2], [rms, rms], color=EDGE, lw=0.9, ls="--")
    axes.text(2.02, rms, f"rms of 2 µs = 1/crest_factor ({1 / rms:.2f})", va="center", fontsize=SMALL)
    axes.set_xlim(-0.3, 5.2)
    axes.set_ylim(-0.45, 1.3)
    axes.legend(frameon=False, fontsize=SMALL, loc="center right", bbox_to_anchor=(1.0, 0.6))
    axes.set_xlabel("time from onset [µs]")


def _late(axes: Panel, example: FeatureExample) -> None:
    """Level of later stretches over that of the beginning."""
    peak = example.at["peak"]
    core = example.between(-LEAD_US, peak + 0.3)
    reference = float(np.mean(core**2))
    level = 10 * np.log10(np.maximum(example.wave**2, 1e-9) / reference)
    axes.plot(example.time_us, level, color="#c9c7d8", lw=0.7)
    axes.plot([-LEAD_US, peak + 0.3], [0, 0], color=EDGE, lw=2)
    axes.text(-LEAD_US, 9.0, "beginning = 0 dB", fontsize=SMALL)
    floor = 10 * np.log10(example.noise**2 / reference)
    axes.axhline(floor, color=_GREY, lw=0.9, ls="--")
    axes.text(6.6, floor + 1, "noise", ha="right", fontsize=SMALL, color=_GREY)
    for number, (name, first, last) in enumerate(bands(example.values, f"late_{_NUMBERS}_db")):
        value = example.values[name]
        if np.isfinite(value):
            axes.plot([peak + first, peak + last], [value, value], color=COLOURS[example.label], lw=2.6)
            side, shift = ("bottom", 1.0) if number % 2 else ("top", -1.5)
            axes.text(peak + first, value + shift, f"{name}\n{value:.1f} dB", va=side, fontsize=7)
    axes.set_xlim(-0.3, 6.7)
    axes.set_ylim(floor - 12, 16)
    axes.set_ylabel("[dB]")
    axes.set_xlabel("time from onset [µs]")


def _arrival(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    waves, delays = panels
    for example in examples:
        shown = (example.time_us >= -0.1) & (example.time_us <= 0.75)
        waves.plot(example.time_us[shown] * 1e3, example.wave[shown], color=COLOURS[example.label], lw=1.5)
    lengths = sorted({name.split("_")[1] for name in examples[0].values if "_delay_" in name and name[0] == "f"})
    for number, length in enumerate(lengths):
        dashes = ("--", "-")[number % 2]
        waves.axvline(float(length.replace("p", ".")) * 1e3, color=EDGE, lw=1.0, ls=dashes)
        words_at(waves, float(length.replace("p", ".")) * 1e3 + 5, 0.9, f"first_{length}_…")
        for example in examples:
            steps = [
                (low, high, example.values[name])
                for name, low, high in bands(example.values, f"first_{length}_delay_{_NUMBERS}_ns")
            ]
            for low, high, delay in steps:
                delays.plot([low, high], [delay, delay], color=COLOURS[example.label], lw=2.0, ls=dashes)
    for example in examples:
        delays.plot([], [], color=COLOURS[example.label], lw=2.0, label=example.title)
    delays.axhline(0, color="#999999", lw=0.6)
    delays.set_xscale("log")
    delays.set_xticks([0.1, 0.3, 1, 3, 10, 25], ["0.1", "0.3", "1", "3", "10", "25"])
    delays.minorticks_off()
    delays.set_xlabel("band [MHz]; dashed: first 0.3 µs, full: first 0.6 µs")
    delays.set_ylabel("delay of the band's energy [ns]")
    delays.margins(y=0.22)
    delays.legend(frameon=False, fontsize=SMALL, loc="upper right")
    waves.set_xlabel("time from onset [ns]")
    waves.set_ylabel("over the peak")


def _copies(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    gram_panel, likeness, levels = panels
    example = examples[0]
    _echogram(gram_panel, example)
    _likeness(likeness, example)
    for name, low, high in bands(example.values, f"copy_1_level_{_NUMBERS}_db"):
        levels.plot([low, high], [example.values[name]] * 2, color=COLOURS[example.label], lw=2.4)
    levels.axhline(0, color="#999999", lw=0.6)
    levels.set_xscale("log")
    levels.set_xticks([1, 2.5, 5, 9, 14], ["1", "2.5", "5", "9", "14"])
    levels.minorticks_off()
    levels.set_xlabel("band [MHz]")
    levels.set_ylabel("copy 1 over pulse [dB]")
    levels.margins(y=0.35)


def _echogram(axes: Panel, example: FeatureExample) -> None:
    delay_us, gram = echogram(example)
    axes.plot(delay_us, gram, color=COLOURS[example.label], lw=1.2)
    axes.axhline(0, color="#999999", lw=0.6)
    for number in (1, 2):
        delay, ratio, width, flank = (
            example.values.get(f"copy_{number}_{what}", np.nan) for what in ("delay_us", "ratio", "width_ns", "flank")
        )
        if np.isnan(delay):
            continue
        half = width / 2e3
        dots(axes, [delay], [ratio])
        axes.plot([delay - half, delay + half], [ratio / 2, ratio / 2], color=EDGE, lw=1.6)
        axes.plot([delay - 0.3, delay + 0.3], [flank * abs(ratio) * np.sign(ratio)] * 2, color=_GREY, lw=0.9, ls=":")
        axes.annotate(
            f"copy {number}: {ratio:+.2f}\nafter {delay:.2f} µs",
            (delay, ratio),
            (delay + 0.9, 0.72 - 0.22 * number),
            fontsize=SMALL,
            arrowprops={"arrowstyle": "-", "lw": 0.6, "color": _GREY},
        )
    axes.set_title(example.title, fontsize=8.5, loc="left")
    axes.set_xlim(0, GRAM_US)
    axes.set_ylim(-0.6, 0.8)
    axes.set_xlabel("delay [µs]; bar: width, dotted: flank")
    axes.set_ylabel("echogram")


def _likeness(axes: Panel, example: FeatureExample) -> None:
    """The beginning of the pulse and of its strongest copy, each over its own height."""
    delay = example.values.get("copy_1_delay_us", np.nan)
    pulse = example.between(-LEAD_US, 0.8)
    time_ns = (np.arange(pulse.size) * example.step_us - LEAD_US) * 1e3
    axes.plot(time_ns, pulse, color=COLOURS[example.label], lw=1.5, label="pulse")
    if np.isfinite(delay):
        later = example.between(delay - LEAD_US - 1e-6, delay + 0.8 - 1e-6)[: pulse.size]
        later = later - later[:6].mean()
        shown = later / np.abs(later).max()
        axes.plot(time_ns[: later.size], shown, color=EDGE, lw=1.1, ls="--", label="copy 1, scaled")
    axes.set_title(said(example, "copy_1_likeness"), fontsize=8)
    axes.set_xlabel("time from each onset [ns]")
    axes.legend(frameon=False, fontsize=SMALL)


def _tilt(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    levels, fits, delays = panels
    for example in examples:
        colour = COLOURS[example.label]
        for name, low, high in bands(example.values, f"first_1p2_level_{_NUMBERS}_db"):
            levels.plot([low, high], [example.values[name]] * 2, color=colour, lw=2.4)
        levels.plot([], [], color=colour, lw=2.4, label=example.label)
        arrival = first_arrival(example)
        _along_root(fits, example, arrival)
        _along_inverse_root(delays, example, arrival)
    levels.set_xscale("log")
    levels.set_xticks([0.5, 1, 3, 10, 25], ["0.5", "1", "3", "10", "25"])
    levels.minorticks_off()
    levels.set_xlabel("band [MHz]")
    levels.set_ylabel("level over the whole band [dB]")
    levels.legend(frameon=False, fontsize=SMALL, loc="lower left")
    for axes in (fits, delays):
        axes.legend(frameon=False, fontsize=SMALL, loc="lower left", bbox_to_anchor=(-0.02, 1.0), borderpad=0)
    fits.set_xticks(np.sqrt([0.7, 2, 4, 6, 10]), ["0.7", "2", "4", "6", "10"])
    fits.set_xlabel("frequency [MHz], by its root")
    fits.set_ylabel("level [dB]; dashed: fit")
    delays.set_xticks(1 / np.sqrt([1, 2.5, 4, 10]), ["1", "2.5", "4", "10"])
    delays.set_xlabel("frequency [MHz], by its inverse root")
    delays.set_ylabel("later than at 10 MHz [ns]; dashed: fit")


def _along_root(axes: Panel, example: FeatureExample, arrival: FirstArrival) -> None:
    """Level against the root of the frequency, with both tilts as fitted."""
    used = (arrival.mhz >= 0.7) & (arrival.mhz <= 10)
    mhz, level = arrival.mhz[used], arrival.level_db[used]
    root, straight = (example.values.get(name, np.nan) for name in ("first_root_tilt_db", "first_straight_tilt_db"))
    words = f"{root:+.1f} dB/√MHz {straight:+.2f} dB/MHz" if np.isfinite(root) else "no such law fits"
    axes.plot(np.sqrt(mhz), level, color=COLOURS[example.label], lw=1.5, label=f"{example.label}: {words}")
    fit = root * np.sqrt(mhz) + straight * mhz
    axes.plot(np.sqrt(mhz), fit + np.median(level - fit), color=EDGE, lw=1.0, ls="--")


def _along_inverse_root(axes: Panel, example: FeatureExample, arrival: FirstArrival) -> None:
    """Delay against the inverse root of the frequency: a straight line is what skin effect makes."""
    # hollows hardly weigh in the fit; their delays are far off and would hide the others
    clear = arrival.level_db > arrival.level_db.max() - 20
    used = (arrival.mhz >= 2.5) & (arrival.mhz <= 10) & clear
    mhz, delay = arrival.mhz[used], arrival.delay_ns[used]
    later = example.values.get("first_dispersion_ns", np.nan)
    words = f"{later:.0f} ns from 10 to 1 MHz" if np.isfinite(later) else "no such law fits"
    place = 1 / np.sqrt(mhz)
    line = later * (1 / np.sqrt(np.append(mhz, 1.0)) - np.sqrt(0.1)) / (1 - np.sqrt(0.1))
    shift = np.median(delay - line[:-1]) if np.isfinite(later) else delay[-1]
    axes.plot(
        place,
        delay - shift,
        color=COLOURS[example.label],
        marker=".",
        ms=3,
        ls="none",
        label=f"{example.label}: {words}",
    )
    axes.plot(1 / np.sqrt(np.append(mhz, 1.0)), line, color=EDGE, lw=1.0, ls="--")


def _modes(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    for axes, example in zip(panels, examples, strict=False):
        draw_wave(axes, example, (-0.15, example.at["peak"] + 2.6))
        time_us, ringing = strongest_mode(example)
        axes.axvspan(time_us[0], time_us[-1], color="#faf9f4", lw=0)
        if np.isfinite(example.values.get("mode_mhz", np.nan)):
            axes.plot(time_us, ringing, color=EDGE, lw=1.2, ls="--", label="its strongest damped oscillation")
            axes.legend(frameon=False, fontsize=SMALL, loc="center right", bbox_to_anchor=(1.0, 0.75))
        words = [said(example, name) for name in ("mode_mhz", "mode_q", "mode_share")]
        axes.text(0.98, 0.97, "\n".join(words), transform=axes.transAxes, ha="right", va="top", fontsize=SMALL)
        axes.set_xlabel("time from onset [µs]; shaded: what is fitted")


def _plain(panels: Sequence[Panel], examples: Sequence[FeatureExample]) -> None:
    """A family without a drawing of its own: the waves that its values are of."""
    (axes,) = panels
    for example in examples:
        draw_wave(axes, example, (-0.3, 4.0))
    axes.set_xlabel("time from onset [µs]")


_DRAWINGS: Mapping[str, tuple[Draw, tuple[float, ...]]] = {
    "edges": (_edges, (1.25, 0.75)),
    "spectrum": (_spectrum, (2.0,)),
    "scales": (_scales, (2.0,)),
    "ringing": (_ringing, (2.0,)),
    "spread": (_spread, (1.1, 0.95)),
    "arrival": (_arrival, (0.8, 1.2)),
    "copies": (_copies, (1.0, 0.6, 0.5)),
    "tilt": (_tilt, (0.65, 0.75, 0.75)),
    "modes": (_modes, (1.0, 1.0)),
}
