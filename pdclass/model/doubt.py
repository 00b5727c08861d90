"""From margins to probabilities and label sets: temperature, class mix and class-conditional conformal limits."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.errors import InputError, PdclassError
from pdclass.pulses import FloatArray, IntArray

#: The temperature is sought between these bounds.
TEMPERATURE_BOUNDS = (0.05, 20.0)
_HALVINGS = 80


def log_probabilities(margins: FloatArray, temperature: float, shift: FloatArray) -> FloatArray:
    """Natural logarithm of the class probabilities, (pulses, classes).

    Parameters
    ----------
    margins : (pulses, classes) [natural log-odds].
    temperature : > 0; above 1 it makes the model less sure.
    shift : (classes,), what the class mix adds after the division.
    """
    scaled = np.ascontiguousarray(margins / temperature + shift)
    _normalise(scaled)
    return scaled


@compiled
def _normalise(scaled: FloatArray) -> None:
    # pulse by pulse: vectorised exponentials may round differently at the end of a batch
    for row in range(scaled.shape[0]):
        top = scaled[row].max()
        total = 0.0
        for k in range(scaled.shape[1]):
            total += math.exp(scaled[row, k] - top)
        lift = top + math.log(total)
        for k in range(scaled.shape[1]):
            scaled[row, k] -= lift


def probabilities(margins: FloatArray, temperature: float, shift: FloatArray) -> FloatArray:
    """Class probabilities for the stated class mix, (pulses, classes), each row summing to 1."""
    out = log_probabilities(margins, temperature, shift)
    _exponentiate(out)
    return out


@compiled
def _exponentiate(values: FloatArray) -> None:
    for row in range(values.shape[0]):
        for k in range(values.shape[1]):
            values[row, k] = math.exp(values[row, k])


def fit_temperature(margins: FloatArray, label_index: IntArray, weights: FloatArray) -> float:
    """The temperature that minimises the weighted log loss.

    The loss is convex in 1/temperature, so its slope is halved down to the root inside `TEMPERATURE_BOUNDS`.
    Source of the method: Guo et al., "On calibration of modern neural networks", 2017 (from memory).

    Parameters
    ----------
    margins : (pulses, classes) of pulses that the trees have not seen [natural log-odds].
    label_index : (pulses,), place of the true class.
    weights : (pulses,), >= 0, not all 0.

    Raises
    ------
    PdclassError
        If there is no pulse or no weight.
    """
    if len(margins) == 0 or not float(np.sum(weights)) > 0:
        raise PdclassError("temperature: expected pulses with weight, found none")
    low, high = 1.0 / TEMPERATURE_BOUNDS[1], 1.0 / TEMPERATURE_BOUNDS[0]
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        if _slope(margins, label_index, weights, middle) > 0:
            high = middle
        else:
            low = middle
    return float(2.0 / (low + high))


def _slope(margins: FloatArray, label_index: IntArray, weights: FloatArray, inverse: float) -> float:
    """Derivative of the weighted log loss by 1/temperature."""
    share = probabilities(margins, 1.0 / inverse, np.zeros(margins.shape[1]))
    own = margins[np.arange(len(margins)), label_index]
    return math.fsum(weights * (np.sum(share * margins, axis=1) - own))


def mix_shift(old: FloatArray, new: FloatArray) -> FloatArray:
    """What a class mix adds to each class's log-odds: log(new / old).

    Parameters
    ----------
    old, new : (classes,), positive shares that each sum to 1 within 1e-9.

    Raises
    ------
    InputError
        If a share is not positive or the shares do not sum to 1.
    """
    for mix in (old, new):
        if not (np.all(np.isfinite(mix)) and np.all(mix > 0) and abs(math.fsum(mix) - 1.0) <= 1e-9):
            raise InputError(f"mix: expected positive shares that sum to 1, found {[float(share) for share in mix]}")
    return np.asarray(np.log(new / old), np.float64)


def exact_share(rate: float) -> Fraction:
    """The fraction that a decimal number was written as: 0.1 is one tenth, not its nearest binary number."""
    return Fraction(repr(float(rate)))


def group_quantile(scores: FloatArray, groups: NDArray[Any], share: Fraction, *, beyond: int) -> float:
    """The smallest score at which the weight of all scores up to it reaches `share`.

    Each of the C groups weighs 1 / (C + beyond), shared equally among its scores; the rest lies at infinity.
    Weights are summed as exact integers over a common denominator.

    Parameters
    ----------
    scores : (pulses,)
    groups : (pulses,), the group of each score.
    share : wanted weight, 0 to 1.
    beyond : number of imagined groups at infinity (1 for a conformal limit, 0 for a plain percentile).

    Returns
    -------
    A score, or infinity where the weight is never reached.
    """
    names, place, size = np.unique(np.asarray(groups, dtype=str), return_inverse=True, return_counts=True)
    common = math.lcm(*(int(n) for n in size)) if len(size) else 1
    wanted = share * (len(names) + beyond) * common
    reached = 0
    for at in np.argsort(scores, kind="stable"):
        reached += common // int(size[place[at]])
        if reached >= wanted:
            return float(scores[at])
    return math.inf


def conformal_limits(
    p_true: FloatArray, label_index: IntArray, groups: NDArray[Any], n_classes: int, error_rate: float
) -> FloatArray:
    """Class-conditional conformal limits on the score 1 - p, one a class.

    Each of the C_k groups that hold class k weighs 1 / (C_k + 1), shared equally among its pulses of the class;
    the missing 1 / (C_k + 1) lies at infinity; the limit is the weighted (1 - error rate) quantile, exact.
    Hierarchical conformal prediction: Lee, Barber, Willett 2023 (from memory).

    Parameters
    ----------
    p_true : (pulses,), probability of the true class.
    label_index : (pulses,), place of the true class.
    groups : (pulses,), group of each pulse.
    n_classes : number of classes.
    error_rate : 0 < rate < 1; read as the decimal it was written as.

    Returns
    -------
    (classes,); infinite where C_k + 1 < 1 / error_rate: such a class can never be ruled out.
    """
    names, scores = np.asarray(groups, dtype=object), 1.0 - p_true
    share = 1 - exact_share(error_rate)
    own = [label_index == k for k in range(n_classes)]
    return np.array([group_quantile(scores[mask], names[mask], share, beyond=1) for mask in own])


def groups_needed(error_rate: float) -> int:
    """How many groups a class needs in the conform part before it can be ruled out."""
    return math.ceil(1 / exact_share(error_rate)) - 1


def label_sets(probabilities: FloatArray, limits: FloatArray) -> NDArray[np.bool_]:
    """Which labels cannot be ruled out: class k is in the set when 1 - p_k <= limit_k, (pulses, classes)."""
    return np.asarray(1.0 - probabilities <= limits, np.bool_)
