"""Tallies: what boards showed, in constant memory however many there were, and mergeable.

A tally counts: boards that solved, boards in each bin between the corner limits, boards that hold a
limit, sums in whole steps of the scale. All of that is whole numbers, so that tallies merge to the
same bytes in any order and any grouping.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import isfinite
from typing import Any

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array
from biasband.variation.in_use import PLACES, InUse

BINS = 4096
"""Bins between the corner limits of a measure: a quantile is known to 1/4096 of their distance."""

STEPS = 2**19
"""Steps in half the distance of the corner limits, in which values are summed.

The squares of 2^14 such whole numbers add up below 2^53: exactly, whatever the order.
"""

_STEPS_PER_BIN = 2 * STEPS // BINS
MOST_AT_ONCE = 2**14
"""Boards that one tally can be made of; any number of them merge."""


@dataclass(frozen=True)
class Scale:
    """Where the boards of a measure are expected: between its corner limits [SI].

    Without finite limits, or with none between them, `half` is 0: nothing but extremes is known then.
    """

    low: float
    high: float

    @property
    def centre(self) -> float:
        """The middle between the limits."""
        return 0.5 * (self.low + self.high) if isfinite(self.low) and isfinite(self.high) else 0.0

    @property
    def half(self) -> float:
        """Half the distance between the limits; 0 where there is none."""
        half = 0.5 * (self.high - self.low)
        return half if isfinite(half) and half > 0.0 else 0.0

    @property
    def bin_width(self) -> float:
        """The width of a bin, which bounds how wrong a quantile can be."""
        return 2.0 * self.half / BINS

    def edges(self) -> Array:
        """The edges of all bins, (BINS + 1,): half a step below the steps that a bin counts."""
        start = self.low - 0.5 * self.half / STEPS
        return np.asarray(start + self.bin_width * np.arange(BINS + 1), dtype=np.float64)

    def contains(self, lowest: float, highest: float) -> bool:
        """Whether values lie between the limits, but for less than half a step."""
        slack = 0.5 * self.half / STEPS
        return self.low - slack <= lowest and highest <= self.high + slack


@dataclass(frozen=True)
class Bound:
    """A limit that boards are held to: a measure may not pass `value` [SI] from above (`lower`) or below."""

    measure: str
    lower: bool
    value: float

    def holds(self, lowest: Array, highest: Array) -> NDArray[np.bool_]:
        """Which boards hold it, (B,), from their lowest and highest; NaN does not."""
        return lowest >= self.value if self.lower else highest <= self.value


@dataclass(frozen=True)
class Tally:
    """What N boards showed. Q measures in the order of `scales`, 3 places of use (`PLACES`), L bounds.

    `solved`, `sums`, `squares`, `lowest`, `highest` and the numbers of the boards that were lowest and
    highest are (Q, 3); `bins` (Q, 3, BINS + 2), the first and last for what lies beyond the corner
    limits. `sums` and `squares` are in steps. `held` (L + 1, 2) counts boards that hold each bound at
    every point of use, and at a random moment in use; its last row those that hold all.
    """

    boards: int
    regions: NDArray[np.int64]
    solved: NDArray[np.int64]
    sums: NDArray[np.object_]
    squares: NDArray[np.object_]
    lowest: Array
    highest: Array
    lowest_board: NDArray[np.int64]
    highest_board: NDArray[np.int64]
    bins: NDArray[np.int64]
    held: NDArray[np.int64]

    def merged(self, other: Tally) -> Tally:
        """This tally and another as one; of equal extremes the board with the smaller number is kept."""
        low, low_board = _farther(self, other, "lowest", sign=1.0)
        high, high_board = _farther(self, other, "highest", sign=-1.0)
        added = ("boards", "regions", "solved", "sums", "squares", "bins", "held")
        return Tally(
            **{name: getattr(self, name) + getattr(other, name) for name in added},
            lowest=low, highest=high, lowest_board=low_board, highest_board=high_board,
        )  # fmt: skip


def _farther(one: Tally, other: Tally, name: str, *, sign: float) -> tuple[Array, NDArray[np.int64]]:
    """The farther extremes of two tallies, lowest (sign +1) or highest (−1), and their boards."""
    ours, theirs = getattr(one, name), getattr(other, name)
    our_board, their_board = getattr(one, f"{name}_board"), getattr(other, f"{name}_board")
    earlier = (ours == theirs) & (their_board < our_board)
    take = (sign * theirs < sign * ours) | np.isnan(ours) | earlier
    return np.where(take, theirs, ours), np.where(take, their_board, our_board)


def tally(
    found: InUse,
    scales: Mapping[str, Scale],
    *,
    first_board: int,
    bounds: Sequence[Bound] = (),
    moment: Mapping[str, tuple[Array, Array]] | None = None,
) -> Tally:
    """Count B boards in use, at most `MOST_AT_ONCE`, numbered from `first_board`.

    `moment` holds, for the measures of the bounds, lowest and highest [SI] of each board at its random
    moment in use.
    """
    count = found.values[next(iter(scales))].shape[1]
    rows = [_Row.of(values, scale) for name, scale in scales.items() for values in found.values[name]]
    shape = (len(scales), len(PLACES))

    def table(name: str, dtype: type) -> NDArray[Any]:
        return np.array([getattr(row, name) for row in rows], dtype=dtype).reshape(shape)

    return Tally(
        boards=count, regions=found.regions,
        solved=table("solved", np.int64), sums=table("total", object), squares=table("squares", object),
        lowest=table("lowest", float), highest=table("highest", float),
        lowest_board=table("lowest_at", np.int64) + first_board,
        highest_board=table("highest_at", np.int64) + first_board,
        bins=np.stack([row.bins for row in rows]).reshape(*shape, BINS + 2),
        held=_held(found, bounds, moment or {}, count),
    )  # fmt: skip


def _held(
    found: InUse, bounds: Sequence[Bound], moment: Mapping[str, tuple[Array, Array]], count: int
) -> NDArray[np.int64]:
    """Boards that hold each bound, always and at their moment; the last row all bounds."""
    held = np.ones((len(bounds) + 1, 2, count), dtype=bool)
    for row, bound in enumerate(bounds):
        _, lowest, highest = found.values[bound.measure]
        held[row, 0] = bound.holds(lowest, highest)
        held[row, 1] = bound.holds(*moment[bound.measure]) if moment else False
    held[-1] = held[:-1].all(axis=0)
    return np.asarray(np.count_nonzero(held, axis=2), dtype=np.int64)


@dataclass(frozen=True)
class _Row:
    """One measure at one place over B boards, as `Tally` has it."""

    solved: int
    total: int
    squares: int
    lowest: float
    highest: float
    lowest_at: int
    highest_at: int
    bins: NDArray[np.int64]

    @classmethod
    def of(cls, values: Array, scale: Scale) -> _Row:
        """Count values, NaN left out."""
        low_at, high_at = int(np.argmin(values)), int(np.argmax(values))
        if np.isnan(values[low_at]):  # argmin points at a NaN where there is one
            return cls._with_gaps(values, scale)
        lowest, highest = float(values[low_at]), float(values[high_at])
        steps = values - scale.centre
        steps *= STEPS / scale.half if scale.half else 0.0
        np.rint(steps, out=steps)
        inside = scale.contains(lowest, highest)
        squares = int(np.einsum("i,i", steps, steps)) if inside else sum(int(step) ** 2 for step in steps)
        bins = _binned(steps, scale, inside=inside, values=values)
        return cls(values.size, int(np.sum(steps)), squares, lowest, highest, low_at, high_at, bins)

    @classmethod
    def _with_gaps(cls, values: Array, scale: Scale) -> _Row:
        there = np.flatnonzero(~np.isnan(values))
        if not there.size:
            return cls(0, 0, 0, np.nan, np.nan, -1, -1, np.zeros(BINS + 2, dtype=np.int64))
        row = cls.of(values[there], scale)
        at = int(there[row.lowest_at]), int(there[row.highest_at])
        return cls(row.solved, row.total, row.squares, row.lowest, row.highest, *at, row.bins)


def _binned(steps: Array, scale: Scale, *, inside: bool, values: Array) -> NDArray[np.int64]:
    """How many values lie in each bin; those beyond the limits in the first and the last."""
    place = steps * (1.0 / _STEPS_PER_BIN)
    place += BINS // 2 + 1
    if not inside:
        np.clip(place, 1, BINS, out=place)
        place[values < scale.low] = 0
        place[values > scale.high] = BINS + 1
    counts = np.bincount(place.astype(np.intp), minlength=BINS + 2)
    if inside:  # the limits themselves, and what rounding puts beyond them, belong to the bins next to them
        counts[1], counts[0] = counts[1] + counts[0], 0
        counts[BINS], counts[BINS + 1] = counts[BINS] + counts[BINS + 1], 0
    return counts
