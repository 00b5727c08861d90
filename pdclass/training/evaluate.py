"""How good a classifier is on labelled pulses; every figure weighs groups equally, whatever their number of pulses.

A share "over groups" is the mean of the shares within each group that has such pulses.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Any, Literal, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import betaincinv

from pdclass.errors import InputError, TooFewError
from pdclass.model.bundle import Classifier
from pdclass.model.decision import Decisions, decide
from pdclass.pulses import FloatArray, IntArray, PulseSet
from pdclass.training.fit import usable
from pdclass.training.groups import Names, group_names

SNR_EDGES_DB = (-np.inf, 12.0, 18.0, 24.0, 30.0, 40.0, np.inf)
DISTANCE_EDGES_M = (0.0, 10.0, 30.0, 100.0, 300.0, 600.0, 1000.0, 2000.0, np.inf)
CALIBRATION_BINS = 10
NEAR_END = ("local", "switchgear")
_INTERVAL = 0.95

Mask = NDArray[np.bool_]


class Evaluation(NamedTuple):
    """Figures by name (None = cannot be said from these pulses) and tables by name."""

    figures: dict[str, Any]
    tables: dict[str, pd.DataFrame]


class Judged(NamedTuple):
    """Labelled pulses with what a classifier decided about them, row by row."""

    classes: tuple[str, ...]
    truth: IntArray
    groups: Names
    verdict: Decisions
    snr_db: FloatArray
    distance_m: FloatArray

    @property
    def hit(self) -> Mask:
        """Whether the likeliest label is the true one, (pulses,)."""
        return np.asarray(self.verdict.likeliest == self.truth, np.bool_)

    @property
    def covered(self) -> Mask:
        """Whether the true label is in the label set, (pulses,)."""
        return self.verdict.sets[np.arange(len(self.truth)), self.truth]

    def where(self, chosen: Mask) -> Judged:
        """The chosen pulses alone."""
        verdict = Decisions._make(column[chosen] for column in self.verdict)
        rest = (self.truth[chosen], self.groups[chosen], verdict, self.snr_db[chosen], self.distance_m[chosen])
        return Judged(self.classes, *rest)

    def of(self, name: str) -> Mask:
        """The pulses that truly are of the class; none where the classifier does not know it."""
        place = self.classes.index(name) if name in self.classes else -1
        return np.asarray(self.truth == place, np.bool_)


def evaluate(
    classifier: Classifier,
    values: FloatArray,
    pulses: PulseSet,
    *,
    by: Literal["circuit-and-site", "circuit"] = "circuit-and-site",
) -> Evaluation:
    """Figures and tables from labelled pulses that the classifier has not been trained on.

    Echoes and unlabelled pulses are left out. The label judged is the likeliest one unless "decided" is said.

    Parameters
    ----------
    values : (pulses, features) in the classifier's feature order.

    Raises
    ------
    TooFewError
        If there is no labelled pulse.
    InputError
        If a label is not a class of the classifier.
    """
    judged = judge(classifier, values, pulses, by)
    figures = {"groups_by": by, **_accuracy(judged), **_doubt(judged), **_dangerous(judged)}
    tables = {
        "confusion": _confusion(judged),
        "by_class": _by_class(judged),
        "by_snr": _by_snr(judged),
        "by_distance": _by_distance(judged),
        "by_group": _by_group(judged),
        "sets": _sets(judged),
        "calibration": _calibration(judged),
    }
    figures["cable_half_distance_m"] = half_distance(tables["by_distance"])
    figures["calibration_error"] = calibration_error(tables["calibration"])
    return Evaluation(figures, tables)


def judge(
    classifier: Classifier,
    values: FloatArray,
    pulses: PulseSet,
    by: Literal["circuit-and-site", "circuit"] = "circuit-and-site",
) -> Judged:
    """What a classifier decides about labelled pulses beside their truth; arguments and errors as for `evaluate`."""
    kept = usable(pulses.table)
    if not len(kept):
        raise TooFewError("labels: expected labelled pulses to evaluate on, found none; label some first")
    # all pulses are decided on, for one that may be an echo shares in its parent's doubt
    alone = np.cumsum(pulses.table["echo_of"].isna().to_numpy()) - 1
    everyone = decide(classifier, values, pulses)
    table = pulses.table.iloc[kept]
    odd = sorted(set(table["label"]) - set(classifier.classes))
    if odd:
        expected = ", ".join(classifier.classes)
        raise InputError(f"label: expected one of {expected}, found '{odd[0]}'; the bundle does not know it")
    distance = table["distance_m"] if "distance_m" in table else pd.Series(np.nan, index=table.index)
    return Judged(
        classes=classifier.classes,
        truth=np.array([classifier.classes.index(label) for label in table["label"]], np.int64),
        groups=group_names(table, by),
        verdict=Decisions(*(column[alone[kept]] for column in everyone)),
        snr_db=np.asarray(table["snr_db"].to_numpy(np.float64)),
        distance_m=np.asarray(distance.to_numpy(np.float64)),
    )


def over_groups(right: Mask | FloatArray, groups: Names, chosen: Mask) -> float | None:
    """Mean over groups of the mean within each group, of the chosen pulses; None without any."""
    if not chosen.any():
        return None
    within = pd.Series(np.asarray(right, np.float64)[chosen]).groupby(groups[chosen], sort=True).mean()
    return float(within.mean())


def _balanced(judged: Judged, chosen: Mask, right: Mask) -> float | None:
    """Mean over the classes present of the share over groups; None where fewer than two classes are present."""
    found = [over_groups(right, judged.groups, chosen & judged.of(name)) for name in judged.classes]
    present = [share for share in found if share is not None]
    return float(np.mean(present)) if len(present) > 1 else None


def _merged(judged: Judged) -> tuple[IntArray, IntArray]:
    """True and likeliest label with local and switchgear taken as one."""
    near = [place for place, name in enumerate(judged.classes) if name in NEAR_END]
    to = np.array([near[0] if place in near else place for place in range(len(judged.classes))])
    return to[judged.truth], to[judged.verdict.likeliest]


def _merged_balanced(judged: Judged, chosen: Mask) -> float | None:
    truth, likeliest = _merged(judged)
    masks = [chosen & (truth == place) for place in sorted(set(truth[chosen]))]
    if len(masks) < 2:
        return None
    return float(np.mean([over_groups(truth == likeliest, judged.groups, mask) for mask in masks]))


def _accuracy(judged: Judged) -> dict[str, Any]:
    everyone = np.ones(len(judged.truth), np.bool_)
    decided = judged.verdict.decided
    return {
        "pulses": len(judged.truth),
        "groups": len(set(judged.groups)),
        "balanced_accuracy": _balanced(judged, everyone, judged.hit),
        "balanced_accuracy_near_end_merged": _merged_balanced(judged, everyone),
        "share_undecided": over_groups(~decided, judged.groups, everyone),
        "accuracy_decided": over_groups(judged.hit, judged.groups, decided),
        "balanced_accuracy_decided": _balanced(judged, decided, judged.hit),
        "pulses_decided": int(decided.sum()),
        "share_unfamiliar": over_groups(judged.verdict.unfamiliar, judged.groups, everyone),
        "share_outside": over_groups(judged.verdict.outside, judged.groups, everyone),
    }


def _doubt(judged: Judged) -> dict[str, Any]:
    coverage = _within_groups(judged.covered, judged.groups)
    size = judged.verdict.sets.sum(axis=1).astype(np.float64)
    return {
        "coverage_mean": float(coverage.mean()),
        "coverage_10th_percentile": float(np.quantile(coverage, 0.1)),
        "coverage_worst_group": float(coverage.min()),
        "set_size_mean": over_groups(size, judged.groups, np.ones(len(size), np.bool_)),
    }


def clear_figures(judged: Judged) -> dict[str, float | None]:
    """The figures by which worlds are compared: classes weigh equally, within a class its groups.

    Near end merged: `local` and `switchgear` count as one, and a label set within these two as decided.
    """
    everyone = np.ones(len(judged.truth), np.bool_)
    near = _decided_merged(judged)
    truth, likeliest = _merged(judged)
    wrong = judged.verdict.decided & ~judged.hit
    return {
        "balanced_accuracy": _balanced(judged, everyone, judged.hit),
        "balanced_accuracy_near_end_merged": _merged_balanced(judged, everyone),
        "coverage_least_class": _least(judged, judged.covered),
        "decided": _balanced(judged, everyone, judged.verdict.decided),
        "accuracy_decided": _ratio(judged, judged.verdict.decided & judged.hit, judged.verdict.decided),
        "decided_near_end_merged": _balanced(judged, everyone, near),
        "accuracy_decided_near_end_merged": _ratio(judged, near & (truth == likeliest), near),
        "decided_wrongly": _balanced(judged, everyone, wrong),
        "unfamiliar": _balanced(judged, everyone, judged.verdict.unfamiliar),
    }


def _least(judged: Judged, right: Mask) -> float | None:
    """The least over the classes present of the share over groups."""
    found = [over_groups(right, judged.groups, judged.of(name)) for name in judged.classes]
    return min((share for share in found if share is not None), default=None)


def _ratio(judged: Judged, part: Mask, whole: Mask) -> float | None:
    """Share of `part` in `whole`, classes weighing equally."""
    everyone = np.ones(len(judged.truth), np.bool_)
    above, below = _balanced(judged, everyone, part), _balanced(judged, everyone, whole)
    return above / below if above is not None and below else None


def _decided_merged(judged: Judged) -> Mask:
    """Decided, or nothing but the near end left in the label set, of a familiar pulse within the limits."""
    near = np.isin(np.array(judged.classes), NEAR_END)
    inside = judged.verdict.sets[:, near].any(axis=1) & ~judged.verdict.sets[:, ~near].any(axis=1)
    sound = ~judged.verdict.unfamiliar & ~judged.verdict.outside & near[judged.verdict.likeliest]
    return judged.verdict.decided | (inside & sound)


def _within_groups(right: Mask, groups: Names) -> FloatArray:
    within = pd.Series(right.astype(np.float64)).groupby(groups, sort=True).mean()
    return np.asarray(within.to_numpy(np.float64))


def _dangerous(judged: Judged) -> dict[str, Any]:
    """True switchgear decided as interference: the cell that leaves a failing panel live."""
    switchgear = judged.of("switchgear")
    place = judged.classes.index("interference") if "interference" in judged.classes else -1
    missed = judged.verdict.decided & (judged.verdict.likeliest == place)
    share = over_groups(missed, judged.groups, switchgear)
    groups = len(set(judged.groups[switchgear]))
    low, high = (None, None) if share is None else group_interval(share, groups)
    return {
        "switchgear_as_interference_count": int((missed & switchgear).sum()),
        "switchgear_pulses": int(switchgear.sum()),
        "switchgear_groups": groups,
        "switchgear_as_interference_groups": len(set(judged.groups[missed & switchgear])),
        "switchgear_as_interference_share": share,
        "switchgear_as_interference_low": low,
        "switchgear_as_interference_high": high,
    }


def group_interval(share: float, groups: int, level: float = _INTERVAL) -> tuple[float, float]:
    """Clopper-Pearson interval of a share over groups, each group counted as one trial however many its pulses.

    Pulses of one group err together, so their number is no evidence; a share within a group varies less than a
    yes or no, so the interval is wide rather than narrow.

    Parameters
    ----------
    share : 0 to 1.
    groups : >= 1.
    """
    tail, hits = (1 - level) / 2, share * groups
    low = 0.0 if hits <= 0 else float(betaincinv(hits, groups - hits + 1, tail))
    high = 1.0 if hits >= groups else float(betaincinv(hits + 1, groups - hits, 1 - tail))
    return low, high


def _confusion(judged: Judged) -> pd.DataFrame:
    """Counts: true label by row; decided labels and undecided by column."""
    names = [*judged.classes, "undecided"]
    column = np.where(judged.verdict.decided, judged.verdict.likeliest, len(judged.classes))
    counts = np.zeros((len(judged.classes), len(names)), np.int64)
    np.add.at(counts, (judged.truth, column), 1)
    return pd.DataFrame(counts, index=pd.Index(judged.classes, name="truth"), columns=names)


def confused(judged: Judged) -> pd.DataFrame:
    """True label by row, likeliest label by column, as shares of the row in which groups weigh equally.

    Returns
    -------
    pd.DataFrame
        Every row sums to one; a class without pulses has none.
    """
    rows = {
        name: [
            over_groups(judged.verdict.likeliest == place, judged.groups, here) for place in range(len(judged.classes))
        ]
        for name in judged.classes
        if (here := judged.of(name)).any()
    }
    return pd.DataFrame(rows, index=list(judged.classes), dtype=np.float64).T.rename_axis("truth")


def _by_class(judged: Judged) -> pd.DataFrame:
    rows = [{"class": name, **_row(judged, judged.of(name))} for name in judged.classes]
    return pd.DataFrame(rows).set_index("class")


def _row(judged: Judged, chosen: Mask) -> dict[str, Any]:
    return {
        "pulses": int(chosen.sum()),
        "groups": len(set(judged.groups[chosen])),
        "recall": over_groups(judged.hit, judged.groups, chosen),
        "coverage": over_groups(judged.covered, judged.groups, chosen),
        "share_undecided": over_groups(~judged.verdict.decided, judged.groups, chosen),
        "accuracy_decided": over_groups(judged.hit, judged.groups, chosen & judged.verdict.decided),
    }


def _by_snr(judged: Judged) -> pd.DataFrame:
    rows = []
    for low, high, chosen in _bands(judged.snr_db, SNR_EDGES_DB):
        balanced = _balanced(judged, chosen, judged.hit)
        merged = _merged_balanced(judged, chosen)
        row = {"balanced_accuracy": balanced, "balanced_accuracy_near_end_merged": merged, **_row(judged, chosen)}
        rows.append({"from_db": low, "to_db": high, **row})
    return pd.DataFrame(rows).drop(columns="recall")


def _by_distance(judged: Judged) -> pd.DataFrame:
    """Cable pulses of each distance band; balanced accuracy holds them against all pulses of the other classes."""
    cable = judged.of("cable")
    rows = []
    for low, high, band in _bands(judged.distance_m, DISTANCE_EDGES_M):
        chosen = band & cable
        middle = float(np.median(judged.distance_m[chosen])) if chosen.any() else None
        versus = chosen | ~cable
        here = bool(chosen.any())
        rows.append({
            "from_m": low, "to_m": high, "median_m": middle, **_row(judged, chosen),
            "balanced_accuracy": _balanced(judged, versus, judged.hit) if here else None,
            "balanced_accuracy_near_end_merged": _merged_balanced(judged, versus) if here else None,
        })  # fmt: skip
    return pd.DataFrame(rows)


def _bands(found: FloatArray, edges: Sequence[float]) -> list[tuple[float, float, Mask]]:
    pairs = itertools.pairwise(edges)
    return [(low, high, np.asarray((found >= low) & (found < high), np.bool_)) for low, high in pairs]


def half_distance(by_distance: pd.DataFrame) -> float | None:
    """The distance at which the recall of cable first passes one half [m], or None where it never does.

    Interpolated over log distance between the medians of neighbouring bands. Where the nearest band already
    recalls half, its median is returned: the true distance is at most that.
    """
    known = by_distance.dropna(subset=["recall", "median_m"])
    recall, middle = known["recall"].to_numpy(np.float64), known["median_m"].to_numpy(np.float64)
    above = np.flatnonzero(recall >= 0.5)
    if not len(above):
        return None
    place = int(above[0])
    if place == 0 or middle[place - 1] <= 0:
        return float(middle[place])
    part = (0.5 - recall[place - 1]) / (recall[place] - recall[place - 1])
    ends = np.log(middle[place - 1 : place + 1])
    return float(np.exp(ends[0] + part * (ends[1] - ends[0])))


def _by_group(judged: Judged) -> pd.DataFrame:
    rows = [{"group": name, **_row(judged, judged.groups == name)} for name in sorted(set(judged.groups))]
    return pd.DataFrame(rows).drop(columns="groups").set_index("group")


def _sets(judged: Judged) -> pd.DataFrame:
    """Share of the label sets by content, the empty set as "none"."""
    everyone = np.ones(len(judged.truth), np.bool_)
    words = np.array(["|".join(np.array(judged.classes)[row]) or "none" for row in judged.verdict.sets], object)
    rows = [
        {
            "label_set": word,
            "pulses": int((words == word).sum()),
            "share": over_groups(words == word, judged.groups, everyone),
            "coverage": over_groups(judged.covered, judged.groups, words == word),
        }
        for word in sorted(set(words))
    ]
    return pd.DataFrame(rows).sort_values("share", ascending=False, kind="stable").reset_index(drop=True)


def _calibration(judged: Judged) -> pd.DataFrame:
    """Stated probability of the likeliest label against how often it is right, in ten fixed bins."""
    stated = judged.verdict.probabilities.max(axis=1)
    weight = 1.0 / pd.Series(stated).groupby(judged.groups).transform("size").to_numpy(np.float64)
    weight = weight / weight.sum()
    place = np.minimum((stated * CALIBRATION_BINS).astype(int), CALIBRATION_BINS - 1)
    rows = []
    for number in range(CALIBRATION_BINS):
        here = place == number
        total = float(weight[here].sum())
        rows.append({
            "from": number / CALIBRATION_BINS, "to": (number + 1) / CALIBRATION_BINS,
            "pulses": int(here.sum()), "share": total,
            "stated": float((weight * stated)[here].sum() / total) if total else np.nan,
            "right": float((weight * judged.hit)[here].sum() / total) if total else np.nan,
        })  # fmt: skip
    return pd.DataFrame(rows)


def calibration_error(calibration: pd.DataFrame) -> float:
    """Expected calibration error: mean of |right - stated| over the bins, weighed by their share.

    Naeini et al. 2015; Guo et al. 2017 (from memory). Biased upwards for few pulses.
    """
    gap = (calibration["right"] - calibration["stated"]).abs() * calibration["share"]
    return float(gap.fillna(0.0).sum())
