"""Spreads that the tests of this room show, with few boards."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

from biasband.files.stage_file import read_stage
from biasband.signoff.spread_study import SpreadStudy
from biasband.signoff.spreading import spread
from biasband.stage import Requirement
from tests.show.reviews import BOARDS, SAMPLES
from tests.variation.stages import coupled


@cache
def spread_of(name: str, sampling: str = "plain", boards: int = BOARDS) -> SpreadStudy:
    """The spread of a sample."""
    return spread(read_stage(SAMPLES / f"{name}.toml"), boards=boards, sampling=sampling)  # type: ignore[arg-type]


@cache
def inverting() -> SpreadStudy:
    """A bypassed divider whose gain, below zero, is held to a magnitude from 87 to 1000; some boards fail."""
    gain = Requirement(id="G", quantity="voltage_gain", at_least=87.0, at_most=1000.0)
    return spread(replace(coupled(), requirements=(gain,)), boards=BOARDS)


@cache
def unrequired() -> SpreadStudy:
    """A stage that nothing is required of."""
    return spread(coupled(), boards=BOARDS)
