"""The page on features: `python -m pdclass.jobs.feature_pages docs` draws its pictures and writes its tables."""

from __future__ import annotations

import sys
from pathlib import Path

from pdclass.extract import ExtractSettings
from pdclass.features import FAMILIES
from pdclass.jobs.simulate import labelled_pulses, scenario_path
from pdclass.pulses import PulseSet
from pdclass.report.feature_examples import FeatureExample, feature_example, strongest
from pdclass.report.feature_page import picture_name, with_tables
from pdclass.report.feature_plots import family_figure
from pdclass.sim.scenario import read_scenario, simulate_capture
from pdclass.writing import write_text

_SEED = 1
#: A circuit of the base world whose pulses show what is meant: with copies that stand apart, and of everything else.
_WITH_COPIES, _USUAL = 39, 191
_LABELS = ("cable", "switchgear")


def draw_features(out: Path) -> list[Path]:
    """Write the picture of every family of features into a folder, and say which."""
    usual, copied = (_examples(number) for number in (_USUAL, _WITH_COPIES))
    out.mkdir(parents=True, exist_ok=True)
    for family in FAMILIES:
        figure = family_figure(family, copied if family == "copies" else usual)
        write_text(out / picture_name(family), figure)
    return [out / picture_name(family) for family in FAMILIES]


def write_page(docs: Path) -> list[Path]:
    """Draw the pictures beside the page on features and bring its tables up to date."""
    page = docs / "features.md"
    write_text(page, with_tables(page.read_text(encoding="utf-8")))
    return [page, *draw_features(docs / "pictures")]


def _examples(number: int) -> list[FeatureExample]:
    capture = simulate_capture(read_scenario(scenario_path("base")), number, seed=_SEED)
    pulses = labelled_pulses(capture, ExtractSettings()).pulses
    places = [strongest(pulses, label) for label in _LABELS]
    return [feature_example(pulses, place, _title(pulses, place)) for place in places]


def _title(pulses: PulseSet, place: int) -> str:
    row = pulses.table.iloc[place]
    away = f", {row['distance_m']:.0f} m away" if row["distance_m"] > 0 else ""
    return f"{row['label']} ({row['family']} discharge{away})"


if __name__ == "__main__":
    for written in write_page(Path(sys.argv[1])):
        sys.stdout.write(f"{written}\n")
