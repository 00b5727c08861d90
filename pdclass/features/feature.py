"""What a feature is: one number with a unit, its words, and what the chain must carry for it."""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass

from pdclass.digest import json_digest

#: Edition of the way windows are made ready, which every feature is measured on: raised as a feature's own.
WINDOW_EDITION = 3
_WORDS = frozenset({"meaning", "sentence", "more", "less", "reference", "absent", "below_zero"})


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
    below_zero : what a negative value means, said behind it; "" = it goes without saying.
    edition : of the way it is measured, from 1; raised when the numbers change by more than rounding though the
        definition stays, so that a bundle taught with the former ones is refused.
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
    below_zero: str = ""
    edition: int = 1

    @property
    def digest(self) -> str:
        """Sha256 of what defines the number: a bundle names it, so that no feature changes under its name.

        Words may be mended without a new name; another definition gets one, another way of measuring an edition
        (of the feature, or of the windows if it changes those).
        """
        declared = {name: value for name, value in asdict(self).items() if name not in _WORDS}
        declared["valid_range"] = [_number(bound) for bound in self.valid_range]
        declared["window_edition"] = WINDOW_EDITION
        return json_digest(declared)


def _number(bound: float) -> float | str:
    return bound if abs(bound) != float("inf") else str(bound)


def why_missing(feature: Feature, snr_db: float, reach_hz: float) -> str | None:
    """Why a feature is unmeasurable on a pulse, in plain words; None where neither noise nor chain is the reason.

    Parameters
    ----------
    snr_db : peak over noise of the pulse [dB]; NaN = unknown.
    reach_hz : highest frequency that its chain carries [Hz].
    """
    if reach_hz < feature.needs_hz:
        return f"the chain ends at {reach_hz / 1e6:.3g} MHz, needs {feature.needs_hz / 1e6:.3g} MHz"
    if feature.needs_snr_db and math.isnan(snr_db):
        return "the noise beside the pulse is unknown"
    if snr_db < feature.needs_snr_db:
        return f"not measurable at {_below(snr_db, feature.needs_snr_db)} dB, needs {feature.needs_snr_db:g} dB"
    return None


def _below(value: float, limit: float) -> str:
    """A number below a limit, rounded so that it still reads as below it."""
    whole = f"{value:.0f}"
    return whole if float(whole) < limit else f"{math.floor(value * 10) / 10:.1f}"
