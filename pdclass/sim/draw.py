"""What every drawn piece of the world shares: kinds of ranges, and how a value is drawn from one."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any

import numpy as np
from pydantic import AfterValidator, Field, model_validator

from pdclass.settings import Settings


def known_names(*names: str) -> AfterValidator:
    """A check of weights: they name nothing but these."""

    def check(weights: dict[str, float]) -> dict[str, float]:
        odd = sorted(set(weights) - set(names))
        if odd:
            raise ValueError(f"a name is one of {', '.join(names)}, not {odd[0]}")
        return weights

    return AfterValidator(check)


def within(least: float, most: float, unit: str = "") -> AfterValidator:
    """A check of two numbers: both lie within bounds that no believable world leaves, the lower one first."""

    def check(pair: tuple[float, float]) -> tuple[float, float]:
        if pair[0] > pair[1]:
            raise ValueError("the lower bound stands first")
        if not least <= pair[0] <= pair[1] <= most:
            raise ValueError(f"both lie between {least:g} and {most:g} {unit}".rstrip())
        return pair

    return AfterValidator(check)


def _some_weight(weights: dict[str, float]) -> dict[str, float]:
    if not any(weight > 0 for weight in weights.values()):
        raise ValueError("at least one weight is above zero")
    return weights


Pair = tuple[float, float]
Whole = tuple[int, int]
#: Two numbers, the lower one first.
Range = Annotated[Pair, within(-1e6, 1e6)]
#: Two numbers above zero, the lower one first.
Positive = Annotated[Pair, within(1e-6, 1e6)]
#: The same of quantities with a unit.
Metres = Annotated[Pair, within(1e-3, 1e5, "m")]
Hertz = Annotated[Pair, within(1.0, 1e9, "Hz")]
Seconds = Annotated[Pair, within(1e-13, 1.0, "s")]
Nanoseconds = Annotated[Pair, within(0.01, 1e5, "ns")]
Ohms = Annotated[Pair, within(1e-6, 1e9, "ohm")]
Henries = Annotated[Pair, within(1e-12, 1e-3, "H")]
Farads = Annotated[Pair, within(1e-15, 1e-6, "F")]
#: Two shares, 0 to 1, the lower one first.
Shares = Annotated[Pair, within(0.0, 1.0)]
#: Two whole numbers from zero, or from one, the lower one first.
Count = Annotated[Whole, within(0, 1000)]
Some = Annotated[Whole, within(1, 1000)]
#: A share, 0 to 1.
Share = Annotated[float, Field(ge=0, le=1)]
#: How often each name is drawn, relative to the others.
Weights = Annotated[dict[str, Annotated[float, Field(ge=0, le=1e6)]], AfterValidator(_some_weight)]


class Ranges(Settings):
    """What a piece of the world is drawn from; a table within it that says a part leaves the rest at its default."""

    @model_validator(mode="before")
    @classmethod
    def _what_is_left_out_stays_as_usual(cls, given: Any) -> Any:
        if not isinstance(given, dict):
            return given
        fields = cls.model_fields
        return {key: _completed(part, fields[key].default) if key in fields else part for key, part in given.items()}


def _completed(given: Any, usual: Any) -> Any:
    if not isinstance(given, dict) or not isinstance(usual, Settings):
        return given
    said = {key: _completed(part, getattr(usual, key, None)) for key, part in given.items()}
    return {**{name: getattr(usual, name) for name in type(usual).model_fields}, **said}


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
