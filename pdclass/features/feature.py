"""What a feature is: one number with a unit, its words, and what the chain must carry for it."""

from __future__ import annotations

from dataclasses import asdict, dataclass

from pdclass.digest import json_digest

_WORDS = frozenset({"meaning", "sentence", "more", "less", "reference", "absent"})


@dataclass(frozen=True)
class Feature:
    """One number measured on a pulse.

    Attributes
    ----------
    name : as in tables and bundles, with its unit.
    unit : for print; "" = a pure number.
    meaning : plain words.
    sentence : begins a reason, with `{value}` for the number and its unit.
    more, less : what a larger and a smaller value is called ("slower", "faster").
    valid_range : smallest and largest possible value.
    tolerance : largest change between sampling rates that counts as the same [unit of the feature].
    reference : where the definition comes from.
    needs_hz : the chain must carry signals up to here, else the feature is unmeasurable [Hz].
    needs_snr_db : below this ratio of peak to noise the feature is unmeasurable [dB].
    absent : what a missing value means where neither chain nor noise forbids it.
    """

    name: str
    unit: str
    meaning: str
    sentence: str
    more: str
    less: str
    valid_range: tuple[float, float]
    tolerance: float
    reference: str
    needs_hz: float = 0.0
    needs_snr_db: float = 0.0
    absent: str = "not measurable here"

    @property
    def digest(self) -> str:
        """Sha256 of what defines the number: a bundle names it, so that no feature changes under its name.

        Words may be mended without a new name; whoever changes how the number comes about gives it one.
        """
        declared = {name: value for name, value in asdict(self).items() if name not in _WORDS}
        declared["valid_range"] = [_number(bound) for bound in self.valid_range]
        return json_digest(declared)


def _number(bound: float) -> float | str:
    return bound if abs(bound) != float("inf") else str(bound)
