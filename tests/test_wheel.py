"""An installed wheel has all that a checkout has: code, shipped bundle, shipped scenarios."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
CODE = """
import pdclass, pdclass.settings
from pdclass.features import feature_digests
from pdclass.jobs.score import base_bundle
from pdclass.jobs.simulate import scenario_path
from pdclass.model.bundle import read_bundle
from pdclass.report.templates import template
print(pdclass.__file__)
print(read_bundle(base_bundle(), feature_digests()).classes)
print(scenario_path("port-ferrow"))
for page in ("batch.html.j2", "gallery.html.j2", "sheet.html.j2"):
    template(page)
"""


@pytest.fixture(scope="module")
def installed(tmp_path_factory):
    """The wheel, built from this checkout and installed in a folder of its own, without its dependencies."""
    folder = tmp_path_factory.mktemp("wheel")
    build = [sys.executable, "-m", "build", "--wheel", "--no-isolation", "--outdir", str(folder / "dist"), str(ROOT)]
    subprocess.run(build, check=True, capture_output=True, text=True)
    wheel = next((folder / "dist").glob("*.whl"))
    install = [sys.executable, "-m", "pip", "install", "--no-deps", "--target", str(folder / "site"), str(wheel)]
    subprocess.run([*install, "--disable-pip-version-check"], check=True, capture_output=True, text=True)
    return folder / "site"


def test_the_wheel_finds_its_bundle_and_scenarios(installed, tmp_path):
    """From the installed wheel alone the shipped bundle opens, the scenarios are there, and so is the page."""
    done = subprocess.run(
        [sys.executable, "-c", f"import sys; sys.path.insert(0, {str(installed)!r}){CODE}"],
        capture_output=True,
        text=True,
        check=True,
        cwd=tmp_path,
    )
    where, classes, scenario = done.stdout.strip().splitlines()
    assert Path(where).is_relative_to(installed)
    assert "switchgear" in classes
    assert Path(scenario).is_relative_to(installed)
