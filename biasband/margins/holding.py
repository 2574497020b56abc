"""Holds a stage against its limits: gathers what the three methods find and makes the rows of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from biasband.boards import sampling
from biasband.boards.draws import coordinates
from biasband.boards.outside import extended
from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import Quantity, clips_first, words
from biasband.circuit.reading import read
from biasband.margins.checks import Standing, check_margins, standing_checks
from biasband.margins.records import Evidence, Margin
from biasband.margins.requirements import requirement_margins
from biasband.stage import Stage
from biasband.variation import causes as causing
from biasband.variation import corners as cornering
from biasband.variation import rss as summing
from biasband.variation.contributors import realise, use_axes
from biasband.variation.corners import BOTH, Sides
from biasband.variation.evaluation import Measures, cut_off_current
from biasband.variation.points_of_use import PointOfUse, points_of_use

_INTERIOR_DIGITS = 2
"""Interior points of use closer than this in every coordinate are one point."""


@dataclass(frozen=True)
class Nominal:
    """The nominal point: every quantity [SI] by name, and the region it stands in."""

    values: Mapping[str, float]
    region: Region


@dataclass(frozen=True)
class Holding:
    """A stage held against its limits; `rows` are requirements and checks, the smallest margin first."""

    nominal: Nominal
    standing: Standing
    evidence: Evidence
    rows: tuple[Margin, ...]


def looked_into(stage: Stage) -> Mapping[str, Quantity]:
    """What a review finds the spread of: the vocabulary of a stage, what is costly only where required."""
    required = {requirement.quantity for requirement in stage.requirements}
    rows = words(stage).items()
    return {name: quantity for name, quantity in rows if name in required or not quantity.costly}


def nominal(stage: Stage, measures: Measures | None = None) -> Nominal:
    """Solve a stage, every resistor valued, with every contributor at its nominal value.

    Without `measures`, the whole vocabulary is read.
    """
    reading, wanted = read(stage, realise(stage, {})), words(stage) if measures is None else measures
    with np.errstate(all="ignore"):
        values = {name: _first(measure.read(reading)) for name, measure in wanted.items()}
    region = Region(int(reading.regions(cut_off_current(stage))[0]))
    return Nominal(values, region)


def hold(
    stage: Stage,
    measures: Measures,
    *,
    boards: int,
    seed: int,
    sides: Sides = BOTH,
    found: cornering.Corners | None = None,
) -> Holding:
    """Hold a stage, every resistor valued, against its requirements and the standing checks.

    `measures` are the quantities to find the spread of, those of the requirements among them; `sides`
    names those of which one side alone is wanted. `found` are corners of the same stage, with these measures
    and the standing checks, where they are known already.
    """
    if found is not None:
        cut_off = cut_off_current(stage)
        standing = standing_checks(stage, cut_off=cut_off)
        wanted = {name: found.ranges[name] for name in (*measures, *standing.measures)}
        known = replace(found, ranges=wanted)
        return _held(stage, measures, standing, known, cut_off=cut_off, boards=boards, seed=seed)
    return hold_all((stage,), measures, boards=boards, seed=seed, sides=sides)[0]


def hold_all(
    stages: Sequence[Stage], measures: Measures, *, boards: int, seed: int, sides: Sides = BOTH
) -> tuple[Holding, ...]:
    """Hold several stages, which differ in the values of their resistors only; quicker than one by one."""
    first, cut_off = stages[0], cut_off_current(stages[0])
    standing = standing_checks(first, cut_off=cut_off)
    checked = {**measures, **standing.measures}
    lowest = dict.fromkeys(standing.measures, -1.0)
    found = cornering.corners_of(stages, checked, cut_off=cut_off, sides={**sides, **lowest})
    return tuple(
        _held(stage, measures, standing, each, cut_off=cut_off, boards=boards, seed=seed)
        for stage, each in zip(stages, found, strict=True)
    )


def _held(
    stage: Stage,
    measures: Measures,
    standing: Standing,
    found: cornering.Corners,
    *,
    cut_off: float,
    boards: int,
    seed: int,
) -> Holding:
    middle, points = nominal(stage, measures), points_met(stage, found, measures)
    sampled = sampling.sample(stage, measures, points, boards=boards, seed=seed, cut_off=cut_off)
    wide = extended(
        stage, found, measures, points, sampled.farthest,
        lambda board: coordinates(stage, slice(board, board + 1), seed=seed), cut_off=cut_off,
    )  # fmt: skip
    ranges, everything = wide.corners.ranges, {**measures, **standing.measures}
    evidence = Evidence(
        nominal=middle.values,
        corners=wide.corners,
        rss=summing.rss(stage, measures, cut_off=cut_off, points=points),
        boards=sampled,
        causes=causing.causes(stage, ranges, everything, cut_off=cut_off),
        outside=wide.outside,
    )
    required = [
        _clipping_noted(stage, row) for row in requirement_margins(stage.requirements, measures, evidence)
    ]
    rows = (*required, *check_margins(stage, standing.made, evidence))
    return Holding(middle, standing, evidence, tuple(sorted(rows, key=smallness)))


def _clipping_noted(stage: Stage, row: Margin) -> Margin:
    """A row about a swing says what it clips at first where it is smallest."""
    if row.quantity != "symmetric_peak_swing" or np.isnan(row.worst.value):
        return row
    first = clips_first(read(stage, realise(stage, row.worst.coordinates)))
    return replace(row, notes=(f"clips at {first} first there", *row.notes))


def smallness(row: Margin) -> float:
    """Sort key: the smallest margin share first; a nominal value beyond its limit before all."""
    share = row.margin_share
    return -np.inf if share is None or np.isnan(share) else share


def _first(values: object) -> float:
    return float(np.ravel(np.asarray(values))[0])


def points_met(stage: Stage, found: cornering.Corners, measures: Measures) -> tuple[PointOfUse, ...]:
    """Where every board is solved: the points of use, and those where a corner search ended inside."""
    return (*points_of_use(stage), *_interior_points(stage, found, measures))


def _interior_points(stage: Stage, found: cornering.Corners, measures: Measures) -> tuple[PointOfUse, ...]:
    """The in-use coordinates of interior extremes: points that boards must be solved at too."""
    inside = {axis.name for axis in use_axes(stage)}
    ranges = (found.ranges[name] for name in measures)
    extremes = [extreme for each in ranges for extreme in (each.low, each.high) if extreme.interior]
    places = [{name: x for name, x in e.coordinates.items() if name in inside} for e in extremes]
    within = [place for place in places if any(abs(x) < 1.0 for x in place.values())]
    unique = {tuple(round(x, _INTERIOR_DIGITS) for x in place.values()): place for place in within}
    return tuple(PointOfUse(place) for place in unique.values())
