"""Estimates: the figures of a run, each with the interval that is right for where its boards came from.

Order statistics and Student's t for plain boards, Student's t over the scramblings for quasi-random
ones; never mixed.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import reduce

from biasband.boards.in_use import PLACES
from biasband.boards.intervals import Between, mean_interval, over_scramblings, quantile_ranks
from biasband.boards.sampling import QUANTILES
from biasband.boards.summary import NAN, Summary, summary
from biasband.boards.tally import Scale, Tally


@dataclass(frozen=True)
class Estimate:
    """A figure [SI] and its 95 % interval, NaN where there is none on a side."""

    value: float
    interval: Between

    def named(self, name: str) -> dict[str, float]:
        """The figure under a name, and the ends of its interval beside it."""
        return {name: self.value, f"{name}_low": self.interval.low, f"{name}_high": self.interval.high}


@dataclass(frozen=True)
class Figures:
    """What a run shows of one measure at one place of use [SI], over the boards that solved there.

    `quantiles` holds those of every report by their share; `resolution` is how far a quantile may be off
    since it was counted in bins.
    """

    mean: Estimate
    sd: float
    quantiles: Mapping[float, Estimate]
    lowest: float
    highest: float
    resolution: float


@dataclass(frozen=True)
class Estimates:
    """A measure over all boards: at nominal use, and the lowest and highest each board meets in use."""

    nominal_use: Figures
    lowest_in_use: Figures
    highest_in_use: Figures


def from_plain(
    total: Tally, scales: Mapping[str, Scale], *, boards_per_batch: int = 1
) -> Mapping[str, Estimates]:
    """The figures of random boards, by measure; boards of one batch count as one."""
    return _by_measure(scales, lambda at: _plain(_summary(total, scales, at), boards_per_batch))


def from_scramblings(tallies: Sequence[Tally], scales: Mapping[str, Scale]) -> Mapping[str, Estimates]:
    """The figures of quasi-random boards, by measure, from the tally of each scrambling."""
    total = reduce(Tally.merged, tallies)
    return _by_measure(
        scales,
        lambda at: _scrambled([_summary(t, scales, at) for t in tallies], _summary(total, scales, at)),
    )


_At = tuple[str, int]
"""A measure by its name, a place of use by its number."""


def _by_measure(scales: Mapping[str, Scale], figures: Callable[[_At], Figures]) -> Mapping[str, Estimates]:
    return {name: Estimates(*(figures((name, place)) for place in range(len(PLACES)))) for name in scales}


def _summary(of: Tally, scales: Mapping[str, Scale], at: _At) -> Summary:
    name, place = at
    return summary(of, scales[name], list(scales).index(name), place)


def _plain(found: Summary, boards_per_batch: int) -> Figures:
    batch, solved = boards_per_batch, found.solved
    mean, sd = found.mean, found.sd

    def quantile(share: float) -> Estimate:
        ranks = quantile_ranks(solved, share, boards_per_batch=batch)
        low = NAN if ranks.low is None else found.at_rank(ranks.low).low
        high = NAN if ranks.high is None else found.at_rank(ranks.high).high
        return Estimate(found.quantile(share), Between(low, high))

    around = mean_interval(mean, sd, solved, boards_per_batch=batch)
    return _figures(found, Estimate(mean, around), {share: quantile(share) for share in QUANTILES})


def _scrambled(each: Sequence[Summary], total: Summary) -> Figures:
    def over(values: Sequence[float]) -> Estimate:
        return Estimate(sum(values) / len(values), over_scramblings(values))

    quantiles = {share: over([found.quantile(share) for found in each]) for share in QUANTILES}
    return _figures(total, over([found.mean for found in each]), quantiles)


def _figures(found: Summary, mean: Estimate, quantiles: Mapping[float, Estimate]) -> Figures:
    return Figures(mean, found.sd, quantiles, found.lowest, found.highest, found.scale.bin_width)
