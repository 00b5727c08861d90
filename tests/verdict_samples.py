"""A small bundle and small pulse sets of closed-form waves for the tests of verdicts and reports."""

import numpy as np
import pandas as pd
from closed_form import damped_sine, double_exponential

from pdclass.digest import pulse_id
from pdclass.features import BY_NAME, feature_digests, feature_table
from pdclass.model.bundle import BundleParts, read_bundle, write_bundle
from pdclass.model.columns import thin
from pdclass.model.doubt import conformal_limits, probabilities
from pdclass.model.forest import check_forest, margins
from pdclass.model.manifest import Validity
from pdclass.model.novelty import fit_novelty
from pdclass.pulses import LABELS, Chain, PulseSet, typed_table
from pdclass.verdict.batch import Shard, begin_folder, capture_record, run_record, write_shard
from pdclass.verdict.score import not_checked, score

FEATURES = ("rise_ns", "width_50_ns", "centroid_mhz", "swings", "energy_before_peak", "copy_1_delay_us")
CHAIN = Chain(100e6, 1e-4, 14, band_hz=(0.1e6, 25e6), mains_hz=50.0)
DIGESTS = {"quay": "a1" * 32, "crane": "b2" * 32, "depot": "c3" * 32}


def wave_of(label, rng):
    """A wave of its label's kind; the kinds overlap a little, as real ones do."""
    if label == "cable":
        return double_exponential(rng.lognormal(np.log(80e-9), 0.5), rng.lognormal(np.log(300e-9), 0.4))
    if label == "local":
        return double_exponential(rng.lognormal(np.log(12e-9), 0.4), rng.lognormal(np.log(60e-9), 0.4))
    if label == "switchgear":
        ring = damped_sine(rng.uniform(7e6, 14e6), rng.uniform(0.03e-6, 0.4e-6))
        return ring + rng.uniform(0.2, 1.5) * double_exponential(12e-9, 60e-9)
    return damped_sine(rng.uniform(0.4e6, 2e6), rng.uniform(1e-6, 3e-6), span_s=12e-6)


def pulse_set(labels, *, rng, chain=CHAIN, capture="quay", noise_v=0.4e-3, **columns):
    """One pulse a label, 100 us apart, in 20 us windows with noise; further columns as given."""
    samples = round(20e-6 * chain.rate_hz)
    waves = rng.normal(0, noise_v, (len(labels), samples)).astype(np.float32)
    size = 0.01 * rng.lognormal(0, 0.7, len(labels)) * rng.choice([-1, 1], len(labels))
    for row, label in enumerate(labels):
        wave = wave_of(label, rng)[: samples - samples // 4]
        waves[row, samples // 4 : samples // 4 + wave.size] += (size[row] * wave / np.abs(wave).max()).astype(
            np.float32
        )
    onset = 20_000 + 10_000 * np.arange(len(labels))
    peak = np.take_along_axis(waves, np.abs(waves).argmax(axis=1)[:, None], axis=1)[:, 0]
    rows = {
        "capture": capture,
        "capture_digest": DIGESTS[capture],
        "circuit": "Quay Road",
        "site": "Harbour West",
        "sensor": "strap 1",
        "session": "one",
        "onset_sample": onset,
        "onset_s": onset / chain.rate_hz,
        "phase_deg": rng.uniform(0, 360, len(labels)),
        "noise_v": noise_v,
        "peak_v": peak,
        "snr_db": 20 * np.log10(np.abs(peak) / noise_v),
        "duration_us": 6.0,
        "window_mates": 1,
        **columns,
    }
    ids = [pulse_id(DIGESTS[capture], "strap 1", int(at)) for at in onset]
    return PulseSet(waves, (chain,), typed_table(pd.DataFrame(rows, index=range(len(labels))), ids))


def band_forest(values, labels):
    """Trees that add to a class where a feature lies between the 10th and 90th percentile of that class."""
    arrays = {name: [] for name in ("tree_start", "tree_class", "feature", "threshold", "left", "right")}
    arrays |= {name: [] for name in ("missing_left", "value", "count")}
    for place, label in enumerate(LABELS):
        for feature in range(values.shape[1]):
            known = values[~np.isnan(values[:, feature]), feature]
            own = values[(labels == label) & ~np.isnan(values[:, feature]), feature]
            if own.size < 5:
                continue
            low, high = np.quantile(own, [0.1, 0.9])
            below, above = np.sum(~(values[:, feature] > low)), np.sum(known > high)
            counts = np.maximum([len(values), below, len(values) - below, len(values) - below - above, above], 1)
            arrays["tree_start"].append(len(arrays["value"]))
            arrays["tree_class"].append(place)
            arrays["feature"] += [feature, 0, feature, 0, 0]
            arrays["threshold"] += [low, 0.0, high, 0.0, 0.0]
            arrays["left"] += [1, -1, 3, -1, -1]
            arrays["right"] += [2, -1, 4, -1, -1]
            arrays["missing_left"] += [True, False, True, False, False]
            arrays["value"] += [0.0, -0.7, 0.0, 0.8, -0.7]
            arrays["count"] += counts.tolist()
    kinds = {"tree_start": "i8", "tree_class": "i2", "feature": "i4", "threshold": "f8", "left": "i4", "right": "i4"}
    kinds |= {"missing_left": "?", "value": "f8", "count": "i8"}
    typed = {name: np.array(column, kinds[name]) for name, column in arrays.items()}
    return check_forest({**typed, "baseline": np.zeros(len(LABELS))}, values.shape[1], len(LABELS))


def sample_parts(seed=1, per_label=60):
    """The parts of a bundle whose trees, limits and reference come from closed-form pulses."""
    rng = np.random.default_rng(seed)
    labels = np.repeat(np.array(LABELS, object), per_label)
    pulses = pulse_set(list(labels), rng=rng)
    values = feature_table(pulses, FEATURES)
    groups = np.array([f"circuit {number % 12}" for number in range(len(labels))], object)
    forest = band_forest(values, labels)
    index = np.array([LABELS.index(label) for label in labels])
    p_true = probabilities(margins(forest, values), 0.5, np.zeros(4))[np.arange(len(index)), index]
    reference = pd.DataFrame(values, columns=list(FEATURES)).assign(
        pulse_id=list(pulses.table.index), label=labels, basis="simulated", group=groups, wave=list(thin(pulses.waves))
    )
    return BundleParts(
        classes=LABELS,
        features=FEATURES,
        forest=forest,
        temperature=0.5,
        shift=np.zeros(4),
        limits=conformal_limits(p_true, index, list(groups), 4, 0.10),
        error_rate=0.10,
        novelty=fit_novelty(values, list(groups), values, list(groups)),
        validity=Validity((62.5e6, 250e6), (0.05e6, 0.5e6), (8e6, 40e6), (12.0, 16.0), (6.0, 60.0)),
        reference=reference,
        feature_digests=feature_digests(),
        feature_units={name: BY_NAME[name].unit for name in FEATURES},
        mix=dict.fromkeys(LABELS, 0.25),
        account={"versions": {"pdclass": "0"}},
        card="a bundle for tests",
    )


def sample_bundle(folder):
    """The sample bundle, written to `folder / "bundle"` and read back."""
    write_bundle(folder / "bundle", sample_parts())
    return read_bundle(folder / "bundle", feature_digests())


def scored_shard(bundle, pulses, capture, **record):
    """One capture's shard, scored."""
    verdicts = score(pulses, feature_table(pulses, bundle.features), bundle)
    echoes = int(pulses.table["echo_of"].notna().sum())
    fields = {"circuit": "Quay Road", "sensor": "strap 1", "session": "one", "phase_reference": "L1-earth"}
    fields |= {"duration_s": 0.02, "detection_limit_v": 2.34e-3, "unchecked": not_checked(pulses, bundle.validity)}
    made = capture_record(
        name=capture,
        capture_digest=DIGESTS[capture],
        found=len(pulses.table) - echoes,
        echoes=echoes,
        **fields | record,
    )
    return Shard(capture, DIGESTS[capture], pulses, verdicts, made)


def sample_shards(bundle, *, counts=(40, 25, 25, 30), seed=5):
    """Three captures: one with everything and an echo, one without phase and bits, one too slow for the bundle."""
    rng = np.random.default_rng(seed)
    labels = [label for label, count in zip(LABELS, counts, strict=True) for _ in range(count)]
    first = pulse_set(labels, rng=rng, label=labels, basis="simulated")
    names = first.table.index
    first.table.loc[names[3], "echo_of"] = names[2]
    first.table.loc[names[5], "maybe_echo_of"] = names[4]
    unknown = Chain(100e6, 1e-4, None, band_hz=(0.1e6, 25e6))
    named = {"circuit": "Crane <b>Row</b>", "sensor": "strap 2", "phase_deg": np.nan}
    second = pulse_set(["cable", "local", "interference"] * 5, rng=rng, chain=unknown, capture="crane", **named)
    slow = Chain(40e6, 1e-4, 8, band_hz=(0.1e6, 15e6))
    third = pulse_set(["cable", "interference"] * 4, rng=rng, chain=slow, capture="depot", circuit="=Depot $x_1$")
    return [
        scored_shard(bundle, first, "quay", start_utc=pd.Timestamp("2031-02-03T04:05:06Z")),
        scored_shard(bundle, second, "crane", circuit="Crane <b>Row</b>", sensor="strap 2", phase_reference=None),
        scored_shard(bundle, third, "depot", circuit="=Depot $x_1$", phase_reference="low-voltage-socket"),
    ]


PLAN = {"settings": {"error_rate": 0.1}, "bundle_digest": "0" * 64, "versions": {"pdclass": "0"}}
INPUTS = [
    *({"given": f"{name}.sigmf-meta", "digest": digest, "state": "scored"} for name, digest in DIGESTS.items()),
    {"given": "torn.sigmf-meta", "digest": None, "state": "skipped: torn.sigmf-data: size: expected 4, found 3"},
]


def staged(folder, shards, plan=None):
    """A folder under way with its shards written, and its run record."""
    plan = PLAN if plan is None else plan
    staging = begin_folder(folder / "verdicts", plan)
    for shard in shards:
        write_shard(staging, shard)
    return staging, run_record(staging, plan, INPUTS)
