"""What all tests share: property tests that repeat the same examples, and both kernels."""

from __future__ import annotations

import pytest
from epochtest.sky.ephemeris import Ephemeris, open_ephemeris
from hypothesis import settings

# STYLE: no unseeded tests. The examples follow from the test's own code; a slow machine is no
# fault of a property.
settings.register_profile("repeatable", derandomize=True, deadline=None)
settings.load_profile("repeatable")


@pytest.fixture(scope="session")
def de421() -> Ephemeris:
    """The short kernel, the default of a study."""
    return open_ephemeris("DE421")


@pytest.fixture(scope="session")
def de440() -> Ephemeris:
    """The long kernel."""
    return open_ephemeris("DE440")
