"""Corners: every combination of limits, and the extremes that lie inside the box.

With V_BE constant and the transistor active, currents and node voltages are monotone in every
contributor, hence extreme at a vertex; that ends where a scenario saturates and never held for
power, swing or temperature. So the box is also searched from several vertices (interior.py).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import RIPPLE, Axis, axes, realise
from biasband.variation.evaluation import Measures, evaluate
from biasband.variation.interior import Start, search

_STARTS_SPLIT_BY = ("gain", "temperature")
"""The axes along which extremes wander: the best vertex on either side of each is a start."""


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
    """Evaluate all 2^n corners and search the box from several of them."""
    box = axes(stage)
    vertices = _vertices(box)
    points = np.vstack([vertices, [_middle(axis) for axis in box]])
    outcome = evaluate(stage, _columns(box, points), measures, cut_off=cut_off)
    regions = outcome.region[:-1]
    starts = [
        start
        for name in measures
        for sign, values in ((-1.0, outcome.low[name]), (1.0, outcome.high[name]))
        for start in _starts(box, points, name, sign, values)
    ]
    best = search(stage, box, starts, measures, cut_off=cut_off)
    ranges = {
        name: Range(_extreme(stage, box, best[name, -1.0]), _extreme(stage, box, best[name, 1.0]))
        for name in measures
    }
    present = [Region(code) for code in np.unique(regions)]
    return Corners(
        ranges,
        count=len(vertices),
        regions={region: int(np.sum(regions == region)) for region in present},
        region_at={r: values_at(stage, _point(box, points[np.argmax(regions == r)])) for r in present},
    )


def values_at(stage: Stage, coordinates: Mapping[str, float]) -> dict[str, float]:
    """Every contributor's value in SI at these coordinates (formats: `low_at`)."""
    return {name: float(value) for name, value in realise(stage, coordinates).named().items()}


def _vertices(box: tuple[Axis, ...]) -> Array:
    """All combinations of limits, shape (2^K, K)."""
    if not box:
        return np.zeros((1, 0))
    sides = np.indices((2,) * len(box)).reshape(len(box), -1).T
    return 2.0 * sides - 1.0


def _columns(box: tuple[Axis, ...], points: Array) -> dict[str, Array]:
    return {axis.name: points[:, k] for k, axis in enumerate(box)}


def _middle(axis: Axis) -> float:
    """Where the search from the middle starts; ripple is there at its peak or not at all."""
    return -1.0 if axis.name == RIPPLE else axis.nominal


def _point(box: tuple[Axis, ...], row: Array) -> dict[str, float]:
    return {axis.name: float(value) for axis, value in zip(box, row, strict=True)}


def _starts(box: tuple[Axis, ...], points: Array, name: str, sign: float, values: Array) -> list[Start]:
    """The best vertex on either side of the axes along which extremes wander, then the middle of the box."""
    score = np.where(np.isnan(values), -np.inf, sign * values)
    found = {int(np.argmax(score[:-1]))}
    for k, axis in enumerate(box):
        if axis.name in _STARTS_SPLIT_BY:
            found |= {int(np.argmax(np.where(points[:, k] == side, score, -np.inf))) for side in (-1.0, 1.0)}
    rows = sorted(found, key=lambda row: -score[row])
    return [Start(name, sign, float(values[row]), points[row]) for row in (*rows, -1)]


def _extreme(stage: Stage, box: tuple[Axis, ...], start: Start) -> Extreme:
    coordinates = _point(box, start.point)
    interior = any(abs(value) < 1.0 for value in coordinates.values())
    return Extreme(start.value, coordinates, values_at(stage, coordinates), interior)
