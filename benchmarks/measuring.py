"""What every benchmark shares: one core, times of the process, tables. Import it before numpy: it limits the threads."""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[name] = "1"

import time

import numpy as np

#: Repeats of a measured call; odd, so that the median is one of them.
REPEATS = 5


def interleaved(calls, repeats=REPEATS):
    """Processor seconds of every named call, (repeats,) each; all are called in turn, so that load falls on all alike."""
    spent = {name: [] for name in calls}
    for call in calls.values():
        call()  # compiles and fills caches
    for _ in range(repeats):
        for name, call in calls.items():
            begun = time.process_time()
            call()
            spent[name].append(time.process_time() - begun)
    return {name: np.array(seconds) for name, seconds in spent.items()}


def times_faster(spent, name, peer):
    """Median over the repeats of how many times faster one call is than its peer."""
    return float(np.median(spent[peer] / spent[name]))


def three(value):
    """A figure with three significant digits; what was not measured is a dash."""
    if value is None or (isinstance(value, float) and not np.isfinite(value)):
        return "–"
    if isinstance(value, str):
        return value
    if value == 0:
        return "0"
    digits = max(0, 2 - int(np.floor(np.log10(abs(value)) + 1e-9)))
    return f"{float(f'{value:.3g}'):,.{digits}f}"


def percent(share):
    """A share as whole per cent."""
    return "–" if share is None or not np.isfinite(share) else f"{100 * share:.0f}"


def table(header, rows):
    """Print a table in Markdown."""
    print("\n| " + " | ".join(header) + " |\n|" + " --- |" * len(header))
    for row in rows:
        print("| " + " | ".join(three(cell) for cell in row) + " |")
    print()


def aims(rows):
    """Print what was aimed at and whether it was reached: (what, aim, reached, whether at least or at most)."""
    met = {"at least": lambda reached, aim: reached >= aim, "at most": lambda reached, aim: reached <= aim}
    table(
        ("aim", "", "reached", "met"),
        [
            (what, f"{side} {aim:g}", reached, "yes" if met[side](reached, aim) else "**no**")
            for what, side, aim, reached in rows
        ],
    )


def weak(*sentences):
    """Print what is weak about the figures or the result."""
    print("Weak here:\n")
    for sentence in sentences:
        print(f"- {sentence}")
    print()
