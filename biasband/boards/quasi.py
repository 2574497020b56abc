"""Quasi-random boards: scrambled Sobol' points, which fill the box more evenly than random ones.

Means and quantiles come out with a smaller error, which the spread over independent scramblings tells.
A yield is not judged on them: no failure in any scrambling would read as exactly 100 %.
Source: Sobol' 1967; Owen, "Randomly permuted (t, m, s)-nets", 1995 (memory); the points are scipy's.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from biasband.boards.streams import BLOCK, Block, Number
from biasband.circuit.scenarios import Array, chunks
from biasband.circuit.topology import EMITTER_PARTS, TOPOLOGIES
from biasband.coupling import BYPASS, INPUT, OUTPUT
from biasband.errors import UsageError
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

if TYPE_CHECKING:
    from scipy.stats import qmc

SCRAMBLINGS = 16
"""Independent scramblings of the same points: enough for a Student-t interval."""

MOST = SCRAMBLINGS * 2**30
"""Boards: scipy's points have 30 bits."""

STRETCH = 2**18
"""Boards of one task; going forward to where it starts takes a few per cent of its work at most."""

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
    """Quasi-random boards, a power of two in each of `SCRAMBLINGS`, which are divided into stretches.

    `aliases` gives the seats of numbers that are named after a group. Every board is a batch of its own:
    a batch in common changes no mean and no quantile of single boards.
    """

    boards: int
    seed: int
    aliases: Mapping[str, str]

    @classmethod
    def of(cls, stage: Stage, *, boards: int, seed: int) -> Scrambled:
        """Quasi-random boards of a stage, at least so many.

        Raises UsageError for more than there are points.
        """
        if boards > MOST:
            raise UsageError(f"boards: from 1 to {MOST} quasi-random ones; read {boards} (plain: any number)")
        first = {r.group: r.name for r in reversed(stage.resistors) if r.group is not None}
        shared = {batch_axis(group): f"batch of {name}" for group, name in first.items()}
        warmed = {f"{group_axis(group)}.tempco": f"group of {name}" for group, name in first.items()}
        return cls(rounded_up(boards), seed, {**shared, **warmed})

    @property
    def each(self) -> int:
        """Boards of one scrambling."""
        return self.boards // SCRAMBLINGS

    @property
    def tasks(self) -> int:
        """A task for each stretch of each scrambling, in turns: an interrupted run has some of every one."""
        return SCRAMBLINGS * -(-self.each // STRETCH)

    def group(self, task: int) -> int:
        """The scrambling that a task belongs to."""
        return task % SCRAMBLINGS

    def blocks(self, numbers: Sequence[Number], task: int) -> Iterator[Block]:
        """The boards of one stretch."""
        stretch = min(STRETCH, self.each)
        first = self.group(task) * self.each + task // SCRAMBLINGS * stretch
        points = self._points_from(first)
        for rows in chunks(stretch, BLOCK):
            drawn = points.random(rows.stop - rows.start)
            yield Block(first + rows.start, self._seated(numbers, drawn))

    def board(self, numbers: Sequence[Number], board: int) -> Mapping[str, Array]:
        """The uniform numbers of one board, (1,) each."""
        return self._seated(numbers, self._points_from(board).random(1))

    def _points_from(self, board: int) -> qmc.Sobol:
        """The points of a board's scrambling, that board's being the next."""
        from scipy.stats import qmc

        scrambling, place = divmod(board, self.each)
        random = np.random.default_rng(np.random.SeedSequence([self.seed, scrambling]))
        points = qmc.Sobol(len(_SEATS), scramble=True, seed=random)
        if place:  # scipy cannot go forward by nothing
            points.fast_forward(place)
        return points

    def _seated(self, numbers: Sequence[Number], points: Array) -> Mapping[str, Array]:
        """Points of all dimensions as the numbers that are wanted."""
        seats = {number.name: _SEATS.index(self.aliases.get(number.name, number.name)) for number in numbers}
        return {name: np.ascontiguousarray(points[:, seat]) for name, seat in seats.items()}
