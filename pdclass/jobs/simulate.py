"""`pdclass simulate`: captures of a synthetic world with their truth, and the pulses found in them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pandas as pd

from pdclass.capture import together, write_pulses, write_sigmf
from pdclass.errors import InputError
from pdclass.extract import Extraction, ExtractSettings, extract
from pdclass.jobs.gallery import GALLERY, write_gallery
from pdclass.jobs.talk import SILENT, Talk, each
from pdclass.pulses import Annotation, Capture, PulseSet
from pdclass.settings import shipped
from pdclass.sim.scenario import Scenario, capture_count, circuit_of, read_scenario, simulate_capture

#: After a planted pulse its echoes may be found for so long; what is found later is background.
SHADOW_S = 70e-6


@dataclass(frozen=True)
class Simulated:
    """What a simulation has written."""

    captures: tuple[Path, ...]
    pulse_tables: tuple[Path, ...]
    pulses: int
    gallery: Path | None = None


def scenario_path(name: str | Path) -> Path:
    """A scenario by its path, or by the name of a shipped one.

    Raises
    ------
    InputError
        If there is neither.
    """
    path = Path(name)
    if path.is_file():
        return path
    inside = shipped("synthetic") / f"{path.name.removesuffix('.toml')}.toml"
    if inside.is_file() and path.name == str(name):
        return inside
    known = ", ".join(sorted(file.stem for file in shipped("synthetic").glob("*.toml")))
    raise InputError(f"{name}: no such scenario file; shipped ones are {known}")


def simulate(
    scenario: str | Path,
    out: Path,
    *,
    seed: int = 1,
    captures: int | None = None,
    pulses: int | None = None,
    jobs: int = 1,
    gallery: bool = False,
    force: bool = False,
    talk: Talk = SILENT,
) -> Simulated:
    """Write a scenario's captures (SigMF with truth annotations) and the labelled pulses found in them.

    Parameters
    ----------
    scenario : path of a scenario, or the name of a shipped one.
    out : folder for the captures and the pulse tables (one for each sampling rate).
    seed : draws another world from the same distributions.
    captures, pulses : captures, and planted pulses a capture; the scenario's own numbers by default.
    jobs : processes; does not change the result.
    gallery : also write a page of what this world looks like.
    force : write into a folder that is not empty.

    Raises
    ------
    InputError
        If the scenario is not usable or the folder is not empty.
    """
    world = read_scenario(scenario_path(scenario))
    # what cannot be drawn says so before anything of an earlier run is touched
    circuit_of(world, 1, seed=seed)
    fresh_folder(out, force=force)
    _clear(out, world.name)
    numbers = range(1, (captures or capture_count(world)) + 1)
    calls = [(world, number, seed, pulses, out) for number in numbers]
    made = each(_capture_to_disk, calls, jobs=jobs, talk=talk, words="captures simulated")
    tables = write_by_rate([found for _, found in made], out)
    page = write_gallery(world, out, seed=seed, talk=talk) if gallery else None
    return Simulated(tuple(path for path, _ in made), tables, sum(len(found.table) for _, found in made), page)


def fresh_folder(out: Path, *, force: bool) -> None:
    """Make a folder, and refuse one that holds something unless told otherwise.

    Raises
    ------
    InputError
        If it is no folder, holds something, or cannot be made.
    """
    try:
        if out.exists() and not out.is_dir():
            raise InputError(f"{out}: expected a folder, found a file; choose another name")
        if out.is_dir() and any(out.iterdir()) and not force:
            raise InputError(f"{out}: expected an empty folder, found files in it; choose another name or --force")
        out.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(f"{out}: cannot be made a folder: {error.strerror}; choose another name") from None


def _clear(out: Path, name: str) -> None:
    """Take away what an earlier run of the same world has written."""
    tables = [out / "pulses.parquet", *out.glob("pulses-*MSps.parquet")]
    for old in [*out.glob(f"{name}-[0-9][0-9][0-9][0-9]*.sigmf-*"), *tables, out / GALLERY]:
        try:
            old.unlink(missing_ok=True)
        except OSError as error:
            raise InputError(f"{old}: cannot be replaced: {error.strerror}; choose another --out") from None


def labelled_pulses(capture: Capture, settings: ExtractSettings) -> Extraction:
    """Pulses of a simulated capture; what is found far from everything planted is labelled background."""
    found = extract(capture, settings)
    table = with_background(found.pulses.table, capture.annotations, capture.chain.rate_hz)
    return replace(found, pulses=replace(found.pulses, table=table))


def with_background(table: pd.DataFrame, planted: Sequence[Annotation], rate_hz: float) -> pd.DataFrame:
    """The table with bare threshold crossings labelled `interference`, family `background`.

    A crossing is an unlabelled event with nothing planted in the 70 us before it (echoes come within 60 us) nor
    in the microsecond after it.
    """
    onsets = np.sort(np.array([note.onset_sample for note in planted], np.int64))
    where = table["onset_sample"].to_numpy(np.int64)
    later = np.searchsorted(onsets, where + round(1e-6 * rate_hz), side="right")
    since = np.where(later > 0, where - np.concatenate([[0], onsets])[later], np.iinfo(np.int64).max)
    bare = table["label"].isna().to_numpy() & table["echo_of"].isna().to_numpy() & (since > SHADOW_S * rate_hz)
    marked = table.copy()
    for name, value in (("label", "interference"), ("basis", "simulated"), ("labelled_by", "simulated")):
        marked[name] = marked[name].astype("object").mask(bare, value)
    if "family" in marked:
        marked["family"] = marked["family"].astype("object").mask(bare, "background")
    return marked


def write_by_rate(found: Sequence[PulseSet], out: Path) -> tuple[Path, ...]:
    """One pulse table a sampling rate: `pulses.parquet`, or `pulses-62.5MSps.parquet` where there are several."""
    sets = by_rate(found)
    paths = []
    for rate_hz, pulses in sets.items():
        name = "pulses.parquet" if len(sets) == 1 else f"pulses-{rate_hz / 1e6:g}MSps.parquet"
        write_pulses(out / name, pulses)
        paths.append(out / name)
    return tuple(paths)


def by_rate(found: Sequence[PulseSet]) -> dict[float, PulseSet]:
    """Pulse sets joined where they share a rate, in order of rate; equal chains are kept once."""
    rates = sorted({pulses.rate_hz for pulses in found if len(pulses.table)})
    return {rate: joined([p for p in found if p.rate_hz == rate and len(p.table)]) for rate in rates}


def joined(sets: Sequence[PulseSet]) -> PulseSet:
    """Pulse sets of one rate as one."""
    chains = list(dict.fromkeys(chain for pulses in sets for chain in pulses.chains))
    tables = []
    for pulses in sets:
        place = np.array([chains.index(chain) for chain in pulses.chains], np.int16)
        tables.append(pulses.table.assign(chain=place[pulses.table["chain"].to_numpy(np.int64)]))
    own_classes = together("own classes", *(pulses.own_classes for pulses in sets))
    return PulseSet(np.concatenate([pulses.waves for pulses in sets]), tuple(chains), pd.concat(tables), own_classes)


def _capture_to_disk(world: Scenario, number: int, seed: int, pulses: int | None, out: Path) -> tuple[Path, PulseSet]:
    capture = simulate_capture(world, number, seed=seed, pulses=pulses)
    return write_sigmf(out, capture), labelled_pulses(capture, ExtractSettings()).pulses
