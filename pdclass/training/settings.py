"""What a user may choose about training."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from pdclass.settings import Settings


class PartShares(Settings):
    """How groups are shared out, as fractions that need not sum to 1."""

    fit: Annotated[float, Field(gt=0)] = 0.6
    stop: Annotated[float, Field(gt=0)] = 0.1
    temper: Annotated[float, Field(gt=0)] = 0.1
    conform: Annotated[float, Field(gt=0)] = 0.2


class TrainSettings(Settings):
    """Settings of one training.

    Attributes
    ----------
    error_rate : the label sets may miss the truth this often, as an average over groups.
    mix : class mix that probabilities are stated for; None = equal.
    group_by : `circuit-and-site` (pulses that share a circuit or a site are never parted) or the weaker `circuit`.
    seed : of the sharing-out and the trees.
    max_trees : most rounds of boosting, one tree a class in each.
    min_samples_leaf : fewest pulses in a leaf.
    parts : how groups are shared out.
    share_below : with fewer groups of the rarest class than this, fit, stop and temper share by cross-validation.
    folds : of that cross-validation.
    reference_rows : most pulses kept for comparison and novelty.
    """

    error_rate: Annotated[float, Field(ge=0.01, le=0.5)] = 0.10
    mix: dict[str, float] | None = None
    group_by: Literal["circuit-and-site", "circuit"] = "circuit-and-site"
    seed: Annotated[int, Field(ge=0, lt=2**32)] = 0
    max_trees: Annotated[int, Field(ge=1, le=2000)] = 300
    max_depth: Annotated[int, Field(ge=1, le=16)] = 6
    max_leaf_nodes: Annotated[int, Field(ge=2, le=255)] = 24
    learning_rate: Annotated[float, Field(gt=0, le=1)] = 0.1
    min_samples_leaf: Annotated[int, Field(ge=1)] = 20
    l2_regularization: Annotated[float, Field(ge=0)] = 1.0
    parts: PartShares = PartShares()
    share_below: Annotated[int, Field(ge=0)] = 40
    folds: Annotated[int, Field(ge=2, le=20)] = 5
    reference_rows: Annotated[int, Field(ge=20, le=100_000)] = 3000
    private: bool = False
