"""Summaries: mean, deviation and quantiles of a measure, read off a tally of however many boards."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from biasband.boards.tally import Scale, Tally
from biasband.circuit.scenarios import Array

NAN = float("nan")


@dataclass(frozen=True)
class Within:
    """Two values [SI] that something lies between."""

    low: float
    high: float


@dataclass(frozen=True)
class Summary:
    """What N boards showed of one measure at one place of use [SI].

    Quantiles between the corner limits are known to a bin of the tally (`scale.bin_width`), beyond them to
    the farthest board; mean and deviation to a step (`scale.step`). NaN where no board solved, or where the
    corners have no limits to count between: then no more is known than the extremes.
    """

    scale: Scale
    solved: int
    total: int
    squares: int
    lowest: float
    highest: float
    bins: NDArray[np.int64]

    @property
    def mean(self) -> float:
        """The mean over solved boards."""
        if self._single is not None:
            return self._single
        return self.scale.centre + self.scale.step * float(Fraction(self.total, self.solved))

    @property
    def sd(self) -> float:
        """The standard deviation over solved boards, with N − 1; NaN for fewer than two."""
        if self.solved < 2:
            return NAN
        if self._single is not None:
            return 0.0 * self._single
        squares = Fraction(self.solved * self.squares - self.total**2, self.solved * (self.solved - 1))
        return self.scale.step * sqrt(squares)

    def quantile(self, share: float) -> float:
        """The value that this share of solved boards does not exceed, interpolated between two boards."""
        if self._single is not None:
            return self._single
        place = share * (self.solved - 1)
        below = min(int(place), self.solved - 2)
        low, high = self._about(below + 1), self._about(below + 2)
        return low + (place - below) * (high - low)

    def at_rank(self, rank: int) -> Within:
        """Where the board of this rank lies, the lowest being 1: between the ends of its bin."""
        if rank == 1:
            return Within(self.lowest, self.lowest)
        if rank == self.solved:
            return Within(self.highest, self.highest)
        if not (self.solved and self.scale.half):
            return Within(self.lowest, self.highest)
        bin_ = self._bin(rank)
        low, high = self._edges[bin_] - self._rounding, self._edges[bin_ + 1] + self._rounding
        return Within(max(float(low), self.lowest), min(float(high), self.highest))

    def _about(self, rank: int) -> float:
        """Where the board of this rank is thought: those of a bin lie evenly between its ends."""
        within, bin_ = self.at_rank(rank), self._bin(rank)
        in_bin = int(self.bins[bin_])
        before = int(self._counted[bin_]) - in_bin
        return within.low + (within.high - within.low) * (rank - 0.5 - before) / in_bin

    def _bin(self, rank: int) -> int:
        return int(np.searchsorted(self._counted, rank, side="left"))

    @property
    def _single(self) -> float | None:
        """The value where it is but one; NaN where nothing but the extremes is known."""
        if self.solved and self.lowest == self.highest:
            return self.lowest
        return None if self.solved and self.scale.half else NAN

    @property
    def _rounding(self) -> float:
        """By how much rounding may put a value into the bin beside its own."""
        return 4.0 * float(np.spacing(self.scale.largest))

    @cached_property
    def _counted(self) -> NDArray[np.int64]:
        return np.cumsum(self.bins)

    @cached_property
    def _edges(self) -> Array:
        """The edges of all bins, those beyond the limits included."""
        return np.concatenate([[-np.inf], self.scale.edges(), [np.inf]])


def summary(tally: Tally, scale: Scale, measure: int, place: int) -> Summary:
    """The summary of a measure and a place of use, by their numbers in the tally."""
    at = measure, place
    return Summary(
        scale=scale, solved=int(tally.solved[at]), total=int(tally.sums[at]), squares=int(tally.squares[at]),
        lowest=float(tally.lowest[at]), highest=float(tally.highest[at]), bins=tally.bins[at],
    )  # fmt: skip
