"""The tables of the page on features, from what the catalogue declares and what was measured."""

from __future__ import annotations

import math
import re

from pdclass.features import FAMILIES, Feature
from pdclass.features.clearness import CLEAR_SNR_DB, HIGHEST_DB

_MARKS = "¹²³⁴⁵⁶⁷⁸⁹"
_HEAD = (
    "| feature | what it is | unit | bound | same at every rate within | needs | clear from | source |\n"
    "|---|---|---|---|---|---|---|---|"
)


def picture_name(family: str) -> str:
    """File of a family's picture, beside the page in `pictures/`."""
    return f"features-{family}.svg"


def with_tables(page: str) -> str:
    """The page with the table of every family as it is now; a family that has no place on it is put at its end.

    Parameters
    ----------
    page : Markdown; the table of a family stands between `<!-- table FAMILY -->` and `<!-- end -->`.
    """
    for family in FAMILIES:
        block = f"<!-- table {family} -->\n{family_table(family)}\n<!-- end -->"
        place = re.compile(rf"<!-- table {family} -->.*?<!-- end -->", re.DOTALL)
        if not place.search(page):
            picture = f"![{family}](pictures/{picture_name(family)})"
            page = f"{page.rstrip()}\n\n## {family.capitalize()}\n\n{picture}\n\n<!-- table {family} --><!-- end -->\n"
        page = place.sub(lambda _, block=block: block, page)  # type: ignore[misc]
    return page


def family_table(family: str) -> str:
    """One family as a Markdown table, its sources below it."""
    features = FAMILIES[family][0]
    sources = list(dict.fromkeys(feature.reference for feature in features))
    rows = [_row(feature, _MARKS[sources.index(feature.reference)]) for feature in features]
    said = " · ".join(f"{mark} {source}" for mark, source in zip(_MARKS, sources, strict=False))
    return "\n".join([_HEAD, *rows, "", f"Source: {said}."])


def _row(feature: Feature, mark: str) -> str:
    low, high = (f"{bound:g}" if math.isfinite(bound) else "any" for bound in feature.valid_range)
    cells = (
        f"`{feature.name}`",
        feature.meaning,
        feature.unit or "1",
        f"{low} to {high}",
        f"{feature.tolerance:g}",
        _needs(feature),
        _clear(feature.name),
        mark,
    )
    return f"| {' | '.join(cells)} |"


def _needs(feature: Feature) -> str:
    needs = [f"chain to {feature.needs_hz / 1e6:g} MHz"] if feature.needs_hz else []
    needs += [f"{feature.needs_snr_db:g} dB"] if feature.needs_snr_db else []
    return ", ".join(needs) or "–"


def _clear(name: str) -> str:
    clear_db = CLEAR_SNR_DB.get(name, math.nan)
    return "–" if math.isnan(clear_db) else f"{clear_db:g} dB" if math.isfinite(clear_db) else f"> {HIGHEST_DB:g} dB"
