"""Pictures in a terminal: a table's rows drawn as strips on one common axis.

A strip is a line of text: a band from the lowest to the highest value, the nominal one on it, upright
lines where limits are, and crosses where the band has passed one.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import replace

from biasband.quantity import Kind
from biasband.show.spelling import Spelling
from biasband.show.table import Bound, Column, Picture, Strip, Table, figure

BAND, NOMINAL, LIMIT, BEYOND = "─", "●", "│", "×"
NARROWEST = 20
"""[cells] A picture with less room is left out."""

_DIGITS = 3
_FAR = 1.0
"""A limit that is further from the bands than this many times what they span is off the axis."""


def legend() -> str:
    """What the signs of a picture mean."""
    return f"pictures: {BAND} lowest to highest, {NOMINAL} nominal, {LIMIT} limit, {BEYOND} beyond a limit"


def pictured(table: Table, room: int, spelling: Spelling) -> Table:
    """The table with its picture as a last column of `room` cells; without it where there is no room."""
    picture = table.picture
    if picture is None or room < NARROWEST:
        return replace(table, picture=None)
    axis = axis_of(picture)
    ends = heading(axis, room, picture.kind, spelling)
    if ends is None:
        return replace(table, picture=None)
    strips = (spelling(strip_signs(strip, picture.bounds, axis, room)) for strip in picture.strips)
    rows = (replace(row, cells=(*row.cells, s)) for row, s in zip(table.rows, strips, strict=True))
    columns = (*table.columns, Column(ends, "left", toned=True))
    return replace(table, columns=columns, rows=tuple(rows), picture=None)


def off_axis(picture: Picture) -> tuple[Bound, ...]:
    """The limits that are too far from the bands to be drawn."""
    axis = axis_of(picture)
    return () if axis is None else tuple(b for b in picture.bounds if not axis[0] <= b.value <= axis[1])


Axis = tuple[float, float]
"""The values [SI] in the middle of the first and of the last cell."""


def axis_of(picture: Picture) -> Axis | None:
    """From the lowest to the highest of the bands, and of the limits that are near; None without values."""
    values = [v for s in picture.strips for v in (s.low, s.nominal, s.high) if math.isfinite(v)]
    if not values:
        return None
    low, high = min(values), max(values)
    reach = _FAR * (high - low)
    near = [bound.value for bound in picture.bounds if low - reach <= bound.value <= high + reach]
    low, high = min(low, *near, low), max(high, *near, high)
    slack = 0.0 if high > low else 0.05 * abs(high) or 1.0
    return low - slack, high + slack


def heading(axis: Axis | None, room: int, kind: Kind, spelling: Spelling) -> str | None:
    """The ends of the axis, one at either side; None where they do not fit."""
    if axis is None:
        return None
    low, high = (spelling(figure(end, kind, digits=_DIGITS)) for end in axis)
    gap = room - len(low) - len(high)
    return f"{low}{' ' * gap}{high}" if gap > 0 else None


def cell_of(value: float, axis: Axis, room: int) -> int:
    """The cell of `room` that a value is in; beyond the axis the first or the last."""
    share = (value - axis[0]) / (axis[1] - axis[0])
    return min(max(round(share * (room - 1)), 0), room - 1)


def strip_signs(strip: Strip, bounds: Sequence[Bound], axis: Axis | None, room: int) -> str:
    """A strip in `room` cells: its band and nominal value, the limits, and what is beyond them."""
    if axis is None:
        return ""

    def cell(value: float) -> int:
        return cell_of(value, axis, room)

    signs = [" "] * room
    banded = math.isfinite(strip.low) and math.isfinite(strip.high)
    if banded:
        signs[cell(strip.low) : cell(strip.high) + 1] = BAND * (cell(strip.high) - cell(strip.low) + 1)
    for bound in bounds:
        if axis[0] <= bound.value <= axis[1]:
            signs[cell(bound.value)] = LIMIT
        for k in _beyond(strip, bound, cell) if banded else ():
            signs[k] = BEYOND
    if math.isfinite(strip.nominal):
        signs[cell(strip.nominal)] = NOMINAL
    return "".join(signs)


def _beyond(strip: Strip, bound: Bound, cell: Callable[[float], int]) -> range:
    """The cells of a band that have passed a limit; one at least where any of it has."""
    if bound.lower and strip.low < bound.value:
        first, last = cell(strip.low), min(cell(bound.value) - 1, cell(strip.high))
        return range(first, max(first, last) + 1)
    if not bound.lower and strip.high > bound.value:
        first, last = max(cell(bound.value) + 1, cell(strip.low)), cell(strip.high)
        return range(min(first, last), last + 1)
    return range(0)
