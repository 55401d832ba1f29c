"""Settings of all tests: the same examples on every run, so that a failure is a change."""

from __future__ import annotations

from hypothesis import settings

settings.register_profile("fixed", derandomize=True, deadline=None)
settings.load_profile("fixed")
