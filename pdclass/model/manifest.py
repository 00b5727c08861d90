"""The shape of manifest.json.

`FORMAT` versions the whole folder. To raise it: change the integer, keep a reader for the number before with its
test, and say in the reader what changed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Annotated, Any, Self

from pydantic import ConfigDict, Field, model_validator

from pdclass.digest import json_digest
from pdclass.pulses import LABELS, is_own_class
from pdclass.settings import Settings

FORMAT = 1

_Number = Annotated[float, Field(allow_inf_nan=False)]
_Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
_Range = tuple[_Number, _Number] | None
_Digest = Annotated[str, Field(pattern=r"^[0-9a-f]{64}$")]
_Name = Annotated[str, Field(pattern=r"^[A-Za-z0-9_]{1,100}$")]


@dataclass(frozen=True)
class Validity:
    """Lowest and highest value among the training pulses; None where none of them knew it.

    Attributes
    ----------
    rate_hz : samples a second [Hz].
    low_hz, high_hz : lower and upper -3 dB corner of the chain [Hz].
    adc_bits : resolution of the digitiser [bit].
    snr_db : signal-to-noise ratio of a pulse [dB].
    """

    rate_hz: tuple[float, float] | None
    low_hz: tuple[float, float] | None
    high_hz: tuple[float, float] | None
    adc_bits: tuple[float, float] | None
    snr_db: tuple[float, float] | None


class _Part(Settings):
    model_config = ConfigDict(frozen=True, extra="forbid", strict=True)


class FeatureEntry(_Part):
    """One feature that the model looks at."""

    name: _Name
    unit: Annotated[str, Field(max_length=40)]
    digest: _Digest


class NoveltyEntry(_Part):
    """How features are scaled before distances, and where unfamiliar begins (null = nowhere)."""

    centre: list[_Number]
    scale: list[_Positive]
    limit: Annotated[float, Field(ge=0, allow_inf_nan=False)] | None


class ValidityEntry(_Part):
    """The ranges of `Validity`, null where unknown."""

    rate_hz: _Range
    low_hz: _Range
    high_hz: _Range
    adc_bits: _Range
    snr_db: _Range


class Manifest(_Part):
    """Everything that manifest.json may hold."""

    format: int
    classes: Annotated[list[str], Field(min_length=2)]
    mix: dict[str, _Positive]
    features: Annotated[list[FeatureEntry], Field(min_length=1)]
    catalogue_digest: _Digest
    temperature: _Positive
    shift: list[_Number]
    limits: list[_Number | None]
    error_rate: Annotated[float, Field(gt=0, lt=1)]
    novelty: NoveltyEntry
    validity: ValidityEntry
    account: dict[str, Any]
    files: dict[str, _Digest]
    seal: _Digest

    @model_validator(mode="after")
    def _lengths_agree(self) -> Self:
        k, f = len(self.classes), len(self.features)
        if len(set(self.classes)) != k or not all(name in LABELS or is_own_class(name) for name in self.classes):
            raise ValueError(f"classes must be different, each one of {', '.join(LABELS)} or a name for a class")
        if len(self.shift) != k or len(self.limits) != k or set(self.mix) != set(self.classes):
            raise ValueError("shift, limits and mix must have one entry a class")
        if not math.isclose(math.fsum(self.mix.values()), 1.0, abs_tol=1e-9):
            raise ValueError("mix must sum to 1")
        if len(set(self.feature_names)) != f:
            raise ValueError("feature names must differ")
        if self.catalogue_digest != json_digest([feature.model_dump() for feature in self.features]):
            raise ValueError("catalogue_digest must be that of the features")
        if len(self.novelty.centre) != f or len(self.novelty.scale) != f:
            raise ValueError("novelty must have one centre and scale a feature")
        return self

    @property
    def feature_names(self) -> tuple[str, ...]:
        """Names of the features in the order of every feature axis."""
        return tuple(feature.name for feature in self.features)

    def validity_ranges(self) -> Validity:
        """The validity limits as ranges."""
        return Validity(**self.validity.model_dump())
