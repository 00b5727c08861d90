"""The gallery of a synthetic world as a page."""

import html
import re
from html.parser import HTMLParser
from typing import get_args

import pytest
from gallery_samples import world

from pdclass.report.gallery import _facts, gallery_page
from pdclass.report.gallery_curve import curve_fit
from pdclass.report.gallery_words import CROSSING, CURRENTS, GROUPS, PATTERN_WORDS
from pdclass.report.summary import CAUTIONS, SHORT_CAUTION
from pdclass.report.templates import begin
from pdclass.sim.drawn_source import Kind
from pdclass.sim.ranges import Scenario

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


def words_of(page):
    """The text of a page without its drawings, spaces made single."""
    bare = re.sub(r"<style>.*?</style>|<svg.*?</svg>", "", page, flags=re.DOTALL)
    return " ".join(html.unescape(re.sub(r"<[^>]+>", " ", bare)).split())


def test_what_the_circuit_has_is_shown_and_the_rest_is_said_to_be_missing(page):
    """The four sources of the only circuit have a picture each; other kinds are one line, and no heading."""
    for caption in (
        "on this cable, 300 m from the sensor",
        "core to screen, at the termination",
        "busbar to enclosure",
        "Converter, conducted on the screen",
    ):
        assert page.count(caption) == 1
    titles = {begin(group.title) for group in (*GROUPS, CROSSING)}
    headed = {html.unescape(found).strip() for found in re.findall(r"<h3><svg.*?</svg>(.*?)</h3>", page, re.DOTALL)}
    assert headed - {begin(CROSSING.title)} == {
        "Cable, 100 to 500 m away",
        "Local, at the termination",
        "Switchgear, busbar",
        "Interference, converter",
    }
    (line,) = re.findall(r"rise out of the noise there: (.*?)\.</p>", page)
    assert {begin(title) for title in html.unescape(line).split("; ")} == titles - headed
    (line,) = re.findall(r"this scenario has no such source: (.*?)\.</p>", page)
    assert "corona, negative point; corona, positive point; thyristor bridge" in line
    assert "Corona, negative point" not in page
    assert len(page) < 4e6


def test_a_caption_names_a_current_and_no_defect(page):
    """What is planted at a busbar is a current as of something, never a void of the busbar."""
    captions = re.findall(r'<figcaption class="small">(.*?)</figcaption>', page)
    discharges = [one for one in captions if "core to screen" in one or "busbar to" in one or "on this cable" in one]
    assert len(discharges) == 3
    assert all(one.startswith("Current as of a") for one in discharges)
    assert set(CURRENTS) == set(get_args(Kind))


def test_headings_begin_large_and_known_values_are_no_ranges(page):
    """The only rate and resolution of a chain stand alone; the kinds of cable have a capital."""
    one = Scenario.model_validate(
        {"name": "w", "circuits": 1, "chain": {"bits": [14]}, "near_end": {"panels": [4, 4]}, "snr_db": [20.0, 20.0]}
    )
    facts = " | ".join(_facts(one))
    assert "with 14 bit" in facts
    assert "near ends of 4 panels" in facts
    assert "pulses of 20 dB" in facts
    assert "one circuit" in facts
    assert "kinds by weight: XLPE 0.5, EPR 0.15, paper 0.2, belted 0.15" in facts
    assert not re.search(r"\b(\d+) to \1\b", words_of(page))


CURVE = """freq_hz,attenuation_db_per_km,velocity_m_per_us
100e3,1.02,170.9
500e3,2.55,173.9
2e6,6.26,175.6
5e6,11.75,176.4
10e6,19.59,176.9
40e6,50.74,177.7
"""


def test_a_world_of_a_measured_curve_shows_it(tmp_path):
    """Its file stands where kinds would, a pulse travels along its line, and its points stand beside the fit."""
    curve = tmp_path / "mine.csv"
    curve.write_text(CURVE, encoding="utf-8")
    named = world()
    ranges = named.cable.model_copy(update={"curve": str(curve)})
    page = gallery_page(named.model_copy(update={"cable": ranges}), seed=3)
    words = words_of(page)
    assert "cables: measured curve mine.csv" in words
    assert "kinds by weight" not in words
    assert str(tmp_path) not in page
    assert "Nothing here was measured but the attenuation and velocity of the cable." in words
    losses = re.search(r"Measured curve mine\.csv: (\S+), (\S+), \S+ dB/km at 1, 10, 30 MHz", words)
    assert float(losses[2]) == pytest.approx(19.59, rel=0.02)
    assert "6 points from 0.1 to 40 MHz" in words
    assert "Attenuation and velocity of drawn cables" not in words
    assert "10 to 40 ohm, drawn: the curve has none" in words
    fit = curve_fit(str(curve))
    assert f"Its attenuation lies at most {100 * abs(fit.attenuation.share):.2g} % " in words


def test_without_sources_no_pattern_is_shown():
    """A named circuit with background alone has no pattern and no kind of pulse, and the page says so."""
    quiet = Scenario.model_validate({"name": "q", "circuit": [{"name": "A", "sensor": "s", "length_m": 300.0}]})
    words = words_of(gallery_page(quiet, seed=3))
    assert "Fifty cycles" not in words
    assert f"no such source: {'; '.join(PATTERN_WORDS.values())}." in words
