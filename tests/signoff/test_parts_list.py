"""The list to order from: a line for each kind of part, and how many of it."""

from __future__ import annotations

from dataclasses import replace
from math import isnan

import pytest
from values.test_ideal import target_stage
from values.test_shelf import drawer

from biasband.files.series_files import load_all
from biasband.signoff.parts_list import PartLine, parts_list
from biasband.stage import Resistor, Stage, Stock, StockItem, Target
from biasband.values.choosing import Design, PartChoice, choose
from biasband.values.keeping import keep

SERIES = load_all()


def designed(*resistors: Resistor, chosen: str = "", stock: Stock | None = None) -> Design:
    """A design of resistors with these values, those named in `chosen` chosen in this run."""
    of: Stage = replace(
        target_stage("divider", Target(collector_current=1e-3)), resistors=resistors, stock=stock
    )
    parts = tuple(
        PartChoice(name=r.name, value=r.value or 0.0, chosen=r.name in chosen.split()) for r in resistors
    )
    return Design(of, parts, ())


def listed(*resistors: Resistor, worst: dict[str, float] | None = None, **more) -> dict[str, PartLine]:
    """The lines of the list by the references on them."""
    return {"+".join(line.references): line for line in parts_list(designed(*resistors, **more), worst or {})}


def part(name: str, value: float = 1e3, **more) -> Resistor:
    """A quarter-watt resistor of 1 %."""
    return Resistor(**{"name": name, "value": value, "tolerance": 0.01, "power_rating": 0.25, **more})


def test_equal_parts_are_one_line_in_the_order_of_the_stage() -> None:
    lines = listed(part("R1"), part("R2", 2.2e3), part("RC"), part("RE", 2.2e3))
    assert list(lines) == ["R1+RC", "R2+RE"]
    assert [line.quantity for line in lines.values()] == [2, 2]


@pytest.mark.parametrize(
    "other",
    [
        {"value": 1.1e3},
        {"tolerance": 0.05},
        {"tolerance_stated": False},
        {"tempco": 1e-4},
        {"power_rating": 0.5},
        {"power_rating": None},
        {"group": "array"},
    ],
)
def test_parts_that_differ_in_what_is_ordered_are_two_lines(other: dict[str, object]) -> None:
    assert list(listed(part("R1"), part("RC", **other))) == ["R1", "RC"]


def test_parts_of_different_series_are_two_lines_only_where_they_were_chosen_from_them() -> None:
    both = (part("R1", series="E24"), part("RC", series="E96"))
    assert list(listed(*both, chosen="R1 RC")) == ["R1", "RC"]
    assert list(listed(*both)) == ["R1+RC"]
    assert list(listed(part("R1"), part("RC"), chosen="R1")) == ["R1", "RC"]


def test_series_is_told_of_chosen_values_alone() -> None:
    lines = listed(part("R1"), part("RC", 2e3), chosen="R1")
    assert (lines["R1"].series, lines["RC"].series) == ("E24", None)
    from_stock = listed(part("R1"), chosen="R1", stock=drawer(1e3))
    assert from_stock["R1"].series is None


def test_power_of_a_line_is_the_most_of_any_of_its_parts() -> None:
    three = (part("R1"), part("RC"), part("RE"))
    (line,) = listed(*three, worst={"R1": 1e-3, "RC": 7e-3, "RE": 2e-3}).values()
    assert line.power_worst == 7e-3
    (line,) = listed(*three, worst={"RE": 2e-3}).values()
    assert line.power_worst == 2e-3
    (line,) = listed(*three).values()
    assert line.power_worst is None


def test_what_is_not_stated_is_none_not_zero() -> None:
    (line,) = listed(Resistor(name="R1", value=1e3, tolerance_stated=False)).values()
    assert (line.tolerance, line.tempco, line.power_rating, line.items) == (None, None, None, ())


def test_marks_are_those_of_value_and_tolerance() -> None:
    (line,) = listed(part("R1", 4.7e3, tolerance=0.05, tempco=1e-4)).values()
    # IEC 60062: J is ±5 %; yellow 4, violet 7, red ×100, gold ±5 %.
    assert line.markings.letter_code == "4K7J"
    assert line.markings.chip_three == "472"
    (loose,) = listed(part("R1", 4.7e3, tolerance_stated=False)).values()
    assert loose.markings.letter_code == "4K7"


def test_line_names_the_cheapest_item_that_serves() -> None:
    stock = drawer(
        StockItem(value=1e3, tolerance=0.05, price=0.01), StockItem(value=1e3, tolerance=0.01, price=0.03)
    )
    lines = listed(part("R1"), part("RC", tolerance=0.05), part("RE", 2.2e3), stock=stock)
    assert lines["R1"].items == (stock.items[1],)
    assert lines["RC"].items == (stock.items[0],)
    assert (lines["RE"].items, lines["RE"].lacking) == ((None,), "not in stock")
    # RE: a value of the stage file that is not in the house


def test_list_of_a_chosen_stage_has_each_resistor_once() -> None:
    of = target_stage("divider", Target(collector_current=1e-3), fixed={"R1": 68e3})
    design = choose(keep(of, {"RC": 3.9e3}, SERIES), SERIES)
    lines = parts_list(design, {})
    names = [name for line in lines for name in line.references]
    assert sorted(names) == ["R1", "R2", "RC", "RE"]
    series = {name: line.series for line in lines for name in line.references}
    assert series == {"R1": None, "R2": "E24", "RC": "E24", "RE": "E24"}  # a kept value too is of its series
    assert not any(isnan(line.value) for line in lines)


def test_scarce_tight_part_is_left_to_the_resistor_that_needs_it() -> None:
    """One piece at 1 %, one at 5 %: together enough for both, if the loose one takes the loose one."""
    stock = drawer(
        StockItem(value=1e3, tolerance=0.01, quantity=1, price=0.01),
        StockItem(value=1e3, tolerance=0.05, quantity=1, price=0.03),
    )
    lines = listed(part("RC", tolerance=0.05), part("RE"), stock=stock)
    assert lines["RE"].items == (stock.items[0],)
    assert lines["RC"].items == (stock.items[1],)


def test_line_that_needs_two_rows_of_the_list_costs_what_both_do() -> None:
    # The cheaper piece is one only: 0.01 + 0.50, not twice 0.01.
    stock = drawer(
        StockItem(value=1e3, quantity=1, price=0.50, location="B"),
        StockItem(value=1e3, quantity=1, price=0.01, location="A"),
    )
    (line,) = listed(part("R1"), part("RC"), stock=stock).values()
    assert [item.location for item in line.taken] == ["A", "B"]
    assert line.price == pytest.approx(0.51, rel=1e-12)  # one addition
    assert line.lacking == ""


def test_pieces_are_counted_over_all_lines_of_a_value() -> None:
    stock = drawer(StockItem(value=1e3, tolerance=0.01, quantity=1, price=0.02))
    lines = listed(part("R1"), part("RC", tolerance=0.05), stock=stock)
    assert sorted(line.lacking for line in lines.values()) == ["", "none left in stock"]
    assert sorted(line.price is None for line in lines.values()) == [False, True]


def test_line_that_the_list_has_too_few_pieces_for_has_no_price() -> None:
    stock = drawer(StockItem(value=1e3, quantity=1, price=0.02))
    (line,) = listed(part("R1"), part("RC"), stock=stock).values()
    assert (line.price, line.lacking) == (None, "only 1 in stock")


def test_price_that_one_row_does_not_state_is_not_known() -> None:
    stock = drawer(StockItem(value=1e3, quantity=1, price=0.02), StockItem(value=1e3))
    (line,) = listed(part("R1"), part("RC"), stock=stock).values()
    assert (line.price, line.lacking, line.quantity) == (None, "", 2)
    assert listed(part("R1"))["R1"].price is None
