"""Boards outside the corner limits: a defect of the corner set, found out and mended.

No board can be worse than the worst within the limits. Where one is, the search of the box has
missed something; the range is then widened to that board, so that what is judged at the corners is
judged there.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from biasband.stage import Stage
from biasband.variation.contributors import Coordinates, axes, realise
from biasband.variation.corners import Corners, Extreme, Range, values_at
from biasband.variation.evaluation import Measures, evaluate
from biasband.variation.points_of_use import PointOfUse

_ROUNDING = 1e-9
"""Relative to the larger limit: less than this beyond it is rounding."""


@dataclass(frozen=True)
class Farthest:
    """The lowest and the highest value [SI] that any board met, and the numbers of those boards."""

    lowest: float
    highest: float
    lowest_board: int
    highest_board: int


@dataclass(frozen=True)
class Outside:
    """A board beyond a corner limit: its number and `value` [SI], and the `limit` [SI] as it was."""

    measure: str
    board: int
    value: float
    limit: float


@dataclass(frozen=True)
class Extended:
    """Corners as wide as the boards show them to be, and the boards that lay outside."""

    corners: Corners
    outside: tuple[Outside, ...]


def extended(
    stage: Stage,
    corners: Corners,
    measures: Measures,
    points: Sequence[PointOfUse],
    farthest: Mapping[str, Farthest],
    drawn: Callable[[int], Coordinates],
    *,
    cut_off: float,
) -> Extended:
    """Widen the range of every measure that a board lies outside of.

    `drawn` gives the coordinates of a board, (1,) each, by its number. The extreme that takes the
    place of a corner lies inside the box, where that board was at its worst point of use.
    """
    found = [each for name, far in farthest.items() for each in _outside(name, corners.ranges[name], far)]
    ranges = dict(corners.ranges)
    for each in found:
        lower = each.value < each.limit
        place = _worst_point(stage, measures, points, drawn(each.board), each, cut_off)
        extreme = Extreme(each.value, _on_axes(stage, place), values_at(stage, place), interior=True)
        ranges[each.measure] = replace(ranges[each.measure], **{"low" if lower else "high": extreme})
    return Extended(replace(corners, ranges=ranges), tuple(found))


def _outside(name: str, limits: Range, far: Farthest) -> Iterator[Outside]:
    low, high = limits.low.value, limits.high.value
    slack = _ROUNDING * max(abs(low), abs(high))
    if far.lowest < low - slack:
        yield Outside(name, far.lowest_board, far.lowest, low)
    if far.highest > high + slack:
        yield Outside(name, far.highest_board, far.highest, high)


def _worst_point(
    stage: Stage,
    measures: Measures,
    points: Sequence[PointOfUse],
    drawn: Coordinates,
    found: Outside,
    cut_off: float,
) -> dict[str, float]:
    """The board's coordinates and those of the point of use where it is farthest out."""
    measure = {found.measure: measures[found.measure]}
    lower = found.value < found.limit
    reached = []
    for point in points:
        outcome = evaluate(stage, {**drawn, **point.coordinates}, measure, cut_off=cut_off)
        reached.append(float((outcome.low if lower else outcome.high)[found.measure][0]))
    worst = points[int(np.argmin(reached) if lower else np.argmax(reached))]
    return {**{name: float(np.ravel(x)[0]) for name, x in drawn.items()}, **worst.coordinates}


def _on_axes(stage: Stage, place: Mapping[str, float]) -> dict[str, float]:
    """The coordinates of a board's place on the axes of the box.

    What makes up a part (tolerance, life drift, tempco) is one axis there: where between its limits
    the part as a whole lies.
    """
    box, here = axes(stage), realise(stage, place).named()
    plain = {axis.name: place.get(axis.name, axis.nominal) for axis in box}
    whole = {axis.name: place[axis.name] for axis in box if axis.name in place}
    ends = {side: realise(stage, {**whole, **{a.name: side for a in box if a.name not in place}}).named()
            for side in (-1.0, 0.0, 1.0)}  # fmt: skip
    for name in (axis.name for axis in box if axis.name not in place and axis.name in here):
        known = [float(np.ravel(ends[side][name])[0]) for side in (-1.0, 0.0, 1.0)]
        plain[name] = float(np.interp(float(np.ravel(here[name])[0]), known, (-1.0, 0.0, 1.0)))
    return plain
