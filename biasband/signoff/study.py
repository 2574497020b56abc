"""The whole story: design what is missing, vary what varies, hold it against its limits, judge.

This is the room that the Python API and the commands call; each function is one analysis.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from biasband.boards import sampling
from biasband.boards.tally import Bound
from biasband.circuit.quantities import Quantity, words
from biasband.constants import BOARDS, MOST_BOARDS
from biasband.errors import UsageError
from biasband.files.series_files import load_series
from biasband.margins.checks import Standing
from biasband.margins.holding import Nominal, hold, looked_into, nominal, points_met
from biasband.margins.limits import required_limits
from biasband.margins.records import Evidence, Margin
from biasband.margins.requirements import joint_yield
from biasband.margins.verdict import Verdict, judge
from biasband.parts.series import Snap, nearest
from biasband.signoff.beyond import Beyond, beyond
from biasband.signoff.intake import known_series
from biasband.signoff.parts_list import PartLine, parts_list
from biasband.signoff.warnings import warnings_of
from biasband.stage import Stage
from biasband.values.choosing import Design, choose
from biasband.values.joint import Progress, silent
from biasband.variation import corners as cornering
from biasband.variation.evaluation import cut_off_current

if TYPE_CHECKING:
    import pandas as pd


CHOOSING = 0.7
"""The share of a review's work, as progress counts it, that choosing values is."""


@dataclass(frozen=True)
class Review:
    """A stage reviewed: what was designed, found and judged.

    `stage` has a value for every resistor. `margins` holds requirements and standing checks, the
    smallest margin first.
    """

    stage: Stage
    design: Design
    nominal: Nominal
    evidence: Evidence
    rows: tuple[Margin, ...]
    standing: Standing
    verdict: Verdict
    warnings: tuple[str, ...]
    joint_yield: float
    beyond: tuple[Beyond, ...]

    @property
    def quantities(self) -> Mapping[str, Quantity]:
        """The vocabulary of this stage, by name."""
        return words(self.stage)

    @property
    def looked_into(self) -> Mapping[str, Quantity]:
        """The part of the vocabulary that was followed beyond the nominal point: costly only if required."""
        return looked_into(self.stage)

    @property
    def spread(self) -> Mapping[str, sampling.Spread]:
        """The sampled spread of every quantity looked into."""
        return self.evidence.boards.spread

    @property
    def parts_list(self) -> tuple[PartLine, ...]:
        """The parts to order, equal ones on one line."""
        ranges, names = self.evidence.corners.ranges, [r.name for r in self.stage.resistors]
        return parts_list(self.design, {name: ranges[f"resistor_power.{name}"].high.value for name in names})

    @property
    def margins(self) -> pd.DataFrame:
        """The margin table, a row per limit [SI]."""
        from biasband.signoff.frames import margin_frame

        return margin_frame(self.rows)


@dataclass(frozen=True)
class CornerStudy:
    """The corners of a stage, and the design they were evaluated for."""

    design: Design
    corners: cornering.Corners

    @property
    def table(self) -> pd.DataFrame:
        """A row per quantity: its extremes [SI] and where each lies."""
        from biasband.signoff.frames import corner_frame

        return corner_frame(self.corners)


def design(stage: Stage, *, progress: Progress = silent) -> Design:
    """Design the resistors that have no value and choose from their series.

    `progress` is told the share of the work that is done.

    Raises PhysicallyImpossible where no positive resistors meet the target.
    """
    return choose(stage, known_series(stage), progress=progress)


def snap(value: float, *, series: str = "E24") -> Snap:
    """Find the preferred values around a resistance [Ω] in a series, the nearest by ratio.

    Raises UsageError for a value that is no positive number, or an unknown series.
    """
    return nearest(load_series(series), value)


def corners(stage: Stage, *, progress: Progress = silent) -> CornerStudy:
    """Evaluate every quantity at all corners of a stage, its missing values designed first.

    Raises PhysicallyImpossible where the target cannot be met.
    """
    chosen = design(stage, progress=lambda done: progress(CHOOSING * done))
    stage = chosen.stage
    return CornerStudy(chosen, cornering.corners(stage, looked_into(stage), cut_off=cut_off_current(stage)))


def check_sampling(boards: int, seed: int, *, most: int | None = MOST_BOARDS) -> None:
    """Refuse numbers of boards and seeds that cannot be sampled with.

    Raises UsageError for anything but a whole number of boards from 1 to `most` and a seed from 0.
    """
    for name, number in (("boards", boards), ("seed", seed)):
        if not isinstance(number, int) or isinstance(number, bool):
            raise UsageError(f"{name}: a whole number; read {number!r}")
    if boards < 1 or (most is not None and boards > most):
        allowed = "from 1" if most is None else f"from 1 to {most}"
        raise UsageError(f"boards: {allowed}; read {boards}")
    if seed < 0:
        raise UsageError(f"seed: a whole number from 0; read {seed}")


def review(stage: Stage, *, boards: int = BOARDS, seed: int = 1, progress: Progress = silent) -> Review:
    """Review a stage: design what is missing, run the three methods, judge.

    Raises UsageError for a number of boards or a seed that cannot be sampled with, PhysicallyImpossible
    where the target cannot be met.
    """
    check_sampling(boards, seed)
    chosen = design(stage, progress=lambda done: progress(CHOOSING * done))
    stage = chosen.stage
    middle = nominal(stage)
    held = hold(stage, looked_into(stage), boards=boards, seed=seed)
    return Review(
        stage=stage,
        design=chosen,
        nominal=middle,
        evidence=held.evidence,
        rows=held.rows,
        standing=held.standing,
        verdict=judge(stage, middle.region, held.rows, held.standing, held.evidence),
        warnings=warnings_of(chosen, middle.values, held.evidence),
        joint_yield=joint_yield(stage.requirements, words(stage), held.evidence),
        beyond=_beyond(stage, held.evidence, seed),
    )


def _beyond(stage: Stage, evidence: Evidence, seed: int) -> tuple[Beyond, ...]:
    """What the corners and the drawn boards leave open."""
    limits = required_limits(stage.requirements, words(stage), evidence.nominal)
    failures = [_failures(evidence.boards, limit.as_bound) for limit in limits]
    points = points_met(stage, evidence.corners, looked_into(stage))
    return beyond(
        stage, limits, evidence.corners, points, failures, seed=seed, cut_off=cut_off_current(stage)
    )


def _failures(boards: sampling.Boards, bound: Bound) -> int:
    """How many boards do not hold a bound at every point of use, or did not solve."""
    met = boards.spread[bound.measure]
    holds = bound.holds(met.lowest_in_use.values, met.highest_in_use.values)
    return boards.boards - int(np.count_nonzero(holds))
