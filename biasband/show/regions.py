"""Sentences: which corners leave the active region, and how far the nearest one is from its ends."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from biasband.circuit.operating_point import Region
from biasband.margins.records import Margin
from biasband.quantity import Kind
from biasband.show.prose import main_places, places
from biasband.show.table import difference
from biasband.signoff.study import Review
from biasband.variation.contributors import axes
from biasband.variation.corners import Extreme, values_at

MOST_NAMED = 3
"""Contributors named with each distance, so that all three fit a few lines."""


@dataclass(frozen=True)
class _End:
    """An end of the active region in words: how far off, or how it is reached; and where."""

    reached: bool
    text: str


def region_sentences(review: Review) -> tuple[str, ...]:
    """Which corners saturate, cut off or run away, where; and the distance to each end not reached."""
    ends = (_saturation(review), _cut_off(review), _runaway(review))
    reached = [end.text for end in ends if end.reached]
    near = [end.text for end in ends if not end.reached]
    return (*reached, *([f"Nearest over all corners: {'; '.join(near)}."] if near else []))


def _saturation(review: Review) -> _End:
    row = _check(review, "saturation")
    where = _where(row.worst, row.causes)
    if row.margin < 0.0:
        return _End(True, f"{_reached(review, Region.SATURATED, 'saturation')}, furthest: {where}.")
    return _End(False, f"to saturation {difference(row.margin, row.kind)} of V_CE ({where})")


def _cut_off(review: Review) -> _End:
    row = _check(review, "cut_off")
    where = _where(row.worst, row.causes)
    if row.margin < 0.0:
        return _End(True, f"{_reached(review, Region.CUT_OFF, 'cut-off')}, furthest: {where}.")
    times = difference(row.corners / row.limit if row.limit > 0.0 else math.nan, Kind.NUMBER)
    return _End(False, f"to cut-off I_C {times} times its limit ({where})")


def _runaway(review: Review) -> _End:
    """By 1 − G, the loop gain that is left to the one at which a stage runs away."""
    name, found = "thermal_loop_gain", review.evidence.corners
    if found.regions.get(Region.RUNAWAY):
        one = _one_corner(review, Region.RUNAWAY)
        return _End(True, f"{_reached(review, Region.RUNAWAY, 'thermal runaway')}, one of them: {one}.")
    if review.stage.transistor.thermal_resistance is None:
        return _End(False, "thermal runaway not looked for, no thermal_resistance given")
    highest = found.ranges[name].high
    left = difference(1.0 - highest.value, Kind.NUMBER)
    where = _where(highest, review.evidence.causes[name].high)
    return _End(False, f"to thermal runaway {left} of loop gain ({where})")


def _check(review: Review, name: str) -> Margin:
    return next(row for row in review.rows if row.standing and row.quantity == name)


def _where(extreme: Extreme, causes: Mapping[str, float]) -> str:
    if math.isnan(extreme.value):
        return "no corner has a value"
    return main_places(extreme, causes, most=MOST_NAMED) or "as nominal"


def _reached(review: Review, region: Region, word: str) -> str:
    corners = review.evidence.corners
    count = corners.regions.get(region, 0)
    where = f"in {count} of {corners.count} corners" if count else "inside the limits, in no corner"
    return f"{word[0].upper()}{word[1:]} {where}"


def _one_corner(review: Review, region: Region) -> str:
    """Where every contributor stands in one corner of a region."""
    at, middle = review.evidence.corners.region_at[region], values_at(review.stage, {})
    return places(Extreme(math.nan, dict(_sides(review, at, middle)), at, interior=False))


def _sides(
    review: Review, at: Mapping[str, float], middle: Mapping[str, float]
) -> Iterator[tuple[str, float]]:
    for axis in axes(review.stage):
        if axis.name in at:
            yield axis.name, 1.0 if at[axis.name] > middle[axis.name] else -1.0
