"""Corners: every combination of limits, and the extremes that lie inside the box.

With V_BE constant and the transistor active, currents and node voltages are monotone in every
contributor, hence extreme at a vertex; that ends where a scenario saturates and never held for
power, swing or temperature. So the box is also searched from several vertices (interior.py), and
what was found inside it is driven to its very end (polish.py).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import NEGATIVE, RIPPLE, Axis, axes, columns, realise
from biasband.variation.evaluation import Measures, Outcome, evaluate
from biasband.variation.interior import Climbs, search
from biasband.variation.polish import polish

_STARTS_SPLIT_BY = ("gain", "temperature")
"""The axes along which extremes wander: the best vertex on either side of each is a start."""

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


def corners(stage: Stage, measures: Measures, *, cut_off: float) -> Corners:
    """Evaluate all 2^n corners and search the box from several of them.

    Worked case: 12 V, RB 240 k, RC 2.2 k, V_BE 0.7 V, h_FE 30…100: V_CE·I_C is 12.6 and 7.7 mW at
    the corners, 16.4 mW inside. A measure that no corner solves has NaN extremes.
    Source: extreme-value (worst-case) analysis, "common practice".
    """
    box = axes(stage)
    limits = vertices(box)
    points = np.vstack([limits, [[_middle(axis) for axis in box]]]) if box else limits
    outcome = evaluate(stage, columns(box, points), measures, cut_off=cut_off)
    found = search(stage, box, _starts(box, points, measures, outcome), measures, cut_off=cut_off)
    found = polish(stage, box, found, measures, cut_off=cut_off)
    found = _shared(found, evaluate(stage, columns(box, found.point), measures, cut_off=cut_off), measures)
    regions = outcome.region[: len(limits)]
    present = [Region(code) for code in np.unique(regions)]
    return Corners(
        ranges=_ranges(stage, box, measures, found),
        count=len(limits),
        regions={region: int(np.sum(regions == region)) for region in present},
        region_at={r: values_at(stage, _point(box, points[np.argmax(regions == r)])) for r in present},
    )


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


def _middle(axis: Axis) -> float:
    """Where the search from the middle starts; ripple is there at its peak or not at all."""
    return -1.0 if axis.name == RIPPLE else axis.nominal


def _point(box: tuple[Axis, ...], row: Array) -> dict[str, float]:
    return {axis.name: float(value) for axis, value in zip(box, row, strict=True)}


def _starts(box: tuple[Axis, ...], points: Array, measures: Measures, outcome: Outcome) -> Climbs:
    """For each measure, downward and upward: the best vertices first, then the middle of the box."""
    rows, measure, sign, score = [], [], [], []
    for k, name in enumerate(measures):
        for side, values in ((-1.0, outcome.low[name]), (1.0, outcome.high[name])):
            scored = np.where(np.isnan(values), -np.inf, side * values)
            starts = [*_bestvertices(box, points, scored), len(points) - 1]
            rows += starts
            measure += [k] * len(starts)
            sign += [side] * len(starts)
            score += [scored[row] for row in starts]
    return Climbs(np.array(measure), np.array(sign), points[rows], np.array(score))


def _bestvertices(box: tuple[Axis, ...], points: Array, scored: Array) -> list[int]:
    """The best vertex, and the best on either side of the axes along which extremes wander."""
    best = int(np.argmax(scored[: 2 ** len(box)]))
    others = {
        int(np.argmax(np.where(points[:, k] == side, scored, -np.inf)))
        for k, axis in enumerate(box)
        if axis.name in _STARTS_SPLIT_BY
        for side in (-1.0, 1.0)
    }
    return [best, *sorted(others - {best})]


def _shared(found: Climbs, outcome: Outcome, measures: Measures) -> Climbs:
    """The climbs, and for each measure either way the best of all points that others climbed to."""
    rows, measure, sign, score = [], [], [], []
    for k, name in enumerate(measures):
        for side, values in ((-1.0, outcome.low[name]), (1.0, outcome.high[name])):
            scored = np.where(np.isnan(values), -np.inf, side * values)
            best = int(np.argmax(scored))
            rows.append(best)
            measure.append(k)
            sign.append(side)
            score.append(scored[best])
    more = Climbs(np.array(measure), np.array(sign), found.point[rows], np.array(score))
    return Climbs(
        np.append(found.measure, more.measure),
        np.append(found.sign, more.sign),
        np.vstack([found.point, more.point]),
        np.append(found.score, more.score),
    )


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
