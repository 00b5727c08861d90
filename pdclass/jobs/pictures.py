"""The pictures of `synthetic/README.md`: `python -m pdclass.jobs.pictures FOLDER` draws them (`make pictures`)."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

from pdclass.jobs.simulate import scenario_path
from pdclass.report.gallery_physics import journey, near_ends, spread
from pdclass.report.gallery_plots import journey_figure, near_end_figure, spread_figure
from pdclass.sim.scenario import read_scenario
from pdclass.writing import write_text

_SEED = 1


def draw_pictures(out: Path) -> list[Path]:
    """Write the pictures of the base world into a folder, and say which."""
    base = read_scenario(scenario_path("base"))
    figures = {
        "spread-xlpe": spread_figure(spread(base.cable, "XLPE", seed=_SEED), name="spread-xlpe"),
        "spread-paper": spread_figure(spread(base.cable, "paper", seed=_SEED), name="spread-paper"),
        "journey-xlpe": journey_figure(
            journey(base.cable, "XLPE", rng=np.random.default_rng(_SEED)), name="journey-xlpe"
        ),
        "near-ends": near_end_figure(near_ends(base, rng=np.random.default_rng(_SEED)), name="near-ends"),
    }
    out.mkdir(parents=True, exist_ok=True)
    for name, figure in figures.items():
        write_text(out / f"{name}.svg", figure)
    return [out / f"{name}.svg" for name in figures]


if __name__ == "__main__":
    for picture in draw_pictures(Path(sys.argv[1])):
        sys.stdout.write(f"{picture}\n")
