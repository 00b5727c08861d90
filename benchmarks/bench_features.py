"""Features of pulses: the package against the same features measured plainly, and two general-purpose libraries.

Pulses of the base world at 100 MS/s, found by the extraction. The plain way (`plain_features`) measures the same
catalogue pulse by pulse with numpy; its values are compared as well. The libraries measure their own features, so they
stand for what a general tool costs, not for a peer of equal duty. Modes (matrix pencil, solved pulse by pulse both
ways) are left out of the ratio and have a line of their own. Run with `make bench`, or alone.
"""

import measuring  # first: one thread

import warnings

import numpy as np
import pandas as pd
import plain_features

from pdclass.extract import extract
from pdclass.features import BY_NAME, CATALOGUE, FAMILIES, feature_table
from pdclass.features.table import BATCH
from pdclass.features.window import chain_band_hz, counting_noise_v, prepared
from pdclass.jobs.simulate import scenario_path
from pdclass.pulses import PulseSet
from pdclass.sim.scenario import capture_of, circuit_of, read_scenario

PULSES, MODES_PULSES, PLAIN_PULSES, LIBRARY_PULSES = 4096, 512, 64, 4
MODES = "modes"
#: Families that the plain way measures otherwise on purpose (one shift of the transform); their values are not compared.
OTHERWISE = ("scales",)


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


def ready(pulses):
    """Plain windows of pulses, one at a time."""
    for place in range(len(pulses.table)):
        chain = pulses.chains[int(pulses.table["chain"].iloc[place])]
        window = plain_features.prepared(pulses.waves[place], chain, float(pulses.table["duration_us"].iloc[place]))
        if window is not None:
            yield window


def plainly(pulses, measures):
    """What the measures find, a dictionary a pulse."""
    return [{name: value for measure in measures for name, value in measure(window).items()}
            for window in ready(pulses)]  # fmt: skip


def by_family(pulses):
    """Microseconds a pulse of each step of the package and of the plain way, {step: (own, plain)}, medians."""
    duration_us = pulses.table["duration_us"].to_numpy(np.float64)
    low_hz, reach_hz = chain_band_hz(pulses.chains)[:, pulses.table["chain"].to_numpy(np.int64)]
    parts = [slice(first, first + BATCH) for first in range(0, len(duration_us), BATCH)]
    few = pulses.take(np.arange(PLAIN_PULSES))
    least_v = counting_noise_v(pulses.chains)[pulses.table["chain"].to_numpy(np.int64)]
    rows = duration_us, reach_hz, low_hz, least_v
    batches = [prepared(pulses.waves[part], *(each[part] for each in rows))[0] for part in parts]
    windows = list(ready(few))

    def all_prepared():
        for part in parts:
            # the spectrum of the own samples is shared by families, and made when first asked for
            prepared(pulses.waves[part], *(each[part] for each in rows))[0].own_power

    for batch in batches:
        batch.own_power
    calls = {("the window", "own"): all_prepared, ("the window", "plain"): lambda: list(ready(few))}
    for family, (_, measure) in FAMILIES.items():
        chosen = batches[: MODES_PULSES // BATCH] if family == MODES else batches
        calls[family, "own"] = lambda measure=measure, chosen=chosen: [measure(batch) for batch in chosen]
        plain = getattr(plain_features, f"measure_{family}")
        calls[family, "plain"] = lambda plain=plain: [plain(window) for window in windows]
    sizes = {"own": len(duration_us), "plain": PLAIN_PULSES}
    spent = measuring.interleaved(calls)
    each = {key: 1e6 * np.median(seconds) / (MODES_PULSES if key == (MODES, "own") else sizes[key[1]])
            for key, seconds in spent.items()}  # fmt: skip
    return {step: (each[step, "own"], each[step, "plain"]) for step, way in each if way == "own"}


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
    """Largest difference from the plain way in tolerances of the feature, its name, and values that only one has.

    Families that are measured otherwise on purpose are left out.
    """
    own, plain = feature_table(pulses), plain_features.plain_table(pulses)
    left_out = {feature.name for family in OTHERWISE for feature in FAMILIES[family][0]}
    kept = [place for place, feature in enumerate(CATALOGUE) if feature.name not in left_out]
    own, plain, features = own[:, kept], plain[:, kept], [CATALOGUE[place] for place in kept]
    apart = np.nan_to_num(np.abs(own - plain) / np.array([feature.tolerance for feature in features]))
    place = np.unravel_index(np.argmax(apart), apart.shape)
    lone = np.count_nonzero(np.isnan(own) != np.isnan(plain))
    beyond = np.count_nonzero(apart > 1)
    return float(apart[place]), features[place[1]].name, beyond, lone, own.size


def same_names(pulses, measures, names):
    """Refuse to compare where both ways do not measure the same."""
    found = set(plainly(pulses.take(np.arange(1)), measures)[0])
    if found != set(names):
        raise SystemExit(f"the plain way and the package measure different features: {sorted(found ^ set(names))}")


def main():
    warnings.filterwarnings("ignore")  # the libraries warn of their own future
    pulses = drawn_pulses()
    few, fewest = pulses.take(np.arange(PLAIN_PULSES)), pulses.take(np.arange(LIBRARY_PULSES))
    modes = [feature.name for feature in FAMILIES[MODES][0]]
    others = [name for name in BY_NAME if name not in modes]
    measures = [measure for measure in plain_features.MEASURES if measure is not plain_features.measure_modes]
    same_names(few, measures, others)
    libraries = library_calls(np.nan_to_num(fewest.waves))
    counts = {name: call() for name, call in libraries.items()}
    counts = {"tsfel": counts["tsfel"][0].shape[1], "tsfresh": counts["tsfresh"].shape[1]}
    calls = {"own": lambda: feature_table(pulses, others), "plain": lambda: plainly(few, measures), **libraries}
    spent = measuring.interleaved(calls)
    sizes = {"own": PULSES, "plain": PLAIN_PULSES, "tsfel": LIBRARY_PULSES, "tsfresh": LIBRARY_PULSES}
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
            measuring.times_faster(each, name, "plain"),
            measuring.times_faster(each, "own", name),
        )
        for name in words
    ]
    print(
        f"Windows of 20 us at 100 MS/s; {PULSES:,} pulses, the plain loop on {PLAIN_PULSES}, the libraries on {LIBRARY_PULSES}."
    )
    measuring.table(("way", "features", "pulses/s", "× plain", "pdclass × this"), rows)
    families = by_family(pulses)
    print("By family, in microseconds a pulse (they depend on the machine; their ratio less so):")
    measuring.table(
        ("step", "features", "pdclass", "plain", "ratio"),
        [(step, str(len(FAMILIES[step][0])) if step in FAMILIES else "", own, plain, plain / own)
         for step, (own, plain) in families.items() if step != MODES],
    )  # fmt: skip
    own, plain = families[MODES]
    print(
        f"Modes (matrix pencil, {len(modes)} features): {measuring.three(own)} us a pulse, plainly {measuring.three(plain)}, the window not included.\n"
    )
    apart, name, beyond, lone, values = disagreement(few)
    print(
        f"Of {values:,} values (modes included, {' and '.join(OTHERWISE)} left out: the plain way takes one shift of the transform, "
        f"the package the mean over all) {beyond} differ from the plain loop by more than the feature's stated tolerance, the largest "
        f"by {measuring.three(apart)} of it (`{name}`); {lone} are measurable in one way only.\n"
    )
    measuring.aims(
        [("features, modes left out, × the plain loop", "at least", 40, measuring.times_faster(each, "own", "plain"))]
    )
    measuring.weak(
        "The libraries measure other features, most of which mean nothing here; few windows, all in one process.",
        "One rate: at other rates a window is brought to the analysis rate first, which costs both ways alike.",
    )


if __name__ == "__main__":
    main()
