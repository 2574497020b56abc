"""Pictures beside tables: where signs stand, what fits, how they are spelled."""

from __future__ import annotations

import math

from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from biasband.quantity import Kind
from biasband.show.layout import lines_of
from biasband.show.pictures import NARROWEST, legend, off_axis, pictured
from biasband.show.spelling import Spelling
from biasband.show.table import Bound, Column, Picture, Row, Strip, Table

NAN = math.nan
FLOOR, CEILING = Bound(2.0, lower=True), Bound(8.0, lower=False)


def drawn(*strips: Strip, bounds: tuple[Bound, ...] = (), room: int = 21) -> list[str]:
    """The heading and the strips, at `room` cells: from 0 to 10 V a cell is half a volt at 21."""
    rows = tuple(Row((str(k),)) for k in range(len(strips)))
    table = Table("", (Column("row"),), rows, picture=Picture(Kind.VOLTAGE, strips, bounds))
    found = pictured(table, room, Spelling())
    return [found.columns[-1].heading, *(row.cells[-1] for row in found.rows)]


def test_signs_stand_where_the_values_are() -> None:
    lines = drawn(Strip(0.0, 5.0, 10.0), Strip(2.5, 3.0, 4.0))
    assert lines == [
        "0 V              10 V",
        "──────────●──────────",
        "     ─●──            ",
    ]


def test_limits_cross_every_row_and_what_is_beyond_them_is_crossed() -> None:
    lines = drawn(Strip(0.0, 5.0, 10.0), Strip(3.0, 5.0, 7.0), Strip(2.0, 5.0, 8.0), bounds=(FLOOR, CEILING))
    assert lines[1:] == [
        "××××│─────●─────│××××",
        "    │ ────●──── │    ",
        "    │─────●─────│    ",
    ]


def test_band_beyond_a_limit_by_less_than_a_cell_is_still_crossed() -> None:
    lines = drawn(Strip(1.95, 5.0, 8.05), Strip(0.0, 5.0, 10.0), bounds=(FLOOR, CEILING))
    assert lines[1] == "    ×─────●─────×    "


def test_band_wholly_beyond_a_limit_is_all_crosses_but_for_the_nominal_value() -> None:
    lines = drawn(Strip(0.0, 0.5, 1.0), Strip(9.0, 9.5, 10.0), bounds=(FLOOR, CEILING))
    assert lines[1:] == [
        "×●× │           │    ",
        "    │           │ ×●×",
    ]


def test_value_that_is_not_known_is_not_drawn() -> None:
    lines = drawn(Strip(0.0, 5.0, 10.0), Strip(NAN, 5.0, NAN), Strip(NAN, NAN, NAN), Strip(0.0, NAN, 1.0))
    assert lines[2:] == [" " * 10 + "●" + " " * 10, " " * 21, "───" + " " * 18]


def test_limit_that_is_far_off_is_left_out_and_said() -> None:
    far = Bound(25.0, lower=False)
    picture = Picture(Kind.VOLTAGE, (Strip(0.0, 5.0, 10.0),), (far, FLOOR))
    assert off_axis(picture) == (far,)
    assert drawn(*picture.strips, bounds=picture.bounds)[0] == "0 V              10 V"


def test_limit_that_is_near_stretches_the_axis() -> None:
    near = Bound(20.0, lower=False)  # as far from the band as the band is wide
    assert drawn(Strip(0.0, 5.0, 10.0), bounds=(near,)) == ["0 V              20 V", "─────●─────         │"]
    assert off_axis(Picture(Kind.VOLTAGE, (Strip(0.0, 5.0, 10.0),), (near,))) == ()


def test_band_of_no_width_is_a_point_in_the_middle() -> None:
    assert drawn(Strip(5.0, 5.0, 5.0)) == ["4.75 V         5.25 V", " " * 10 + "●" + " " * 10]
    assert drawn(Strip(0.0, 0.0, 0.0))[1].strip() == "●"


def test_picture_without_a_value_or_without_room_is_left_out() -> None:
    table = Table(
        "", (Column("row"),), (Row(("0",)),), picture=Picture(Kind.VOLTAGE, (Strip(NAN, NAN, NAN),))
    )
    assert pictured(table, 60, Spelling()).columns == table.columns
    some = Table("", (Column("row"),), (Row(("0",)),), picture=Picture(Kind.VOLTAGE, (Strip(0.0, 1.0, 2.0),)))
    assert pictured(some, NARROWEST - 1, Spelling()).columns == some.columns
    assert len(pictured(some, NARROWEST, Spelling()).columns) == 2


@given(
    strips=st.lists(st.tuples(*[st.floats(-1e6, 1e6) | st.just(NAN)] * 3), min_size=1, max_size=5),
    bounds=st.lists(st.builds(Bound, st.floats(-1e6, 1e6), lower=st.booleans()), max_size=3),
    width=st.integers(20, 130),
    kind=st.sampled_from(list(Kind)),
    encoding=st.sampled_from(["utf-8", "ascii"]),
)
def test_any_picture_keeps_the_width(
    strips: list[tuple[float, float, float]], bounds: list[Bound], width: int, kind: Kind, encoding: str
) -> None:
    ordered = [Strip(*(sorted(each) if not any(map(math.isnan, each)) else each)) for each in strips]
    rows = tuple(Row((f"{k} °C", "4.7 kΩ")) for k in range(len(strips)))
    picture = Picture(kind, tuple(ordered), tuple(bounds))
    table = Table("title", (Column("ambient"), Column("value")), rows, picture=picture)
    lines = [line.plain for line in lines_of((table,), width=width, spelling=Spelling(encoding))]
    assert all(cell_len(line) <= width for line in lines)
    assert encoding != "ascii" or "".join(lines).isascii()


def test_ascii_has_a_sign_for_each() -> None:
    assert (
        Spelling("ascii")(legend()) == "pictures: - lowest to highest, o nominal, | limit, x beyond a limit"
    )
    picture = Picture(Kind.RESISTANCE, (Strip(0.0, 5e3, 10e3),), (Bound(2e3, lower=True),))
    table = Table("", (Column("row"),), (Row(("0",)),), picture=picture)
    lines = [line.plain for line in lines_of((table,), width=26, spelling=Spelling("ascii"))]
    assert lines == ["row  0 ohm         10 kohm", "-" * 26, "  0  xxxx|-----o----------"]
