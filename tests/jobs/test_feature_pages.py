"""The page on features is that of the present catalogue."""

import re
from pathlib import Path

import pytest

from pdclass.features import CATALOGUE, FAMILIES
from pdclass.jobs.feature_pages import draw_features
from pdclass.report.feature_page import picture_name, with_tables

DOCS = Path(__file__).parents[2] / "docs"
PAGE = (DOCS / "features.md").read_text(encoding="utf-8")
NAMES = {family: [feature.name for feature in features] for family, (features, _) in FAMILIES.items()}


@pytest.fixture(scope="module")
def drawn_now(tmp_path_factory):
    return {path.name: path.read_text() for path in draw_features(tmp_path_factory.mktemp("pictures"))}


def test_the_tables_are_up_to_date():
    """Written now they are the same; `make pictures` writes them again where the catalogue has changed."""
    assert with_tables(PAGE) == PAGE, "run make pictures"


def test_every_feature_is_on_the_page():
    """The page names every feature of the catalogue."""
    assert [feature.name for feature in CATALOGUE if f"`{feature.name}`" not in PAGE] == []


def test_every_picture_is_on_the_page_and_every_link_leads_somewhere():
    """Every family has its picture there, and no link of the page is dead."""
    links = re.findall(r"\]\((?!https?:|#)([^)#]+)", PAGE)
    assert {f"pictures/{picture_name(family)}" for family in FAMILIES} <= set(links)
    assert [link for link in links if not (DOCS / link).exists()] == []


@pytest.mark.parametrize("family", FAMILIES)
def test_every_feature_is_in_its_picture(drawn_now, family):
    """A picture, drawn now and as shipped, names every feature of its family."""
    shipped = (DOCS / "pictures" / picture_name(family)).read_text(encoding="utf-8")
    for picture in (drawn_now[picture_name(family)], shipped):
        words = re.sub(r"<[^>]*>", " ", picture).split()
        assert [name for name in NAMES[family] if name not in words] == []


def test_the_pictures_drawn_are_those_shipped(drawn_now):
    """No picture of a family that is gone is left behind."""
    assert {path.name for path in (DOCS / "pictures").glob("features-*.svg")} == set(drawn_now)


def test_a_family_without_a_place_on_the_page_gets_one():
    """A new family comes to the end of the page with its picture and its table, once."""
    family = next(iter(FAMILIES))
    rest = re.sub(rf"<!-- table {family} -->.*?<!-- end -->", "", PAGE, flags=re.DOTALL)
    page = with_tables(rest)
    assert page.count(f"<!-- table {family} -->") == 1
    assert f"](pictures/{picture_name(family)})" in page[len(rest.rstrip()) :]
    assert with_tables(page) == page
