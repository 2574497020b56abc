"""Histograms in a terminal: how closely boards lie over each cell of one axis, limits drawn through.

No cell holds both a limit and boards: those that would share its cell stand beside it, on the side
that they are on, in a cell that is the wider for it. So what is beyond a limit is seen to be, however
few they are or little it is.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.boards.summary import NAN, Summary
from biasband.circuit.scenarios import Array
from biasband.show.pictures import (
    BAND,
    BEYOND,
    LIMIT,
    NARROWEST,
    NOMINAL,
    Axis,
    axis_of,
    cell_of,
    heading,
    strip_signs,
)
from biasband.show.spelling import Spelling
from biasband.show.table import Bound, Column, Histogram, Panel, Passage, Picture, Row, Strip, Table, percent

FULL, HALF, FEW = "█", "▄", "."
HEIGHT = 6
"""[lines] The highest cell of a panel."""

_BAND_LABEL = "99.73 %"
_PEAK_DIGITS = 2
_GAP = 2

Counts = NDArray[np.int64]


def legend() -> str:
    """What the signs of a histogram mean."""
    return (
        f"{FULL} boards, {FEW} a few, {BEYOND} beyond a limit, {LIMIT} limit; peak: the share of boards in "
        f"the highest cell; {BAND} what RSS and corners reach, and the middle {_BAND_LABEL} of boards "
        f"({NOMINAL} median)"
    )


def drawn(histogram: Histogram, width: int, spelling: Spelling) -> Table | Passage:
    """The histogram as a table for a width; a sentence where there is nothing to draw or no room."""
    room = width - max(map(len, _labels(histogram))) - _GAP
    axis = axis_of(picture_of(histogram))
    ends = heading(axis, room - 2, histogram.kind, spelling) if room >= NARROWEST else None
    if axis is None or not all(panel.found.solved and panel.found.scale.half for panel in histogram.panels):
        return Passage(histogram.title, ("no histogram: there are no values, or no limits to count between",))
    if ends is None:
        return Passage(histogram.title, ("no histogram: there is no room for it",))
    columns = (Column("", "left"), Column(f" {ends}", "left"))
    rows = _rows(histogram, _with_margins(axis, room), room)
    return Table(histogram.title, columns, tuple(rows), histogram.notes)


def picture_of(histogram: Histogram) -> Picture:
    """The picture that spans the axis: all boards, all strips, and the limits that are near."""
    boards = (Strip(panel.found.lowest, NAN, panel.found.highest) for panel in histogram.panels)
    return Picture(histogram.kind, (*boards, *histogram.strips.values()), histogram.bounds)


def _with_margins(axis: Axis, room: int) -> Axis:
    """An axis longer by a cell at either end, where boards beyond a limit there have their place."""
    cell = (axis[1] - axis[0]) / (room - 3)
    return axis[0] - cell, axis[1] + cell


def _labels(histogram: Histogram) -> Iterator[str]:
    """Every label that may stand before a line."""
    yield from (*(panel.label for panel in histogram.panels), *histogram.strips)
    yield from (_BAND_LABEL, _peak(0.0099))


def _peak(share: float) -> str:
    return f"peak {percent(share, digits=_PEAK_DIGITS)}"


def _rows(histogram: Histogram, axis: Axis, room: int) -> Iterator[Row]:
    for panel in histogram.panels:
        cells = over_cells(panel, histogram.bounds, axis, room)
        labels = (panel.label, _peak(cells.highest / panel.found.solved), *[""] * (HEIGHT - 2))
        for label, line in zip(labels, _bars(cells, histogram.bounds, axis), strict=True):
            yield Row((label, line))
        yield Row((_BAND_LABEL, strip_signs(panel.strip, histogram.bounds, axis, room)))
    for label, strip in histogram.strips.items():
        yield Row((label, strip_signs(strip, histogram.bounds, axis, room)))


@dataclass(frozen=True)
class Cells:
    """Boards over the cells of an axis: those that hold the panel's limit, and those that do not.

    `density` is how many there would be in a cell of the usual width.
    """

    holding: Counts
    beyond: Counts
    density: Array

    @property
    def highest(self) -> int:
        """How many boards stand in the cell that is drawn highest."""
        return int((self.holding + self.beyond)[np.argmax(self.density)])


def over_cells(panel: Panel, bounds: tuple[Bound, ...], axis: Axis, room: int) -> Cells:
    """Count the boards of a panel over `room` cells, each board once."""
    found = panel.found
    cells = _cells_of(_middles(found), _seen(bounds, axis), axis, room)
    passed = _passed(found.bins, panel)
    holding, beyond = np.zeros((2, room), dtype=np.int64)
    np.add.at(holding, _on_side(cells, panel, axis, room, beyond=False), found.bins - passed)
    np.add.at(beyond, _on_side(cells, panel, axis, room, beyond=True), passed)
    usual = (axis[1] - axis[0]) / (room - 1) / found.scale.bin_width
    widths = np.bincount(cells[1:-1], minlength=room)
    return Cells(holding, beyond, (holding + beyond) * usual / np.where(widths, widths, usual))


def _middles(found: Summary) -> Array:
    """The middle [SI] of each bin; what lies beyond the corner limits is thought with the farthest board."""
    edges = found.scale.edges()
    return np.concatenate([[found.lowest], 0.5 * (edges[1:] + edges[:-1]), [found.highest]])


def _cells_of(middles: Array, seen: Sequence[Bound], axis: Axis, room: int) -> Counts:
    """The cell of each bin: its own, or beside it where a limit has that."""
    places = np.rint((middles - axis[0]) / (axis[1] - axis[0]) * (room - 1))
    cells = np.clip(places, 0, room - 1).astype(np.int64)
    for bound in seen:
        here = cells == cell_of(bound.value, axis, room)
        cells[here] += np.where(middles[here] < bound.value, -1, 1)
    return cells


def _seen(bounds: tuple[Bound, ...], axis: Axis) -> list[Bound]:
    return [bound for bound in bounds if axis[0] <= bound.value <= axis[1]]


def _passed(bins: Counts, panel: Panel) -> Counts:
    """How many boards of each bin have passed the panel's limit: the outermost ones."""
    if panel.bound is not None and not panel.bound.lower:
        return np.diff(np.minimum(np.cumsum(bins[::-1]), panel.beyond), prepend=0)[::-1]
    return np.diff(np.minimum(np.cumsum(bins), panel.beyond), prepend=0)


def _on_side(cells: Counts, panel: Panel, axis: Axis, room: int, *, beyond: bool) -> Counts:
    """The cells of boards that are beyond the panel's limit or hold it, none on its wrong side."""
    if panel.bound is None or not _seen((panel.bound,), axis):
        return cells
    limit = cell_of(panel.bound.value, axis, room)
    below = panel.bound.lower is beyond
    return np.minimum(cells, limit - 1) if below else np.maximum(cells, limit + 1)


def _bars(cells: Cells, bounds: tuple[Bound, ...], axis: Axis) -> Iterator[str]:
    """The lines of a histogram from the top."""
    room = len(cells.density)
    limits = {cell_of(bound.value, axis, room) for bound in _seen(bounds, axis)}
    halves = np.rint(2 * HEIGHT * cells.density / cells.density.max()).astype(int)
    for line in reversed(range(HEIGHT)):
        some = (cells.density > 0.0) & (line == 0)
        signs = [_sign(int(halves[k]) - 2 * line, bool(some[k])) for k in range(room)]
        yield "".join(
            LIMIT if k in limits else BEYOND if cells.beyond[k] and sign != " " else sign
            for k, sign in enumerate(signs)
        )


def _sign(halves: int, some: bool) -> str:
    """What stands in a cell that is filled by so many halves or more."""
    if halves > 0:
        return FULL if halves > 1 else HALF
    return FEW if some else " "
