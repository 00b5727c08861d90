"""What is drawn lies in its range, and the same generator draws the same."""

from typing import Annotated

import numpy as np
import pytest
from pydantic import TypeAdapter, ValidationError

from pdclass.sim.draw import (
    Count,
    Metres,
    Positive,
    Range,
    Ranges,
    Shares,
    Some,
    Weights,
    chosen,
    even,
    known_names,
    log_even,
    whole,
)


def test_numbers_keep_to_their_bounds():
    """Even logarithms reach both decades alike; whole numbers include both bounds."""
    rng = np.random.default_rng(1)
    drawn = np.array([log_even((1.0, 100.0), rng=rng) for _ in range(4000)])
    assert drawn.min() >= 1
    assert drawn.max() <= 100
    assert abs((drawn < 10).mean() - 0.5) < 0.03
    assert {whole((2, 4), rng=rng) for _ in range(100)} == {2, 3, 4}
    assert even((3.0, 3.0), rng=rng) == 3.0


def test_names_come_as_often_as_their_weights_say():
    """A weight of three beside one of one is three quarters, a weight of zero never; the order does not matter."""
    weights = {"b": 3.0, "a": 1.0, "c": 0.0}
    drawn = [chosen(weights, rng=np.random.default_rng(seed)) for seed in range(2000)]
    assert drawn.count("b") / len(drawn) == pytest.approx(0.75, abs=0.03)
    assert "c" not in drawn
    turned = dict(reversed(weights.items()))
    assert [chosen(turned, rng=np.random.default_rng(seed)) for seed in range(50)] == drawn[:50]


@pytest.mark.parametrize(
    ("kind", "wrong"),
    [
        (Range, (2.0, 1.0)),
        (Range, (np.nan, 1.0)),
        (Positive, (0.0, 1.0)),
        (Metres, (1.0, np.inf)),
        (Shares, (0.5, 1.1)),
        (Count, (-1, 3)),
        (Some, (0, 3)),
        (Weights, {"a": 0.0}),
        (Weights, {"a": -1.0}),
        (Weights, {"a": 1e308}),
        (Annotated[Weights, known_names("a", "b")], {"a": 1.0, "c": 1.0}),
    ],
)
def test_impossible_ranges_are_refused(kind, wrong):
    """A range rises, a positive one begins above zero, some weight is above zero."""
    with pytest.raises(ValidationError):
        TypeAdapter(kind).validate_python(wrong)


def test_a_table_that_says_a_part_keeps_the_rest():
    """What a table leaves out is what the field has by default, not what its class has."""

    class Lead(Ranges):
        length_m: Metres = (1.0, 2.0)
        turns: Some = (1, 2)

    class Chain(Ranges):
        lead: Lead = Lead(length_m=(3.0, 4.0), turns=(5, 6))

    assert Chain.model_validate({"lead": {"turns": (7, 8)}}).lead == Lead(length_m=(3.0, 4.0), turns=(7, 8))
    assert Chain.model_validate({"lead": {}}) == Chain()
