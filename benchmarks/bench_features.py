"""Features of pulses: the package against the same features measured plainly, and two general-purpose libraries.

Pulses of the base world at 100 MS/s, found by the extraction. The plain way (`plain_features`) measures the same
catalogue pulse by pulse with numpy; its values are compared as well. The libraries measure their own features, so they
stand for what a general tool costs, not for a peer of equal duty. Modes (matrix pencil) have a line of their own.
Run with `make bench`, or alone.
"""

import measuring  # first: one thread

import warnings

import numpy as np
import pandas as pd

from pdclass.extract import extract
from pdclass.features import BY_NAME, CATALOGUE, FAMILIES, feature_table
from pdclass.jobs.simulate import scenario_path
from pdclass.pulses import PulseSet
from pdclass.sim.scenario import capture_of, circuit_of, read_scenario

PULSES, PLAIN_PULSES, LIBRARY_PULSES = 512, 64, 4
MODES = "modes"


def drawn_pulses():
    """Pulses of one rate from many circuits, echoes left out."""
    world = read_scenario(scenario_path("base"))
    world = world.model_copy(update={"chain": world.chain.model_copy(update={"rates_hz": (100e6,)})})
    waves, chains, tables, number = [], [], [], 0
    while sum(len(table) for table in tables) < PULSES:
        number += 1
        pulses = extract(capture_of(world, circuit_of(world, number, seed=4), number, seed=4)).pulses
        pulses = pulses.take(pulses.table["echo_of"].isna().to_numpy())
        tables.append(pulses.table.assign(chain=np.int16(len(chains))))
        waves.append(pulses.waves)
        chains += pulses.chains
    every = PulseSet(np.concatenate(waves), tuple(chains), pd.concat(tables))
    return every.take(np.arange(PULSES))


def plain_calls(pulses):
    """Calls of the plain way without and with modes; none where it is not there."""
    try:
        import plain_features
    except ImportError:
        return {}

    def measured(chosen):
        for place in range(len(pulses.table)):
            chain = pulses.chains[int(pulses.table["chain"].iloc[place])]
            duration_us = float(pulses.table["duration_us"].iloc[place])
            window = plain_features.prepared(pulses.waves[place], chain, duration_us)
            if window is not None:
                for measure in chosen:
                    measure(window)

    chosen = [measure for measure in plain_features.MEASURES if MODES not in measure.__name__]
    return {"plain": lambda: measured(chosen)}


def library_calls(waves):
    """Calls of two general-purpose feature libraries on a few waves, one process, all of their features."""
    import tsfel
    from tsfresh import extract_features
    from tsfresh.feature_extraction import EfficientFCParameters

    every = tsfel.get_features_by_domain()
    frames = [pd.DataFrame({"wave": wave.astype(float)}) for wave in waves]
    long = pd.DataFrame({"id": np.repeat(np.arange(len(waves)), waves.shape[1]), "wave": waves.astype(float).ravel()})

    def by_tsfel():
        return [tsfel.calc_window_features(every, frame, 100e6, verbose=0, single_window=True) for frame in frames]

    def by_tsfresh():
        options = {"default_fc_parameters": EfficientFCParameters(), "n_jobs": 0, "disable_progressbar": True}
        return extract_features(long, column_id="id", **options)

    return {"tsfel": by_tsfel, "tsfresh": by_tsfresh}


def disagreement(pulses):
    """Largest difference from the plain way in tolerances of the feature, its name, and values that only one has."""
    import plain_features

    own, plain = feature_table(pulses), plain_features.plain_table(pulses)
    tolerance = np.array([feature.tolerance for feature in CATALOGUE])
    apart = np.nan_to_num(np.abs(own - plain) / tolerance)
    place = np.unravel_index(np.argmax(apart), apart.shape)
    lone = np.count_nonzero(np.isnan(own) != np.isnan(plain))
    return float(apart[place]), CATALOGUE[place[1]].name, lone, own.size


def main():
    warnings.filterwarnings("ignore")  # the libraries warn of their own future
    pulses = drawn_pulses()
    few, fewest = pulses.take(np.arange(PLAIN_PULSES)), pulses.take(np.arange(LIBRARY_PULSES))
    modes = [feature.name for feature in FAMILIES[MODES][0]] if MODES in FAMILIES else []
    others = [name for name in BY_NAME if name not in modes]
    libraries = library_calls(np.nan_to_num(fewest.waves))
    counts = {name: call() for name, call in libraries.items()}
    counts = {"tsfel": counts["tsfel"][0].shape[1], "tsfresh": counts["tsfresh"].shape[1]}
    calls = {"own": lambda: feature_table(pulses, others), **plain_calls(few), **libraries}
    if modes:
        calls["modes"] = lambda: feature_table(pulses, modes)
    spent = measuring.interleaved(calls)
    sizes = {"own": PULSES, "modes": PULSES, "plain": PLAIN_PULSES, "tsfel": LIBRARY_PULSES, "tsfresh": LIBRARY_PULSES}
    each = {name: seconds / sizes[name] for name, seconds in spent.items()}
    words = {
        "own": ("pdclass `feature_table`, modes left out", str(len(others))),
        "plain": ("the same features, plain loop over pulses", str(len(others))),
        "tsfel": ("tsfel, all domains", str(counts["tsfel"])),
        "tsfresh": ("tsfresh, efficient set", str(counts["tsfresh"])),
    }
    rows = [
        (
            *words[name],
            1 / np.median(each[name]),
            measuring.times_faster(each, name, "plain") if "plain" in each else None,
            measuring.times_faster(each, "own", name),
        )
        for name in words
        if name in each
    ]
    print(
        f"Windows of 20 us at 100 MS/s; {PULSES} pulses, the plain loop on {PLAIN_PULSES}, the libraries on {LIBRARY_PULSES}."
    )
    measuring.table(("way", "features", "pulses/s", "× plain", "pdclass × this"), rows)
    if modes:
        print(
            f"Modes (matrix pencil, {len(modes)} features): {measuring.three(1e6 * np.median(each['modes']))} us a pulse, preparing the window included.\n"
        )
    if "plain" not in each:
        print(
            "The plain loop is not there (`benchmarks/plain_features`); its ratio and the agreement with it are not measured.\n"
        )
    else:
        apart, name, lone, values = disagreement(few)
        print(
            f"Largest difference from the plain loop: {measuring.three(apart)} of a feature's stated tolerance (`{name}`); {lone} of {values} values are measurable in one way only.\n"
        )
        measuring.aims(
            [
                (
                    "features, modes left out, × the plain loop",
                    "at least",
                    40,
                    measuring.times_faster(each, "own", "plain"),
                )
            ]
        )
    measuring.weak(
        "The libraries measure other features, most of which mean nothing here; few windows, all in one process.",
        "One rate: at other rates a window is brought to the analysis rate first, which costs both ways alike.",
    )


if __name__ == "__main__":
    main()
