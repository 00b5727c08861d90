"""The batch report: one self-contained HTML page from a verdict folder."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from pdclass.features import measured_edges
from pdclass.model.bundle import Bundle
from pdclass.pulses import UNDECIDED
from pdclass.report.plots import COLOURS, EDGE, MOST_POINTS, edge_figure, phase_scatter, pulse_figure
from pdclass.report.summary import (
    CAUTIONS,
    MEANING,
    NOT_STATED,
    SHORT_CAUTION,
    WHO_ACTS,
    DoubtGroup,
    capture_rows,
    circuit_words,
    compare_with_truth,
    counted_once,
    doubt_groups,
    example_ids,
    label_counts,
    overall_words,
    phase_words,
    place_words,
    unchecked_lines,
    with_names,
)
from pdclass.report.templates import drawn, template
from pdclass.verdict.batch import read_pulse_tables, read_shard_pulses, read_verdicts
from pdclass.verdict.sentences import (
    CABLE_NOTE,
    MAYBE_ECHO_NOTE,
    doubt_in_words,
    quantity,
    standing_notes,
    three_digits,
)

#: Most causes of doubt that get a drawn example, and most circuits and sensors that get phase panels.
_MOST_CAUSES = 6
_MOST_SENSORS = 40
_MOST_LISTED = 5
_MOST_WRONG = 20


@dataclass(frozen=True)
class _Batch:
    """What the sections of a page draw on."""

    folder: Path
    run: Mapping[str, Any]
    bundle: Bundle
    verdicts: pd.DataFrame
    pulses: pd.DataFrame
    twice: int


def batch_report(
    folder: Path,
    run: Mapping[str, Any],
    bundle: Bundle,
    *,
    truth: pd.Series[Any] | None = None,
    planted: Mapping[str, int] | None = None,
) -> str:
    """The report on a folder of verdicts as HTML, without scripts and without requests to outside.

    Parameters
    ----------
    folder : holds `verdicts/` and `pulses/`; may still be under way.
    run : content of its `run.json`.
    bundle : the model that scored.
    truth : planted label by `pulse_id`, for simulated captures only.
    planted : planted pulses per label, those that were not found among them.
    """
    batch = _read(folder, run, bundle)
    counts = label_counts(batch.verdicts, batch.pulses, bundle.classes, run["captures"])
    doubts = doubt_groups(batch.verdicts)
    page = template("batch.html.j2")
    return page.render(
        overall=overall_words(counts, run),
        circuits=circuit_words(counts, doubts, run["captures"]),
        cable_found="cable" in bundle.classes and bool(counts["cable"].sum()),
        labels=[*bundle.classes, UNDECIDED],
        count_rows=[(*place_words(where), row.to_dict()) for where, row in counts.iterrows()],
        count_total=counts.sum().to_dict(),
        phase=_phase_groups(batch),
        most_points=MOST_POINTS,
        examples=_label_examples(batch),
        doubts=_doubt_examples(batch, doubts),
        comparison=None if truth is None else _comparison(batch, truth, planted),
        captures=capture_rows(run),
        unchecked=_unchecked(batch),
        provenance=_provenance(run, bundle),
        mix=_mix_words(bundle),
        record=_record_words(bundle),
        error_percent=f"{100 * bundle.error_rate:.3g}",
        cautions=CAUTIONS,
        short_caution=SHORT_CAUTION,
        cable_note=CABLE_NOTE,
        meaning=MEANING,
        who_acts=WHO_ACTS,
        colours=COLOURS,
        edge=EDGE,
    )


def _read(folder: Path, run: Mapping[str, Any], bundle: Bundle) -> _Batch:
    """Read the folder; a pulse that came under two names (the same capture copied) is kept once."""
    verdicts, pulses = read_verdicts(folder), read_pulse_tables(folder)
    once = counted_once(pulses)
    return _Batch(folder, run, bundle, counted_once(verdicts), once, len(pulses) - len(once))


def _phase_groups(batch: _Batch) -> list[dict[str, Any]]:
    """Panels per circuit, sensor and phase reference; different references are never laid over one another."""
    reference = {item["capture_digest"]: item["phase_reference"] for item in batch.run["captures"]}
    rows = with_names(batch.verdicts).assign(
        peak_mv=batch.pulses["peak_v"].reindex(batch.verdicts.index).astype(float) * 1e3,
        reference=[reference.get(digest) or "" for digest in batch.verdicts["capture_digest"]],
    )
    groups = []
    for at, (key, members) in enumerate(rows.groupby(["circuit", "sensor", "reference"], sort=True)):
        circuit, sensor, words = (str(word) for word in key)
        group = {"circuit": circuit, "sensor": sensor, "words": phase_words(words), "count": len(members)}
        known = members[members["phase_deg"].notna()]
        drawn = at < _MOST_SENSORS
        panels = _panels(batch, known, words, f"p{at}") if drawn and len(known) else []
        absent = [name for name in (*batch.bundle.classes, UNDECIDED) if not (known["label"] == name).any()]
        groups.append({**group, "panels": panels, "absent": absent, "known": len(known), "drawn": drawn})
    return groups


def _panels(batch: _Batch, known: pd.DataFrame, reference: str, name: str) -> list[dict[str, Any]]:
    offset_known = reference not in ("", "low-voltage-socket")
    limit_mv = 1.1 * max(float(known["peak_mv"].abs().max()), 1e-6)
    panels = []
    for label in (*batch.bundle.classes, UNDECIDED):
        rows = known[known["label"] == label]
        if rows.empty:
            continue
        phase, peak = rows["phase_deg"].to_numpy(np.float64), rows["peak_mv"].to_numpy(np.float64)
        figure = phase_scatter(phase, peak, label, limit_mv=limit_mv, offset_known=offset_known, name=f"{name}{label}")
        panels.append({"label": label, "count": len(rows), "figure": drawn(figure)})
    return panels


def _label_examples(batch: _Batch) -> list[dict[str, Any]]:
    chosen = example_ids(batch.verdicts, batch.bundle.classes)
    cards = _cards(batch, [pulse for pairs in chosen.values() for pulse, _ in pairs])
    return [
        {"label": label, "cards": [{**cards[pulse], "stands_for": words} for pulse, words in pairs]}
        for label, pairs in chosen.items()
    ]


def _doubt_examples(batch: _Batch, doubts: Sequence[DoubtGroup]) -> list[dict[str, Any]]:
    cards = _cards(batch, [group.ids[0] for group in doubts[:_MOST_CAUSES]])
    return [
        {
            "kind": group.kind,
            "count": group.count,
            "circuits": ", ".join(f"{name} ({count})" for name, count in group.circuits.items()),
            "ids": group.ids[:_MOST_LISTED],
            "more": max(0, group.count - _MOST_LISTED),
            "card": cards.get(group.ids[0]),
        }
        for group in doubts
    ]


def _cards(batch: _Batch, ids: Sequence[str]) -> dict[str, dict[str, Any]]:
    """What the page shows of each chosen pulse; every shard is opened once."""
    cards = {}
    for file, members in batch.pulses.loc[list(ids)].groupby("shard", sort=True):
        pulses = read_shard_pulses(batch.folder, str(file))
        for pulse in members.index:
            edges = measured_edges(pulses, list(pulses.table.index).index(pulse))
            cards[str(pulse)] = _card(batch, str(pulse), edges)
    return cards


def _card(batch: _Batch, pulse: str, edges: Mapping[str, Any]) -> dict[str, Any]:
    row: dict[Any, Any] = {**batch.pulses.loc[pulse].to_dict(), **batch.verdicts.loc[pulse].to_dict()}
    row["maybe_echo_of"] = row["maybe_echo_of"] if isinstance(row["maybe_echo_of"], str) else None
    drawings = [
        draw(edges, row["label"], name=f"{letter}{pulse}")
        for letter, draw in (("w", pulse_figure), ("e", edge_figure))
        if edges
    ]
    return {
        "pulse": pulse,
        "label": row["label"],
        "likeliest": row["likeliest"],
        "against": row["against"],
        "where": _where(row),
        "measured": _measured(row, bundle_limit=batch.bundle.novelty.limit),
        "probabilities": [(name, percent(row[f"p_{name}"]), name in row["label_set"]) for name in batch.bundle.classes],
        "odds": _odds(float(row["log_odds"])),
        "reasons": [row[f"reason_{place}"] for place in (1, 2, 3) if row[f"reason_{place}"] is not None],
        "notes": [note for note in standing_notes(row) if note != MAYBE_ECHO_NOTE],
        "doubt": "; ".join([doubt_in_words(row), *(note for note in standing_notes(row) if note == MAYBE_ECHO_NOTE)]),
        "echoes": _echo_words(batch.pulses, pulse, float(row["onset_s"])),
        "figures": [drawn(drawing) for drawing in drawings],
    }


def _where(row: Mapping[Any, Any]) -> str:
    parts = [row["circuit"] or NOT_STATED, f"sensor {row['sensor'] or NOT_STATED}"]
    if row["capture"] is not None:
        parts.append(f"capture {row['capture']}")
    if not pd.isna(row["onset_s"]):
        parts.append(f"at {row['onset_s'] * 1e3:.4f} ms")
    return ", ".join(parts)


def _measured(row: Mapping[Any, Any], *, bundle_limit: float) -> str:
    figures = (
        ("peak", row["peak_v"] * 1e3, "mV"),
        ("signal to noise", row["snr_db"], "dB"),
        ("phase", row["phase_deg"], "deg"),
        ("length", row["duration_us"], "µs"),
    )
    known = [f"{word} {quantity(float(value), unit)}" for word, value, unit in figures if not pd.isna(value)]
    known.append(f"novelty {three_digits(float(row['novelty']))} (limit {three_digits(bundle_limit)})")
    return ", ".join([*known, "clipped"] if row["clipped"] else known)


def _echo_words(pulses: pd.DataFrame, pulse: str, onset_s: float) -> str:
    own = pulses[pulses["echo_of"] == pulse]
    if own.empty:
        return ""
    delays = [quantity(float(at - onset_s) * 1e6, "µs") for at in own["onset_s"].sort_values()]
    return f"{len(own)} listed under this pulse, after {', '.join(delays)}"


def percent(share: float) -> str:
    """A probability as a percentage at three significant digits, never rounded to certainty."""
    if share < 0.001:
        return "<0.1 %" if share > 0 else "0 %"
    return ">99.9 %" if 0.9995 <= share < 1 else f"{three_digits(100 * share)} %"


def _odds(log_odds: float) -> str:
    odds = float(np.exp(min(abs(log_odds), 50.0)))
    words = three_digits(odds) if odds < 1000 else "over 1000"
    return f"{words} to 1"


def _comparison(batch: _Batch, truth: pd.Series[Any], planted: Mapping[str, int] | None) -> dict[str, Any]:
    found = compare_with_truth(batch.verdicts, truth, batch.bundle.classes)
    recall = found.recall["recall"].astype(float).to_dict()
    rows = [
        {
            "label": label,
            "counts": found.table.loc[label].to_dict(),
            "planted": "" if planted is None else planted.get(str(label), 0),
            "recall": percent(recall[label]),
        }
        for label in found.table.index
    ]
    rows.append(_nothing_planted(batch, truth, list(found.table.columns)))
    wrong = [
        {"pulse": pulse, "planted": row["planted"], "label": row["label"], "where": _where(row.to_dict())}
        for pulse, row in found.wrong.head(_MOST_WRONG).iterrows()
    ]
    columns = list(found.table.columns)
    return {"rows": rows, "columns": columns, "wrong": wrong, "wrong_total": len(found.wrong), "planted": planted}


def _nothing_planted(batch: _Batch, truth: pd.Series[Any], columns: Sequence[str]) -> dict[str, Any]:
    """The row of verdicts on pulses that nothing was planted for; they have no recall."""
    others = batch.verdicts.loc[~batch.verdicts.index.isin(truth.dropna().index), "label"].value_counts()
    counts = {name: int(others.get(name, 0)) for name in columns}
    return {"label": "nothing planted", "counts": counts, "planted": "", "recall": ""}


def _unchecked(batch: _Batch) -> list[tuple[str, str]]:
    lines = [(line, _captures_words(names, batch)) for line, names in unchecked_lines(batch.run)]
    if batch.twice:
        lines.append((f"{batch.twice} pulses came twice, the same samples under two names; counted once", ""))
    return lines


def _captures_words(names: Sequence[str], batch: _Batch) -> str:
    if len(names) == len(batch.run["captures"]) > 1:
        return "all captures"
    shown = ", ".join(names[:_MOST_LISTED])
    return shown if len(names) <= _MOST_LISTED else f"{shown} and {len(names) - _MOST_LISTED} more"


def _record_words(bundle: Bundle) -> str:
    """How well the bundle did where it was tested, the dangerous error first; that it was not, where it was not."""
    metrics = bundle.manifest.get("account", {}).get("metrics")
    if not metrics or metrics.get("accuracy_decided") is None:
        return "The model that decided carries no figures of a test: how often it is right is not known"
    provenance = bundle.manifest["account"].get("provenance", {})
    where = "simulated circuits" if "scenario" in provenance else "circuits"
    dangerous = metrics.get("switchgear_as_interference_share")
    words = f"Tested on {metrics['groups']} {where} that it had not seen, the model that decided"
    if dangerous is not None:
        words += f" called {percent(dangerous)} of the switchgear pulses interference,"
    return (
        f"{words} left {percent(metrics['share_undecided'])} undecided, and was right in "
        f"{percent(metrics['accuracy_decided'])} of those it decided; its card in the folder `bundle` says more"
    )


def _mix_words(bundle: Bundle) -> str:
    mix = bundle.manifest["mix"]
    if len({round(share, 9) for share in mix.values()}) == 1:
        return "every label taken as equally frequent beforehand"
    return "taken beforehand as " + ", ".join(f"{name} {percent(mix[name])}" for name in bundle.classes)


def _provenance(run: Mapping[str, Any], bundle: Bundle) -> list[tuple[str, str]]:
    plan = run["plan"]
    lines = [("bundle", bundle.digest)]
    lines += [(name.replace("_", " "), str(plan[name])) for name in ("catalogue_digest",) if name in plan]
    lines += [(f"version of {name}", str(version)) for name, version in sorted(plan.get("versions", {}).items())]
    lines += [(f"input {item['given']}", f"{item['digest'] or 'no digest'}, {item['state']}") for item in run["inputs"]]
    lines += [(f"samples of {item['capture']}", item["capture_digest"]) for item in run["captures"]]
    return lines
