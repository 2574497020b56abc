"""Tables and passages are laid out within a width, and nothing is cut off."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from biasband.show.layout import NARROWEST, lines_of, wrapped
from biasband.show.spelling import Spelling
from biasband.show.table import Column, Passage, Row, Table

UNICODE = Spelling("utf-8")
TEXTS = st.text(alphabet="ab1 µΩ%,.漢é-", max_size=60)


def laid(block, width):
    return [line.plain for line in lines_of((block,), width=width, spelling=UNICODE)]


def ink(text: str) -> str:
    return re.sub(r"\s", "", text)


@given(text=TEXTS, width=st.integers(NARROWEST, 120))
def test_wrapped_text_keeps_its_signs_and_its_width(text, width):
    lines = list(wrapped(text, width, first="  ", rest="    "))
    assert all(cell_len(line) <= width for line in lines)
    assert ink("".join(lines)) == ink(text)


@pytest.mark.parametrize("figure", ["12.34 mV", "4.7 kΩ", "99.73 %", "-10 °C", "≥ 3 V", "23 K"])
def test_number_is_never_parted_from_its_unit(figure):
    for length in range(1, 40):
        lines = list(wrapped(f"{'x' * length} {figure} and so on", 40))
        assert sum(figure in line for line in lines) == 1


def test_no_text_makes_no_line():
    assert list(wrapped("", 80)) == []
    assert laid(Passage("", ()), 80) == []


TABLE = Table(
    "Title",
    (
        Column("name", "left"),
        Column("first", spare=1),
        Column("second", spare=2),
        Column("stays"),
        Column("verdict", "left", toned=True),
    ),
    (Row(("a_rather_long_name", "111 mV", "222 mV", "333 mV", "pass"), ("below it",), "pass"),),
    ("a note",),
)


def test_wide_table_stands_on_one_line_with_its_heading():
    lines = laid(TABLE, 80)
    assert lines[0] == "Title"
    assert lines[1].split() == ["name", "first", "second", "stays", "verdict"]
    assert lines[3] == "a_rather_long_name  111 mV  222 mV  333 mV  pass"
    assert lines[4:] == ["    below it", "a note"]


def test_columns_line_up_at_their_side():
    rows = (Row(("a", "1 V", "", "10.25 V", "x")), Row(("bb", "100 V", "", "2 V", "y")))
    heading, _, *lines = laid(Table("", TABLE.columns, rows), 80)
    assert heading == "name  first  second    stays  verdict"
    assert lines == ["a       1 V          10.25 V  x", "bb    100 V              2 V  y"]


def test_spare_columns_move_below_their_row_in_order():
    # The kept columns take 18 + 5 + 6 + 7 cells and three gaps; "first" and "second" 8 each.
    assert "first 111 mV" not in "\n".join(laid(TABLE, 58))
    assert laid(TABLE, 50)[3:5] == ["a_rather_long_name  222 mV  333 mV  pass", "    first 111 mV"]
    assert laid(TABLE, 42)[3:5] == ["a_rather_long_name  333 mV  pass", "    first 111 mV, second 222 mV"]


def test_table_too_wide_for_anything_else_becomes_a_list():
    lines = laid(TABLE, NARROWEST)
    assert "a_rather_long_name" in lines
    for cell in ("111 mV", "222 mV", "333 mV", "pass"):
        assert any(cell in line for line in lines)


CELLS = st.tuples(*[TEXTS] * len(TABLE.columns))


@given(rows=st.lists(CELLS, max_size=4), width=st.integers(NARROWEST, 130), flows=st.booleans())
def test_any_table_keeps_its_signs_and_its_width(rows, width, flows):
    table = Table("Title", TABLE.columns, tuple(Row(cells) for cells in rows), flows=flows)
    lines = laid(table, width)
    assert all(cell_len(line) <= width for line in lines)
    for cells in rows:
        for cell in cells:
            assert not ink(cell) or ink(cell) in ink("".join(lines))


def test_flowing_table_stands_in_as_many_blocks_as_fit():
    rows = tuple(Row((f"name{k}", f"{k} V")) for k in range(5))
    table = Table("T", (Column("n", "left"), Column("v")), rows, flows=True)
    assert laid(table, 30)[2:] == ["name0  0 V    name3  3 V", "name1  1 V    name4  4 V", "name2  2 V"]
    assert laid(table, 20)[2:] == [f"name{k}  {k} V" for k in range(5)]


def test_parts_of_a_report_are_set_apart_by_an_empty_line():
    lines = [
        line.plain for line in lines_of((Passage("A", ()), Passage("B", ())), width=80, spelling=UNICODE)
    ]
    assert lines == ["A", "", "B"]


def test_only_the_toned_cell_carries_the_colour():
    line = lines_of((TABLE,), width=80, spelling=UNICODE)[3]
    coloured = [line.plain[span.start : span.end] for span in line.spans if span.style]
    assert coloured == ["pass"]
