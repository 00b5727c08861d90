"""What every drawn piece of the world shares: kinds of ranges, and how a value is drawn from one."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated

import numpy as np
from pydantic import AfterValidator, Field


def _rising(pair: tuple[float, float]) -> tuple[float, float]:
    if pair[0] > pair[1]:
        raise ValueError("the lower bound stands first")
    return pair


def _some_weight(weights: dict[str, float]) -> dict[str, float]:
    if not any(weight > 0 for weight in weights.values()):
        raise ValueError("at least one weight is above zero")
    return weights


#: Two numbers, the lower one first.
Range = Annotated[tuple[float, float], AfterValidator(_rising)]
#: Two numbers above zero, the lower one first.
Positive = Annotated[tuple[Annotated[float, Field(gt=0)], float], AfterValidator(_rising)]
#: Two whole numbers from zero, the lower one first.
Count = Annotated[tuple[Annotated[int, Field(ge=0)], int], AfterValidator(_rising)]
#: How often each name is drawn, relative to the others.
Weights = Annotated[dict[str, Annotated[float, Field(ge=0)]], AfterValidator(_some_weight)]


def even(bounds: tuple[float, float], *, rng: np.random.Generator) -> float:
    """A number drawn evenly between two bounds."""
    return float(rng.uniform(*bounds))


def log_even(bounds: tuple[float, float], *, rng: np.random.Generator) -> float:
    """A positive number whose logarithm is drawn evenly between two bounds."""
    return float(np.exp(rng.uniform(np.log(bounds[0]), np.log(bounds[1]))))


def whole(bounds: tuple[int, int], *, rng: np.random.Generator) -> int:
    """A whole number drawn evenly between two bounds, both included."""
    return int(rng.integers(bounds[0], bounds[1] + 1))


def chosen(weights: Mapping[str, float], *, rng: np.random.Generator) -> str:
    """A name drawn by its weight, whatever the order in which the names stand."""
    names = sorted(weights)
    bounds = np.cumsum([weights[name] for name in names])
    return names[int(np.searchsorted(bounds, rng.uniform(0.0, bounds[-1]), side="right"))]
