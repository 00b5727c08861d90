"""`pdclass simulate --gallery`: one page that shows what a synthetic world looks like."""

from __future__ import annotations

from pathlib import Path

from pdclass.errors import InputError
from pdclass.jobs.talk import SILENT, Talk
from pdclass.sim.ranges import Scenario
from pdclass.writing import write_text

#: Name of the page in the folder of the simulation.
GALLERY = "gallery.html"


def write_gallery(world: Scenario, out: Path, *, seed: int, talk: Talk = SILENT) -> Path:
    """Write the gallery of a world into a folder, and say where it is.

    Parameters
    ----------
    world : the scenario.
    out : an existing folder.
    seed : of the world, >= 0.

    Raises
    ------
    InputError
        If there is no such folder or the page cannot be written.
    """
    if not out.is_dir():
        raise InputError(f"{out}: expected a folder, found none; make it first")
    # drawing is loaded only where something is drawn
    from pdclass.report.gallery import gallery_page  # noqa: PLC0415

    talk.say("drawing the gallery")
    path = out / GALLERY
    write_text(path, gallery_page(world, seed=seed))
    return path
