"""Groups: which pulses may never be parted, how they are weighed, and how groups are shared out."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass.errors import InputError, TooFewError
from pdclass.pulses import FloatArray, IntArray

Names = NDArray[Any]

#: Fewest groups altogether, and of each class: two to fit, one for each other part.
LEAST_GROUPS = 8
LEAST_CLASS_GROUPS = 5


def group_names(table: pd.DataFrame, by: Literal["circuit-and-site", "circuit"] = "circuit-and-site") -> Names:
    """The group of every pulse: the connected set of circuits and sites, named after its first circuit.

    Parameters
    ----------
    table : pulse table; a pulse without a site joins its circuit only.
    by : `circuit` leaves sites aside (the weaker choice: figures then carry "sites shared").

    Returns
    -------
    (pulses,) of str

    Raises
    ------
    InputError
        If a pulse has no circuit.
    """
    if table["circuit"].isna().any():
        place = str(table.index[int(np.argmax(table["circuit"].isna()))])
        raise InputError(f"pulse {place}: circuit: expected a name, found none; groups are made of circuits")
    circuits = [str(name) for name in table["circuit"]]
    sites = [None if pd.isna(name) else str(name) for name in table["site"]]
    if by == "circuit":
        return np.array(circuits, dtype=object)
    head: dict[tuple[str, str], tuple[str, str]] = {}
    for circuit, site in sorted(set(zip(circuits, sites, strict=True)), key=str):
        _join(head, ("circuit", circuit), ("circuit", circuit) if site is None else ("site", site))
    return np.array([_find(head, ("circuit", circuit))[1] for circuit in circuits], dtype=object)


def _find(head: dict[tuple[str, str], tuple[str, str]], member: tuple[str, str]) -> tuple[str, str]:
    head.setdefault(member, member)
    while head[member] != member:
        head[member] = head[head[member]]
        member = head[member]
    return member


def _join(head: dict[tuple[str, str], tuple[str, str]], one: tuple[str, str], other: tuple[str, str]) -> None:
    # "circuit" sorts before "site", so a set that holds a circuit is headed by its first circuit
    first, second = sorted((_find(head, one), _find(head, other)))
    head[second] = first


def class_group_weights(label_index: IntArray, groups: Names) -> FloatArray:
    """Weights that make classes equal, the groups of a class equal, and the pulses of a group in a class equal.

    Returns
    -------
    (pulses,), mean 1
    """
    pairs = pd.DataFrame({"label": label_index, "group": groups})
    in_group = pairs.groupby(["label", "group"], sort=True)["label"].transform("size").to_numpy(np.float64)
    of_class = pairs.groupby("label", sort=True)["group"].transform("nunique").to_numpy(np.float64)
    weights = 1.0 / (in_group * of_class)
    return np.asarray(weights * (len(weights) / math.fsum(weights)), np.float64)


def check_enough(label_index: IntArray, groups: Names, classes: Sequence[str]) -> None:
    """Make sure that there are enough groups, altogether and of every class.

    Raises
    ------
    TooFewError
        Naming the class, how many groups it has and how many are needed.
    """
    advice = "label pulses of more circuits"
    if len(classes) < 2:
        raise TooFewError(f"classes: expected at least 2 with labels, found {len(classes)}; {advice}")
    total = len(set(groups))
    if total < LEAST_GROUPS:
        raise TooFewError(f"groups: expected at least {LEAST_GROUPS}, found {total}; {advice}")
    for k, name in enumerate(classes):
        found = len(set(groups[label_index == k]))
        if found < LEAST_CLASS_GROUPS:
            line = f"class '{name}': expected labels in at least {LEAST_CLASS_GROUPS} groups, found {found}"
            raise TooFewError(f"{line}; {advice}")


def share_out(
    label_index: IntArray, groups: Names, shares: Mapping[str, float], *, rng: np.random.Generator
) -> dict[str, Names]:
    """Share whole groups out to parts so that every class is spread as the shares say, as well as groups allow.

    The class with the fewest unplaced groups goes first; each of its groups goes to the part that lacks that
    class most (iterative stratification: Sechidis, Tsoumakas, Vlahavas 2011, from memory).

    Parameters
    ----------
    label_index, groups : (pulses,), class and group of every pulse.
    shares : wanted fraction of the groups for each part, in order of precedence.

    Returns
    -------
    Sorted group names of each part.
    """
    names, holds = _holdings(label_index, groups)
    order = rng.permutation(len(names))
    wanted = {part: share / math.fsum(shares.values()) * holds.sum(axis=0) for part, share in shares.items()}
    whole = {part: share / math.fsum(shares.values()) * len(names) for part, share in shares.items()}
    placed: dict[str, list[str]] = {part: [] for part in shares}
    left = list(order)
    while left:
        rarest = _rarest(holds[left])
        for place in [place for place in left if holds[place, rarest]]:
            part = max(shares, key=lambda name: (wanted[name][rarest], whole[name]))
            placed[part].append(names[place])
            wanted[part] = wanted[part] - holds[place]
            whole[part] -= 1
        left = [place for place in left if not holds[place, rarest]]
    return {part: np.array(sorted(found), dtype=object) for part, found in placed.items()}


def _holdings(label_index: IntArray, groups: Names) -> tuple[list[str], NDArray[np.bool_]]:
    names = sorted(set(groups))
    place = {name: row for row, name in enumerate(names)}
    holds = np.zeros((len(names), int(label_index.max()) + 1), np.bool_)
    holds[[place[name] for name in groups], label_index] = True
    return names, holds


def _rarest(holds: NDArray[np.bool_]) -> int:
    held = holds.sum(axis=0)
    return int(np.argmin(np.where(held > 0, held, np.iinfo(np.int64).max)))
