"""What a batch of verdicts amounts to, as tables and plain words; nothing here draws."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from pdclass.pulses import UNDECIDED
from pdclass.verdict.sentences import doubt_kind, quantity, set_in_words

NOT_STATED = "not stated"

#: Who has to act on a label, after the table of labels.
WHO_ACTS: Mapping[str, str] = {
    "cable": "locate from both ends first, then the owner of the place found",
    "local": "the termination crew",
    "switchgear": "the switchgear crew, under the safety rules for switchgear",
    "interference": "nobody",
}
#: A set without `interference` is a discharge whose place is open: who then has to act.
WHO_ACTS_TOGETHER: Mapping[tuple[str, ...], str] = {
    ("cable", "local"): "the termination crew, and locate from both ends",
    ("local", "switchgear"): "termination crew and switchgear crew together",
    ("cable", "switchgear"): "the switchgear crew, and locate from both ends",
    ("cable", "local", "switchgear"): "termination crew and switchgear crew together, and locate from both ends",
}
MEANING: Mapping[str, str] = {
    "cable": "a discharge that arrived after travel along a cable: a path, not an asset",
    "local": "a discharge in the termination, cable box or first 10 m of cable at the sensor",
    "switchgear": "a discharge in the switchgear at the sensor, of this panel or a neighbour",
    "interference": "no discharge of insulation in cable system or switchgear, by whatever path it came",
    UNDECIDED: "not decided; why is said below",
}

SHORT_CAUTION = (
    "Advisory only, from one sensor's waveforms. Not a permit to work, and not proof that equipment is healthy "
    "or safe. High voltage kills. Full cautions at the end."
)
_AUTHORISED = (
    "High voltage kills. Sensors are fitted and equipment is entered only by authorised persons under the "
    "utility's own safety rules and local codes."
)
_TOGETHER = (
    "Pulses of one source err together: many equal labels are not many proofs, and the share of a label is "
    "not its probability."
)
CAUTIONS = (
    "This report is advisory only. It rests on the waveforms of one sensor.",
    "It is not a permit to work, and not proof that equipment is healthy or safe.",
    _AUTHORISED,
    "Decisions to dig, to switch or to leave in service rest with licensed, competent staff.",
    "Absolute magnitude means little on-line; trends and location matter.",
    _TOGETHER,
)
PHASE_WORDS: Mapping[str, str] = {
    "own": "phase 0 is the rising zero crossing of the conductor's own voltage to earth",
    "L1-earth": "phase 0 is the rising zero crossing of L1 to earth",
    "L2-earth": "phase 0 is the rising zero crossing of L2 to earth",
    "L3-earth": "phase 0 is the rising zero crossing of L3 to earth",
    "low-voltage-socket": "phase taken from a low-voltage socket: offset unknown",
}
PHASE_UNKNOWN = "phase reference not stated: offset unknown"


@dataclass(frozen=True)
class DoubtGroup:
    """Undecided pulses that share a cause.

    Attributes
    ----------
    kind : the cause in words.
    ids : their pulse ids, the most probable one first.
    circuits : pulses per circuit.
    """

    kind: str
    ids: tuple[str, ...]
    circuits: Mapping[str, int]

    @property
    def count(self) -> int:
        """How many pulses share the cause."""
        return len(self.ids)


@dataclass(frozen=True)
class TruthComparison:
    """Verdicts beside what was planted.

    Attributes
    ----------
    table : (truths, verdicts) counts; with the column `echo` for those listed as an echo.
    recall : per truth, the share of its pulses decided rightly, and decided at all.
    wrong : the pulses decided otherwise than planted.
    """

    table: pd.DataFrame
    recall: pd.DataFrame
    wrong: pd.DataFrame


def with_names(table: pd.DataFrame) -> pd.DataFrame:
    """A copy in which an unknown circuit, sensor or session is called "not stated"."""
    return table.assign(**{name: table[name].fillna(NOT_STATED) for name in ("circuit", "sensor", "session")})


def counted_once(table: pd.DataFrame) -> pd.DataFrame:
    """Without the repeats of pulses that came twice, as when a capture was given under two names."""
    return table[~table.index.duplicated()]


def label_counts(
    verdicts: pd.DataFrame,
    pulses: pd.DataFrame,
    classes: Sequence[str],
    captures: Sequence[Mapping[str, Any]] = (),
) -> pd.DataFrame:
    """Pulses per circuit and sensor by label, with undecided ones, their sum, and echoes.

    Parameters
    ----------
    verdicts : verdicts on pulses that are no echoes.
    pulses : the pulse tables, echoes among them.
    classes : labels in the bundle's order.
    captures : records of the captures; where nothing was found, zeros are counted.
    """
    everything = with_names(pulses)
    places = set(zip(everything["circuit"], everything["sensor"], strict=True))
    places |= {(item["circuit"], item["sensor"]) for item in captures if item["circuit"] and item["sensor"]}
    index = pd.MultiIndex.from_tuples(sorted(places), names=["circuit", "sensor"])
    named = with_names(verdicts)
    columns = {label: _count(named[named["label"] == label], index) for label in (*classes, UNDECIDED)}
    echoes = everything[everything["echo_of"].notna()]
    return pd.DataFrame({**columns, "pulses": _count(named, index), "echoes": _count(echoes, index)})


def _count(rows: pd.DataFrame, index: pd.MultiIndex) -> pd.Series[int]:
    sizes = rows.groupby(["circuit", "sensor"]).size()
    return sizes.reindex(index, fill_value=0).astype(np.int64)


def doubt_groups(verdicts: pd.DataFrame) -> list[DoubtGroup]:
    """The undecided pulses by cause, most frequent cause first."""
    open_ones = with_names(verdicts[~verdicts["decided"].astype(bool)])
    if open_ones.empty:
        return []
    kinds = pd.Series([doubt_kind(row) for row in open_ones.to_dict("records")], index=open_ones.index, dtype="object")
    top = likeliest_probability(open_ones)
    groups = []
    for kind, members in kinds.groupby(kinds):
        rows = open_ones.loc[members.index].assign(top=top.loc[members.index])
        ids = rows.sort_values("top", ascending=False, kind="stable").index
        circuits = {str(name): int(count) for name, count in rows.groupby("circuit").size().items()}
        groups.append(DoubtGroup(str(kind), tuple(ids), circuits))
    return sorted(groups, key=lambda group: (-group.count, group.kind))


def likeliest_probability(verdicts: pd.DataFrame) -> pd.Series[float]:
    """Probability of each pulse's likeliest label."""
    columns = [name for name in verdicts.columns if name.startswith("p_")]
    return verdicts[columns].max(axis=1)


def example_ids(verdicts: pd.DataFrame, classes: Sequence[str]) -> dict[str, list[tuple[str, str]]]:
    """Per label that was decided, a typical pulse and the least sure one, each with what it stands for."""
    examples = {}
    for label in classes:
        rows = verdicts[verdicts["label"] == label]
        if rows.empty:
            continue
        order = rows[f"p_{label}"].sort_values(ascending=False, kind="stable").index
        middle, last = str(order[(len(order) - 1) // 2]), str(order[-1])
        examples[label] = [(middle, f"the middle one of {len(order)} by probability")]
        if last != middle:
            examples[label].append((last, f"the least sure of {len(order)}"))
    return examples


def circuit_words(
    counts: pd.DataFrame, doubts: Sequence[DoubtGroup], captures: Iterable[Mapping[str, Any]]
) -> list[tuple[str, str]]:
    """Per circuit its name and, in words, what was found and who has to act first."""
    captures = list(captures)
    words = []
    for circuit, rows in counts.groupby(level="circuit", sort=True):
        total = rows.sum()
        own = {group.kind: group.circuits.get(str(circuit), 0) for group in doubts}
        seen = [item for item in captures if (item["circuit"] or NOT_STATED) == circuit]
        sentences = [_heard(total, seen), _decided_words(total), _doubt_words(total, own), _who(total, own)]
        words.append((str(circuit), " ".join(sentence for sentence in sentences if sentence)))
    return words


def overall_words(counts: pd.DataFrame, run: Mapping[str, Any]) -> str:
    """One sentence or two on the whole batch."""
    total = counts.sum()
    circuits = counts.index.get_level_values("circuit").nunique()
    skipped = sum(item["state"] != "scored" for item in run["inputs"])
    first = (
        f"{_plural(circuits, 'circuit')}, {_plural(len(run['captures']), 'record')}: "
        f"{_plural(int(total['pulses']), 'pulse')}, of which "
        f"{int(total['pulses'] - total[UNDECIDED])} got a label and {int(total[UNDECIDED])} stay undecided."
    )
    return first if not skipped else f"{first} {_plural(skipped, 'input')} could not be read and is listed below."


def capture_rows(run: Mapping[str, Any]) -> list[dict[str, str]]:
    """One row of text a capture: where, how long, what was found, from which peak on."""
    return [
        {
            "capture": item["capture"],
            "circuit": item["circuit"] or NOT_STATED,
            "sensor": item["sensor"] or NOT_STATED,
            "session": item["session"] or NOT_STATED,
            "start": (item["start_utc"] or NOT_STATED).replace("T", " ").replace("+00:00", " UTC"),
            "duration": "unknown" if item["duration_s"] is None else duration(item["duration_s"]),
            "pulses": str(item["pulses_found"]),
            "echoes": str(item["echoes"]),
            "limit": "unknown" if item["detection_limit_mv"] is None else quantity(item["detection_limit_mv"], "mV"),
        }
        for item in sorted(run["captures"], key=lambda item: (item["circuit"] or "", item["capture"]))
    ]


def unchecked_lines(run: Mapping[str, Any]) -> list[tuple[str, list[str]]]:
    """What was not checked or is worth a remark, each with the captures it holds for."""
    lines: dict[str, list[str]] = {}
    for item in run["captures"]:
        for remark in [*item["not_checked"], *item["notes"]]:
            line = remark.removeprefix(f"{item['capture']}: ")
            lines.setdefault(line, []).append(item["capture"])
    skipped = [item for item in run["inputs"] if item["state"] != "scored"]
    return [*lines.items(), *((str(item["state"]), [str(item["given"])]) for item in skipped)]


def phase_words(reference: str | None) -> str:
    """What phase 0 is, or that nobody knows."""
    return PHASE_WORDS.get(reference or "", PHASE_UNKNOWN)


def compare_with_truth(verdicts: pd.DataFrame, truth: pd.Series[Any], classes: Sequence[str]) -> TruthComparison:
    """Set verdicts beside planted labels.

    Parameters
    ----------
    verdicts : verdicts on pulses that are no echoes.
    truth : planted label by `pulse_id`; a pulse without a verdict was listed as an echo.
    """
    truth = truth.dropna()
    given = verdicts["label"].reindex(truth.index).fillna("echo")
    order = [label for label in classes if (truth == label).any()]
    table = pd.crosstab(truth, given).reindex(index=order, columns=[*classes, UNDECIDED, "echo"], fill_value=0)
    table.index.name, table.columns.name = None, None
    total = table.sum(axis=1)
    right = pd.Series({label: table.loc[label, label] for label in order}, dtype=np.int64)
    decided = table[list(classes)].sum(axis=1)
    recall = pd.DataFrame({"planted": total, "recall": right / total, "decided": decided / total})
    wrong = [
        pulse
        for pulse, label, planted in zip(truth.index, given, truth, strict=True)
        if label in classes and label != planted
    ]
    return TruthComparison(table, recall, verdicts.loc[wrong].assign(planted=truth.loc[wrong]))


def morning_lines(
    verdicts: pd.DataFrame, pulses: pd.DataFrame, run: Mapping[str, Any], classes: Sequence[str], folder: Path
) -> list[str]:
    """The lines for the terminal: counts by circuit, what stays open, where the report is, what to type next."""
    verdicts, pulses = counted_once(verdicts), counted_once(pulses)
    counts = label_counts(verdicts, pulses, classes, run["captures"])
    lines = [overall_words(counts, run)]
    for where, row in counts.iterrows():
        parts = [f"{name} {row[name]}" for name in (*classes, UNDECIDED, "echoes") if row[name]]
        lines.append(f"  {', '.join(place_words(where))}: {', '.join(parts) or 'no pulses'}")
    lines += [f"  undecided: {group.count} x {group.kind}" for group in doubt_groups(verdicts)]
    pulse = pulse_to_question(verdicts)
    if (folder / "report.html").is_file():
        first = "" if pulse is None else f"; the first pulse to question is {pulse}"
        lines.append(f"next: open {folder / 'report.html'} in a browser{first}")
    else:
        lines.append(f"verdicts: {folder / 'verdicts'}; a report needs the same command without --no-report")
    return lines


def place_words(where: Any) -> tuple[str, ...]:
    """Circuit and sensor from a row's name in the table of counts."""
    return tuple(str(word) for word in where)


def pulse_to_question(verdicts: pd.DataFrame) -> str | None:
    """The pulse worth an audit first: the least sure of the decided discharges, else of all; None without any."""
    decided = verdicts[verdicts["decided"].astype(bool) & (verdicts["label"] != "interference")]
    rows = decided if len(decided) else verdicts
    return None if rows.empty else str(likeliest_probability(rows).sort_values(kind="stable").index[0])


def duration(seconds: float) -> str:
    """A duration in ms below one second, else in s."""
    return quantity(seconds * 1e3, "ms") if seconds < 1 else quantity(seconds, "s")


def _plural(count: int, noun: str) -> str:
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def _heard(total: pd.Series[int], seen: Sequence[Mapping[str, Any]]) -> str:
    times = [item["duration_s"] for item in seen]
    heard = f" in {duration(sum(times))} of signal" if times and None not in times else ""
    echoes = int(total["echoes"])
    if not echoes:
        return f"{_plural(int(total['pulses']), 'pulse')}{heard}."
    listed = "1 echo is listed under its pulse" if echoes == 1 else f"{echoes} echoes are listed under their pulses"
    return f"{_plural(int(total['pulses']), 'pulse')}{heard}; {listed}."


def _decided_words(total: pd.Series[int]) -> str:
    labels = [name for name in total.index if name not in (UNDECIDED, "pulses", "echoes") and total[name]]
    if not labels:
        return "None got a label." if total["pulses"] else ""
    named = sorted(labels, key=lambda name: -total[name])
    return f"Labels: {', '.join(f'{name} {total[name]}' for name in named)}."


def _doubt_words(total: pd.Series[int], own: Mapping[str, int]) -> str:
    if not total[UNDECIDED]:
        return ""
    kind = max(own, key=lambda name: own[name])
    amount = "all" if own[kind] == total[UNDECIDED] else str(own[kind])
    return f"Undecided: {total[UNDECIDED]}; most frequent cause ({amount}): {kind}."


def _who(total: pd.Series[int], own: Mapping[str, int]) -> str:
    discharges = [name for name in WHO_ACTS if name != "interference" and total.get(name, 0)]
    calls = [f"for {name} ({total[name]}), {WHO_ACTS[name]}" for name in sorted(discharges, key=lambda n: -total[n])]
    # a class of the user's own may be a discharge: it is never passed over in silence
    others = [
        str(name) for name in total.index if name not in {*WHO_ACTS, UNDECIDED, "pulses", "echoes"} and total[name]
    ]
    calls += [f"for {name} ({total[name]}), whoever was agreed for this class" for name in others]
    for labels, who in WHO_ACTS_TOGETHER.items():
        if count := own.get(set_in_words(labels), 0):
            calls.append(f"for those open between {' and '.join(labels)} ({count}), {who}")
    if calls:
        return f"To act: {'; '.join(calls)}."
    found = "No pulse was decided as a discharge" if total["pulses"] else "No pulse was found"
    return f"{found}; that does not show that the circuit is healthy."
