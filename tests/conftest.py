"""Shared worlds and limits: one thread a process, small records made once a session."""

import os

import pytest

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ.setdefault(name, "1")

# after the threads are settled: these import the numeric libraries
from verdict_samples import sample_bundle, sample_shards  # noqa: E402


@pytest.fixture(scope="session")
def bundle(tmp_path_factory):
    """A bundle of hand-made trees on closed-form pulses."""
    return sample_bundle(tmp_path_factory.mktemp("sample"))


@pytest.fixture(scope="session")
def bundle_folder(bundle, tmp_path_factory):
    """The same bundle's bytes in a folder of their own."""
    folder = tmp_path_factory.mktemp("copy")
    sample_bundle(folder)
    return folder / "bundle"


@pytest.fixture(scope="session")
def shards(bundle):
    """Three scored captures."""
    return sample_shards(bundle)
