"""Report card of the extraction on simulated captures whose truth is known, beside the plain wavelet detector.

Whole circuits of the base world (their own cable, sensor, rate, noise, carriers, interference), with pulses planted low:
4 to 34 dB above the recorded noise, carriers included (8 times the noise is 18 dB). A planted pulse counts as found if
an event begins from 1 us before to 3 us after its onset; pulses that begin within 5 us of another are left out, for
which of two overlapping ones was found cannot be said. The plain detector (PyWavelets, every scale against its own
noise level) has one threshold for all circuits, the lowest that leaves at most one false event a cycle on the
background of other circuits. Draws `pictures/extraction.png`. Run with `make bench`, or alone.
"""

import measuring  # first: one thread

import sys
from pathlib import Path

import numpy as np
import pandas as pd

from pdclass.extract import extract
from pdclass.jobs.simulate import scenario_path
from pdclass.pulses import LABELS
from pdclass.sim.scenario import capture_of, circuit_of, read_scenario
from pdclass.wavelets import crossing_events, scale_crossings

PICTURE = Path(__file__).parent / "pictures" / "extraction.png"
HEIGHTS_DB = (4.0, 34.0)
EDGES_DB = (4, 6, 8, 10, 12, 14, 16, 18, 22, 26, 34)
ONSET_EDGES_DB = (8, 12, 16, 20, 26, 34)
LIMIT_EDGES = (0.0, 0.35, 0.5, 0.7, 1.0, 1.4, 2.0, 2.8, np.inf)
CARRIER_EDGES, CARRIER_WORDS = (0, 1, 3, 5, 99), ("none", "1 or 2", "3 or 4", "5 or more")
BEFORE_S, AFTER_S, APART_S = 1e-6, 3e-6, 5e-6
#: What begins so long after a planted pulse may be its echo, and is no false event.
ECHOES_S = 60e-6
PLAIN_APART_S = 3e-6
GRID = np.arange(3.5, 14.0, 0.1)
SEED_PLANTED, SEED_CALIBRATION, SEED_QUIET = 31, 32, 33


def plain_crossings(capture):
    """What the plain detector sees of a capture, and from how far apart events count as two."""
    return scale_crossings(capture.counts, GRID[0]), round(PLAIN_APART_S * capture.chain.rate_hz)


def calibrated(world, count):
    """The lowest threshold of the plain detector with at most one false event a cycle in the background."""
    seen, cycles = [], 0.0
    for number in range(1, count + 1):
        capture = capture_of(
            world, circuit_of(world, number, seed=SEED_CALIBRATION), number, seed=SEED_CALIBRATION, pulses=0
        )
        seen.append(plain_crossings(capture))
        cycles += capture.duration_s * capture.chain.mains_hz
    for threshold in GRID:
        if sum(crossing_events(crossings, threshold, apart).size for crossings, apart in seen) <= cycles:
            return float(threshold)
    raise SystemExit(f"no threshold up to {GRID[-1]:g} noise levels leaves at most one false event a cycle")


def first_after(events, onsets, rate_hz):
    """From each onset to the first event from 1 us before to 3 us after it [s]; NaN = none."""
    events = np.append(np.sort(events), np.inf)
    begins = onsets - BEFORE_S * rate_hz
    first = events[np.searchsorted(events, begins)]
    return np.where(first <= onsets + AFTER_S * rate_hz, (first - onsets) / rate_hz, np.nan)


def unexplained(events, onsets, rate_hz):
    """Events that no planted pulse explains, nor its echoes."""
    last = np.searchsorted(onsets, events + BEFORE_S * rate_hz, side="right") - 1
    since = np.where(last >= 0, events - onsets[np.maximum(last, 0)], np.inf)
    return int(np.count_nonzero(since > ECHOES_S * rate_hz))


def judged(world, number, threshold):
    """Planted pulses of one circuit that stand apart, and what the capture holds beyond them."""
    circuit = circuit_of(world, number, seed=SEED_PLANTED)
    capture = capture_of(world, circuit, number, seed=SEED_PLANTED)
    rate_hz = capture.chain.rate_hz
    result = extract(capture)
    table = result.pulses.table
    own = table["onset_s"].to_numpy() * rate_hz
    crossings, apart = plain_crossings(capture)
    plain = crossing_events(crossings, threshold, apart)
    notes = sorted(capture.annotations, key=lambda note: note.onset_sample)
    onsets = np.array([note.onset_sample for note in notes], float)
    heights_db = np.array([float(note.comment.split()[1]) for note in notes])
    gaps = np.diff(onsets, prepend=-np.inf, append=np.inf) / rate_hz
    echo = table["echo_of"].notna().to_numpy()
    rows = pd.DataFrame(
        {
            "label": [note.label for note in notes],
            "family": [note.family for note in notes],
            "height_db": heights_db,
            "own_s": first_after(own, onsets, rate_hz),
            "kept_s": first_after(own[~echo], onsets, rate_hz),
            "plain_s": first_after(plain, onsets, rate_hz),
            "over_limit": 10 ** (heights_db / 20) * circuit.noise_v / result.detection_limit_v,
            "beside": circuit.traits["interference"],
            "carriers": len(circuit.reception.carriers),
            "communication": bool(circuit.reception.communication),
        }
    )[np.minimum(gaps[:-1], gaps[1:]) > APART_S]
    beyond = (unexplained(own[~echo], onsets, rate_hz), unexplained(plain, onsets, rate_hz))
    cycles = (capture.duration_s - len(onsets) * (BEFORE_S + ECHOES_S)) * capture.chain.mains_hz
    return rows, {"beside": circuit.traits["interference"], "own": beyond[0], "plain": beyond[1], "cycles": cycles}


def quiet(world, number, threshold):
    """False events in the background alone, ours and the plain detector's."""
    circuit = circuit_of(world, number, seed=SEED_QUIET)
    capture = capture_of(world, circuit, number, seed=SEED_QUIET, pulses=0)
    crossings, apart = plain_crossings(capture)
    return {
        "carriers": len(circuit.reception.carriers),
        "communication": bool(circuit.reception.communication),
        "own": extract(capture).found,
        "plain": crossing_events(crossings, threshold, apart).size,
        "cycles": capture.duration_s * capture.chain.mains_hz,
    }


def both(rows):
    """Found by us and by the plain detector, in per cent."""
    return f"{measuring.percent(rows['own_s'].notna().mean())} ({measuring.percent(rows['plain_s'].notna().mean())})"


def by_height(rows):
    band = pd.cut(rows["height_db"], EDGES_DB, right=False)
    lines = []
    for label in LABELS:
        own = rows[rows["label"] == label]
        lines.append((label, *(both(part) for _, part in own.groupby(band, observed=False)), str(len(own))))
    print("Found % by class and height [dB over the recorded noise]; in brackets the plain detector.")
    measuring.table(("class", *(f"{a}-{b}" for a, b in zip(EDGES_DB, EDGES_DB[1:])), "pulses"), lines)


def by_limit(rows):
    band = pd.cut(rows["over_limit"], LIMIT_EDGES, right=False)
    lines = [
        (
            label,
            *(
                measuring.percent(part["own_s"].notna().mean())
                for _, part in rows[rows["label"] == label].groupby(band, observed=False)
            ),
        )
        for label in LABELS
    ]
    print("Found % by peak over the smallest findable pulse that the capture states (a Gaussian of 50 ns).")
    heads = [f"{a:g}-{b:g}" for a, b in zip(LIMIT_EDGES, LIMIT_EDGES[1:])]
    measuring.table(("class", *heads[:-1], f"over {LIMIT_EDGES[-2]:g}"), lines)


def by_onset(rows):
    lines = []
    for low, high in zip(ONSET_EDGES_DB, ONSET_EDGES_DB[1:]):
        part = rows[(rows["height_db"] >= low) & (rows["height_db"] < high)]
        errors = [1e9 * part[name].dropna().to_numpy() for name in ("own_s", "plain_s")]
        figures = [(round(np.median(one), 1), np.quantile(np.abs(one - np.median(one)), 0.9)) for one in errors]
        lines.append((f"{low}-{high}", *figures[0], *figures[1]))
    print("Onset found less the true one [ns]: median, and what 90 % keep within about it.")
    measuring.table(("height [dB]", "median", "90 % within", "plain: median", "plain: 90 % within"), lines)


def by_disturbance(rows, beyond):
    discharge = rows[(rows["label"] != "interference") & (rows["height_db"] < 18)]
    lines = []
    for family in sorted({one for text in beyond["beside"] for one in text.split("|") if one}):
        here = discharge[discharge["beside"].str.split("|").map(lambda names, f=family: f in names)]
        sent = rows[(rows["family"] == family) & (rows["label"] == "interference")]
        there = beyond[beyond["beside"].str.split("|").map(lambda names, f=family: f in names)]
        rates = there[["own", "plain"]].sum() / there["cycles"].sum()
        lines.append((family, both(here), str(len(here)), both(sent), str(len(sent)), rates["own"], rates["plain"]))
    print(
        "Beside each family of interference: discharges of 4 to 18 dB, the family's own pulses, and events that nothing"
    )
    print(
        "planted explains (later than 60 us after any planted pulse, echoes left out); in brackets the plain detector."
    )
    measuring.table(
        (
            "beside",
            "discharges found %",
            "discharges",
            "own pulses found %",
            "own pulses",
            "unexplained a cycle",
            "plain",
        ),
        lines,
    )
    carriers = pd.cut(discharge["carriers"], CARRIER_EDGES, right=False)
    lines = [
        (words, both(part), str(len(part)))
        for words, (_, part) in zip(CARRIER_WORDS, discharge.groupby(carriers, observed=False))
    ]
    print("Discharges of 4 to 18 dB by the number of broadcast carriers in the record.")
    measuring.table(("carriers", "found %", "discharges"), lines)


def in_the_background(alone):
    lines = []
    for named, part in (
        ("all", alone),
        ("no carriers, no communication", alone[(alone["carriers"] == 0) & ~alone["communication"]]),
        ("carriers", alone[(alone["carriers"] > 0) & ~alone["communication"]]),
        ("carrier communication", alone[alone["communication"]]),
    ):
        cycles = part["cycles"].sum() or np.nan
        lines.append((named, part["own"].sum() / cycles, part["plain"].sum() / cycles, cycles))
    print("False events a cycle in the background alone (circuits of their own).")
    measuring.table(("background", "pdclass", "plain", "cycles looked at"), lines)


def interval(hits, count, z=1.96):
    """Wilson's interval of a share, 95 %."""
    share, middle = hits / count, (hits + z**2 / 2) / (count + z**2)
    half = z * np.sqrt(share * (1 - share) / count + z**2 / (4 * count**2)) / (1 + z**2 / count)
    return middle - half, middle + half


def draw(rows, alone):
    """Found share against height, a panel a class: ours solid with its uncertainty, the plain detector dashed."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    from pdclass.report.plots import COLOURS, EDGE, MARKERS

    figure = Figure(figsize=(8.0, 5.6), layout="constrained")
    FigureCanvasAgg(figure)
    panels = figure.subplots(2, 2, sharex=True, sharey=True)
    middles = [(a + b) / 2 for a, b in zip(EDGES_DB, EDGES_DB[1:])]
    band = pd.cut(rows["height_db"], EDGES_DB, right=False)
    for panel, label in zip(panels.flat, LABELS):
        own = rows[rows["label"] == label]
        groups = [part for _, part in own.groupby(band, observed=False)]
        counts = np.array([len(part) for part in groups])
        for name, style, words in (("own_s", "-", "pdclass"), ("plain_s", "--", "plain wavelet detector")):
            hits = np.array([part[name].notna().sum() for part in groups])
            low, high = interval(hits, np.maximum(counts, 1))
            panel.fill_between(
                middles, 100 * low, 100 * high, color=COLOURS[label], alpha=0.18 if style == "-" else 0.09, lw=0
            )
            panel.plot(
                middles,
                100 * hits / np.maximum(counts, 1),
                style,
                color=COLOURS[label],
                lw=1.8,
                marker=MARKERS[label],
                ms=6,
                mec=EDGE,
                mew=0.7,
                mfc=COLOURS[label] if style == "-" else "white",
                label=words,
            )
        panel.set_title(f"{label} ({len(own)} pulses)", fontsize=10, loc="left")
        panel.set_ylim(-3, 104)
        panel.grid(color="#e4e4e4", lw=0.6)
        panel.spines[["top", "right"]].set_visible(False)
        panel.legend(frameon=False, fontsize=8.5, loc="lower right")
    for panel in panels[1]:
        panel.set_xlabel("peak over recorded noise [dB]")
    for panel in panels[:, 0]:
        panel.set_ylabel("pulses found [%]")
    own, plain = (alone[name].sum() / alone["cycles"].sum() for name in ("own", "plain"))
    figure.suptitle(
        "Pulses found in simulated captures (shaded: 95 % interval); "
        f"false events a cycle: pdclass {measuring.three(own)}, plain detector {measuring.three(plain)}",
        fontsize=10,
    )
    PICTURE.parent.mkdir(exist_ok=True)
    figure.savefig(PICTURE, dpi=132, metadata={"Software": None})


def main(count):
    world = read_scenario(scenario_path("base")).model_copy(update={"snr_db": HEIGHTS_DB})
    threshold = calibrated(world, count // 2)
    parts = [judged(world, number, threshold) for number in range(1, count + 1)]
    rows = pd.concat([part for part, _ in parts], ignore_index=True)
    beyond = pd.DataFrame([one for _, one in parts])
    alone = pd.DataFrame([quiet(world, number, threshold) for number in range(1, count // 2 + 1)])
    print(
        f"{count} circuits, {len(rows)} planted pulses that stand apart; the plain detector's threshold: {threshold:.1f} noise levels.\n"
    )
    by_height(rows)
    by_limit(rows)
    by_onset(rows[rows["label"] != "interference"])
    by_disturbance(rows, beyond)
    in_the_background(alone)
    draw(rows, alone)
    print("![Share of pulses found against height, by class](pictures/extraction.png)\n")
    eight = rows[(rows["height_db"] >= 18) & (rows["height_db"] < 20)]
    taken = rows[rows["own_s"].notna() & (rows["label"] != "interference")]
    measuring.aims(
        [
            (
                "found % of discharges of 18 to 20 dB (peak 8 to 10 times the noise)",
                "at least",
                95,
                100 * eight[eight["label"] != "interference"]["own_s"].notna().mean(),
            ),
            ("false events a cycle in the background", "at most", 1, alone["own"].sum() / alone["cycles"].sum()),
        ]
    )
    measuring.weak(
        f"Of the discharges found, {100 * (1 - taken['kept_s'].notna().mean()):.1f} % were taken for the echo of an earlier pulse: they are listed under it and get no verdict of their own.",
        "The plain detector's threshold comes from other circuits, so its false events here need not be one a cycle; ours is asked for one everywhere.",
        "Simulated captures only: the world's interference is what we thought of.",
        f"A class has about {len(rows) // 4 // (len(EDGES_DB) - 1)} pulses in a band of height: a share is uncertain by up to {100 * np.sqrt(0.25 / (len(rows) / 4 / (len(EDGES_DB) - 1))):.0f} points (one standard error).",
        "The true onset is that of the noiseless response at 2 % of its peak, to a whole sample; a slow rise out of the noise is found later by nature.",
        "Circuits of a family hold other families as well; a row is no clean comparison of one with another.",
    )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 200)
