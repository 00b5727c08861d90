"""The gallery as a file beside the captures."""

import tomllib

import pytest

from pdclass.errors import InputError
from pdclass.jobs.gallery import GALLERY, write_gallery
from pdclass.jobs.simulate import simulate
from pdclass.sim.ranges import Scenario

WORLD = """
name = "alone"
[cable]
kinds = { EPR = 1.0 }
[chain]
rates_hz = [62.5e6]
[[circuit]]
name = "A"
sensor = "strap"
length_m = 400.0
[[circuit.sources]]
label = "local"
pulses_per_cycle = 200.0
snr_db = [20.0, 30.0]
"""


@pytest.fixture
def scenario(tmp_path):
    path = tmp_path / "alone.toml"
    path.write_text(WORLD, encoding="utf-8")
    return path


def test_the_gallery_is_written_beside_the_captures_and_repeats(scenario, tmp_path):
    """With the option the page is there and named; written again for the same seed it has the same bytes."""
    done = simulate(scenario, tmp_path / "w", seed=2, gallery=True)
    assert done.gallery == tmp_path / "w" / GALLERY
    first = done.gallery.read_bytes()
    again = write_gallery(Scenario.model_validate(_read(scenario)), tmp_path, seed=2)
    assert again.read_bytes() == first


def test_without_the_option_there_is_no_gallery_and_no_stale_one(scenario, tmp_path):
    """Simulating again into a folder takes away the page of the former world."""
    out = tmp_path / "w"
    out.mkdir()
    (out / GALLERY).write_text("old", encoding="utf-8")
    done = simulate(scenario, out, seed=2, force=True)
    assert done.gallery is None
    assert not (out / GALLERY).exists()


def test_a_folder_that_is_not_there_is_said(tmp_path):
    """Before anything is drawn, one line says which folder is missing."""
    with pytest.raises(InputError, match="nowhere: expected a folder"):
        write_gallery(Scenario(name="w"), tmp_path / "nowhere", seed=1)


def _read(path):
    return tomllib.loads(path.read_text(encoding="utf-8"))
