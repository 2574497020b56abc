"""Pieces handed out: as many as can be, the cheapest together, held against every way to do it."""

from __future__ import annotations

from itertools import permutations
from math import inf

from hypothesis import given, settings
from hypothesis import strategies as st

from biasband.parts.allotment import allot
from biasband.parts.stock import Demand
from biasband.stage import FileRecord, Stock, StockItem

ANY, TIGHT = Demand(), Demand(tolerance=0.01)


def stock_of(*items: StockItem) -> Stock:
    return Stock(items=items, file=FileRecord(path="invented.csv", sha256=""))


def item(price: float | None = None, **more) -> StockItem:
    return StockItem(**{"value": 10e3, "price": price, **more})


def test_one_value_is_taken_from_two_rows_where_one_has_too_few() -> None:
    near, far = item(0.01, quantity=1, location="A"), item(0.5, quantity=1, location="B")
    assert allot(stock_of(far, near), [10e3, 10e3], [ANY, ANY]) == (near, far)


def test_row_that_states_no_quantity_does_not_run_out() -> None:
    endless = item(0.5)
    assert allot(stock_of(endless), [10e3] * 3, [ANY] * 3) == (endless,) * 3


def test_tight_part_is_left_to_the_resistor_that_needs_it_though_it_is_the_cheapest() -> None:
    tight, loose = item(0.01, tolerance=0.01, quantity=1), item(0.03, tolerance=0.05, quantity=1)
    assert allot(stock_of(tight, loose), [10e3, 10e3], [ANY, TIGHT]) == (loose, tight)


def test_tight_and_loose_resistor_draw_on_the_same_row() -> None:
    (row,) = rows = (item(0.02, tolerance=0.01, quantity=2),)
    assert allot(stock_of(*rows), [10e3, 10e3], [TIGHT, Demand(tolerance=0.05)]) == (row, row)
    (row,) = rows = (item(0.02, tolerance=0.01, quantity=1),)
    assert allot(stock_of(*rows), [10e3, 10e3], [TIGHT, Demand(tolerance=0.05)]) == (row, None)


def test_what_is_not_there_is_none() -> None:
    assert allot(stock_of(item(quantity=0)), [10e3, 1e3], [ANY, ANY]) == (None, None)


pieces = st.builds(
    StockItem,
    value=st.sampled_from([1e3, 2e3]),
    tolerance=st.sampled_from([None, 0.01, 0.05]),
    price=st.sampled_from([0.01, 0.02, 0.05, 0.1]),
    quantity=st.sampled_from([0, 1, 2]),
)
seekers = st.tuples(st.sampled_from([1e3, 2e3]), st.sampled_from([ANY, TIGHT, Demand(tolerance=0.05)]))


def cost(found) -> tuple[int, float]:
    """What decides: how many go without, then the price of all."""
    return found.count(None), sum(each.price for each in found if each is not None)


@settings(max_examples=200, deadline=None)
@given(st.lists(pieces, max_size=4), st.lists(seekers, min_size=1, max_size=3))
def test_no_other_way_serves_more_or_costs_less(items, wanted) -> None:
    found = allot(stock_of(*items), [value for value, _ in wanted], [demand for _, demand in wanted])
    assert all(
        each is None or (each.value == value and demand.met_by(each))
        for each, (value, demand) in zip(found, wanted, strict=True)
    )
    single = [each for each in items for _ in range(each.quantity)] + [None] * len(wanted)
    assert all(sum(each is row for each in found) <= row.quantity for row in items)
    best = min(
        (
            cost(way)
            for way in permutations(single, len(wanted))
            if all(e is None or (e.value == v and d.met_by(e)) for e, (v, d) in zip(way, wanted, strict=True))
        ),
        default=(0, inf),
    )
    fewest, price = cost(found)
    assert (fewest, round(price, 9)) == (best[0], round(best[1], 9))
