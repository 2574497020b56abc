"""Reviews that the tests of this room show: the samples, with few boards."""

from __future__ import annotations

from functools import cache
from pathlib import Path

from biasband.files.stage_file import read_stage
from biasband.signoff.study import Review, review

SAMPLES = Path(__file__).parents[2] / "samples"
BOARDS = 2048
"""Enough for a yield of 99.73 % to be shown: that takes 1109 boards, ln 0.05 / ln 0.9973."""


@cache
def reviewed(name: str) -> Review:
    """The review of a sample."""
    return review(read_stage(SAMPLES / f"{name}.toml"), boards=BOARDS)


HIVE, FAILING, PNP, SPLIT = "hive_microphone", "workshop_intercom_fails", "river_gauge", "wind_mast"
EVERY = tuple(sorted(path.stem for path in SAMPLES.glob("*.toml")))
