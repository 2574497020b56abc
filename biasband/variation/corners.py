"""Corners: every combination of limits, and the extremes that lie inside the box.

With V_BE constant and the transistor active, currents and node voltages are monotone in every
contributor, hence extreme at a vertex; that ends where a scenario saturates and never held for
power, swing or temperature. So the box is also searched from several vertices (interior.py), and
what was found inside it is driven to its very end (polish.py).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import NEGATIVE, RIPPLE, Axis, realise
from biasband.variation.evaluation import Measures, Outcome, evaluate
from biasband.variation.family import Family
from biasband.variation.interior import Climbs, search
from biasband.variation.polish import polish

_STARTS_SPLIT_BY = ("gain", "temperature")
"""The axes along which extremes wander: the best vertex on either side of each is a start."""

Sides = Mapping[str, float]
BOTH: Sides = MappingProxyType({})
"""Every measure searched for both of its extremes."""

_EQUAL = 1e-9
"""Extremes that differ relatively by less are the same, found twice."""


@dataclass(frozen=True)
class Extreme:
    """An extreme value [SI], the coordinates and the contributors' values [SI] that give it."""

    value: float
    coordinates: Mapping[str, float]
    at: Mapping[str, float]
    interior: bool


@dataclass(frozen=True)
class Range:
    """The lowest and the highest that a quantity can be within the contributors' limits."""

    low: Extreme
    high: Extreme

    @property
    def interior(self) -> bool:
        """Whether either extreme lies inside the box."""
        return self.low.interior or self.high.interior


@dataclass(frozen=True)
class Corners:
    """All corners of a stage: ranges by measure, how many corners, and in which region they lie.

    `region_at` holds, per region met, the contributors' values [SI] of one corner that lies there.
    """

    ranges: Mapping[str, Range]
    count: int
    regions: Mapping[Region, int]
    region_at: Mapping[Region, Mapping[str, float]]


def corners(stage: Stage, measures: Measures, *, cut_off: float, sides: Sides = BOTH) -> Corners:
    """Evaluate all 2^n corners and search the box from several of them.

    `sides` names measures of which only the lowest (−1) or the highest (+1) is searched for; their other
    end is merely the best of the points that were looked at for the rest.

    Worked case: 12 V, RB 240 k, RC 2.2 k, V_BE 0.7 V, h_FE 30…100: V_CE·I_C is 12.6 and 7.7 mW at
    the corners, 16.4 mW inside. A measure that no corner solves has NaN extremes.
    Source: extreme-value (worst-case) analysis, "common practice".
    """
    return corners_of((stage,), measures, cut_off=cut_off, sides=sides)[0]


def corners_of(
    stages: Sequence[Stage], measures: Measures, *, cut_off: float, sides: Sides = BOTH
) -> tuple[Corners, ...]:
    """The corners of several stages at once, which differ in the values of their resistors only."""
    family = Family.of(stages)
    points = _starting_points(family.box)
    member = np.repeat(np.arange(family.size), len(points))
    x = family.columns(np.tile(points, (family.size, 1)), member)
    outcome = evaluate(family.stage, x, measures, cut_off=cut_off)
    found = search(family, _starts(family, points, measures, outcome, sides), measures, cut_off=cut_off)
    found = polish(family, found, measures, cut_off=cut_off)
    again = evaluate(family.stage, family.columns(found.point, found.member), measures, cut_off=cut_off)
    found = _shared(family, found, again, measures)
    return tuple(
        _corners(stage, family.box, points, measures, _own(outcome, k, len(points)), found.part(rows))
        for k, stage in enumerate(stages)
        for rows in (np.flatnonzero(found.member == k),)
    )


def _corners(
    stage: Stage, box: tuple[Axis, ...], points: Array, measures: Measures, outcome: Outcome, found: Climbs
) -> Corners:
    """The corners of one stage, from its own outcome at the starting points and its own climbs."""
    count = 2 ** len(box)
    regions = outcome.region[:count]
    present = [Region(code) for code in np.unique(regions)]
    return Corners(
        ranges=_ranges(stage, box, measures, found),
        count=count,
        regions={region: int(np.sum(regions == region)) for region in present},
        region_at={r: values_at(stage, _point(box, points[np.argmax(regions == r)])) for r in present},
    )


def _own(outcome: Outcome, member: int, count: int) -> Outcome:
    """The part of an outcome that belongs to one member of a family."""
    rows = slice(member * count, (member + 1) * count)
    low = {name: values[rows] for name, values in outcome.low.items()}
    high = {name: values[rows] for name, values in outcome.high.items()}
    return Outcome(low, high, outcome.region[rows])


def values_at(stage: Stage, coordinates: Mapping[str, float]) -> dict[str, float]:
    """Every contributor's value in SI at these coordinates (formats: `low_at`)."""
    values = realise(stage, coordinates).named()
    absent = {NEGATIVE} if stage.negative_supply is None else set()
    return {name: float(value) for name, value in values.items() if name not in absent}


def vertices(box: tuple[Axis, ...]) -> Array:
    """All combinations of the limits of K axes, in coordinates, shape (2^K, K)."""
    if not box:
        return np.zeros((1, 0))
    sides = np.indices((2,) * len(box)).reshape(len(box), -1).T
    return np.asarray(2.0 * sides - 1.0, dtype=np.float64)


def _starting_points(box: tuple[Axis, ...]) -> Array:
    """All vertices, and the middle of the box; ripple is there at its peak or not at all."""
    limits = vertices(box)
    middle = [-1.0 if axis.name == RIPPLE else axis.nominal for axis in box]
    return np.vstack([limits, [middle]]) if box else limits


def _point(box: tuple[Axis, ...], row: Array) -> dict[str, float]:
    return {axis.name: float(value) for axis, value in zip(box, row, strict=True)}


def _starts(family: Family, points: Array, measures: Measures, outcome: Outcome, sides: Sides) -> Climbs:
    """For each member and measure, downward and upward: the best vertices first, then the middle."""
    climbs: list[_Climb] = []
    for member in range(family.size):
        own = _own(outcome, member, len(points))
        for k, name in enumerate(measures):
            for side, values in ((-1.0, own.low[name]), (1.0, own.high[name])):
                if sides.get(name, side) != side:
                    continue
                scored = np.where(np.isnan(values), -np.inf, side * values)
                starts = [*_best_vertices(family.box, points, scored), len(points) - 1]
                climbs += [(member, k, side, row, scored[row]) for row in starts]
    return _climbs(climbs, points)


_Climb = tuple[int, int, float, int, float]
"""A climb as it is collected: member, measure, sign, row of its point, score."""


def _climbs(collected: Sequence[_Climb], points: Array) -> Climbs:
    member, measure, sign, row, score = np.array(collected, dtype=float).reshape(-1, 5).T
    at = points[row.astype(np.intp)]
    return Climbs(member.astype(np.intp), measure.astype(np.intp), sign, at, score)


def _best_vertices(box: tuple[Axis, ...], points: Array, scored: Array) -> list[int]:
    """The best vertex, and the best on either side of the axes along which extremes wander."""
    best = int(np.argmax(scored[: 2 ** len(box)]))
    others = {
        int(np.argmax(np.where(points[:, k] == side, scored, -np.inf)))
        for k, axis in enumerate(box)
        if axis.name in _STARTS_SPLIT_BY
        for side in (-1.0, 1.0)
    }
    return [best, *sorted(others - {best})]


def _shared(family: Family, found: Climbs, outcome: Outcome, measures: Measures) -> Climbs:
    """The climbs, and for each member and measure either way the best point that others climbed to."""
    more: list[_Climb] = []
    for member in range(family.size):
        own = np.flatnonzero(found.member == member)
        for k, name in enumerate(measures):
            for side, values in ((-1.0, outcome.low[name]), (1.0, outcome.high[name])):
                scored = np.where(np.isnan(values[own]), -np.inf, side * values[own])
                best = int(np.argmax(scored))
                more.append((member, k, side, int(own[best]), scored[best]))
    return found.joined(_climbs(more, found.point))


def _ranges(stage: Stage, box: tuple[Axis, ...], measures: Measures, found: Climbs) -> dict[str, Range]:
    """The best climb of each measure either way; of equals the earlier start wins."""
    ranges = {}
    for k, name in enumerate(measures):
        low, high = (
            _extreme(stage, box, found.part(np.flatnonzero((found.measure == k) & (found.sign == side))))
            for side in (-1.0, 1.0)
        )
        ranges[name] = Range(low, high)
    return ranges


def _extreme(stage: Stage, box: tuple[Axis, ...], climbs: Climbs) -> Extreme:
    top = float(np.max(climbs.score))
    winner = int(np.argmax(climbs.score >= top - _EQUAL * abs(top)))
    coordinates = _point(box, climbs.point[winner])
    interior = any(abs(x) < 1.0 for x in coordinates.values())
    value = climbs.sign[winner] * climbs.score[winner] if np.isfinite(top) else np.nan
    return Extreme(float(value), coordinates, values_at(stage, coordinates), interior)
