"""Monte Carlo: boards drawn at random, each solved at every point of use.

A board holds a requirement when it holds it at all points, so the yield is the share of boards
that hold it everywhere. The result is the same bytes for any chunk size.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from biasband.boards.draws import batch_size, coordinates
from biasband.boards.in_use import in_use
from biasband.boards.outside import Farthest
from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array, chunks
from biasband.stage import Stage
from biasband.variation.evaluation import Measures
from biasband.variation.points_of_use import PointOfUse

CHUNK = 16384
"""Boards evaluated in one go; a multiple of four, the doubles that one step of the counter gives."""

QUANTILES = (0.00135, 0.5, 0.99865)
"""The quantiles of every report: ±3σ of a normal distribution, and the median."""


@dataclass(frozen=True)
class Sample:
    """One figure per board [SI], shape (N,); NaN for a board that did not solve."""

    values: Array

    @cached_property
    def _solved(self) -> Array:
        return np.sort(self.values[~np.isnan(self.values)])

    @property
    def lowest(self) -> float:
        """The lowest of all solved boards; NaN where there is none."""
        return float(np.fmin.reduce(self.values))

    @property
    def highest(self) -> float:
        """The highest of all solved boards; NaN where there is none."""
        return float(np.fmax.reduce(self.values))

    @property
    def mean(self) -> float:
        """The mean over solved boards; NaN where there is none."""
        return float(np.mean(self._solved)) if self._solved.size else float("nan")

    @property
    def sd(self) -> float:
        """The standard deviation over solved boards, with N − 1; NaN for fewer than two."""
        return float(np.std(self._solved, ddof=1)) if self._solved.size > 1 else float("nan")

    def quantile(self, share: float) -> float:
        """The value that this share of solved boards does not exceed, interpolated linearly."""
        return float(np.quantile(self._solved, share)) if self._solved.size else float("nan")


@dataclass(frozen=True)
class Spread:
    """A quantity over all boards: at nominal use, and the lowest and highest each meets in use."""

    nominal_use: Sample
    lowest_in_use: Sample
    highest_in_use: Sample

    def inside(self, low: float, high: float) -> float:
        """The share of all boards that stay between two limits at every point of use."""
        held = (self.lowest_in_use.values >= low) & (self.highest_in_use.values <= high)
        return float(np.mean(held))


@dataclass(frozen=True)
class Boards:
    """The sampled boards: the spread of every measure, and scenarios counted by region.

    Boards of one batch are dependent, so what they show counts in batches of `boards_per_batch`.
    """

    spread: Mapping[str, Spread]
    boards: int
    seed: int
    points: int
    regions: Mapping[Region, int]
    boards_per_batch: int = 1

    @property
    def farthest(self) -> Mapping[str, Farthest]:
        """The lowest and the highest of all boards, by measure; none where no board solved."""
        return {
            name: Farthest(low.lowest, high.highest, _first(low, low.lowest), _first(high, high.highest))
            for name, low, high in ((n, s.lowest_in_use, s.highest_in_use) for n, s in self.spread.items())
            if not (np.isnan(low.lowest) or np.isnan(high.highest))
        }

    @property
    def batches(self) -> int:
        """How many batches the boards come from, the last of which may be a part of one."""
        return -(-self.boards // self.boards_per_batch)


def _first(sample: Sample, value: float) -> int:
    """The number of the first board with a value."""
    return int(np.argmax(sample.values == value))


def sample(
    stage: Stage,
    measures: Measures,
    points: Sequence[PointOfUse],
    *,
    boards: int,
    seed: int,
    cut_off: float,
) -> Boards:
    """Draw boards and solve each at every point of use, nominal use first."""
    values = {name: np.empty((3, boards)) for name in measures}
    regions = np.zeros(len(Region), dtype=np.int64)
    for rows in chunks(boards, CHUNK):
        found = in_use(stage, coordinates(stage, rows, seed=seed), measures, points, cut_off=cut_off)
        regions += found.regions
        for name, kept in values.items():
            kept[:, rows] = found.values[name]
    spread = {name: Spread(*(Sample(row) for row in kept)) for name, kept in values.items()}
    counted = {region: int(regions[region]) for region in Region if regions[region]}
    return Boards(spread, boards, seed, len(points), counted, batch_size(stage))
