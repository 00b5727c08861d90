"""`pdclass train`: a bundle from labelled pulses."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pandas as pd
from pydantic import ValidationError

from pdclass.capture import double_notes, join_labels, read_labels, read_pulses, together
from pdclass.digest import file_digest
from pdclass.errors import InputError
from pdclass.features import ANALYSIS_BAND_HZ, ANALYSIS_RATE_HZ, CATALOGUE, feature_digests, feature_table
from pdclass.jobs.inventory import inventory_lines
from pdclass.jobs.simulate import joined
from pdclass.jobs.talk import SILENT, Talk
from pdclass.model.bundle import BundleParts, check_place, write_bundle
from pdclass.model.columns import thin
from pdclass.pulses import LABELS, FloatArray, PulseSet
from pdclass.training.card import with_card
from pdclass.training.fit import train
from pdclass.training.settings import TrainSettings

#: A label that hardly ever occurs still has to be possible.
_SMALLEST_SHARE = 0.001


@dataclass(frozen=True)
class Trained:
    """The bundle's digest, what the user should know about it, and what it was trained on (said before the fit)."""

    out: Path
    digest: str
    notes: tuple[str, ...]
    pulses: tuple[str, ...] = ()


def train_bundle(
    pulses: Sequence[Path],
    out: Path,
    *,
    error_rate: float = 0.10,
    mix: Mapping[str, float] | None = None,
    group: str | None = None,
    labels: Path | None = None,
    classes: Mapping[str, str] | None = None,
    private: bool = False,
    seed: int = 0,
    force: bool = False,
    talk: Talk = SILENT,
) -> Trained:
    """Fit, calibrate and write a bundle.

    `labels` is a label file that replaces what the tables say of the pulses it names; `classes` are own classes that
    may stand in it, each with the one of our labels that it is a kind of, or "".

    Raises
    ------
    InputError
        If a table or a setting is not usable.
    TooFewError
        If there are too few groups, altogether or of a class.
    """
    settings = _settings(error_rate, mix, group, classes=classes or {}, private=private, seed=seed)
    check_place(out, replace=force)
    sets, notes = labelled_tables(pulses, labels, classes)
    talk.say(f"{sum(len(one.table) for one in sets)} pulses read")
    found = inventory_lines(pd.concat([one.table for one in sets]), _rates(sets))
    # said before the fit: where that refuses for too few labels, here stands which there are
    for line in (*notes, *found):
        talk.say(line)
    values, together = measured(sets)
    talk.say(f"{values.shape[1]} features measured; fitting")
    files = [*tables_of(pulses), *([] if labels is None else [labels])]
    provenance: dict[str, object] = {"inputs": [{"name": path.name, "digest": file_digest(path)} for path in files]}
    if together_classes := own_classes_of(sets):
        provenance["own_classes"] = together_classes
    parts = fit(values, together, settings, provenance=provenance)
    parts = with_card(parts, None, title="Bundle trained on labelled pulses")
    digest = write_bundle(out, parts, replace=force)
    return Trained(out, digest, tuple(parts.account["notes"]), (*notes, *found))


def fit(
    values: FloatArray,
    pulses: PulseSet,
    settings: TrainSettings,
    *,
    provenance: Mapping[str, object],
    world: str | None = None,
) -> BundleParts:
    """Train on the whole catalogue; the manifest tells the analysis band and rate."""
    analysis = {"analysis_band_hz": list(ANALYSIS_BAND_HZ), "analysis_rate_hz": ANALYSIS_RATE_HZ}
    return train(
        values,
        [feature.name for feature in CATALOGUE],
        feature_digests(),
        pulses,
        settings,
        feature_units={feature.name: feature.unit for feature in CATALOGUE},
        provenance={**analysis, **provenance},
        world=world,
    )


def tables_of(given: Sequence[Path]) -> list[Path]:
    """Pulse tables, a verdict folder standing for those in its `pulses/`."""
    found: list[Path] = []
    for path in given:
        inside = sorted((path / "pulses").glob("*.parquet")) if path.is_dir() else [path]
        if not inside:
            raise InputError(f"{path}: expected a pulse table or a verdict folder, found neither; name another")
        found += inside
    return found


def read_tables(given: Sequence[Path]) -> tuple[list[PulseSet], list[str]]:
    """The pulse sets of some tables, with notes of the reading."""
    read = [read_pulses(path) for path in tables_of(given)]
    return [pulses for pulses, _ in read], [note for _, notes in read for note in notes]


def labelled_tables(
    given: Sequence[Path], labels: Path | None, classes: Mapping[str, str] | None = None
) -> tuple[list[PulseSet], list[str]]:
    """The pulse sets of some tables with the labels of a file, and notes of both.

    Raises
    ------
    InputError
        If a table or the label file is not usable, or a class is a kind of two things.
    """
    sets, notes = read_tables(given)
    whole = together("own classes", *(one.own_classes for one in sets), classes or {})
    sets = [replace(one, own_classes=whole) for one in sets]
    if labels is not None:
        found = join_labels(sets, read_labels(labels, whole))
        sets, notes = list(found.sets), [*notes, *found.notes]
    return sets, [*notes, *double_notes(sets)]


def own_classes_of(sets: Sequence[PulseSet]) -> dict[str, str]:
    """The own classes that labels of some pulse sets are, each with what it is a kind of."""
    used = {str(name) for one in sets for name in one.table["label"].dropna().unique()}
    return {name: kind for one in sets for name, kind in one.own_classes.items() if name in used}


def _rates(sets: Sequence[PulseSet]) -> FloatArray:
    """The sampling rate of every pulse [Hz]."""
    return np.concatenate([np.full(len(one.table), one.rate_hz) for one in sets])


def measured(sets: Sequence[PulseSet], names: Sequence[str] | None = None) -> tuple[FloatArray, PulseSet]:
    """Features of pulse sets of any rates, and the pulses as one set with their waves thinned.

    Training looks at features and keeps thinned waves for comparison, so that rates may differ. Echoes neither teach
    nor test: their rows are NaN.
    """
    values = np.concatenate([_of_those_that_count(pulses, names) for pulses in sets])
    return values, joined([replace(pulses, waves=thin(pulses.waves)) for pulses in sets])


def _of_those_that_count(pulses: PulseSet, names: Sequence[str] | None) -> FloatArray:
    alone = pulses.table["echo_of"].isna().to_numpy()
    own = feature_table(pulses.take(alone), names)
    values = np.full((len(alone), own.shape[1]), np.nan)
    values[alone] = own
    return values


def _settings(
    error_rate: float,
    mix: Mapping[str, float] | None,
    group: str | None,
    *,
    classes: Collection[str],
    private: bool,
    seed: int,
) -> TrainSettings:
    if not 0.01 <= error_rate <= 0.5:
        raise InputError(f"--error-rate: expected 0.01 to 0.5, found {error_rate:g}; choose one between")
    if group not in {None, "circuit"}:
        raise InputError(f"--group: expected circuit, found {group!r}; leave it out for circuit and site")
    if mix is not None:
        _check_mix(mix, classes)
    by = "circuit-and-site" if group is None else group
    chosen = {"error_rate": error_rate, "mix": mix, "group_by": by, "private": private, "seed": seed}
    try:
        return TrainSettings.model_validate(chosen)
    except ValidationError as error:
        first = error.errors()[0]
        raise InputError(f"{first['loc'][0]}: {first['msg']}, found {first['input']!r}") from None


def _check_mix(mix: Mapping[str, float], classes: Collection[str]) -> None:
    known = (*LABELS, *classes)
    strange = sorted(set(mix) - set(known))
    if strange:
        expected, advice = ", ".join(known), "correct the name, or name a class of your own with --classes"
        raise InputError(f"--mix: expected shares of {expected}, found '{strange[0]}'; {advice}")
    low = [name for name, share in mix.items() if not share >= _SMALLEST_SHARE]
    if low:
        raise InputError(f"--mix: {low[0]}: expected at least {_SMALLEST_SHARE}, found {mix[low[0]]:g}; raise it")
    if abs(sum(mix.values()) - 1) > 0.01:
        raise InputError(f"--mix: expected shares that add up to 1, found {sum(mix.values()):.3g}; correct them")
