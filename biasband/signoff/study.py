"""The whole story: design what is missing, vary what varies, hold it against its limits, judge.

This is the room that the Python API and the commands call; each function is one analysis.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import Quantity, vocabulary
from biasband.circuit.reading import Reading, read
from biasband.constants import BOARDS, MOST_BOARDS
from biasband.errors import UsageError
from biasband.files.series_files import load_all, load_series
from biasband.margins.checks import Standing, check_margins, standing_checks
from biasband.margins.records import Evidence, Margin
from biasband.margins.requirements import joint_yield, requirement_margins
from biasband.margins.verdict import Verdict, judge
from biasband.parts.series import Snap, nearest
from biasband.signoff.warnings import warnings_of
from biasband.stage import Stage
from biasband.values.choosing import Design, choose
from biasband.variation import causes as causing
from biasband.variation import corners as cornering
from biasband.variation import rss as summing
from biasband.variation import sampling
from biasband.variation.contributors import realise, use_axes
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import PointOfUse, points_of_use

if TYPE_CHECKING:
    import pandas as pd

_INTERIOR_DIGITS = 2
"""Interior points of use closer than this in every coordinate are one point."""


@dataclass(frozen=True)
class Nominal:
    """The nominal point: every quantity [SI] by name, and the region it stands in."""

    values: Mapping[str, float]
    region: Region


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

    @property
    def quantities(self) -> Mapping[str, Quantity]:
        """The vocabulary of this stage, by name."""
        return words(self.stage)

    @property
    def spread(self) -> Mapping[str, sampling.Spread]:
        """The sampled spread of every quantity."""
        return self.evidence.boards.spread

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


@dataclass(frozen=True)
class SpreadStudy:
    """The sampled boards of a stage, and the design they were drawn for."""

    design: Design
    boards: sampling.Boards

    @property
    def table(self) -> pd.DataFrame:
        """A row per quantity and place: mean, deviation and quantiles [SI]."""
        from biasband.signoff.frames import spread_frame

        return spread_frame(self.boards.spread)


def words(stage: Stage) -> Mapping[str, Quantity]:
    """The vocabulary of a stage."""
    return vocabulary(tuple(resistor.name for resistor in stage.resistors))


def design(stage: Stage) -> Design:
    """Design the resistors that have no value and snap them to their series.

    Raises PhysicallyImpossible where no positive resistors meet the target.
    """
    return choose(stage, load_all())


def snap(value: float, *, series: str = "E24") -> Snap:
    """Find the preferred values around a resistance [Ω] in a series, the nearest by ratio.

    Raises UsageError for a value that is no positive number, or an unknown series.
    """
    return nearest(load_series(series), value)


def nominal(stage: Stage) -> Nominal:
    """Solve a stage, every resistor valued, with every contributor at its nominal value."""
    reading = read(stage, realise(stage, {}))
    with np.errstate(all="ignore"):
        values = {name: _first(quantity.read(reading)) for name, quantity in words(stage).items()}
    return Nominal(values, _region(stage, reading))


def _first(values: object) -> float:
    return float(np.ravel(np.asarray(values))[0])


def _region(stage: Stage, reading: Reading) -> Region:
    return Region(int(reading.regions(cut_off_current(stage))[0]))


def corners(stage: Stage) -> CornerStudy:
    """Evaluate every quantity at all corners of a stage, its missing values designed first.

    Raises PhysicallyImpossible where the target cannot be met.
    """
    chosen = design(stage)
    stage = chosen.stage
    return CornerStudy(chosen, cornering.corners(stage, words(stage), cut_off=cut_off_current(stage)))


def spread(stage: Stage, *, boards: int = BOARDS, seed: int = 1) -> SpreadStudy:
    """Sample boards of a stage, its missing values designed first, at every point of use.

    The points of use are nominal use and the limits; a review adds those where its corner search
    found an extreme inside. Raises UsageError for a number of boards or a seed that cannot be sampled
    with, PhysicallyImpossible where the target cannot be met.
    """
    check_sampling(boards, seed)
    chosen = design(stage)
    stage, points, cut_off = chosen.stage, points_of_use(chosen.stage), cut_off_current(chosen.stage)
    drawn = sampling.sample(stage, words(stage), points, boards=boards, seed=seed, cut_off=cut_off)
    return SpreadStudy(chosen, drawn)


def check_sampling(boards: int, seed: int) -> None:
    """Refuse numbers of boards and seeds that cannot be sampled with.

    Raises UsageError for anything but a whole number of boards from 1 to 2^22 and a seed from 0.
    """
    for name, number in (("boards", boards), ("seed", seed)):
        if not isinstance(number, int) or isinstance(number, bool):
            raise UsageError(f"{name}: a whole number; read {number!r}")
    if not 1 <= boards <= MOST_BOARDS:
        raise UsageError(f"boards: from 1 to {MOST_BOARDS}; read {boards}")
    if seed < 0:
        raise UsageError(f"seed: a whole number from 0; read {seed}")


def review(stage: Stage, *, boards: int = BOARDS, seed: int = 1) -> Review:
    """Review a stage: design what is missing, run the three methods, judge.

    Raises UsageError for a number of boards or a seed that cannot be sampled with, PhysicallyImpossible
    where the target cannot be met.
    """
    check_sampling(boards, seed)
    chosen = design(stage)
    stage, cut_off = chosen.stage, cut_off_current(chosen.stage)
    middle, standing = nominal(stage), standing_checks(stage, cut_off=cut_off)
    evidence = _evidence(stage, middle, standing, boards=boards, seed=seed, cut_off=cut_off)
    required = requirement_margins(stage.requirements, words(stage), evidence)
    checked = check_margins(stage, standing.made, evidence)
    rows = tuple(sorted((*required, *checked), key=_by_margin))
    return Review(
        stage=stage,
        design=chosen,
        nominal=middle,
        evidence=evidence,
        rows=rows,
        standing=standing,
        verdict=judge(stage, middle.region, rows, standing, evidence),
        warnings=warnings_of(chosen, middle.values, evidence),
        joint_yield=joint_yield(stage.requirements, words(stage), evidence),
    )


def _evidence(
    stage: Stage, middle: Nominal, standing: Standing, *, boards: int, seed: int, cut_off: float
) -> Evidence:
    """Run the three methods and ask for the causes."""
    measures = words(stage)
    found = cornering.corners(stage, {**measures, **standing.measures}, cut_off=cut_off)
    points = (*points_of_use(stage), *_interior_points(stage, found, measures))
    return Evidence(
        nominal=middle.values,
        corners=found,
        rss=summing.rss(stage, measures, cut_off=cut_off),
        boards=sampling.sample(stage, measures, points, boards=boards, seed=seed, cut_off=cut_off),
        causes=causing.causes(stage, found.ranges, {**measures, **standing.measures}, cut_off=cut_off),
    )


def _interior_points(
    stage: Stage, found: cornering.Corners, measures: Mapping[str, Quantity]
) -> tuple[PointOfUse, ...]:
    """The in-use coordinates of interior extremes: points that boards must be solved at too."""
    inside = {axis.name for axis in use_axes(stage)}
    extremes = [extreme for name in measures for extreme in _ends(found.ranges[name]) if extreme.interior]
    places = [{name: x for name, x in e.coordinates.items() if name in inside} for e in extremes]
    within = [place for place in places if any(abs(x) < 1.0 for x in place.values())]
    unique = {tuple(round(x, _INTERIOR_DIGITS) for x in place.values()): place for place in within}
    return tuple(PointOfUse(place) for place in unique.values())


def _ends(found: cornering.Range) -> tuple[cornering.Extreme, cornering.Extreme]:
    return found.low, found.high


def _by_margin(row: Margin) -> float:
    """Sort key: the smallest margin share first; a nominal value beyond its limit before all."""
    share = row.margin_share
    return -np.inf if share is None or np.isnan(share) else share
