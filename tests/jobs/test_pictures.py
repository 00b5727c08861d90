"""The pictures of the synthetic worlds' page are those of the present world."""

import re
from pathlib import Path

import numpy as np
import pytest

from pdclass.jobs.pictures import draw_pictures

FOLDER = Path(__file__).parents[2] / "synthetic"
SHIPPED = FOLDER / "pictures"


@pytest.fixture(scope="module")
def drawn_now(tmp_path_factory):
    return {path.name: path.read_text() for path in draw_pictures(tmp_path_factory.mktemp("pictures"))}


def test_the_shipped_pictures_are_up_to_date(drawn_now):
    """Drawn now they are the same but for rounding; `make pictures` draws them again where the world has changed."""
    shipped = {path.name: path.read_text() for path in SHIPPED.glob("*.svg")}
    assert sorted(shipped) == sorted(drawn_now)
    old = [name for name in shipped if not alike(shipped[name], drawn_now[name])]
    assert not old, f"{', '.join(old)}: of a former world; run make pictures"


def alike(one, two):
    """Whether two drawings have the same text and their numbers agree within half a point."""
    texts = [re.split(r"-?[0-9]+\.?[0-9]*(?:e-?[0-9]+)?", svg) for svg in (one, two)]
    numbers = [np.array(re.findall(r"-?[0-9]+\.?[0-9]*(?:e-?[0-9]+)?", svg), float) for svg in (one, two)]
    return texts[0] == texts[1] and np.allclose(*numbers, atol=0.5)


def test_another_world_draws_other_pictures(drawn_now):
    """The comparison sees a difference: two of the pictures are not alike, nor is one with a point moved."""
    one = drawn_now["spread-xlpe.svg"]
    assert not alike(one, drawn_now["spread-paper.svg"])
    assert not alike(one, re.sub(r"L ([0-9.]+)", lambda place: f"L {float(place.group(1)) + 3}", one, count=1))


def test_the_page_shows_every_picture(drawn_now):
    """Every picture is on the page, and every link of the page leads to a file."""
    text = (FOLDER / "README.md").read_text(encoding="utf-8")
    links = re.findall(r"\]\((?!https?:|#)([^)#]+)", text)
    assert {link for link in links if link.startswith("pictures/")} == {f"pictures/{name}" for name in drawn_now}
    assert [link for link in links if not (FOLDER / link).is_file()] == []
