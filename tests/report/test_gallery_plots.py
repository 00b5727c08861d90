"""How the gallery's figures are drawn."""

import re

from pdclass.report.gallery_plots import distance
from pdclass.report.plots import panels_figure


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
