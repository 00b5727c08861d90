"""Training: labelled pulses and their features in, the parts of a bundle out."""

from __future__ import annotations

import platform
from collections.abc import Collection, Mapping, Sequence
from importlib.metadata import version
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass.digest import array_digest
from pdclass.errors import InputError, TooFewError
from pdclass.model.bundle import BundleParts
from pdclass.model.columns import thin
from pdclass.model.doubt import conformal_limits, groups_needed, mix_shift, probabilities
from pdclass.model.forest import checked_values, margins
from pdclass.model.manifest import Validity
from pdclass.model.novelty import fit_novelty
from pdclass.pulses import LABELS, FloatArray, PulseSet
from pdclass.training.boost import Examples, Fitted, fit_on_parts, fit_shared
from pdclass.training.groups import Names, check_enough, class_group_weights, group_names, share_out
from pdclass.training.settings import TrainSettings

_SHARINGS = 20
_LIBRARIES = ("pdclass", "numpy", "scikit-learn", "numba", "pandas", "pyarrow")


class Shared(NamedTuple):
    """How groups were shared out: names of each part, and the fractions used."""

    parts: dict[str, Names]
    shares: dict[str, float]


def train(
    values: FloatArray,
    feature_names: Sequence[str],
    feature_digests: Mapping[str, str],
    pulses: PulseSet,
    settings: TrainSettings,
    *,
    feature_units: Mapping[str, str] | None = None,
    provenance: Mapping[str, Any] | None = None,
    world: str | None = None,
) -> BundleParts:
    """A classifier from labelled pulses, calibrated on groups that its trees have not seen.

    Echoes and unlabelled pulses are left out. The order of the pulses does not matter.

    Parameters
    ----------
    values : (pulses, features), NaN where unmeasurable.
    feature_names, feature_digests : names in column order; the digest of each one's definition.
    pulses : the pulses of the rows, with labels, circuits, sites and chains.
    provenance : what else the manifest should tell (inputs, analysis band, scenario, parent); JSON values.
    world : TOML of the synthetic world that simulated pulses came from.

    Returns
    -------
    Everything but the card, ready for `write_bundle`; notes for the user are in `account["notes"]`.

    Raises
    ------
    InputError
        If a label, the mix or a value is not usable, or a pulse stands there twice.
    TooFewError
        If there are too few groups, altogether or of a class.
    """
    rows = checked_values(values, len(feature_names))
    kept = usable(pulses.table)
    kept = kept[np.argsort(pulses.table.index.to_numpy(str)[kept], kind="stable")]
    pulses, rows = pulses.take(kept), rows[kept]
    classes = _classes(pulses.table, pulses.own_classes)
    examples = _examples(rows, pulses.table, classes, settings)
    shared = _share(examples, classes, settings)
    fitted, how = _fit(examples, shared, len(classes), settings)
    mix = checked_mix(settings.mix, classes)
    shift = mix_shift(np.full(len(classes), 1 / len(classes)), np.array([mix[name] for name in classes]))
    conform = examples.of(shared.parts["conform"])
    limits, notes = _limits(fitted, shift, conform, classes, settings)
    keep = reference_places(examples.label_index, examples.groups, settings.reference_rows)
    novelty = fit_novelty(rows[keep], examples.groups[keep], conform.values, conform.groups)
    return BundleParts(
        classes=classes,
        features=tuple(feature_names),
        forest=fitted.forest,
        temperature=fitted.temperature,
        shift=shift,
        limits=limits,
        error_rate=settings.error_rate,
        novelty=novelty,
        validity=validity_of(pulses),
        reference=_reference(rows, pulses, examples, keep, feature_names),
        feature_digests=dict(feature_digests),
        feature_units=dict(feature_units or {}),
        mix=mix,
        account={
            **_account(examples, shared, classes, settings),
            "how": how,
            "rounds": fitted.rounds,
            "stop_log_loss": fitted.stop_loss,
            "notes": notes + _sharing_note(settings) + _empty_notes(rows, feature_names),
            "provenance": dict(provenance or {}),
        },
        world=world,
        training=None if settings.private else _real(rows, pulses.table, examples, feature_names),
    )


def usable(table: pd.DataFrame) -> NDArray[np.int64]:
    """Places of the pulses that can teach or test: labelled, and no echo."""
    return np.flatnonzero((table["label"].notna() & table["echo_of"].isna()).to_numpy(np.bool_)).astype(np.int64)


def checked_mix(mix: Mapping[str, float] | None, classes: Sequence[str]) -> dict[str, float]:
    """The class mix, equal unless given.

    Raises
    ------
    InputError
        If the given classes are not those of the model.
    """
    if mix is None:
        return dict.fromkeys(classes, 1 / len(classes))
    if set(mix) != set(classes):
        raise InputError(f"mix: expected a share for each of {', '.join(classes)}, found {', '.join(mix)}")
    return {name: float(mix[name]) for name in classes}


def _classes(table: pd.DataFrame, own_classes: Collection[str] = ()) -> tuple[str, ...]:
    """The labels that there are: ours in their order, then the user's own by name."""
    found, known = set(table["label"]), (*LABELS, *sorted(own_classes))
    odd = sorted(str(label) for label in found - set(known))
    if odd:
        raise InputError(f"label: expected one of {', '.join(known)}, found '{odd[0]}'; correct the labels")
    twice = table.index[table.index.duplicated()]
    if len(twice):
        raise InputError(f"pulse {twice[0]}: expected once among the labelled pulses, found twice; drop one table")
    return tuple(label for label in known if label in found)


def _examples(rows: FloatArray, table: pd.DataFrame, classes: Sequence[str], settings: TrainSettings) -> Examples:
    if not len(rows):
        raise TooFewError(
            "labels: expected labelled pulses, found none; label some first (capture annotations, or column label)"
        )
    label_index = np.array([classes.index(label) for label in table["label"]], np.int64)
    groups = group_names(table, settings.group_by)
    check_enough(label_index, groups, classes)
    return Examples(rows, label_index, groups)


def _share(examples: Examples, classes: Sequence[str], settings: TrainSettings) -> Shared:
    """The first of some sharings that has every class in every part."""
    shares = _shares(examples, len(classes), settings)
    for attempt in range(_SHARINGS):
        rng = np.random.default_rng([settings.seed, attempt])
        parts = share_out(examples.label_index, examples.groups, shares, rng=rng)
        lost = [(part, _lost(examples.of(names), classes)) for part, names in parts.items()]
        if not any(missing for _, missing in lost):
            return Shared(parts, shares)
    part, missing = next(pair for pair in lost if pair[1])
    raise TooFewError(
        f"class '{missing[0]}': expected groups for every part, found none left for '{part}' in {_SHARINGS} sharings; "
        "label pulses of more circuits"
    )


def _lost(examples: Examples, classes: Sequence[str]) -> list[str]:
    held = set(examples.label_index.tolist())
    return [name for k, name in enumerate(classes) if k not in held]


def _shares(examples: Examples, n_classes: int, settings: TrainSettings) -> dict[str, float]:
    """Conform gets its share, or more where at most half of the rarest class's groups buys it a finite limit."""
    rarest = min(len(set(examples.groups[examples.label_index == k])) for k in range(n_classes))
    chosen = settings.parts.model_dump()
    wanted = chosen["conform"] / sum(chosen.values())
    finite = groups_needed(settings.error_rate) / rarest
    if wanted < finite <= 0.5:
        wanted = finite
    others = {name: chosen[name] for name in ("fit", "stop", "temper")}
    if rarest < settings.share_below:
        others = {"learn": 1.0}
    left = (1 - wanted) / sum(others.values())
    # conform first: ties of the sharing-out go to it
    return {"conform": wanted, **{name: share * left for name, share in others.items()}}


def _fit(examples: Examples, shared: Shared, n_classes: int, settings: TrainSettings) -> tuple[Fitted, str]:
    if "learn" in shared.parts:
        fitted, folds = fit_shared(examples.of(shared.parts["learn"]), n_classes, settings)
        return fitted, (
            f"fit, stop and temper shared their groups: rounds and temperature from {folds}-fold cross-validation "
            "by group, trees from all of these groups; conform apart"
        )
    fit, stop, temper = (examples.of(shared.parts[name]) for name in ("fit", "stop", "temper"))
    return fit_on_parts(fit, stop, temper, settings), "fit, stop, temper and conform apart"


def _limits(
    fitted: Fitted, shift: FloatArray, conform: Examples, classes: Sequence[str], settings: TrainSettings
) -> tuple[FloatArray, list[str]]:
    chances = probabilities(margins(fitted.forest, conform.values), fitted.temperature, shift)
    p_true = chances[np.arange(len(chances)), conform.label_index]
    limits = conformal_limits(p_true, conform.label_index, conform.groups, len(classes), settings.error_rate)
    needed = groups_needed(settings.error_rate)
    notes = []
    for k, name in enumerate(classes):
        found = len(set(conform.groups[conform.label_index == k]))
        if found < needed:
            notes.append(
                f"class '{name}' can never be ruled out: at error rate {settings.error_rate:g} the conform part needs "
                f"{needed} groups of it and has {found}; {needed - found} missing there"
            )
    return limits, notes


def _sharing_note(settings: TrainSettings) -> list[str]:
    return ["sites shared: groups are circuits, figures are too good"] if settings.group_by == "circuit" else []


def _empty_notes(rows: FloatArray, names: Sequence[str]) -> list[str]:
    empty = [name for column, name in enumerate(names) if np.isnan(rows[:, column]).all()]
    return [f"feature '{name}' is unmeasurable in every training pulse, so no tree uses it" for name in empty]


def _account(examples: Examples, shared: Shared, classes: Sequence[str], settings: TrainSettings) -> dict[str, Any]:
    counts = {}
    for part, names in shared.parts.items():
        held = examples.of(names)
        per_class = {name: len(set(held.groups[held.label_index == k])) for k, name in enumerate(classes)}
        counts[part] = {"groups": len(names), "pulses": len(held.groups), "groups_of": per_class}
    total = len(set(examples.groups))
    return {
        "settings": settings.model_dump(),
        "groups": {"by": settings.group_by, "total": total, "shares": shared.shares, "parts": counts},
        "pulses": {name: int(np.sum(examples.label_index == k)) for k, name in enumerate(classes)},
        "left_out": "echoes and unlabelled pulses",
        "training_digest": array_digest(examples.values),
        "versions": {name: version(name) for name in _LIBRARIES} | {"python": platform.python_version()},
    }


def validity_of(pulses: PulseSet) -> Validity:
    """Lowest and highest rate, corner, resolution and SNR among the pulses (plain minimum and maximum)."""
    chains = [pulses.chains[place] for place in sorted(set(pulses.table["chain"]))]
    bands = [chain.band_hz for chain in chains if chain.band_hz is not None]
    snr = pulses.table["snr_db"].to_numpy(np.float64)
    return Validity(
        rate_hz=_range([chain.rate_hz for chain in chains]),
        low_hz=_range([band[0] for band in bands]),
        high_hz=_range([band[1] for band in bands]),
        adc_bits=_range([float(chain.adc_bits) for chain in chains if chain.adc_bits is not None]),
        snr_db=_range([float(value) for value in snr[np.isfinite(snr)]]),
    )


def _range(found: Sequence[float]) -> tuple[float, float] | None:
    return (float(min(found)), float(max(found))) if found else None


def reference_places(label_index: NDArray[np.int64], groups: Names, most: int) -> NDArray[np.int64]:
    """Places of at most so many pulses: one of each class and group in turn until the number is reached."""
    frame = pd.DataFrame({"label": label_index, "group": groups})
    turn = frame.groupby(["label", "group"], sort=True).cumcount()
    order = np.lexsort((np.arange(len(frame)), turn.to_numpy()))
    return np.sort(order[:most]).astype(np.int64)


def _reference(
    rows: FloatArray, pulses: PulseSet, examples: Examples, keep: NDArray[np.int64], names: Sequence[str]
) -> pd.DataFrame:
    frame = _feature_frame(rows[keep], pulses.table.iloc[keep], examples.groups[keep], names)
    frame["wave"] = list(thin(pulses.waves[keep]))
    return frame


def _real(rows: FloatArray, table: pd.DataFrame, examples: Examples, names: Sequence[str]) -> pd.DataFrame | None:
    real = (table["basis"] != "simulated").to_numpy(np.bool_)
    if not real.any():
        return None
    frame = _feature_frame(rows[real], table.iloc[real], examples.groups[real], names)
    frame["weight"] = class_group_weights(examples.label_index, examples.groups)[real]
    return frame


def _feature_frame(rows: FloatArray, table: pd.DataFrame, groups: Names, names: Sequence[str]) -> pd.DataFrame:
    columns: dict[str, Any] = {"pulse_id": table.index.to_numpy(object)}
    columns |= {name: rows[:, column] for column, name in enumerate(names)}
    columns |= {"label": table["label"].to_numpy(object), "basis": table["basis"].to_numpy(object)}
    return pd.DataFrame({**columns, "group": groups})
