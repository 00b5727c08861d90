"""A tiny world, simulated and trained on once a session."""

import pytest

from pdclass.jobs import base_model
from pdclass.jobs.simulate import simulate


@pytest.fixture(scope="session")
def tiny_world(tmp_path_factory):
    """Captures and labelled pulses of the tiny scenario."""
    out = tmp_path_factory.mktemp("tiny") / "world"
    return simulate("tiny", out, seed=4)


@pytest.fixture(scope="session")
def tiny_bundle(tmp_path_factory):
    """A bundle trained on the tiny scenario, as `make model` trains on the base one."""
    out = tmp_path_factory.mktemp("bundle") / "tiny"
    base_model.make_base(out, scenario="tiny")
    return out
