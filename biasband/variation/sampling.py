"""Monte Carlo: boards drawn at random, each solved at every point of use.

A board holds a requirement when it holds it at all points, so the yield is the share of boards
that hold it everywhere. The result is the same bytes for any chunk size.
"""

from __future__ import annotations

import functools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array, chunks
from biasband.stage import Stage
from biasband.variation.draws import batch_size, coordinates
from biasband.variation.evaluation import Measures
from biasband.variation.in_use import in_use
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
    def batches(self) -> int:
        """How many batches the boards come from, the last of which may be a part of one."""
        return -(-self.boards // self.boards_per_batch)


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


def yield_bound(held: int, boards: int, *, boards_per_batch: int = 1, confidence: float = 0.95) -> float:
    """The one-sided lower Clopper–Pearson bound of a yield: `held` of `boards` passed.

    Boards of one batch are dependent, at worst all alike, so both counts are divided by the boards
    of a batch: B = N/n batches, of which k/n failed. The beta quantile takes such fractions. That is
    exact where the boards of a batch are all alike and conservative where they are not (a design
    effect of n, the largest there is; Kish, "Survey Sampling", 1965, memory).
    Source: Clopper & Pearson, "The use of confidence or fiducial limits", Biometrika 26 (1934).
    """
    from scipy.special import betaincinv

    if held == 0:
        return 0.0
    failed = (boards - held) / boards_per_batch
    return float(betaincinv(held / boards_per_batch, failed + 1.0, 1.0 - confidence))


@functools.cache
def allowed_failures(
    boards: int, required: float, *, boards_per_batch: int = 1, confidence: float = 0.95
) -> int:
    """How many boards may fail while the bound still reaches the required yield; −1: not even none."""
    from scipy.special import betainc

    # The bound with f failures reaches `required` when P(X >= held) at that yield is at most 1 - confidence.
    failures = np.arange(boards)
    held = (boards - failures) / boards_per_batch
    reaches = betainc(held, failures / boards_per_batch + 1.0, required) <= 1.0 - confidence
    return int(np.sum(np.cumprod(reaches))) - 1
