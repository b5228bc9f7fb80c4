"""Settings for every test: property tests repeat the same examples on every run."""

from __future__ import annotations

from hypothesis import settings

# STYLE: no unseeded tests. The examples follow from the test's own code; a slow machine is no
# fault of a property.
settings.register_profile("repeatable", derandomize=True, deadline=None)
settings.load_profile("repeatable")
