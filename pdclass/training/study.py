"""What more circuits bring, and what happens when a kind of the world turns up that was left out of training."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np
import pandas as pd

from pdclass.model.bundle import Classifier
from pdclass.pulses import FloatArray, PulseSet
from pdclass.training.evaluate import Judged, Mask, clear_figures, judge

#: Pulses below this height over the noise are left out of the studies [dB].
CLEAR_DB = 15.0

#: Trains on each of some sets of pulses; a job may do so in several processes.
Trainer = Callable[[Sequence["Measured"]], Sequence[Classifier]]


class Measured(NamedTuple):
    """Pulses with their features, and what is known of the circuits they come from.

    Attributes
    ----------
    values : (pulses, features).
    pulses : the pulses; their table has `circuit` and `family`.
    traits : one row a circuit, indexed by its name; a column a trait.
    """

    values: FloatArray
    pulses: PulseSet
    traits: pd.DataFrame

    def where(self, chosen: Mask) -> Measured:
        """The chosen pulses."""
        return Measured(self.values[chosen], self.pulses.take(chosen), self.traits)

    def of_circuits(self, names: Sequence[str]) -> Mask:
        """Which pulses come from one of the circuits, (pulses,)."""
        return np.asarray(self.pulses.table["circuit"].isin(list(names)).to_numpy(), np.bool_)


class Family(NamedTuple):
    """Something that can be left out of training: pulses of some circuits, or of some families.

    Attributes
    ----------
    name : what it is, in words.
    circuits : whether a circuit, by its row of traits, is of it; None where a kind of pulse is meant.
    pulses : the `family` of the pulses meant.
    """

    name: str
    circuits: Callable[[Mapping[str, Any]], bool] | None = None
    pulses: str | None = None


def clear(judged: Judged) -> dict[str, float | None]:
    """Figures of the pulses of `CLEAR_DB` and more."""
    return clear_figures(judged.where(np.asarray(judged.snr_db >= CLEAR_DB, np.bool_)))


def learning_curve(taught: Measured, tested: Measured, counts: Sequence[int], train: Trainer) -> pd.DataFrame:
    """Figures on the tested circuits for trainings on the first so many circuits.

    Parameters
    ----------
    counts : numbers of circuits, each at most that of `taught`.
    """
    circuits = list(dict.fromkeys(taught.traits.index))
    parts = [taught.where(taught.of_circuits(circuits[:count])) for count in counts]
    rows = [
        {"circuits": count, **clear(judge(classifier, tested.values, tested.pulses))}
        for count, classifier in zip(counts, train(parts), strict=True)
    ]
    return pd.DataFrame(rows)


def left_out(
    taught: Measured, tested: Measured, families: Sequence[Family], train: Trainer, full: Classifier
) -> pd.DataFrame:
    """For each family two rows: taught with and without it, scored on the tested circuits where it is met."""
    rows = []
    trained = train([taught.where(~_of(taught, family)) for family in families])
    for family, lacking in zip(families, trained, strict=True):
        with_it = tested.where(_met(tested, family))
        for word, classifier in (("known", full), ("left out", lacking)):
            judged = judge(classifier, with_it.values, with_it.pulses)
            met = {"pulses": len(judged.truth), "circuits": len(set(judged.groups))}
            rows.append({"family": family.name, "training": word, **met, **clear(judged)})
    return pd.DataFrame(rows)


def _met(measured: Measured, family: Family) -> Mask:
    """All pulses of the circuits in which the family occurs."""
    return measured.of_circuits(list(dict.fromkeys(measured.pulses.table["circuit"][_of(measured, family)])))


def _of(measured: Measured, family: Family) -> Mask:
    """The pulses that belong to the family."""
    table = measured.pulses.table
    if family.circuits is None:
        return np.asarray((table["family"] == family.pulses).to_numpy(), np.bool_)
    chosen = [
        name for name, row in zip(measured.traits.index, _rows(measured.traits), strict=True) if family.circuits(row)
    ]
    return measured.of_circuits(chosen)


def _rows(traits: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(key): value for key, value in row.items()} for row in traits.to_dict("records")]
