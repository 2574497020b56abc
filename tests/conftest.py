"""Hypothesis repeats the same examples in every run, so that a red run is a change of ours.

`HYPOTHESIS_PROFILE=explore` looks for new ones.
"""

from __future__ import annotations

import os

from hypothesis import settings

settings.register_profile("repeat", derandomize=True, database=None)
settings.register_profile("explore")
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "repeat"))
