"""One object of a file's metadata, read field by field: the type and bounds of each, and who supplied it."""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, TypeVar

from pdclass.errors import InputError, complaint
from pdclass.pulses import Chain

TEXT_LIMIT = 200
CONDUCTORS = ("L1", "L2", "L3", "three-core")
_RESPONSE_LIMIT = 100_000

Value = TypeVar("Value")


@dataclass(frozen=True)
class Fields:
    """Named values of one metadata object; null counts as absent, and absent ones come from the fill-ins.

    Attributes
    ----------
    where : the file, for messages.
    content : the object as it stands in the file.
    place : what stands before a field's name in messages, such as `captures[2].`.
    fill : fill-in values by field name; a field that the file has is never overridden.
    options : command-line options by field name.
    """

    where: str
    content: Mapping[str, Any]
    place: str = ""
    fill: Mapping[str, Any] = field(default_factory=dict)
    options: Mapping[str, str] = field(default_factory=dict)

    def value(self, name: str) -> Any:
        """The value of the file, else the fill-in, else None."""
        stated = self.content.get(name)
        return self.fill.get(name) if stated is None else stated

    def wrong(self, name: str, expected: object, found: object, advice: str = "correct it in the file") -> InputError:
        """The error that says what is wrong with a field, naming the option if the value came from there."""
        supplied = self.content.get(name) is None and self.fill.get(name) is not None
        if supplied:
            return InputError(
                complaint(self.where, self.options[name], expected=expected, found=found, advice="correct the option")
            )
        return InputError(complaint(self.where, self.place + name, expected=expected, found=found, advice=advice))

    def needed(self, name: str, value: Value | None) -> Value:
        """The value, which must be there.

        Raises
        ------
        InputError
            If it is None; the message names the option that supplies it.
        """
        if value is not None:
            return value
        option = self.options.get(name)
        advice = f"write it, or give {option}" if option else "write it"
        raise self.wrong(name, "a value", "nothing", advice)

    def number(
        self, name: str, *, above: float = -math.inf, low: float = -math.inf, high: float = math.inf
    ) -> float | None:
        """A finite number within bounds, or None."""
        value = self.value(name)
        if value is None:
            return None
        bounds = _bounds(above, low, high)
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise self.wrong(name, f"a number{bounds}", shown(value))
        if abs(value) > 1e300 or not math.isfinite(value) or not (value > above and low <= value <= high):
            raise self.wrong(name, f"a finite number{bounds}", shown(value))
        return float(value)

    def whole(self, name: str, *, low: int = 0, high: int = 2**63 - 1) -> int | None:
        """A whole number within bounds, or None."""
        value = self.value(name)
        if value is None:
            return None
        if isinstance(value, float) and value.is_integer():
            value = int(value)
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            raise self.wrong(name, f"a whole number from {low} to {high}", shown(value))
        return value

    def text(self, name: str, choices: Iterable[str] | None = None) -> str | None:
        """A line of text (one of the choices, if given), or None."""
        value = self.value(name)
        if value is None:
            return None
        if choices is not None and value not in tuple(choices):
            raise self.wrong(name, "one of " + ", ".join(choices), shown(value))
        if not isinstance(value, str) or not is_name(value):
            raise self.wrong(name, f"one line of text, 1 to {TEXT_LIMIT} characters", shown(value))
        return value

    def numbers(self, name: str, count: int) -> tuple[float, ...] | None:
        """A list of so many finite numbers, or None."""
        value = self.value(name)
        if value is None:
            return None
        if not _are_numbers(value, count):
            raise self.wrong(name, f"a list of {count} finite numbers", shown(value))
        return tuple(float(item) for item in value)


def chain_of(fields: Fields, prefix: str, rate_hz: float) -> Chain:
    """The chain that a metadata object describes under field names with the given prefix.

    Raises
    ------
    InputError
        If a field is of the wrong type, out of bounds, or contradicts another one.
    """
    return Chain(
        rate_hz=rate_hz,
        volts_per_count=fields.number(prefix + "volts_per_count", above=0.0),
        adc_bits=fields.whole(prefix + "adc_bits", low=4, high=24),
        transfer_ohm=fields.number(prefix + "transfer_ohm", above=0.0),
        band_hz=_band(fields, prefix + "band_hz", rate_hz),
        response=_response(fields, prefix + "response"),
        mains_hz=fields.number(prefix + "mains_hz", low=10.0, high=100.0),
    )


def _band(fields: Fields, name: str, rate_hz: float) -> tuple[float, float] | None:
    band = fields.numbers(name, 2)
    if band is None:
        return None
    low_hz, high_hz = band
    if not 0.0 <= low_hz < high_hz:
        raise fields.wrong(name, "[low, high] in Hz with 0 <= low < high", shown([low_hz, high_hz]))
    if low_hz >= rate_hz / 2:
        raise fields.wrong(name, f"a lower corner below half the sample rate ({rate_hz / 2:g} Hz)", f"{low_hz:g} Hz")
    return low_hz, high_hz


def _response(fields: Fields, name: str) -> tuple[tuple[float, float, float], ...] | None:
    rows = fields.value(name)
    if rows is None:
        return None
    if not isinstance(rows, list) or not 0 < len(rows) <= _RESPONSE_LIMIT:
        raise fields.wrong(name, f"1 to {_RESPONSE_LIMIT} rows of [freq_hz, ohm, phase_deg]", shown(rows))
    last_hz = -1.0
    for number, row in enumerate(rows):
        if not _are_numbers(row, 3) or row[0] <= max(last_hz, -0.5) or row[0] < 0 or row[1] < 0:
            expected = "[freq_hz, ohm, phase_deg], finite, frequencies rising from 0, ohm not negative"
            raise fields.wrong(f"{name}[{number}]", expected, shown(row))
        last_hz = float(row[0])
    return tuple((float(row[0]), float(row[1]), float(row[2])) for row in rows)


def is_name(text: str) -> bool:
    """Whether a text can name something: one line, not blank, of bounded length, without control characters."""
    if not 0 < len(text) <= TEXT_LIMIT or not text.strip():
        return False
    # printable is the quick answer for nearly every name; only some spaces of other scripts need the slow one
    return text.isprintable() or not any(map(_is_control, text))


def shown(value: object) -> str:
    """A value as it may stand in a message: short and on one line."""
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _is_control(character: str) -> bool:
    return unicodedata.category(character) in ("Cc", "Cs", "Zl", "Zp")


def _are_numbers(value: object, count: int) -> bool:
    if not isinstance(value, Sequence) or isinstance(value, str) or len(value) != count:
        return False
    plain = all(isinstance(item, int | float) and not isinstance(item, bool) for item in value)
    return plain and all(abs(item) <= 1e300 for item in value)


def _bounds(above: float, low: float, high: float) -> str:
    parts = [f" above {above:g}"] if math.isfinite(above) else []
    parts += [f" from {low:g}"] if math.isfinite(low) else []
    parts += [f" to {high:g}"] if math.isfinite(high) else []
    return "".join(parts)
