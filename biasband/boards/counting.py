"""Counting: boards in use are added up in place, block after block, and become a tally at the end."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import inf

import numpy as np
from numpy.typing import NDArray

from biasband.boards.in_use import PLACES, InUse
from biasband.boards.tally import BINS, STEPS, STEPS_PER_BIN, Bound, Scale, Tally
from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array

Moment = Mapping[str, tuple[Array, Array]]
"""Lowest and highest [SI] by measure, (B,) each, of boards that are each at a random moment in use."""

_EXACT = 2**53

_EVERY_BIN = BINS + 2

_BIN_BITS = STEPS_PER_BIN.bit_length() - 1
"""Steps of a bin are a power of two."""

_PLACE = np.arange(len(PLACES), dtype=np.int32)

_FIRST_BIN = STEPS + STEPS_PER_BIN * (1 + _EVERY_BIN * _PLACE[:, np.newaxis])
"""Added to steps, it numbers the bins of all places in one row, once divided by the steps of a bin."""

_SIGNS = np.array([[1.0], [-1.0]])
"""The lowest and the highest: the lowest of what has its sign changed."""


class Counter:
    """Counts boards in use, in the order of their numbers; `tally` is what they showed."""

    def __init__(self, scales: Mapping[str, Scale], bounds: Sequence[Bound] = ()) -> None:
        shape = (len(scales), len(PLACES))
        self._scales, self._bounds = scales, bounds
        self._boards = 0
        self._regions = np.zeros(len(Region), dtype=np.int64)
        self._sums = np.zeros((2, *shape), dtype=object)  # of steps and of their squares
        self._extremes = np.stack([np.full(shape, inf), np.full(shape, -inf)])
        self._holders = np.full((2, *shape), -1, dtype=np.int64)
        self._bins = np.zeros((*shape, _EVERY_BIN), dtype=np.int64)
        self._held = np.zeros((len(bounds) + 1, 2), dtype=np.int64)

    def add(self, found: InUse, *, first_board: int, moment: Moment | None = None) -> None:
        """Count B more boards, numbered from `first_board`; quickly up to 2^14, exactly however many.

        `moment` holds the measures of the bounds.
        """
        count = found.values[next(iter(self._scales))].shape[1]
        boards = np.arange(first_board, first_board + count, dtype=np.int64)
        for row, (name, scale) in enumerate(self._scales.items()):
            self._add(row, slice(None), found.values[name], scale, boards)
        self._boards += count
        self._regions += found.regions
        self._held += _held(found, self._bounds, moment or {}, count)

    def _add(self, row: int, places: slice, values: Array, scale: Scale, boards: NDArray[np.int64]) -> None:
        """Count a measure at some places, values (P, B)."""
        each = _PLACE[: len(values)]
        ends = np.array([values.argmin(axis=1), values.argmax(axis=1)])
        extremes = values[each, ends]
        if not np.isfinite(extremes).all():  # argmin points at a NaN where there is one
            self._add_finite(row, values, scale, boards)
            return
        self._compare(row, places, extremes, boards[ends])
        steps = scale.steps(values)
        most = float(np.abs(steps[each, ends]).max())
        self._sums[:, row, places] += _added(steps, most)
        self._bins[row, places] += _binned(steps if most < STEPS else np.clip(steps, -STEPS - 1, STEPS))

    def _add_finite(self, row: int, values: Array, scale: Scale, boards: NDArray[np.int64]) -> None:
        """Count those boards of each place whose value is finite."""
        for place, those in enumerate(values):
            there = np.flatnonzero(np.isfinite(those))
            if there.size:
                self._add(row, slice(place, place + 1), those[np.newaxis, there], scale, boards[there])

    def _compare(self, row: int, places: slice, extremes: Array, holders: NDArray[np.int64]) -> None:
        """Keep what is farther than all before, and whose it is, (2, P) each."""
        ours = self._extremes[:, row, places]
        farther = _SIGNS * extremes < _SIGNS * ours
        ours[farther] = extremes[farther]
        self._holders[:, row, places][farther] = holders[farther]

    def tally(self) -> Tally:
        """What all boards showed; nothing is counted after that."""
        solved = self._bins.sum(axis=2)
        lowest, highest = np.where(solved, self._extremes, np.nan)
        lowest_board, highest_board = self._holders
        sums, squares = self._sums
        return Tally(
            boards=self._boards, regions=self._regions, solved=solved, sums=sums, squares=squares,
            lowest=lowest, highest=highest, lowest_board=lowest_board, highest_board=highest_board,
            bins=self._bins, held=self._held,
        )  # fmt: skip


def tally(
    found: InUse,
    scales: Mapping[str, Scale],
    *,
    first_board: int,
    bounds: Sequence[Bound] = (),
    moment: Moment | None = None,
) -> Tally:
    """Count B boards in use and no more, numbered from `first_board` (see `Counter.add`)."""
    counter = Counter(scales, bounds)
    counter.add(found, first_board=first_board, moment=moment)
    return counter.tally()


def _held(found: InUse, bounds: Sequence[Bound], moment: Moment, count: int) -> NDArray[np.int64]:
    """Boards that hold each bound, always and at their moment; the last row all required ones."""
    held = np.ones((len(bounds) + 1, 2, count), dtype=bool)
    for row, bound in enumerate(bounds):
        _, lowest, highest = found.values[bound.measure]
        held[row, 0] = bound.holds(lowest, highest)
        held[row, 1] = bound.holds(*moment[bound.measure]) if moment else False
    held[-1] = held[[row for row, bound in enumerate(bounds) if bound.required]].all(axis=0)
    return np.asarray(np.count_nonzero(held, axis=2), dtype=np.int64)


def _added(steps: Array, most: float) -> NDArray[np.object_]:
    """Exact sums of rows of whole numbers and of their squares, (2, P); `most` is the largest, signless."""
    if steps.shape[1] * most * most < _EXACT:
        squares = np.einsum("ij,ij->i", steps, steps)  # a dot product of so many would start threads
        return np.array([steps.sum(axis=1), squares]).astype(np.int64).astype(object)
    whole = np.array([[int(step) for step in row] for row in steps], dtype=object)  # as large as need be
    return np.array([whole.sum(axis=1), (whole * whole).sum(axis=1)])


def _binned(steps: Array) -> NDArray[np.int64]:
    """How many values of each row, (P, B), lie in each bin; in the first and the last what is beyond."""
    bins = steps.astype(np.int32)  # three times as fast as to 64 bits
    bins += _FIRST_BIN[: len(steps)]
    bins >>= _BIN_BITS  # divided by the steps of a bin
    return np.bincount(bins.ravel(), minlength=len(steps) * _EVERY_BIN).reshape(len(steps), _EVERY_BIN)
