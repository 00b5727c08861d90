"""Drawings: deterministic SVG that can stand beside others on one page."""

import re
import xml.etree.ElementTree as ET

import numpy as np
import pytest

from pdclass.features import measured_edges
from pdclass.pulses import LABELS, UNDECIDED
from pdclass.report.plots import COLOURS, MARKERS, edge_figure, envelope, phase_scatter, pulse_figure, thinned_places


@pytest.fixture(scope="module")
def edges(shards):
    """Measured edges of the first sample pulse."""
    return measured_edges(shards[0].pulses, 0)


def _scatter(name="p", label="cable", offset_known=True, count=30):
    rng = np.random.default_rng(1)
    phase, peak = rng.uniform(0, 360, count), rng.normal(0, 5, count)
    return phase_scatter(phase, peak, label, limit_mv=20.0, offset_known=offset_known, name=name)


def test_the_same_input_gives_the_same_bytes(edges):
    """Drawing twice gives the same text, with no date in it."""
    assert _scatter() == _scatter()
    assert pulse_figure(edges, "cable", name="w") == pulse_figure(edges, "cable", name="w")
    assert edge_figure(edges, "cable", name="e") == edge_figure(edges, "cable", name="e")
    assert "dc:date" not in _scatter()


def test_figures_are_whole_xml_without_scripts_or_links_to_outside(edges):
    """Every figure parses as XML, holds no script, and refers to nothing but its own parts."""
    for text in (_scatter(), pulse_figure(edges, "local", name="w"), edge_figure(edges, "local", name="e")):
        root = ET.fromstring(text)
        assert root.tag.endswith("svg")
        assert "<script" not in text
        assert all(link.startswith("#") for link in re.findall(r'href="([^"]*)"', text))
        assert root.find("{http://www.w3.org/2000/svg}title").text


def test_two_figures_on_a_page_share_no_id():
    """Ids carry the figure's name, and every reference finds its id in the same figure."""
    one, two = _scatter(name="one"), _scatter(name="two")
    ids = [set(re.findall(r'\bid="([^"]+)"', text)) for text in (one, two)]
    assert ids[0]
    assert not ids[0] & ids[1]
    for text, own in zip((one, two), ids, strict=True):
        assert set(re.findall(r'(?:url\(#|href="#)([^")]+)', text)) <= own


def test_every_label_has_its_fixed_colour_and_a_shape_of_its_own():
    """Colours are the fixed set, shapes differ, and the dark edge is drawn."""
    assert COLOURS == {
        "cable": "#332288",
        "local": "#CC6677",
        "switchgear": "#44AA99",
        "interference": "#DDCC77",
        "undecided": "#888888",
    }
    assert len(set(MARKERS.values())) == 5
    for label in (*LABELS, UNDECIDED):
        text = _scatter(label=label)
        assert COLOURS[label].lower() in text
        assert "#222222" in text


def test_an_unknown_offset_is_written_and_no_sine_is_drawn():
    """With an unknown offset the reference sine, which would claim a phase, is left away."""
    known, unknown = _scatter(), _scatter(offset_known=False)
    assert "phase, offset unknown [deg]" in unknown
    assert "offset unknown" not in known
    assert "#cccccc" in known
    assert "#cccccc" not in unknown


def test_thinning_keeps_the_largest_and_the_number():
    """At most so many pulses are drawn, the largest among them; few are all drawn."""
    peak = np.random.default_rng(2).normal(0, 1, 5000)
    places = thinned_places(peak, 100)
    assert len(places) == 100
    assert int(np.argmax(np.abs(peak))) in places
    assert thinned_places(peak[:50], 100).tolist() == list(range(50))


def test_crossings_that_were_not_measured_are_not_drawn(edges):
    """A crossing that is NaN leaves no mark: one white mark fewer for each."""
    missing = {**edges, "fall_10": np.nan, "fall_50": np.nan}
    marks = [edge_figure(each, "cable", name="e").count("fill: #ffffff; stroke: #222222") for each in (edges, missing)]
    assert marks[0] - marks[1] == 2


def test_an_envelope_keeps_every_extreme_and_the_end():
    """A single spike survives, values come in their order, and the last step is drawn."""
    x = np.arange(10_001.0)
    y = np.zeros(10_001)
    y[777], y[9_999] = 5.0, -4.0
    thin_x, thin_y = envelope(x, y, 200)
    assert thin_y.max() == 5.0
    assert thin_y.min() == -4.0
    assert np.all(np.diff(thin_x) >= 0)
    assert thin_x.size < 500
    assert thin_x[-1] > 9_900


def test_a_short_series_stays_as_it_is():
    """What fits is not thinned."""
    x = np.arange(100.0)
    thin_x, thin_y = envelope(x, x**2, 60)
    assert np.array_equal(thin_x, x)
    assert np.array_equal(thin_y, x**2)
