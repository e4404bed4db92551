"""What all tests share: chance that is the same every time, and no cache of the user's."""

import numpy as np
import pytest
from hypothesis import settings

settings.register_profile("same", derandomize=True, deadline=None)
settings.load_profile("same")


@pytest.fixture
def rng():
    return np.random.default_rng(20240229)


@pytest.fixture(autouse=True)
def _own_cache(monkeypatch):
    """Horizons are tabulated afresh; tests of the cache name a folder of their own."""
    monkeypatch.setenv("SMALLBODY_CACHE", "off")
