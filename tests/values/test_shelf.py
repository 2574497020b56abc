"""What a resistor may be given: preferred values around its ideal one, or what is in stock.

Expected values are read off the series by eye: E24 is 1.0 1.1 1.2 1.3 1.5 1.6 1.8 2.0 2.2 2.4 2.7 3.0
3.3 3.6 3.9 4.3 4.7 5.1 5.6 6.2 6.8 7.5 8.2 9.1 (IEC 60063).
"""

from __future__ import annotations

from dataclasses import replace
from decimal import Decimal

import pytest
from variation.stages import with_resistor, with_resistors

from biasband.errors import PhysicallyImpossible
from biasband.files.series_files import load_all
from biasband.parts.series import Series
from biasband.stage import FileRecord, Stage, Stock, StockItem, Target
from biasband.values.shelf import Shelf, shelves, usual_steps
from values.test_ideal import target_stage

SERIES = load_all()
E24 = SERIES["E24"]


def drawer(*items: StockItem | float) -> Stock:
    """A stock list; a bare number states nothing but a value."""
    stocked = tuple(item if isinstance(item, StockItem) else StockItem(value=item) for item in items)
    return Stock(items=stocked, file=FileRecord(path="invented.csv", sha256=""))


def free_divider(**more) -> Stage:
    """A divider with nothing chosen, in E24."""
    return target_stage("divider", Target(collector_current=1e-3), **more)


# --- how far it looks ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "steps"),
    [("E3", 2), ("E6", 2), ("E12", 2), ("E24", 2), ("E48", 3), ("E96", 5), ("E192", 5)],
)
def test_finer_series_are_searched_farther(name: str, steps: int) -> None:
    # Issue 3: two steps for coarse series, wider for fine ones, five in E96.
    assert usual_steps(SERIES[name]) == steps


@pytest.mark.parametrize(("count", "steps"), [(1, 2), (24, 2), (25, 3), (48, 3), (49, 5)])
def test_own_series_are_searched_as_far_as_their_fineness_asks(count: int, steps: int) -> None:
    mantissas = tuple(Decimal(100 + k) / 100 for k in range(count))
    assert usual_steps(Series(name="own", mantissas=mantissas)) == steps


def test_stage_says_how_far_each_resistor_is_searched() -> None:
    of = with_resistor(with_resistor(free_divider(), "RC", search_steps=0), "RE", search_steps=4)
    of = with_resistor(of, "R2", series="E96")
    assert {name: shelf.steps for name, shelf in shelves(of, SERIES).items()} == {
        "R1": 2, "R2": 5, "RC": 0, "RE": 4
    }  # fmt: skip


# --- values ----------------------------------------------------------------------------------------


def test_values_around_an_ideal_one_are_the_nearest_and_its_steps_across_decades() -> None:
    assert Shelf(E24, 2).around(9.3e3) == (7.5e3, 8.2e3, 9.1e3, 10e3, 11e3)
    assert Shelf(E24, 1).around(10e3) == (9.1e3, 10e3, 11e3)
    assert Shelf(E24, 0).around(4e3) == (3.9e3,)
    assert Shelf(E24, 2).nearest(9.3e3) == 9.1e3


STOCK = (1e3, 1.2e3, 2.2e3, 4.7e3, 10e3)


@pytest.mark.parametrize(
    ("ideal", "nearest", "around"),
    [
        (2.2e3, 2.2e3, (1e3, 1.2e3, 2.2e3, 4.7e3, 10e3)),
        (3e3, 2.2e3, (1e3, 1.2e3, 2.2e3, 4.7e3, 10e3)),  # √(2.2 · 4.7) = 3.22
        (3.3e3, 4.7e3, (1.2e3, 2.2e3, 4.7e3, 10e3)),  # the list ends
        (100.0, 1e3, (1e3, 1.2e3, 2.2e3)),
        (1e3, 1e3, (1e3, 1.2e3, 2.2e3)),
        (1.1e3, 1.2e3, (1e3, 1.2e3, 2.2e3, 4.7e3)),  # √(1.0 · 1.2) = 1.0954
        (1e6, 10e3, (2.2e3, 4.7e3, 10e3)),
    ],
)
def test_stock_has_the_values_it_lists_and_ends(
    ideal: float, nearest: float, around: tuple[float, ...]
) -> None:
    shelf = Shelf(E24, 2, STOCK)
    assert (shelf.nearest(ideal), shelf.around(ideal)) == (nearest, around)


def test_lower_of_two_equally_near_in_stock_is_taken() -> None:
    # 2 is the geometric mean of 1 and 4, and 3 k that of 1 and 9 k; by difference both would differ.
    assert Shelf(E24, 1, (1e3, 4e3)).nearest(2e3) == 1e3
    assert Shelf(E24, 1, (1e3, 9e3)).nearest(3e3) == 1e3
    assert Shelf(E24, 1, (1e3, 9e3)).nearest(3000.001) == 9e3


def test_one_value_in_stock_is_all_there_is() -> None:
    assert Shelf(E24, 2, (4.7e3,)).around(100.0) == (4.7e3,)


# --- of a stage ------------------------------------------------------------------------------------


def test_only_free_resistors_have_a_shelf_in_the_stage_s_order() -> None:
    of = with_resistor(free_divider(fixed={"RC": 3.3e3}), "R1", series="E12")
    found = shelves(of, SERIES)
    assert list(found) == ["R1", "R2", "RE"]
    assert {name: shelf.series.name for name, shelf in found.items()} == {
        "R1": "E12", "R2": "E24", "RE": "E24"
    }  # fmt: skip
    assert all(shelf.in_stock is None for shelf in found.values())


def test_each_resistor_is_offered_what_meets_its_demand() -> None:
    stock = drawer(
        StockItem(value=10e3, tolerance=0.01), StockItem(value=1e3, tolerance=0.05), StockItem(value=2.2e3),
        StockItem(value=3.3e3, tolerance=0.01, quantity=0),
    )  # fmt: skip
    of = with_resistors(replace(free_divider(), stock=stock), tolerance=0.05)
    found = shelves(with_resistor(of, "RE", tolerance=0.01), SERIES)
    assert found["RE"].in_stock == (2.2e3, 10e3)
    assert found["RC"].in_stock == (1e3, 2.2e3, 10e3)


def test_every_resistor_that_nothing_in_stock_serves_is_named_with_what_it_asks() -> None:
    stock = drawer(StockItem(value=1e3, tolerance=0.02, tempco=2e-4, power_rating=0.25))
    of = with_resistors(replace(free_divider(fixed={"R1": 68e3}), stock=stock), tolerance=0.02)
    of = with_resistor(of, "R1", tolerance=0.001)  # has a value: not asked for
    of = with_resistor(of, "R2", tolerance=0.01)
    of = with_resistor(of, "RC", tempco=5e-5, power_rating=0.5)
    with pytest.raises(PhysicallyImpossible, match="the one part in stock will not do") as caught:
        shelves(of, SERIES)
    assert [(fault.file, fault.key) for fault in caught.value.faults] == [
        ("invented.csv", "resistors.R2"), ("invented.csv", "resistors.RC")
    ]  # fmt: skip
    first, second = caught.value.faults
    assert first.allowed == "a tolerance of 1 % at most"
    assert second.allowed == "a tolerance of 2 % at most, a tempco of 50 ppm/K at most, 500 mW at least"


def test_demand_for_any_part_is_told_as_that() -> None:
    of = replace(free_divider(), stock=drawer(StockItem(value=1e3, quantity=0)))
    with pytest.raises(PhysicallyImpossible, match="any part of which there is one") as caught:
        shelves(with_resistors(of, tolerance_stated=False), SERIES)
    assert len(caught.value.faults) == 4
