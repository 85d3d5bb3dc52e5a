"""Shared by all tests: random searches are repeatable where nobody is there to look into a rare find."""

import os

from hypothesis import settings

settings.register_profile("repeatable", derandomize=True)
settings.register_profile("searching")
# Elsewhere each run searches anew; what it finds becomes a test of its own.
settings.load_profile("repeatable" if os.environ.get("CI") == "true" else "searching")
