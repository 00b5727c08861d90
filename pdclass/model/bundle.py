"""A trained model in memory and as a folder that is safe to open: nothing in it is ever executed."""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from pydantic import ValidationError

from pdclass.digest import canonical_json, file_digest, json_digest
from pdclass.errors import InputError, RefusedError, complaint
from pdclass.model.columns import read_reference, read_training, write_reference, write_training
from pdclass.model.forest import ARRAY_TYPES, Forest, check_forest
from pdclass.model.manifest import FORMAT, Manifest, Validity
from pdclass.model.novelty import NoveltyReference, make_reference
from pdclass.model.treefile import read_arrays, write_arrays
from pdclass.pulses import FloatArray
from pdclass.writing import flush, put_in_place, settle

MANIFEST = "manifest.json"
TREES, REFERENCE, TRAINING = "trees.npz", "reference.parquet", "training.parquet"
WORLD, CARD = "world.toml", "card.md"
#: Largest size of each file [byte]; no other file may be there.
SIZE_LIMITS: Mapping[str, int] = {
    MANIFEST: 4 << 20,
    TREES: 256 << 20,
    REFERENCE: 256 << 20,
    TRAINING: 1 << 30,
    WORLD: 1 << 20,
    CARD: 1 << 20,
}
_NEEDED = (MANIFEST, TREES, REFERENCE, CARD)
_ADVICE = "do not use it; get the bundle again from its maker"


@dataclass(frozen=True)
class Classifier:
    """A calibrated model: everything that turns feature values into probabilities, sets, reasons and novelty.

    Attributes
    ----------
    classes : labels, in the order of every class axis.
    features : feature names, in the order of every feature axis.
    temperature : margins are divided by it.
    shift : (classes,), log(class mix / equal), added after the division.
    limits : (classes,), conformal limits on 1 - p, infinite where a class can never be ruled out.
    error_rate : the label sets miss the truth this often, as an average over groups.
    validity : ranges of the training pulses; beyond them a pulse is outside.
    reference : training pulses for comparison: `pulse_id`, the features, `label`, `basis`, `group`, `wave`.
    """

    classes: tuple[str, ...]
    features: tuple[str, ...]
    forest: Forest
    temperature: float
    shift: FloatArray
    limits: FloatArray
    error_rate: float
    novelty: NoveltyReference
    validity: Validity
    reference: pd.DataFrame


@dataclass(frozen=True)
class BundleParts(Classifier):
    """A classifier with what else goes into its folder.

    Attributes
    ----------
    feature_digests : digest of each feature's definition.
    feature_units : unit of each feature, "" where it has none or none was given.
    mix : class mix that the probabilities are stated for.
    account : how it was trained (settings, shares of groups, counts, seeds, versions, provenance, metrics).
    card : Markdown.
    world : TOML of the synthetic world that the simulated part came from.
    training : real training pulses with features, `label`, `basis`, `group`, `weight`.
    """

    feature_digests: Mapping[str, str]
    feature_units: Mapping[str, str]
    mix: Mapping[str, float]
    account: Mapping[str, Any]
    card: str = ""
    world: str | None = None
    training: pd.DataFrame | None = None


@dataclass(frozen=True)
class Bundle(Classifier):
    """A classifier as it was read from its folder.

    Attributes
    ----------
    manifest : the content of manifest.json.
    digest : sha256 of the bytes of manifest.json, which names the sha256 of every other file.
    """

    manifest: dict[str, Any] = field(repr=False)
    digest: str
    world: str | None = None
    training: pd.DataFrame | None = None


def write_bundle(path: Path, parts: BundleParts, *, replace: bool = False) -> str:
    """Write the folder of a bundle, whole or not at all, and return its digest.

    The same parts give the same bytes.

    Parameters
    ----------
    path : the folder; its parent must exist.
    replace : whether an existing folder may be replaced.

    Raises
    ------
    InputError
        If the folder exists (and is not to be replaced) or its parent does not.
    """
    check_place(path, replace=replace)
    fresh = path.with_name(f".{path.name}.{os.getpid()}.part")
    fresh.mkdir()
    try:
        _fill(fresh, parts)
        _flush_all(fresh)
        put_in_place(fresh, path, SIZE_LIMITS)
    finally:
        shutil.rmtree(fresh, ignore_errors=True)
    return file_digest(path / MANIFEST)


def _fill(folder: Path, parts: BundleParts) -> None:
    write_arrays(folder / TREES, parts.forest.arrays())
    write_reference(folder / REFERENCE, parts.reference, parts.features)
    (folder / CARD).write_bytes(parts.card.encode())
    if parts.world is not None:
        (folder / WORLD).write_bytes(parts.world.encode())
    if parts.training is not None:
        write_training(folder / TRAINING, parts.training, parts.features)
    files = {file.name: file_digest(file) for file in sorted(folder.iterdir())}
    (folder / MANIFEST).write_bytes(_manifest_bytes(parts, files))


def _manifest_bytes(parts: BundleParts, files: Mapping[str, str]) -> bytes:
    features = [
        {"name": name, "unit": parts.feature_units.get(name, ""), "digest": parts.feature_digests[name]}
        for name in parts.features
    ]
    content: dict[str, Any] = {
        "format": FORMAT,
        "classes": list(parts.classes),
        "mix": {name: float(parts.mix[name]) for name in parts.classes},
        "features": features,
        "catalogue_digest": json_digest(features),
        "temperature": float(parts.temperature),
        "shift": [float(value) for value in parts.shift],
        "limits": [float(value) if np.isfinite(value) else None for value in parts.limits],
        "error_rate": float(parts.error_rate),
        "novelty": _novelty_entry(parts.novelty),
        "validity": {name: list(ends) if ends else None for name, ends in asdict(parts.validity).items()},
        "account": dict(parts.account),
        "files": dict(files),
    }
    return canonical_json({**content, "seal": json_digest(content)}).encode()


def _novelty_entry(novelty: NoveltyReference) -> dict[str, Any]:
    return {
        "centre": [float(value) for value in novelty.centre],
        "scale": [float(value) for value in novelty.scale],
        "limit": float(novelty.limit) if np.isfinite(novelty.limit) else None,
    }


def check_place(path: Path, *, replace: bool) -> None:
    """Refuse a place where no bundle can be written: to be asked before the work is done.

    Raises
    ------
    InputError
        If its parent is no folder, if something is there and not to be replaced, or if that is no bundle.
    """
    if not path.parent.is_dir():
        raise InputError(f"{path.parent}: expected a folder to write the bundle in, found none; make it first")
    settle(path, SIZE_LIMITS)
    if path.exists() and not replace:
        raise InputError(f"{path}: expected nothing there yet, found something; choose another name or --force")
    if path.exists() and not _replaceable(path):
        raise InputError(f"{path}: expected a bundle to replace, found something else; choose another name")


def _replaceable(path: Path) -> bool:
    """Whether a folder holds nothing but the files of a bundle: nothing else is ever removed."""
    return path.is_dir() and all(file.name in SIZE_LIMITS for file in path.iterdir())


def _flush_all(folder: Path) -> None:
    for place in [*sorted(folder.iterdir()), folder]:
        flush(place)


def read_bundle(path: Path, known: Mapping[str, str]) -> Bundle:
    """A bundle from its folder, after everything in it has been checked while it was still plain bytes.

    Order: sizes, names and links -> format -> digests -> names, shapes and types -> tree structure -> build.

    Parameters
    ----------
    path : the folder.
    known : digest of each feature that this program has, by name.

    Raises
    ------
    InputError
        If there is no such folder.
    RefusedError
        If anything is not as it should be; the message names the file and the field.
    """
    if not path.is_dir():
        raise InputError(f"{path}: expected the folder of a bundle, found none; check the path")
    _check_files(path)
    manifest, content = _read_manifest(path / MANIFEST)
    _check_digests(path, manifest)
    _check_features(path, manifest, known)
    features, classes = manifest.feature_names, tuple(manifest.classes)
    arrays = read_arrays(path / TREES, ARRAY_TYPES)
    forest = check_forest(arrays, len(features), len(classes))
    reference = read_reference(path / REFERENCE, features, classes)
    far = np.inf if manifest.novelty.limit is None else manifest.novelty.limit
    centre, scale = np.array(manifest.novelty.centre), np.array(manifest.novelty.scale)
    world, training = path / WORLD, path / TRAINING
    return Bundle(
        classes=classes,
        features=features,
        forest=forest,
        temperature=manifest.temperature,
        shift=np.array(manifest.shift, np.float64),
        limits=np.array([np.inf if limit is None else limit for limit in manifest.limits], np.float64),
        error_rate=manifest.error_rate,
        novelty=make_reference(reference[list(features)].to_numpy(np.float64), centre, scale, far),
        validity=manifest.validity_ranges(),
        reference=reference,
        manifest=content,
        digest=file_digest(path / MANIFEST),
        world=_text(world) if world.exists() else None,
        training=read_training(training, features, classes) if training.exists() else None,
    )


def _text(path: Path) -> str:
    try:
        return path.read_bytes().decode()
    except UnicodeDecodeError:
        raise RefusedError(
            complaint(path, "content", expected="UTF-8 text", found="other bytes", advice=_ADVICE)
        ) from None


def _check_files(folder: Path) -> None:
    if folder.is_symlink():
        raise RefusedError(complaint(folder, "folder", expected="a folder", found="a link", advice=_ADVICE))
    there = sorted(folder.iterdir())[: len(SIZE_LIMITS) + 1]
    for file in there:
        if file.name not in SIZE_LIMITS:
            found = f"'{file.name}'"
            advice = "remove it if you know it is harmless; a bundle holds nothing else"
            raise RefusedError(complaint(folder, "files", expected=", ".join(SIZE_LIMITS), found=found, advice=advice))
        if file.is_symlink() or not file.is_file():
            found = "a link or folder"
            raise RefusedError(complaint(file, "file", expected="a plain file", found=found, advice=_ADVICE))
        size, limit = file.stat().st_size, SIZE_LIMITS[file.name]
        if size > limit:
            expected, found = f"at most {limit} bytes", f"{size}"
            raise RefusedError(complaint(file, "size", expected=expected, found=found, advice=_ADVICE))
    for name in _NEEDED:
        if not (folder / name).exists():
            raise RefusedError(complaint(folder / name, "file", expected="it", found="none", advice=_ADVICE))


def _read_manifest(path: Path) -> tuple[Manifest, dict[str, Any]]:
    content = _plain_json(path)
    if content.get("format") != FORMAT or isinstance(content["format"], bool):
        advice = "use the version of the program that wrote it, or train it again"
        found = content.get("format")
        raise RefusedError(complaint(path, "format", expected=FORMAT, found=found, advice=advice))
    body = {name: value for name, value in content.items() if name != "seal"}
    if content.get("seal") != json_digest(body):
        found = f"{content.get('seal')!s:.64}"
        raise RefusedError(complaint(path, "seal", expected=json_digest(body), found=found, advice=_ADVICE))
    try:
        manifest = Manifest.model_validate_json(path.read_bytes())
    except ValidationError as error:
        first = error.errors()[0]
        where = ".".join(str(part) for part in first["loc"]) or "content"
        found = f"{first['input']!r:.60}"
        raise RefusedError(complaint(path, where, expected=first["msg"], found=found, advice=_ADVICE)) from None
    return manifest, content


def _plain_json(path: Path) -> dict[str, Any]:
    raw = path.read_bytes()
    try:
        content = json.loads(raw)
        canonical = canonical_json(content).encode()
    except (ValueError, RecursionError):
        found = "something else"
        raise RefusedError(complaint(path, "content", expected="JSON", found=found, advice=_ADVICE)) from None
    if not isinstance(content, dict) or canonical != raw:
        expected, found = "one object of canonical JSON", "another form"
        raise RefusedError(complaint(path, "content", expected=expected, found=found, advice=_ADVICE))
    return content


def _check_digests(folder: Path, manifest: Manifest) -> None:
    there = sorted(file.name for file in folder.iterdir() if file.name != MANIFEST)
    if there != sorted(manifest.files):
        expected, found = ", ".join(sorted(manifest.files)), ", ".join(there)
        raise RefusedError(complaint(folder / MANIFEST, "files", expected=expected, found=found, advice=_ADVICE))
    for name, digest in sorted(manifest.files.items()):
        found = file_digest(folder / name)
        if found != digest:
            raise RefusedError(
                complaint(folder / name, "sha256", expected=digest, found=found, advice=f"it was altered; {_ADVICE}")
            )


def _check_features(folder: Path, manifest: Manifest, known: Mapping[str, str]) -> None:
    versions = manifest.account.get("versions")
    maker = versions.get("pdclass", "?") if isinstance(versions, dict) else "?"
    advice = f"score with pdclass {maker!s:.40}, or train the bundle again with this one"
    for feature in manifest.features:
        ours = known.get(feature.name)
        if ours != feature.digest:
            found = f"digest {ours}" if ours else "no such feature in this program"
            field_name, expected = f"feature '{feature.name}'", f"digest {feature.digest}"
            raise RefusedError(complaint(folder / MANIFEST, field_name, expected=expected, found=found, advice=advice))
