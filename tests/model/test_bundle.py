"""The folder of a bundle: whole or refused."""

import json
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from blobs import DIGESTS, NAMES, blobs

from pdclass.digest import canonical_json, file_digest, json_digest
from pdclass.errors import InputError, RefusedError
from pdclass.model.bundle import SIZE_LIMITS, read_bundle, write_bundle
from pdclass.model.decision import decide
from pdclass.model.forest import margins
from pdclass.model.novelty import novelty

FILES = ("card.md", "manifest.json", "reference.parquet", "training.parquet", "trees.npz", "world.toml")


@pytest.fixture
def folder(parts, tmp_path):
    path = tmp_path / "bundle"
    write_bundle(path, replace(parts, card="# A card\n", world='name = "small"\n'))
    return path


def reseal(path, **changes):
    """Change the manifest and make its seal fit, as somebody who means harm would."""
    content = json.loads((path / "manifest.json").read_text())
    content = {name: value for name, value in {**content, **changes}.items() if name != "seal"}
    content["files"] = {name: file_digest(path / name) for name in content["files"]}
    sealed = {**content, "seal": json_digest(content)}
    (path / "manifest.json").write_text(canonical_json(sealed))


def test_what_is_read_is_what_was_written(parts, folder):
    """Every part of the classifier comes back bit for bit, and decides the same."""
    bundle = read_bundle(folder, DIGESTS)
    assert sorted(file.name for file in folder.iterdir()) == sorted(FILES)
    assert bundle.digest == file_digest(folder / "manifest.json")
    values, pulses = blobs(6, seed=3)
    np.testing.assert_array_equal(margins(bundle.forest, values), margins(parts.forest, values))
    np.testing.assert_array_equal(novelty(bundle.novelty, values), novelty(parts.novelty, values))
    for one, other in zip(decide(bundle, values, pulses), decide(parts, values, pulses), strict=True):
        np.testing.assert_array_equal(one, other)
    assert (bundle.classes, bundle.features, bundle.validity) == (parts.classes, parts.features, parts.validity)
    assert bundle.world == 'name = "small"\n'
    assert bundle.manifest["features"][0] == {"name": "rise_ns", "unit": "ns", "digest": DIGESTS["rise_ns"]}


def test_the_tables_come_back(parts, folder):
    """Reference and training pulses keep features, words, waves and weights."""
    bundle = read_bundle(folder, DIGESTS)
    flat = parts.reference.drop(columns="wave").reset_index(drop=True)
    pd.testing.assert_frame_equal(bundle.reference.drop(columns="wave"), flat, check_dtype=False)
    np.testing.assert_array_equal(np.stack(bundle.reference["wave"]), np.stack(parts.reference["wave"]))
    pd.testing.assert_frame_equal(bundle.training, parts.training.reset_index(drop=True), check_dtype=False)
    assert set(bundle.training["basis"]) == {"expert"}


def test_the_same_parts_give_the_same_bytes(parts, tmp_path):
    """No clock and no chance in any file."""
    for name in ("one", "other"):
        write_bundle(tmp_path / name, parts)
    for file in (tmp_path / "one").iterdir():
        assert file.read_bytes() == (tmp_path / "other" / file.name).read_bytes()


@pytest.mark.parametrize("name", FILES)
def test_one_flipped_byte_is_refused(folder, name):
    """Wherever it is in whichever file, and the message names the file."""
    whole = (folder / name).read_bytes()
    rng = np.random.default_rng(len(name))
    places = {0, len(whole) // 2, len(whole) - 1, *rng.integers(0, len(whole), 12).tolist()}
    for place in places:
        flipped = bytearray(whole)
        flipped[place] ^= 1 << int(rng.integers(8))
        (folder / name).write_bytes(flipped)
        with pytest.raises(RefusedError, match=name) as caught:
            read_bundle(folder, DIGESTS)
        assert "\n" not in str(caught.value)
    (folder / name).write_bytes(whole)
    read_bundle(folder, DIGESTS)


def test_a_digest_error_names_both_digests(folder):
    """Expected and found are in the message."""
    before = file_digest(folder / "card.md")
    (folder / "card.md").write_text("# Another card\n")
    with pytest.raises(RefusedError, match=before) as caught:
        read_bundle(folder, DIGESTS)
    assert file_digest(folder / "card.md") in str(caught.value)


def test_missing_further_and_linked_files_are_refused(folder, tmp_path):
    """The folder holds what the manifest names and nothing else, and no links."""
    (folder / "more.txt").write_text("x")
    with pytest.raises(RefusedError, match=r"more\.txt"):
        read_bundle(folder, DIGESTS)
    (folder / "more.txt").unlink()
    moved = (folder / "card.md").rename(tmp_path / "card.md")
    with pytest.raises(RefusedError, match=r"card\.md"):
        read_bundle(folder, DIGESTS)
    (folder / "card.md").symlink_to(moved)
    with pytest.raises(RefusedError, match="link"):
        read_bundle(folder, DIGESTS)
    (folder / "card.md").unlink()
    moved.rename(folder / "card.md")
    (folder / "world.toml").unlink()
    with pytest.raises(RefusedError, match=r"files: expected .*world.toml"):
        read_bundle(folder, DIGESTS)
    (tmp_path / "alias").symlink_to(folder)
    with pytest.raises(RefusedError, match="link"):
        read_bundle(tmp_path / "alias", DIGESTS)
    with pytest.raises(InputError, match="none"):
        read_bundle(tmp_path / "nowhere", DIGESTS)


def test_a_file_that_is_too_large_is_refused_unread(folder):
    """Size comes before everything; the file here is a hole without content."""
    with (folder / "world.toml").open("wb") as file:
        file.truncate(SIZE_LIMITS["world.toml"] + 1)
    with pytest.raises(RefusedError, match="at most"):
        read_bundle(folder, DIGESTS)


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"format": 2}, "format"),
        ({"format": True}, "format"),
        ({"temperature": 0.0}, "temperature"),
        ({"temperature": "1"}, "temperature"),
        ({"classes": ["cable", "local", "switchgear", "frog|toad"]}, "classes"),
        ({"classes": ["cable", "local", "switchgear", "switchgear"]}, "classes"),
        ({"shift": [0.0]}, "one entry a class"),
        ({"limits": [0.5, None]}, "one entry a class"),
        ({"error_rate": 1.0}, "error_rate"),
        ({"mix": {"cable": 0.25, "local": 0.25, "switchgear": 0.25, "interference": 0.3}}, "sum to 1"),
        ({"novelty": {"centre": [], "scale": [], "limit": 1.0}}, "one centre"),
        ({"catalogue_digest": "0" * 64}, "catalogue_digest"),
        ({"extra": 1}, "extra"),
        ({"features": []}, "features"),
    ],
)
def test_a_manifest_that_makes_no_sense_is_refused(folder, changes, said):
    """Even with a seal that fits, every field must be of its kind and agree with the others."""
    reseal(folder)
    read_bundle(folder, DIGESTS)
    reseal(folder, **changes)
    with pytest.raises(RefusedError, match=r"manifest\.json") as caught:
        read_bundle(folder, DIGESTS)
    assert said in str(caught.value)


@pytest.mark.parametrize("content", [b"", b"[]", b"{", b'{"format":NaN}', b"\xff", b"[" * 100_000, b'{"format": 1}'])
def test_a_manifest_that_is_no_canonical_json_is_refused(folder, content):
    """Broken, endless or reformatted JSON is refused in one line."""
    (folder / "manifest.json").write_bytes(content)
    with pytest.raises(RefusedError, match=r"manifest\.json"):
        read_bundle(folder, DIGESTS)


def test_a_manifest_in_another_form_is_refused(folder):
    """The same content with spaces, or with a key that stands there twice, is not what was sealed."""
    path = folder / "manifest.json"
    whole = path.read_text()
    for other in (json.dumps(json.loads(whole), sort_keys=True), whole.replace("{", '{"account":{},', 1)):
        path.write_text(other)
        with pytest.raises(RefusedError, match="canonical JSON"):
            read_bundle(folder, DIGESTS)


def test_a_feature_that_the_program_lacks_is_refused(folder):
    """A name or digest that is not the program's own is refused, naming feature and version."""
    with pytest.raises(RefusedError, match=r"'empty'.*no such feature.*pdclass \d"):
        read_bundle(folder, {name: DIGESTS[name] for name in NAMES[:-1]})
    with pytest.raises(RefusedError, match="'rise_ns'"):
        read_bundle(folder, {**DIGESTS, "rise_ns": "0" * 64})


def test_tables_and_trees_that_do_not_fit_are_refused(folder, parts, tmp_path):
    """Files that agree with their digests but not with the format are refused, too."""
    for name, raw in (("trees.npz", b"no archive"), ("reference.parquet", b"PAR1 not really PAR1")):
        whole = (folder / name).read_bytes()
        (folder / name).write_bytes(raw)
        reseal(folder)
        with pytest.raises(RefusedError, match=name):
            read_bundle(folder, DIGESTS)
        (folder / name).write_bytes(whole)
    other = tmp_path / "other"
    write_bundle(other, replace(parts, reference=parts.reference.assign(label="frog"), world="", card=""))
    with pytest.raises(RefusedError, match=r"reference\.parquet: label"):
        read_bundle(other, DIGESTS)


def test_nothing_is_overwritten_or_left_half(folder, parts, tmp_path):
    """An existing folder is kept unless replaced, and a failed writing leaves nothing behind."""
    before = file_digest(folder / "manifest.json")
    with pytest.raises(InputError, match="--force"):
        write_bundle(folder, parts)
    assert file_digest(folder / "manifest.json") == before
    broken = replace(parts, feature_digests={})
    with pytest.raises(KeyError):
        write_bundle(folder, broken, replace=True)
    assert file_digest(folder / "manifest.json") == before
    write_bundle(folder, parts, replace=True)
    assert file_digest(folder / "manifest.json") != before
    assert [path.name for path in tmp_path.iterdir()] == ["bundle"]
    with pytest.raises(InputError, match="make it first"):
        write_bundle(tmp_path / "no" / "where", parts)
