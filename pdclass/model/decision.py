"""From margins to one decision a pulse: the label set, and whether it leaves exactly one familiar label."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pdclass.model.bundle import Classifier
from pdclass.model.doubt import label_sets, probabilities
from pdclass.model.forest import margins
from pdclass.model.manifest import Validity
from pdclass.model.novelty import novelty, unfamiliar
from pdclass.pulses import Chain, FloatArray, IntArray, PulseSet, WaveArray

BoolArray = NDArray[np.bool_]


class Decisions(NamedTuple):
    """What is known of the label of each pulse that is no echo.

    Attributes
    ----------
    probabilities : (pulses, classes), for the bundle's class mix.
    sets : (pulses, classes), the labels that cannot be ruled out.
    likeliest : (pulses,) place of the most probable class; ties go to the earlier one.
    novelty : (pulses,) float32 [robust spreads].
    unfamiliar : (pulses,), beyond the novelty limit.
    outside : (pulses,), beyond a validity limit.
    decided : (pulses,), the set is exactly the likeliest, and the pulse neither unfamiliar nor outside.
    """

    probabilities: FloatArray
    sets: BoolArray
    likeliest: IntArray
    novelty: WaveArray
    unfamiliar: BoolArray
    outside: BoolArray
    decided: BoolArray


def decide(classifier: Classifier, values: FloatArray, pulses: PulseSet) -> Decisions:
    """Probabilities, label sets and decisions of the pulses that are no echoes, in their order.

    Parameters
    ----------
    values : (pulses, features), a row for every pulse, echoes included.
    """
    alone = np.flatnonzero(pulses.table["echo_of"].isna().to_numpy())
    judged, rows = pulses.take(alone), values[alone]
    chances = probabilities(margins(classifier.forest, rows), classifier.temperature, classifier.shift)
    sets = with_parents(pulses.table, label_sets(chances, classifier.limits))
    likeliest = np.argmax(chances, axis=1).astype(np.int64)
    far = novelty(classifier.novelty, rows)
    strange = unfamiliar(classifier.novelty, far)
    beyond = outside(classifier.validity, judged)
    single = (sets.sum(axis=1) == 1) & sets[np.arange(len(sets)), likeliest]
    return Decisions(chances, sets, likeliest, far, strange, beyond, single & ~strange & ~beyond)


def with_parents(table: pd.DataFrame, own_sets: BoolArray) -> BoolArray:
    """Label sets in which a pulse that may be an echo keeps what is open for its parent, too.

    Parents are resolved in order of onset; a parent that is an echo itself stands for the pulse it echoes; a
    parent that is not among the pulses leaves every label open.

    Parameters
    ----------
    table : pulse table, echoes included.
    own_sets : (pulses that are no echoes, classes), in the table's order.
    """
    alone = table["echo_of"].isna().to_numpy()
    place = {name: row for row, name in enumerate(table.index[alone])}
    doubtful = table.loc[alone & table["maybe_echo_of"].notna().to_numpy()]
    echo_of = {str(name): str(parent) for name, parent in table["echo_of"].dropna().items()}
    sets, settled = own_sets.copy(), set(place) - set(doubtful.index)
    for name, row in doubtful.sort_values("onset_sample", kind="stable").iterrows():
        parent = _first_arrival(str(row["maybe_echo_of"]), echo_of)
        sets[place[name]] |= sets[place[parent]] if parent in settled else True
        settled.add(name)
    return sets


def _first_arrival(name: str, echo_of: dict[str, str]) -> str:
    for _ in range(len(echo_of)):  # a circle of echoes, which only a damaged table holds, must end
        if name not in echo_of:
            break
        name = echo_of[name]
    return name


def outside(validity: Validity, pulses: PulseSet) -> BoolArray:
    """Which pulses lie beyond a validity limit; what chain or bundle do not know is not checked."""
    of_chain = np.array([bool(broken_limits(validity, stated_by(chain))) for chain in pulses.chains], np.bool_)
    snr_db = pulses.table["snr_db"].to_numpy(np.float64)
    beyond = np.array([bool(broken_limits(validity, {"snr_db": float(value)})) for value in snr_db], np.bool_)
    return np.asarray(beyond | of_chain[pulses.table["chain"].to_numpy(np.int64)], np.bool_)


def stated_by(chain: Chain) -> dict[str, float | None]:
    """What a chain states of the quantities that have validity limits, by the limit's name."""
    low, high = chain.band_hz or (None, None)
    return {"rate_hz": chain.rate_hz, "low_hz": low, "high_hz": high, "adc_bits": chain.adc_bits}


def broken_limits(validity: Validity, stated: Mapping[str, float | None]) -> list[str]:
    """Names of the limits that stated quantities break; unknown ones (None, NaN) break none."""
    broken = []
    for name, value in stated.items():
        ends = getattr(validity, name)
        known = value is not None and ends is not None and not np.isnan(value)
        if known and not ends[0] <= value <= ends[1]:
            broken.append(name)
    return broken
