"""Extraction against plain detectors of general-purpose libraries, in one run on one core.

Cycles of 2,000,000 samples with seven carriers and 200 pulses of our own shapes. Each peer's threshold is calibrated to
at most one false event a cycle on cycles of noise with carriers; the extraction is asked for one. A pulse counts as
found if an event begins from 0.64 us before to 4.5 us after its onset. Peak/sigma is that of the white noise, carriers
left out. Speed is processor time over records of five cycles, all detectors in turn, median of the repeats.

Run with `make bench`, or alone.
"""

import measuring  # first: one thread

import numpy as np
from cycles import KINDS, SAMPLES, burst_cycle, cycle
from peers import FRESH_CYCLES, PEERS, WORDS, calibrated, own_events, own_flags, peer_events

HEIGHTS = (4.0, 6.0, 8.0, 12.0, 20.0)
CYCLES_A_HEIGHT, SPEED_CYCLES, BURST_CYCLES = 2, 5, 3
NEAR = (64, 450)
#: Between bursts events are dense: only one this near counts [samples].
BURST_NEAR = (30, 30)


def found(events, onsets, near=NEAR):
    """Whether an event begins near each onset, (pulses,) bool."""
    events = np.sort(events)
    first = np.searchsorted(events, onsets - near[0], side="left")
    return np.searchsorted(events, onsets + near[1], side="right") > first


def detectors():
    """Events of a record by every detector, and the thresholds of the peers."""
    thresholds = {name: calibrated(crossings) for name, crossings in PEERS.items()}
    calls = {
        name: (lambda counts, name=name, z=threshold: peer_events(name, z, counts))
        for name, threshold in thresholds.items()
    }
    return {**calls, "whole": own_events}, thresholds


def shares(calls):
    """Share found by height, and at peak/sigma 8 by kind, for every detector."""
    by_height = {name: [] for name in calls}
    by_kind = {name: [] for name in calls}
    for height in HEIGHTS:
        records = [cycle(height, round(100 * height) + seed) for seed in range(CYCLES_A_HEIGHT)]
        kinds = np.concatenate([kinds for _, _, kinds in records])
        for name, call in calls.items():
            hits = np.concatenate([found(call(counts), onsets) for counts, onsets, _ in records])
            by_height[name].append(hits.mean())
            if height == 8.0:
                by_kind[name] = [hits[kinds == kind].mean() for kind in KINDS]
    return by_height, by_kind


def speeds(calls):
    """Processor seconds of every detector, the kernel among them, on a record of five cycles."""
    counts, _, _ = cycle(12.0, 7, SPEED_CYCLES)
    run = {name: (lambda call=call: call(counts)) for name, call in calls.items()}
    run["kernel"] = lambda: own_flags(counts)
    return measuring.interleaved(run)


def false_events(calls):
    """False events a cycle on fresh cycles of noise with carriers."""
    records = [cycle(0.0, seed)[0] for seed in range(500, 500 + FRESH_CYCLES)]
    return {name: np.mean([call(counts).size for counts in records]) for name, call in calls.items()}


def between_bursts(calls):
    """Share of the pulses between bursts that each detector finds, and the share found by chance, without pulses."""
    rows = []
    for kind in ("ringing", "noisy"):
        for name, call in calls.items():
            by_pulses = [
                burst_cycle(12.0, 70 + seed, kind, planted=planted)
                for planted in (True, False)
                for seed in range(BURST_CYCLES)
            ]
            hits = [found(call(counts), onsets, BURST_NEAR).mean() for counts, onsets in by_pulses]
            rows.append((kind, name, np.mean(hits[:BURST_CYCLES]), np.mean(hits[BURST_CYCLES:])))
    return rows


def main():
    calls, thresholds = detectors()
    by_height, by_kind = shares(calls)
    quiet, spent = false_events(calls), speeds(calls)
    samples = SPEED_CYCLES * SAMPLES
    rows = []
    for name in (*PEERS, "kernel", "whole"):
        rate = samples / np.median(spent[name]) / 1e6
        faster = measuring.times_faster(spent, name, "wavedec")
        seen = [measuring.percent(share) for share in by_height.get(name, [])]
        kinds = [measuring.percent(share) for share in by_kind.get(name, [])]
        rows.append(
            (
                WORDS[name],
                thresholds.get(name),
                rate,
                faster,
                quiet.get(name),
                " / ".join(seen) or None,
                " / ".join(kinds) or None,
            )
        )
    heights = " / ".join(f"{height:g}" for height in HEIGHTS)
    print("Speed and what is found at about one false event a cycle.")
    measuring.table(
        (
            "detector",
            "threshold [noise levels]",
            "MS/s",
            "× `wavedec`",
            "false a cycle",
            f"found % at peak/sigma {heights}",
            f"at 8: {' / '.join(KINDS)}",
        ),
        rows,
    )
    print(
        "Bursts of 3 us, five times as high as the pulses, every 10 us; pulses at peak/sigma 12 that begin outside a burst."
    )
    print(
        "Found: an event within 0.3 us of the onset. By chance: the same places in the same record without the pulses."
    )
    bursts = between_bursts(calls)
    measuring.table(
        ("bursts", "detector", "found %", "by chance %"),
        [(kind, WORDS[name], measuring.percent(hit), measuring.percent(chance)) for kind, name, hit, chance in bursts],
    )
    own = by_height["whole"]
    measuring.aims(
        [
            ("detection kernel, × `wavedec`", "at least", 2.2, measuring.times_faster(spent, "kernel", "wavedec")),
            ("whole extraction, × `wavedec`", "at least", 1.8, measuring.times_faster(spent, "whole", "wavedec")),
            ("found % at peak/sigma 8", "at least", 95, 100 * own[HEIGHTS.index(8.0)]),
            ("false events a cycle", "at most", 1, quiet["whole"]),
            *(
                (f"found % between {kind} bursts", "at least", 90, 100 * hit)
                for kind, name, hit, _ in bursts
                if name == "whole"
            ),
        ]
    )
    measuring.weak(
        f"{CYCLES_A_HEIGHT * 200} pulses a height: a share is uncertain by up to 2.5 points (one standard error), one of a kind by up to 5.",
        f"False events are counted on {FRESH_CYCLES} cycles: a rate of 1 is uncertain by 0.4.",
        "The peers are plain on purpose: one threshold for all scales, no notch for carriers. Who tunes them by hand to a site finds more.",
        "The carriers stand still in frequency and their level changes smoothly; what fades or switches is the report card's matter.",
        "The peers join what is nearer than 3 us to one event, and so lose pulses right after a burst.",
        "Speed is that of 200 pulses a cycle; the kernel's share does not depend on it, the rest does.",
    )


if __name__ == "__main__":
    main()
