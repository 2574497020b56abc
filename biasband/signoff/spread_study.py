"""What is known of a stage from its sampled boards, and what it rests on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

from biasband.boards.estimates import Estimates
from biasband.boards.in_use import PLACES
from biasband.boards.intervals import NOWHERE, Between, yield_bound, yield_interval
from biasband.boards.job import Job, merged
from biasband.boards.outside import Outside
from biasband.boards.streams import Plain
from biasband.boards.summary import NAN, Summary, summary
from biasband.boards.tally import Tally
from biasband.boards.variance import VarianceCauses
from biasband.margins.holding import nominal
from biasband.margins.limits import HeldLimit
from biasband.signoff.beyond import Beyond
from biasband.signoff.goals import Goal
from biasband.signoff.sampling_run import Ending
from biasband.signoff.warnings import spread_warnings
from biasband.values.choosing import Design
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners
from biasband.variation.rss import Interval

if TYPE_CHECKING:
    import pandas as pd

Sampling = Literal["plain", "quasi-random"]


@dataclass(frozen=True)
class Held:
    """How many boards hold a limit, or all of them: the share of boards that hold it at every point of use.

    `interval` is two-sided 95 %, `bound` the one-sided lower one that a yield is judged by, both NaN for
    quasi-random boards. `time` is the share of moments in use, of all boards, in which it is held.
    """

    boards: float
    interval: Between
    bound: float
    time: float


@dataclass(frozen=True)
class SpreadStudy:
    """The sampled boards of a stage: what was asked, what came out, and what it means.

    `yields` are those of `limits`, one by one. `tallies` holds one of all boards, for quasi-random
    boards one of each scrambling.
    """

    design: Design
    job: Job
    asked: int
    goal: Goal | None
    ending: Ending
    tallies: tuple[Tally, ...]
    estimates: Mapping[str, Estimates]
    limits: tuple[HeldLimit, ...]
    corners: Corners
    outside: tuple[Outside, ...]
    rss: Mapping[str, Interval]
    causes: Mapping[str, Causes]
    shares: Mapping[str, VarianceCauses]
    beyond: tuple[Beyond, ...]

    @property
    def warnings(self) -> tuple[str, ...]:
        """Every warning, those about the design first."""
        middle = nominal(self.job.stage).values
        return spread_warnings(self.design, middle, self.corners, self.outside)

    @property
    def sampling(self) -> Sampling:
        """Where the boards came from."""
        return "plain" if isinstance(self.job.source, Plain) else "quasi-random"

    @cached_property
    def total(self) -> Tally:
        """The tally of all boards."""
        return merged(iter(self.tallies))

    @property
    def boards(self) -> int:
        """How many boards were sampled."""
        return self.total.boards

    @property
    def boards_per_batch(self) -> int:
        """How many boards share a batch; 1 where nothing does."""
        return self.job.source.batch_size if isinstance(self.job.source, Plain) else 1

    @property
    def yields(self) -> tuple[Held, ...]:
        """How many boards hold each limit."""
        return tuple(map(self._held, range(len(self.limits))))

    @property
    def joint_yield(self) -> Held:
        """How many boards hold every limit."""
        return self._held(-1)

    def _held(self, row: int) -> Held:
        always, moments = (int(count) for count in self.total.held[row])
        batch = self.boards_per_batch
        plain = self.sampling == "plain"
        return Held(
            boards=always / self.boards,
            interval=yield_interval(always, self.boards, boards_per_batch=batch) if plain else NOWHERE,
            bound=yield_bound(always, self.boards, boards_per_batch=batch) if plain else NAN,
            time=moments / self.boards,
        )

    @property
    def inside_rss(self) -> Mapping[str, float]:
        """The share of boards inside RSS at every point of use, by measure with a requirement."""
        counts = self.total.held[len(self.limits) : -1, 0]
        names = [bound.measure for bound in self.job.bounds if not bound.required]
        return {name: int(count) / self.boards for name, count in zip(names, counts, strict=True)}

    def summary(self, measure: str, place: str) -> Summary:
        """What was counted of one measure at one place of use, a histogram among it."""
        scales = self.job.scales
        return summary(self.total, scales[measure], list(scales).index(measure), PLACES.index(place))

    @property
    def table(self) -> pd.DataFrame:
        """A row per quantity and place: mean, deviation and quantiles, with their intervals [SI]."""
        from biasband.signoff.frames import estimates_frame

        return estimates_frame(self.estimates)
