"""The trees: fitted, stopped where groups that they have not seen say so, tempered, frozen."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from pdclass.errors import TooFewError
from pdclass.model.doubt import fit_temperature, log_probabilities
from pdclass.model.forest import Forest, margins
from pdclass.pulses import FloatArray, IntArray
from pdclass.training.freeze import freeze, staged_margins
from pdclass.training.groups import Names, class_group_weights, share_out
from pdclass.training.settings import TrainSettings

_PROBE_ROWS = 500


class Examples(NamedTuple):
    """Labelled pulses as arrays: values (n, features), label places (n,), group names (n,)."""

    values: FloatArray
    label_index: IntArray
    groups: Names

    def take(self, mask: NDArray[np.bool_]) -> Examples:
        """The chosen pulses."""
        return Examples(self.values[mask], self.label_index[mask], self.groups[mask])

    def of(self, names: Names) -> Examples:
        """The pulses of the named groups."""
        return self.take(np.isin(self.groups.astype(str), names.astype(str)))

    @property
    def weights(self) -> FloatArray:
        """Classes equal, the groups of a class equal; mean 1."""
        return class_group_weights(self.label_index, self.groups)


class Fitted(NamedTuple):
    """Frozen trees, their temperature, the number of rounds, and the log loss it was chosen by."""

    forest: Forest
    temperature: float
    rounds: int
    stop_loss: float


def fit_on_parts(fit: Examples, stop: Examples, temper: Examples, settings: TrainSettings) -> Fitted:
    """Trees from the fit groups, as many rounds as suit the stop groups, temperature from the temper groups."""
    classifier = _boosted(fit, settings, settings.max_trees)
    with threadpool_limits(1):
        losses = _losses(classifier, stop, stop.weights)
        rounds = int(np.argmin(losses)) + 1
        forest = freeze(classifier, rounds, _probe(fit, stop))
    temperature = fit_temperature(margins(forest, temper.values), temper.label_index, temper.weights)
    return Fitted(forest, temperature, rounds, float(losses[rounds - 1] / len(stop.groups)))


def fit_shared(learn: Examples, n_classes: int, settings: TrainSettings) -> tuple[Fitted, int]:
    """Trees from all the groups; rounds and temperature from cross-validation over them; and the folds used.

    Every margin that rounds or temperature see comes from trees that have not seen its group.

    Raises
    ------
    TooFewError
        If no cross-validation leaves every class in every fold's training groups.
    """
    folds = [np.isin(learn.groups.astype(str), names.astype(str)) for names in _folds(learn, n_classes, settings)]
    weights = learn.weights
    trained = [_boosted(learn.take(~held), settings, settings.max_trees) for held in folds]
    with threadpool_limits(1):
        pairs = list(zip(trained, folds, strict=True))
        losses = np.sum([_losses(each, learn.take(held), weights[held]) for each, held in pairs], axis=0)
        rounds = int(np.argmin(losses)) + 1
        unseen = np.empty((len(learn.groups), n_classes))
        for each, held in pairs:
            unseen[held] = margins(freeze(each, rounds, _probe(learn, learn)), learn.values[held])
        forest = freeze(_boosted(learn, settings, rounds), rounds, _probe(learn, learn))
    temperature = fit_temperature(unseen, learn.label_index, weights)
    return Fitted(forest, temperature, rounds, float(losses[rounds - 1] / len(learn.groups))), len(folds)


def _boosted(examples: Examples, settings: TrainSettings, rounds: int) -> Any:
    from sklearn.ensemble import HistGradientBoostingClassifier  # noqa: PLC0415 (heavy: half a second)

    classifier = HistGradientBoostingClassifier(
        learning_rate=settings.learning_rate,
        max_iter=rounds,
        max_depth=settings.max_depth,
        max_leaf_nodes=settings.max_leaf_nodes,
        min_samples_leaf=settings.min_samples_leaf,
        l2_regularization=settings.l2_regularization,
        early_stopping=False,
        random_state=settings.seed,
    )
    # the library cannot bin a feature that is never measurable; a constant one is never split on
    never = np.isnan(examples.values).all(axis=0)
    values = np.where(never, 0.0, examples.values)
    # spinning threads make fits ten times slower on a busy machine; only libraries loaded by now are limited
    with threadpool_limits(1):
        return classifier.fit(values, examples.label_index, sample_weight=examples.weights)


def _losses(classifier: Any, seen: Examples, weights: FloatArray) -> FloatArray:
    """Summed weighted log loss after every round."""
    rows = np.arange(len(seen.groups))
    stages = staged_margins(classifier, seen.values)
    logs = (log_probabilities(stage, 1.0, np.zeros(stage.shape[1]))[rows, seen.label_index] for stage in stages)
    return np.array([-np.sum(weights * own) for own in logs])


def _probe(one: Examples, other: Examples) -> FloatArray:
    """Some pulses of both, and the same again with every other feature missing."""
    rows = np.concatenate([one.values[:_PROBE_ROWS], other.values[-_PROBE_ROWS:]])
    holes = rows.copy()
    holes[::2, ::2], holes[1::2, 1::2] = np.nan, np.nan
    return np.concatenate([rows, holes, np.full((1, rows.shape[1]), np.nan)])


def _folds(learn: Examples, n_classes: int, settings: TrainSettings) -> list[Names]:
    held = [len(set(learn.groups[learn.label_index == k])) for k in range(n_classes)]
    for number in range(min(settings.folds, *held), 1, -1):
        rng = np.random.default_rng([settings.seed, number])
        shares = {str(fold): 1.0 for fold in range(number)}
        folds = [names for names in share_out(learn.label_index, learn.groups, shares, rng=rng).values() if len(names)]
        if len(folds) > 1 and all(_complete(learn, names, n_classes) for names in folds):
            return folds
    raise TooFewError("cross-validation: expected every class in every fold's training groups, found a class that "
                      "would be lost; label pulses of more circuits")  # fmt: skip


def _complete(learn: Examples, left_out: Names, n_classes: int) -> bool:
    held = np.isin(learn.groups.astype(str), left_out.astype(str))
    return len(set(learn.label_index[~held])) == n_classes
