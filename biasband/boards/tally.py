"""Tallies: what boards showed, in constant memory however many there were, and mergeable.

A tally counts: boards that solved, boards in each bin between the corner limits, boards that hold a
limit, sums in whole steps of the scale. All of that is whole numbers, so that tallies merge to the
same bytes in any order and any grouping. How boards are counted, see counting.py.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import inf, isfinite

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array

BINS = 4096
"""Bins between the corner limits of a measure: a quantile is known to 1/4096 of their distance."""

STEPS_PER_BIN = 2**8
STEPS = BINS * STEPS_PER_BIN // 2
"""Values are summed in whole steps from the middle, −STEPS … STEPS − 1 in bins between the corner limits.

The squares of 2^14 such numbers add up below 2^53: exactly in floating point, whatever the order.
"""

_APART = 1e-9
"""Limits nearer than this share of themselves are one value, as exactly as it is solved."""

_LEAST_HALF = 1e-200
"""Far below any figure of a stage, and far above where steps per unit would overflow."""


@dataclass(frozen=True)
class Scale:
    """Where the boards of a measure are expected: between its corner limits [SI].

    Limits that coincide are spread by a billionth of themselves to either side. Without finite limits,
    or where both are zero, `half` is 0: nothing but extremes is known then.
    """

    low: float
    high: float

    @cached_property
    def centre(self) -> float:
        """The middle between the limits."""
        return 0.5 * (self.low + self.high) if isfinite(self.low) and isfinite(self.high) else 0.0

    @cached_property
    def half(self) -> float:
        """Half the distance between the limits; 0 where there is none."""
        half = max(0.5 * (self.high - self.low), _APART * self.largest)
        return half if isfinite(half) and half > _LEAST_HALF else 0.0

    @property
    def largest(self) -> float:
        """The limit that is farther from zero, without its sign."""
        return max(abs(self.low), abs(self.high))

    @cached_property
    def step(self) -> float:
        """The distance of the whole steps: the limits lie STEPS − 1 of them from the middle."""
        return self.half / (STEPS - 1)

    @property
    def bin_width(self) -> float:
        """The width of a bin, which bounds how wrong a quantile between the limits can be."""
        return self.step * STEPS_PER_BIN

    def edges(self) -> Array:
        """The edges of all bins, (BINS + 1,): half a step below the steps that a bin counts."""
        below = np.arange(BINS + 1) * STEPS_PER_BIN - STEPS - 0.5
        return np.asarray(self.centre + self.step * below, dtype=np.float64)

    def contains(self, lowest: float, highest: float) -> bool:
        """Whether values lie between the limits, but for less than half a step."""
        slack = self.half + 0.5 * self.step
        return self.centre - slack <= lowest and highest <= self.centre + slack

    def steps(self, values: Array) -> Array:
        """Values in whole steps from the middle; all 0 where there is no scale."""
        steps = values - self.centre
        steps *= 1.0 / self.step if self.half else 0.0
        return np.rint(steps, out=steps)


@dataclass(frozen=True)
class Bound:
    """What boards are held to: a measure stays from `low` to `high` [SI].

    `required` says that a board must hold it to hold all of them; others are merely counted.
    """

    measure: str
    low: float = -inf
    high: float = inf
    required: bool = True

    def holds(self, lowest: Array, highest: Array) -> NDArray[np.bool_]:
        """Which boards hold it, (B,), from their lowest and highest; NaN does not."""
        return np.asarray((lowest >= self.low) & (highest <= self.high))


@dataclass(frozen=True)
class Tally:
    """What N boards showed. Q measures in the order of `scales`, 3 places of use (`PLACES`), L bounds.

    `solved`, `sums`, `squares`, `lowest`, `highest` and the numbers of the boards that were lowest and
    highest (−1: none) are (Q, 3); `bins` (Q, 3, BINS + 2), the first and last for what lies beyond the
    corner limits. `sums` and `squares` are in steps. A board is solved whose value is finite. `held`
    (L + 1, 2) counts boards that hold each bound at every point of use, and at a random moment in use; its
    last row those that hold all required ones.
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
