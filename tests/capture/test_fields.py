"""A field is what the file says, else what the user supplies, and is blamed on whoever supplied it."""

from __future__ import annotations

import pytest

from pdclass.capture.fields import Fields, chain_of, is_name
from pdclass.errors import InputError
from pdclass.pulses import Chain

RESPONSE = [[0, 0, 90], [1e6, 5, 0]]


def test_null_counts_as_absent_and_the_file_wins():
    """A fill-in stands in for null or nothing, never for a value, not even for zero."""
    fields = Fields("f", {"a": None, "b": 0}, fill={"a": 3, "b": 4, "c": 5})
    assert [fields.number(name) for name in "abcd"] == [3.0, 0.0, 5.0, None]


@pytest.mark.parametrize("value", [float("nan"), float("inf"), 10**400, "1", True, [1]])
def test_only_finite_numbers_are_numbers(value):
    """Text, truth values, lists and what does not fit into a float are refused."""
    with pytest.raises(InputError, match="f: a: expected a"):
        Fields("f", {"a": value}).number("a")


def test_whole_numbers_may_be_written_with_a_point():
    """14.0 is 14; 14.5 is refused."""
    assert Fields("f", {"a": 14.0}).whole("a") == 14
    with pytest.raises(InputError, match=r"expected a whole number from 0 to .*, found 14.5"):
        Fields("f", {"a": 14.5}).whole("a")


def test_a_chain_is_read_under_its_prefix():
    """Every field of the chain is taken over, lists as tuples."""
    content = {"x:volts_per_count": 1e-4, "x:band_hz": [0, 2e7], "x:response": RESPONSE, "x:mains_hz": 60}
    wanted = Chain(1e8, 1e-4, None, None, (0.0, 2e7), ((0.0, 0.0, 90.0), (1e6, 5.0, 0.0)), 60.0)
    assert chain_of(Fields("f", content), "x:", 1e8) == wanted


@pytest.mark.parametrize(
    ("text", "fits"),
    [("Quay 3", True), ("Qu\u00e4y\u00a03", True), ("", False), (" ", False), ("a\tb", False), ("x" * 201, False)],
)
def test_a_name_is_one_line_of_bounded_length(text, fits):
    """Letters of any script and spaces make a name; control characters and blanks do not."""
    assert is_name(text) is fits
