"""One small trained classifier for the room."""

import pytest
from blobs import trained


@pytest.fixture(scope="session")
def parts():
    return trained()
