"""Goals: what a run of boards is to know before it stops."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from biasband.boards.in_use import PLACES
from biasband.boards.job import Job
from biasband.boards.sampling import QUANTILES
from biasband.boards.stopping import SequenceFigures, least_sequence, narrow, stable
from biasband.boards.summary import summary
from biasband.boards.tally import Tally
from biasband.circuit.scenarios import Array
from biasband.errors import QuantityError, UsageError
from biasband.quantity import Kind, parse

FEWEST_SEQUENCES = 4
"""Two would do by the standard, but so few are steady by luck in one run of four (measured)."""

_ALLOWED = 'allowed: "yield ± 0.1 %" (the joint yield), "1 digit" or "2 digits" (of every standard deviation)'


class Goal(Protocol):
    """What a run is to know; it is asked after every sequence of boards."""

    @property
    def text(self) -> str:
        """As it was asked for."""

    def met(self, job: Job, total: Tally, sequence: Tally) -> bool:
        """Whether it is known by now, from all boards so far and the last sequence of them."""


@dataclass(frozen=True)
class YieldGoal:
    """The joint yield is to be known to ± `half_width`, by its two-sided 95 % interval."""

    text: str
    half_width: float
    boards_per_batch: int = 1

    def met(self, job: Job, total: Tally, sequence: Tally) -> bool:
        """Whether the interval is narrow enough."""
        held = int(total.held[-1, 0])
        return narrow(held, total.boards, self.half_width, boards_per_batch=self.boards_per_batch)


@dataclass(frozen=True)
class DigitsGoal:
    """Means, deviations and outer quantiles are to be steady to digits of the deviation (JCGM 101, 7.9.4).

    Of what requirements are about, at all places of use; of every measure where there are no requirements.
    """

    text: str
    digits: int
    seen: list[Array] = field(default_factory=list)

    def met(self, job: Job, total: Tally, sequence: Tally) -> bool:
        """Whether one more sequence would no longer change the digits."""
        if sequence.boards < least_sequence(QUANTILES[-1] - QUANTILES[0]):
            return False
        self.seen.append(_figures(job, sequence))
        if len(self.seen) < FEWEST_SEQUENCES:
            return False
        figures = SequenceFigures(*np.stack(self.seen, axis=1))
        return stable(figures, _figures(job, total)[1], digits=self.digits).all


def _figures(job: Job, of: Tally) -> Array:
    """Mean, deviation and the outer quantiles of what counts, shape (4, Q)."""
    wanted = {bound.measure for bound in job.bounds} or set(job.scales)
    found = [
        summary(of, scale, row, place)
        for row, (name, scale) in enumerate(job.scales.items())
        for place in range(len(PLACES))
        if name in wanted
    ]
    ends = (QUANTILES[0], QUANTILES[-1])
    return np.array([[each.mean, each.sd, *map(each.quantile, ends)] for each in found]).T


def read_goal(text: str, *, boards_per_batch: int = 1) -> Goal:
    """Read what stands behind --until.

    Raises UsageError for anything but a joint yield with its ±, or one or two digits.
    """
    tidy = " ".join(text.split())
    if found := re.fullmatch(r"yield ?(?:±|\+/-) ?(.+%)", tidy):
        return YieldGoal(tidy, _half_width(text, found.group(1)), boards_per_batch)
    if found := re.fullmatch(r"([12]) ?digits?", tidy):
        if boards_per_batch > 1:
            raise UsageError("--until: digits need independent boards, not batches: ask for a yield")
        return DigitsGoal(tidy, int(found.group(1)))
    raise UsageError(f"--until: read {text!r}; {_ALLOWED}")


def _half_width(text: str, share: str) -> float:
    try:
        half_width = parse(share, Kind.RATIO)
    except QuantityError as error:
        raise UsageError(f"--until: {error}") from None
    if not 0.0 < half_width < 0.5:
        raise UsageError(f"--until: the yield's ± is above 0 and below 50 %; read {text!r}")
    return half_width
