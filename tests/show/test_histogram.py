"""Histograms: every board stands once, on its side of a limit, in the cell where it is."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from biasband.boards.counting import tally
from biasband.boards.in_use import InUse
from biasband.boards.summary import summary
from biasband.boards.tally import Scale
from biasband.circuit.operating_point import Region
from biasband.quantity import Kind
from biasband.show.histogram import BEYOND, FEW, FULL, HALF, HEIGHT, drawn, legend, over_cells
from biasband.show.layout import lines_of
from biasband.show.pictures import LIMIT, NARROWEST
from biasband.show.spelling import Spelling
from biasband.show.table import Bound, Histogram, Panel, Passage, Strip, Table

NAN = math.nan
NOTHING = Strip(NAN, NAN, NAN)


def panel(values: Sequence[float], scale: Scale, bound: Bound | None = None) -> Panel:
    """Boards at these values, counted between the limits of a scale; those beyond the bound one by one."""
    rows = np.tile(np.array(values, dtype=float), (3, 1))
    counted = tally(InUse({"x": rows}, np.zeros(len(Region), dtype=np.int64)), {"x": scale}, first_board=0)
    beyond = (
        0 if bound is None else sum((v < bound.value) if bound.lower else (v > bound.value) for v in values)
    )
    return Panel("boards", summary(counted, scale, 0, 0), NOTHING, bound, beyond)


def histogram(
    *panels: Panel, bounds: tuple[Bound, ...] = (), corners: Strip = NOTHING, kind: Kind = Kind.VOLTAGE
) -> Histogram:
    return Histogram("title", kind, panels, {"corners": corners}, bounds)


def picture(of: Histogram) -> list[str]:
    """The heading and the lines of the picture alone."""
    table = drawn(of, WIDTH, Spelling())
    assert isinstance(table, Table)
    return [table.columns[1].heading, *(row.cells[1].rstrip() for row in table.rows)]


def lines(of: Histogram, width: int, encoding: str = "utf-8") -> list[str]:
    return [line.plain for line in lines_of((of,), width=width, spelling=Spelling(encoding))]


# 11 cells are kept for labels ("peak 0.91 %") and 2 for the gap; of 23 cells the outer two are margins, so
# that 21 show 0 V to 10 V: a cell is half a volt.
WIDTH = 11 + 2 + 23
SCALE = Scale(0.0, 10.0)
CORNERS = Strip(0.0, NAN, 10.0)


def test_boards_stand_where_they_are_and_the_limit_between_them() -> None:
    floor = Bound(5.0, lower=True)
    # 1 V, 4.9 V (the limit's own cell, 4.75 to 5.25 V), 5.1 V (too) and 9 V: cells 2, 9, 11, 18 from 0 V.
    boards = [1.0] * 4 + [4.9] * 2 + [5.1] * 12 + [9.0] * 8
    heading, *shown = picture(histogram(panel(boards, SCALE, floor), bounds=(floor,), corners=CORNERS))
    assert heading == " 0 V              10 V"
    # Beside the limit stand one and a half cells of boards: 12 there are as close as 8 elsewhere.
    assert shown[:HEIGHT] == [
        "           │█      █",
        "           │█      █",
        "           │█      █",
        "   ×       │█      █",
        "   ×       │█      █",
        "   ×      ×│█      █",
    ]
    assert shown[-1] == " ××××××××××│──────────"


def test_few_boards_are_seen_however_few() -> None:
    boards = [2.0] * 10_000 + [8.0]
    assert picture(histogram(panel(boards, SCALE), corners=CORNERS))[HEIGHT] == "     █           ."
    ceiling = Bound(7.0, lower=False)
    beyond = histogram(panel(boards, SCALE, ceiling), bounds=(ceiling,), corners=CORNERS)
    assert picture(beyond)[HEIGHT] == "     █         │ ×"


def test_peak_is_the_share_of_boards_in_the_highest_cell() -> None:
    shown = lines(histogram(panel([2.0] * 3 + [4.0], SCALE), corners=CORNERS), WIDTH)
    assert any(line.startswith("peak 75 % ") for line in shown)


def test_half_lines_are_drawn() -> None:
    # Of 12 half lines 5 of 12 boards are 5: two lines and a half.
    shown = picture(histogram(panel([2.0] * 12 + [8.0] * 5, SCALE), corners=CORNERS))
    assert [line.ljust(23)[17] for line in shown[1 : 1 + HEIGHT]] == [" ", " ", " ", HALF, FULL, FULL]


def test_boards_beyond_the_corner_limits_stand_with_the_farthest() -> None:
    found = panel([5.0] * 3 + [12.0, 11.0], SCALE)
    cells = over_cells(found, (), (0.0, 12.0), 25)
    assert list(cells.holding[[10, 24]]) == [3, 2]  # 5 V is cell 10 of half a volt; 11 V stands with 12 V


@given(
    values=st.lists(st.floats(-20.0, 20.0, allow_subnormal=False), min_size=1, max_size=50),
    floor=st.floats(-25.0, 25.0),
    ceiling=st.floats(-25.0, 25.0),
    room=st.integers(NARROWEST, 110),
    lower=st.booleans(),
)
def test_every_board_stands_once_and_on_its_side(
    values: list[float], floor: float, ceiling: float, room: int, lower: bool
) -> None:
    bounds = (Bound(floor, lower=True), Bound(ceiling, lower=False))
    bound = bounds[0] if lower else bounds[1]
    found = panel(values, Scale(-10.0, 10.0), bound)
    axis = (-30.0, 30.0)
    cells = over_cells(found, bounds, axis, room)
    assert cells.holding.sum() + cells.beyond.sum() == len(values)
    assert cells.beyond.sum() == found.beyond
    limit = round((bound.value - axis[0]) / (axis[1] - axis[0]) * (room - 1))
    here = slice(limit, None) if lower else slice(0, limit + 1)
    there = slice(0, limit + 1) if lower else slice(limit, None)
    assert not cells.beyond[here].any() and not cells.holding[there].any()


@given(
    values=st.lists(st.floats(-1e3, 1e3), min_size=1, max_size=20),
    bounds=st.lists(st.builds(Bound, st.floats(-1e4, 1e4), lower=st.booleans()), max_size=3),
    width=st.integers(20, 130),
    encoding=st.sampled_from(["utf-8", "ascii"]),
    kind=st.sampled_from([Kind.VOLTAGE, Kind.RESISTANCE, Kind.TEMPERATURE]),
)
def test_any_histogram_keeps_the_width(
    values: list[float], bounds: list[Bound], width: int, encoding: str, kind: Kind
) -> None:
    found = panel(values, Scale(-1e3, 1e3), bounds[0] if bounds else None)
    shown = lines(histogram(found, bounds=tuple(bounds), kind=kind), width, encoding)
    assert all(cell_len(line) <= width for line in shown)
    assert encoding != "ascii" or "".join(shown).isascii()


def test_limits_run_through_every_line() -> None:
    bounds = (Bound(2.0, lower=True), Bound(8.0, lower=False))
    for line in picture(histogram(panel([5.0, 6.0], SCALE, bounds[0]), bounds=bounds, corners=CORNERS))[1:]:
        assert [k for k, sign in enumerate(line) if sign == LIMIT] == [5, 17]  # a margin, then 4 and 16


def test_boards_of_one_value_are_one_column() -> None:
    shown = picture(histogram(panel([5.0] * 7, Scale(5.0, 5.0))))
    assert [line.strip() for line in shown[1 : 1 + HEIGHT]] == [FULL] * HEIGHT


@pytest.mark.parametrize("found", [panel([NAN, NAN], SCALE), panel([1.0, 2.0], Scale(NAN, NAN))])
def test_histogram_of_nothing_that_can_be_counted_says_so(found: Panel) -> None:
    assert "no values" in " ".join(lines(histogram(found), 80))


def test_histogram_without_room_says_so() -> None:
    of = histogram(panel([1.0, 2.0], SCALE))
    assert drawn(of, 30, Spelling()) == Passage("title", ("no histogram: there is no room for it",))
    assert isinstance(drawn(of, WIDTH, Spelling()), Table)


def test_ascii_has_a_sign_for_each() -> None:
    plain = Spelling("ascii")(legend())
    assert plain.startswith("# boards, . a few, x beyond a limit, | limit") and "(o median)" in plain
    assert {Spelling("ascii")(sign) for sign in (FULL, HALF, FEW, BEYOND)} == {"#", ":", ".", "x"}
