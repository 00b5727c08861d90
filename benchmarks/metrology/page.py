"""What the metrology found, as tables, as one page of curves, and as the figures that sentences use."""

from typing import NamedTuple

import matplotlib as mpl
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from pdclass.features import BY_NAME, CATALOGUE, FAMILIES

COLOURS = {"white": "#332288", "carriers": "#CC6677", "bias": "#44AA99", "rate": "#888888", "band": "#DDCC77"}
NAMES = [feature.name for feature in CATALOGUE]
FAMILY_OF = {feature.name: family for family, (features, _) in FAMILIES.items() for feature in features}
COLUMNS, LOWEST, HIGHEST = 9, 0.004, 12.0
#: Where the markers beside the curves stand.
BESIDE = {"rate": 46.0, "upper": 50.0, "lower": 54.0}
SHOWN_UPPER_HZ, SHOWN_LOWER_HZ = 14e6, 0.3e6


class Errors(NamedTuple):
    """Value less truth of every feature under one condition: median and half the 16-84 % range over all pulses.

    `share` is that of the pulses with a truth in which it was measurable; `seen_db` the median ratio of measured peak
    to noise [dB].
    """

    bias: np.ndarray
    spread: np.ndarray
    share: np.ndarray
    seen_db: float


class Findings(NamedTuple):
    """Errors by (noise, dB), by rate [Hz], by band [Hz, Hz]; class differences; declared gates; clear from [dB]."""

    noise: dict
    rate: dict
    band: dict
    difference: np.ndarray
    declared: dict
    clear: dict
    reference_hz: tuple


def write_tables(found, path):
    path.write_text("\n".join([*_head(found), *_short(found), *_against_noise(found), *_against_chain(found)]) + "\n")


def write_clearness(found, path):
    """The ratios that sentences name, as a module of the package."""
    rows = [f'    "{name}": {_literal(value)},' for name, value in zip(NAMES, seen_from(found), strict=True)]
    before = path.read_text().partition("CLEAR_SNR_DB: ")[0]
    path.write_text(before + "CLEAR_SNR_DB: Mapping[str, float] = {\n" + "\n".join(rows) + "\n}\n")


def seen_from(found):
    """From which measured ratio of peak to noise on a feature is clear in white noise [dB]; infinite = nowhere, NaN = not known."""
    seen = {snr_db: round(errors.seen_db) for (kind, snr_db), errors in found.noise.items() if kind == "white"}
    return [float(seen.get(value, value)) for value in found.clear["white"]]


def _literal(value):
    return f"{value:.1f}" if np.isfinite(value) else "math.nan" if np.isnan(value) else "math.inf"


def _head(found):
    pulses = "5 closed-form shapes and 48 simulated pulses, a dozen of each label"
    seen = [
        f"| measured, {words} | " + " | ".join(f"{found.noise[kind, snr].seen_db:.1f}" for snr in _ratios(found)) + " |"
        for kind, words in (("white", "white noise"), ("carriers", "with carriers"))
    ]
    return [
        "# Bias and spread of every feature",
        "",
        f"Written by `python benchmarks/feature_metrology.py`: {pulses}. Curves: "
        "[feature-metrology.png](../docs/pictures/feature-metrology.png).",
        "",
        "* **Truth** = the same pulse 60 dB over the noise, at 100 MS/s, behind a sensor of 0.1-40 MHz.",
        "* A cell is **bias ± spread**: median, and half the 16-84 % range, of value less truth over all pulses and "
        "draws. A bias that differs from pulse to pulse counts as spread. `–` = measurable in under a quarter of them.",
        "* **SNR** = true peak over the white noise, both in the analysis band. The measured one is higher for weak "
        "pulses, for the largest of many noisy samples counts as their peak:",
        "",
        "| planted [dB] | " + " | ".join(f"{snr}" for snr in _ratios(found)) + " |",
        "|---|" + "---|" * len(_ratios(found)),
        *seen,
        "",
        "  So a gate at 6 or 9 dB hardly ever closes.",
        "* **Carriers**: four tones, 0.75 to 2 times the noise. Analysis band and reduction of carriers together then win "
        "10.5 dB over what is recorded; for the pulses of 400 circuits of the base world they win 4 dB in the median, and "
        "so much for 2 in 100 only: a hard case. What is left of the carriers counts as error.",
        "* The onset is given and the end lies where the noiseless pulse sinks into the noise; what finding a pulse "
        "adds is not in these tables.",
        "* **Between classes** = largest less smallest of the medians of the four labels, of the base bundle's "
        "reference pulses. Where medians hardly differ a feature may still tell labels apart by how it scatters, or "
        "together with others: a figure of noise, not of worth.",
        "* **Clear from** = the lowest planted ratio of the grid from which on the spread stays below half of that. "
        "Below it a reason says that noise blurs the value. The value itself is kept for the trees: made missing below "
        "these ratios, the features of an earlier catalogue taught them less (tried by circuit; not repeated since).",
        "",
    ]


def _ratios(found):
    return sorted({snr for _, snr in found.noise})


def _short(found):
    rows = []
    for place, name in enumerate(NAMES):
        feature = BY_NAME[name]
        errors = [_total(found.rate[rate], place) for rate in found.rate]
        worst = _plain(np.nanmax(errors), place, found) if np.isfinite(errors).any() else "–"
        bands = [_cell(found.band[band], place, found) for band in _shown_bands(found)]
        clear = [_decibels(found.clear[kind][place]) for kind in ("white", "carriers")]
        size = _plain(found.difference[place], place, found)
        gate = f"{found.declared[name]:g}" if found.declared[name] else "–"
        cells = [f"`{name}`", feature.unit or "1", size, *clear, gate, worst, f"{feature.tolerance:g}", *bands]
        rows.append("| " + " | ".join(cells) + " |")
    return [
        "## In short",
        "",
        "Rate: the largest error (root of bias² + spread²) among 62.5 to 250 MS/s, to be held against the tolerance "
        "that the feature declares. Sensor: bias ± spread behind one that ends at 14 MHz, and one that begins at "
        "0.3 MHz.",
        "",
        "| feature | unit | between classes | clear from [dB] | with carriers | gate [dB] | rate | tolerance "
        "| to 14 MHz | from 0.3 MHz |",
        "|---|---|---|---|---|---|---|---|---|---|",
        *rows,
        "",
    ]


def _shown_bands(found):
    low, high = found.reference_hz
    return (low, SHOWN_UPPER_HZ), (SHOWN_LOWER_HZ, high)


def _decibels(value):
    return f"{value:g}" if np.isfinite(value) else "> 40"


def _against_noise(found):
    lines = []
    for kind, title in (("white", "White noise"), ("carriers", "Noise with carriers")):
        columns = {f"{snr} dB": found.noise[kind, snr] for snr in _ratios(found)}
        lines += [f"## {title}, by SNR", "", *_table(columns, found), ""]
    return lines


def _against_chain(found):
    low, high = found.reference_hz
    rates = {f"{rate / 1e6:g} MS/s": errors for rate, errors in found.rate.items()}
    upper = {f"to {band[1] / 1e6:g} MHz": errors for band, errors in found.band.items() if band[0] == low}
    lower = {f"from {band[0] / 1e6:g} MHz": errors for band, errors in found.band.items() if band[1] == high}
    return [
        "## By sampling rate",
        "",
        "60 dB; all rates behind one chain that ends at 20 MHz, so that only the sampling differs.",
        "",
        *_table(rates, found),
        "",
        "## By upper corner of the sensor",
        "",
        "60 dB, 100 MS/s. `–` where the declared need of the chain is not met.",
        "",
        *_table(upper, found),
        "",
        "## By lower corner of the sensor",
        "",
        *_table(lower, found),
    ]


def _table(columns, found):
    head = "| feature | unit | " + " | ".join(columns) + " |"
    rows = [
        f"| `{name}` | {BY_NAME[name].unit or '1'} | "
        + " | ".join(_cell(errors, place, found) for errors in columns.values())
        + " |"
        for place, name in enumerate(NAMES)
    ]
    return [head, "|---|---|" + "---|" * len(columns), *rows]


def _cell(errors, place, found):
    bias, spread = errors.bias[place], errors.spread[place]
    if not np.isfinite(bias):
        return "–"
    return f"{_plain(bias, place, found)} ± {_plain(spread, place, found)}"


def _plain(value, place, found):
    """Three significant digits, and none that is finer than a thousandth of the difference between classes."""
    if not np.isfinite(value):
        return "–"
    scale = found.difference[place] or BY_NAME[NAMES[place]].tolerance
    scale = scale if np.isfinite(scale) else BY_NAME[NAMES[place]].tolerance
    finest = int(np.floor(np.log10(scale))) - 3
    size = int(np.floor(np.log10(abs(value)))) - 2 if value else finest
    digits = max(-max(size, finest), 0)
    text = f"{round(value, -max(size, finest)):.{digits}f}"
    return "0" if float(text) == 0 else text


def _total(errors, place):
    return float(np.hypot(errors.bias[place], errors.spread[place]))


def draw(found, path):
    """Small multiples, one a feature: errors as shares of the difference between classes."""
    with mpl.rc_context({"font.size": 7.5, "axes.spines.top": False, "axes.spines.right": False}):
        rows = -(-len(NAMES) // COLUMNS)
        figure = Figure(figsize=(17.0, 1.75 * rows + 1.3))
        FigureCanvasAgg(figure)
        grid = figure.subplots(rows, COLUMNS, sharex=True, sharey=True, squeeze=False).ravel()
        figure.subplots_adjust(
            left=0.035, right=0.995, bottom=0.022, top=1 - 1.15 / (1.75 * rows + 1.3), wspace=0.1, hspace=0.32
        )
        for place, panel in enumerate(grid):
            if place < len(NAMES):
                _panel(panel, found, place)
            else:
                panel.set_axis_off()
        _legend(figure, grid[0])
        path.parent.mkdir(parents=True, exist_ok=True)
        figure.savefig(path, dpi=100, metadata={"Software": None})


def _panel(panel, found, place):
    name, difference = NAMES[place], found.difference[place]
    panel.set_yscale("log")
    panel.set_xlim(3, 57)
    panel.set_ylim(LOWEST, HIGHEST)
    panel.axhspan(0.5, HIGHEST, color="#f3ece4", lw=0)
    panel.axvline(43, color="#bbbbbb", lw=0.5)
    panel.set_xticks([6, 12, 18, 24, 30, 40], minor=False)
    panel.set_yticks([0.01, 0.1, 1, 10], ["0.01", "0.1", "1", "10"])
    panel.minorticks_off()
    panel.tick_params(length=2, pad=1.5, labelsize=6.5)
    panel.set_title(name, loc="left", fontsize=7.5, pad=2.5, color="#222222", fontweight="bold")
    panel.text(0.02, 0.04, FAMILY_OF[name], transform=panel.transAxes, fontsize=6.5, color="#888888")
    panel.tick_params(labelbottom=place + COLUMNS >= len(NAMES))
    if not difference > 0:
        panel.text(24, 0.05, "class medians are alike", ha="center", fontsize=7, color="#777777")
        return
    for kind, marker, dashes in (("carriers", "^", "--"), ("white", "o", "-")):
        spread = [found.noise[kind, snr].spread[place] / difference for snr in _ratios(found)]
        panel.plot(_ratios(found), _within(spread), dashes, marker=marker, ms=3, lw=1.1, color=COLOURS[kind])
    bias = [abs(found.noise["white", snr].bias[place]) / difference for snr in _ratios(found)]
    panel.plot(_ratios(found), _within(bias), ":", lw=1.1, color=COLOURS["bias"])
    upper, lower = _shown_bands(found)
    rate = [_total(errors, place) for errors in found.rate.values()]
    beside = {
        "rate": (np.nanmax(rate) if np.isfinite(rate).any() else np.nan, "s"),
        "upper": (_total(found.band[upper], place), "D"),
        "lower": (_total(found.band[lower], place), "v"),
    }
    for kind, (error, marker) in beside.items():
        colour = COLOURS["rate" if kind == "rate" else "band"]
        panel.plot(BESIDE[kind], _within(error / difference), marker, ms=4, mfc=colour, mec="#222222", mew=0.5)


def _within(values):
    return np.clip(values, LOWEST * 1.15, HIGHEST / 1.15)


def _legend(figure, panel):
    kinds = (
        (COLOURS["white"], "-", "o", "spread, white noise"),
        (COLOURS["carriers"], "--", "^", "spread, noise with carriers"),
        (COLOURS["bias"], ":", "", "bias, white noise"),
        (COLOURS["rate"], "", "s", "62.5 to 250 MS/s, worst"),
        (COLOURS["band"], "", "D", "sensor that ends at 14 MHz"),
        (COLOURS["band"], "", "v", "sensor that begins at 0.3 MHz"),
    )
    handles = [
        panel.plot([], [], line, marker=marker, ms=5, color=colour, mec=colour if line else "#222222", label=words)[0]
        for colour, line, marker, words in kinds
    ]
    height = figure.get_figheight()
    figure.legend(handles=handles, loc="upper left", ncols=6, frameon=False, bbox_to_anchor=(0.03, 1 - 0.5 / height))
    figure.text(
        0.035,
        1 - 0.28 / height,
        "How far noise, sampling and sensor move each feature, as a share of how far the medians of the labels lie apart",
        fontsize=12,
        fontweight="bold",
    )
    figure.text(
        0.035,
        1 - 0.48 / height,
        "Error over class difference (logarithmic) against true peak over noise [dB]; shaded: more than half of the "
        "difference. Beside the curves, at 60 dB: other rates and sensors. Points at a rim lie beyond it.",
        fontsize=9,
        color="#444444",
    )
