"""How the gallery's figures are drawn."""

import re

import numpy as np

from pdclass.report.gallery_plots import _envelope, distance
from pdclass.report.plots import panels_figure


def test_an_envelope_keeps_every_extreme_and_the_end():
    """A single spike survives, values come in their order, and the last step is drawn."""
    x = np.arange(10_001.0)
    y = np.zeros(10_001)
    y[777], y[9_999] = 5.0, -4.0
    thin_x, thin_y = _envelope(x, y, 200)
    assert thin_y.max() == 5.0
    assert thin_y.min() == -4.0
    assert np.all(np.diff(thin_x) >= 0)
    assert thin_x.size < 500
    assert thin_x[-1] > 9_900


def test_a_short_series_stays_as_it_is():
    """What fits is not thinned."""
    x = np.arange(100.0)
    thin_x, thin_y = _envelope(x, x**2, 60)
    assert np.array_equal(thin_x, x)
    assert np.array_equal(thin_y, x**2)


def test_distances_are_written_as_one_says_them():
    """Metres below a kilometre, kilometres from there, and the source by name."""
    assert [distance(km) for km in (0.0, 0.05, 1.0, 5.0)] == ["at the source", "50 m", "1 km", "5 km"]


def test_a_light_figure_says_what_a_full_one_says():
    """Text stays text with all its digits, ids are kept only where something refers to them, bytes repeat."""

    def draw(panels):
        panels[0].plot([0.0, 1.0], [0.0, 1.0], marker="o")
        panels[0].set_xticks([0.125, 0.875], ["0.125", "0.875"])
        panels[1].plot([0, 1, 2], [3, 1, 2])

    figure = panels_figure("f", "two panels", (4.0, 2.0), draw, (1.0, 2.0))
    assert figure == panels_figure("f", "two panels", (4.0, 2.0), draw, (1.0, 2.0))
    assert ">0.125<" in figure
    assert "<title>two panels</title>" in figure
    ids = set(re.findall(r'\bid="([^"]*)"', figure))
    used = set(re.findall(r'xlink:href="#([^"]*)"', figure)) | set(re.findall(r"url\(#([^)]*)\)", figure))
    assert used <= ids
    assert all(name.startswith("f-") for name in ids)
    assert not re.search(r' d="[^"]*\d\.\d{2}', figure)
