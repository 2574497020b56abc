"""Summaries: mean, deviation and quantiles of a measure, read off a tally of however many boards."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array
from biasband.variation.tally import BINS, STEPS, Scale, Tally

NAN = float("nan")


@dataclass(frozen=True)
class Within:
    """Two values [SI] that something lies between."""

    low: float
    high: float


@dataclass(frozen=True)
class Summary:
    """What N boards showed of one measure at one place of use [SI].

    Quantiles are known to a bin of the tally (`scale.bin_width`); mean and deviation to a step, 1/2^20 of
    the distance of the corner limits. NaN where no board solved, or where the corners have no limits to count
    between.
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
        step = self.scale.half / STEPS
        return self.scale.centre + step * float(Fraction(self.total, self.solved))

    @property
    def sd(self) -> float:
        """The standard deviation over solved boards, with N − 1; NaN for fewer than two."""
        if self.solved < 2:
            return NAN
        if self._single is not None:
            return 0.0 * self._single
        squares = Fraction(self.solved * self.squares - self.total**2, self.solved * (self.solved - 1))
        return self.scale.half / STEPS * sqrt(squares)

    def quantile(self, share: float) -> float:
        """The value that this share of solved boards does not exceed, interpolated linearly in its bin."""
        if self._single is not None:
            return self._single
        place = share * (self.solved - 1) + 0.5
        counted = self._counted
        bin_ = min(int(np.searchsorted(counted, place, side="right")), BINS + 1)
        before = int(counted[bin_ - 1]) if bin_ else 0
        low, high = self._ends(bin_)
        return low + (high - low) * (place - before) / float(self.bins[bin_])

    def at_rank(self, rank: int) -> Within:
        """Where the board of this rank lies, the lowest being 1: between the ends of its bin."""
        if self._single is not None:
            return Within(self._single, self._single)
        return Within(*self._ends(int(np.searchsorted(self._counted, rank, side="left"))))

    @property
    def _single(self) -> float | None:
        """The value where it is but one; NaN where nothing but the extremes is known."""
        if self.solved and self.lowest == self.highest:
            return self.lowest
        return None if self.solved and self.scale.half else NAN

    @cached_property
    def _counted(self) -> NDArray[np.int64]:
        return np.cumsum(self.bins)

    @cached_property
    def _edges(self) -> Array:
        """The edges of all bins, those beyond the limits included; no board lies outside the extremes."""
        edges = np.concatenate([[-np.inf], self.scale.edges(), [np.inf]])
        return np.asarray(np.clip(edges, self.lowest, self.highest), dtype=np.float64)

    def _ends(self, bin_: int) -> tuple[float, float]:
        return float(self._edges[bin_]), float(self._edges[bin_ + 1])


def summary(tally: Tally, scale: Scale, measure: int, place: int) -> Summary:
    """The summary of a measure and a place of use, by their numbers in the tally."""
    at = measure, place
    return Summary(
        scale=scale, solved=int(tally.solved[at]), total=int(tally.sums[at]), squares=int(tally.squares[at]),
        lowest=float(tally.lowest[at]), highest=float(tally.highest[at]), bins=tally.bins[at],
    )  # fmt: skip
