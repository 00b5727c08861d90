"""What labelled pulses there are: per class, basis, circuit, site, session, sensor, height and rate."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from pdclass.pulses import FloatArray
from pdclass.training.evaluate import SNR_EDGES_DB

UNLABELLED = "unlabelled"
_NOT_STATED = "not stated"
#: So many rows of each kind are printed; the table has them all.
MOST_PRINTED = 6


def inventory(table: pd.DataFrame, rates_hz: Sequence[float] | FloatArray) -> pd.DataFrame:
    """How many pulses and circuits there are by `kind` of division, its `value` and label.

    Echoes are left out: they neither teach nor test.

    Parameters
    ----------
    table : pulse table.
    rates_hz : sampling rate of each pulse [Hz], or one for all.

    Returns
    -------
    columns `kind` (label, basis, circuit, site, session, sensor, snr, rate), `value`, `label`, `pulses`, `circuits`;
    in the order of kinds, then by value and label.
    """
    rates = np.broadcast_to(np.asarray(rates_hz, np.float64), len(table))
    alone = table["echo_of"].isna().to_numpy()
    table, rates = table[alone], rates[alone]
    label = table["label"].astype("object").fillna(UNLABELLED)
    divisions: dict[str, Any] = {"label": label}
    for name in ("basis", "circuit", "site", "session", "sensor"):
        divisions[name] = table[name].astype("object").fillna(_NOT_STATED)
    divisions["snr"] = _bands(table["snr_db"].to_numpy(np.float64))
    divisions["rate"] = np.array([f"{rate / 1e6:g} MS/s" for rate in rates], object)
    names, circuits = label.to_numpy(), table["circuit"].to_numpy()
    parts = []
    for kind, values in divisions.items():
        rows = pd.DataFrame({"value": np.asarray(values), "label": names, "circuit": circuits})
        if isinstance(values, pd.Categorical):
            rows["value"] = values
        counts = rows.groupby(["value", "label"], sort=True, observed=True)["circuit"].agg(["size", "nunique"])
        counts = counts.reset_index().set_axis(["value", "label", "pulses", "circuits"], axis=1)
        parts.append(counts.assign(kind=kind, value=counts["value"].astype("object")))
    return pd.concat(parts, ignore_index=True)[["kind", "value", "label", "pulses", "circuits"]]


def inventory_lines(table: pd.DataFrame, rates_hz: Sequence[float] | FloatArray) -> list[str]:
    """The inventory in a few lines."""
    whole = inventory(table, rates_hz)
    alone = int(table["echo_of"].isna().sum())
    labels = whole[whole["kind"] == "label"].set_index("value")
    labelled = int(labels["pulses"].drop(UNLABELLED, errors="ignore").sum())
    lines = [f"{alone} pulses, {labelled} of them labelled, {len(table) - alone} echoes besides"]
    for name, row in labels.iterrows():
        lines.append(f"  {name}: {row['pulses']} pulses of {_many(int(row['circuits']), 'circuit')}")
    taught = whole[(whole["label"] != UNLABELLED) & (whole["kind"] != "label")]
    for kind, rows in taught.groupby("kind", sort=False):
        counts = rows.groupby("value", sort=False)["pulses"].sum()
        counts = counts if kind == "snr" else counts.sort_values(ascending=False, kind="stable")
        shown = [f"{value} {count}" for value, count in counts.head(MOST_PRINTED).items()]
        more = [f"{len(counts) - MOST_PRINTED} more"] if len(counts) > MOST_PRINTED else []
        lines.append(f"  labelled by {kind}: {', '.join([*shown, *more])}")
    return lines


def _bands(snr_db: FloatArray) -> Any:
    """The band of each height in words, in the order of height."""
    names = [f"{_edge(low, high)} dB" for low, high in itertools.pairwise(SNR_EDGES_DB)]
    place = np.clip(np.searchsorted(SNR_EDGES_DB, snr_db, side="right") - 1, 0, len(names) - 1)
    words = np.array([*names, "not known"], object)
    return pd.Categorical(words[np.where(np.isnan(snr_db), len(names), place)], categories=words.tolist())


def _edge(low: float, high: float) -> str:
    if np.isinf(low):
        return f"below {high:g}"
    return f"from {low:g}" if np.isinf(high) else f"{low:g} to {high:g}"


def _many(count: int, word: str) -> str:
    return f"{count} {word}" + ("" if count == 1 else "s")
