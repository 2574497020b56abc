"""Quasi-random boards: scrambled Sobol' points, which fill the box more evenly than random ones.

Means and quantiles come out with a smaller error, which the spread over independent scramblings tells.
A yield is not judged on them: no failure in any scrambling would read as exactly 100 %.
Source: Sobol' 1967; Owen, "Randomly permuted (t, m, s)-nets", 1995 (memory); the points are scipy's.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from biasband.circuit.topology import EMITTER_PARTS, TOPOLOGIES
from biasband.coupling import BYPASS, INPUT, OUTPUT
from biasband.stage import Stage
from biasband.variation.contributors import (
    BASE_EMITTER,
    GAIN,
    LEAKAGE,
    NEGATIVE,
    SUPPLY,
    batch_axis,
    group_axis,
)
from biasband.variation.streams import BLOCK, Block, Number

SCRAMBLINGS = 16
"""Independent scramblings of the same points: enough for a Student-t interval."""

_RESISTORS = sorted({*EMITTER_PARTS, *(name for each in TOPOLOGIES.values() for name in each.resistors)})

_SEATS = (
    *(GAIN, BASE_EMITTER, LEAKAGE, SUPPLY, NEGATIVE),
    *(f"{name}.tolerance" for name in _RESISTORS),
    *(f"{name}.tempco" for name in _RESISTORS),
    *(f"{name}.life_drift" for name in _RESISTORS),
    *(f"{name}.{what}" for name in (INPUT, OUTPUT, BYPASS) for what in ("tolerance", "temperature_change")),
    *(f"{name}.batch" for name in (GAIN, BASE_EMITTER, SUPPLY, NEGATIVE)),
    *(f"{name}.tolerance.batch" for name in _RESISTORS),
    *(f"batch of {name}" for name in _RESISTORS),
    *(f"group of {name}" for name in _RESISTORS),
)
"""A dimension for every number that any stage may take, so that a contributor more moves no other's."""


def rounded_up(boards: int) -> int:
    """The next number of boards that is a power of two in every scrambling."""
    return SCRAMBLINGS * (1 << max(-(-boards // SCRAMBLINGS) - 1, 0).bit_length())


@dataclass(frozen=True)
class Scrambled:
    """Quasi-random boards, a power of two in each of `SCRAMBLINGS` tasks.

    `aliases` gives the seats of numbers that are named after a group. Every board is a batch of its own:
    a batch in common changes no mean and no quantile of single boards.
    """

    boards: int
    seed: int
    aliases: Mapping[str, str]

    @classmethod
    def of(cls, stage: Stage, *, boards: int, seed: int) -> Scrambled:
        """Quasi-random boards of a stage, at least so many."""
        first = {r.group: r.name for r in reversed(stage.resistors) if r.group is not None}
        shared = {batch_axis(group): f"batch of {name}" for group, name in first.items()}
        warmed = {f"{group_axis(group)}.tempco": f"group of {name}" for group, name in first.items()}
        return cls(rounded_up(boards), seed, {**shared, **warmed})

    @property
    def tasks(self) -> int:
        """A task for each scrambling."""
        return SCRAMBLINGS

    def blocks(self, numbers: Sequence[Number], task: int) -> Iterator[Block]:
        """The boards of one scrambling."""
        from scipy.stats import qmc

        random = np.random.default_rng(np.random.SeedSequence([self.seed, task]))
        points = qmc.Sobol(len(_SEATS), scramble=True, seed=random)
        seats = {number.name: _SEATS.index(self.aliases.get(number.name, number.name)) for number in numbers}
        each = self.boards // SCRAMBLINGS
        for start in range(0, each, BLOCK):
            drawn = points.random(min(BLOCK, each - start))
            uniforms = {name: np.ascontiguousarray(drawn[:, seat]) for name, seat in seats.items()}
            yield Block(task * each + start, uniforms)
