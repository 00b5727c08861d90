"""The gallery of a synthetic world as a page."""

import re
from html.parser import HTMLParser

import pytest
from gallery_samples import world

from pdclass.report.gallery import gallery_page
from pdclass.report.summary import CAUTIONS, SHORT_CAUTION

HEADINGS = [
    "What each class looks like",
    "What distance does",
    "Attenuation and velocity of drawn cables",
    "Near ends",
    "Sensors",
    "When in the cycle",
    "Background",
    "Cautions in full",
]


@pytest.fixture(scope="module")
def page():
    return gallery_page(world(), seed=3)


class _Text(HTMLParser):
    """Collects text, attributes and ids, and checks that tags close in order."""

    def __init__(self):
        super().__init__()
        self.open, self.words, self.attributes, self.headings = [], [], [], []

    def handle_starttag(self, tag, attrs):
        self.attributes += attrs
        if tag != "meta":
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.attributes += attrs

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.words.append(data)
        if self.open and self.open[-1] == "h2":
            self.headings.append(data)


@pytest.fixture(scope="module")
def text(page):
    parser = _Text()
    parser.feed(page)
    parser.close()
    assert not parser.open
    return parser


def test_every_section_is_there(text):
    """The page has its sections in their order, and says what world it shows."""
    assert text.headings == HEADINGS
    words = " ".join(" ".join(text.words).split())
    assert "Nothing here was measured" in words
    assert "scenario one, seed 3" in words
    assert SHORT_CAUTION in words
    assert all(caution in words for caution in CAUTIONS)


def test_the_page_stands_alone(page, text):
    """No script, no request to outside, and a name with angle brackets stays a name."""
    assert "<script" not in page
    assert "<b>1" not in page
    assert "A &lt;b&gt;1" in page
    links = [value for name, value in text.attributes if name in ("src", "href", "xlink:href")]
    assert links
    assert all(link.startswith("#") for link in links)


def test_every_reference_has_one_target(text):
    """Ids of all the drawings are unlike each other, and what a drawing refers to is there."""
    ids = [value for name, value in text.attributes if name == "id"]
    assert len(ids) == len(set(ids))
    wanted = {value[1:] for name, value in text.attributes if name == "xlink:href"}
    clips = {match for _, value in text.attributes for match in re.findall(r"url\(#([^)]+)\)", value or "")}
    assert wanted | clips <= set(ids)


def test_what_the_circuit_has_is_shown_and_the_rest_is_said_to_be_missing(page):
    """The four sources of the only circuit have a picture each, other kinds are said not to be there."""
    for caption in (
        "on this cable, 300 m from the sensor",
        "core to screen, at the termination",
        "busbar to enclosure",
        "Converter, conducted on the screen",
    ):
        assert page.count(caption) == 1
    assert page.count("This scenario has none") >= 14
    assert len(page) < 4e6
