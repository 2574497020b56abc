"""What a stock list can serve, asked of a small one by hand."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import permutations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.parts.allotment import allot, enough_in_stock
from biasband.parts.stock import Demand, demand_of, pieces_in_stock, values_in_stock
from biasband.stage import FileRecord, Resistor, Stock, StockItem

ANYTHING = Demand()


def best_item(stock: Stock, value: float, demand: Demand) -> StockItem | None:
    """What a lone resistor gets."""
    return allot(stock, (value,), (demand,))[0]


def stock_of(*items: StockItem) -> Stock:
    return Stock(items=items, file=FileRecord(path="invented.csv", sha256=""))


# Expected answers are the documented rule applied by eye.
SMALL = stock_of(
    StockItem(value=10e3),
    StockItem(value=1e3, tolerance=0.05, tempco=250e-6, power_rating=0.25, quantity=40, price=0.01),
    StockItem(value=1e3, tolerance=0.01, tempco=100e-6, power_rating=0.25, quantity=3, price=0.03),
    StockItem(value=4.7e3, tolerance=0.01, tempco=50e-6, power_rating=0.6, quantity=2, price=0.05),
    StockItem(value=2.2e3, tolerance=0.01, quantity=0),
)


@pytest.mark.parametrize(
    ("demand", "values"),
    [
        (ANYTHING, (1e3, 4.7e3, 10e3)),
        (Demand(tolerance=0.05), (1e3, 4.7e3, 10e3)),
        (Demand(tolerance=0.01), (1e3, 4.7e3, 10e3)),
        (Demand(tolerance=0.005), (10e3,)),
        (Demand(tempco=50e-6), (4.7e3, 10e3)),
        (Demand(power_rating=0.25), (1e3, 4.7e3, 10e3)),
        (Demand(power_rating=0.5), (4.7e3, 10e3)),
        (Demand(tolerance=0.01, tempco=100e-6, power_rating=0.6), (4.7e3, 10e3)),
    ],
)
def test_values_are_those_of_items_that_state_nothing_worse(
    demand: Demand, values: tuple[float, ...]
) -> None:
    assert values_in_stock(SMALL, demand) == values


def test_cheapest_item_that_serves_is_the_best() -> None:
    cheap, tight = SMALL.items[1:3]
    assert best_item(SMALL, 1e3, ANYTHING) is cheap
    assert best_item(SMALL, 1e3, Demand(tolerance=0.01)) is tight
    assert best_item(SMALL, 1e3, Demand(tolerance=0.001)) is None
    assert best_item(SMALL, 2.2e3, ANYTHING) is None  # none left
    assert best_item(SMALL, 3.3e3, ANYTHING) is None


@pytest.mark.parametrize(
    ("better", "worse"),
    [
        (StockItem(value=1e3, price=0.5), StockItem(value=1e3, tolerance=0.01)),
        (StockItem(value=1e3, tolerance=0.01), StockItem(value=1e3, tolerance=0.02)),
        (StockItem(value=1e3, tolerance=0.02), StockItem(value=1e3)),
        (StockItem(value=1e3, tempco=1e-5), StockItem(value=1e3, tempco=1e-4)),
        (StockItem(value=1e3, power_rating=0.5), StockItem(value=1e3, power_rating=0.25)),
        (StockItem(value=1e3, price=0.0), StockItem(value=1e3, price=0.01, tolerance=0.01)),
    ],
)
def test_what_is_stated_and_tighter_comes_first_at_the_same_price(
    better: StockItem, worse: StockItem
) -> None:
    assert best_item(stock_of(better, worse), 1e3, ANYTHING) is better
    assert best_item(stock_of(worse, better), 1e3, ANYTHING) is better


def test_first_of_equal_items_is_taken() -> None:
    first, second = (StockItem(value=1e3, location=place) for place in "AB")
    assert best_item(stock_of(first, second), 1e3, ANYTHING) is first


def test_pieces_are_counted_over_items_that_serve() -> None:
    assert pieces_in_stock(SMALL, 1e3, ANYTHING) == 43
    assert pieces_in_stock(SMALL, 1e3, Demand(tolerance=0.01)) == 3
    assert pieces_in_stock(SMALL, 3.3e3, ANYTHING) == 0
    assert pieces_in_stock(SMALL, 2.2e3, ANYTHING) == 0


def test_item_without_a_quantity_leaves_the_pieces_uncounted() -> None:
    assert pieces_in_stock(SMALL, 10e3, ANYTHING) is None
    mixed = stock_of(StockItem(value=1e3, quantity=2), StockItem(value=1e3, tolerance=0.05))
    assert pieces_in_stock(mixed, 1e3, ANYTHING) is None
    assert pieces_in_stock(mixed, 1e3, Demand(tolerance=0.01)) == 2


def test_resistor_demands_what_the_stage_states_of_it() -> None:
    stated = Resistor(name="RC", tolerance=0.01, tempco=100e-6, power_rating=0.25)
    assert demand_of(stated) == Demand(tolerance=0.01, tempco=100e-6, power_rating=0.25)
    assert demand_of(Resistor(name="RC", tolerance_stated=False)) == ANYTHING
    # "0 %" is a demand; a tempco of zero is the default and none.
    assert demand_of(Resistor(name="RC", tolerance=0.0)) == Demand(tolerance=0.0)


figures = st.none() | st.floats(0.0, 0.1)
items = st.builds(
    StockItem,
    value=st.sampled_from([1e3, 2.2e3, 4.7e3]),
    tolerance=figures,
    tempco=figures,
    power_rating=figures,
    quantity=st.none() | st.integers(0, 3),
    price=figures,
)
demands = st.builds(Demand, tolerance=figures, tempco=figures, power_rating=figures)


@given(st.lists(items), demands)
def test_answers_to_the_three_questions_agree(listed: list[StockItem], demand: Demand) -> None:
    stock = stock_of(*listed)
    for value in (1e3, 2.2e3, 4.7e3):
        there = value in values_in_stock(stock, demand)
        assert there == (best_item(stock, value, demand) is not None)
        assert there == (pieces_in_stock(stock, value, demand) != 0)


@given(st.lists(items), demands, st.floats(0.0, 0.1))
def test_demanding_more_never_offers_more(listed: list[StockItem], demand: Demand, tolerance: float) -> None:
    stock = stock_of(*listed)
    loose = Demand(tempco=demand.tempco, power_rating=demand.power_rating)
    tight = Demand(tolerance=tolerance, tempco=demand.tempco, power_rating=demand.power_rating)
    assert set(values_in_stock(stock, tight)) <= set(values_in_stock(stock, loose))


def handed_out(stock: Stock, values: Sequence[float], wanted: Sequence[Demand]) -> bool:
    """Whether single pieces can be handed to all, by trying every way; uncounted items never run out."""
    pieces = [
        item
        for item in stock.items
        for _ in range(len(wanted) if item.quantity is None else min(item.quantity, len(wanted)))
    ]
    return any(
        all(
            piece.value == value and demand.met_by(piece)
            for piece, value, demand in zip(given_out, values, wanted, strict=True)
        )
        for given_out in permutations(pieces, len(wanted))
    )


few_figures = st.sampled_from([None, 0.01, 0.05])
few_items = st.builds(
    StockItem,
    value=st.sampled_from([1e3, 2.2e3]),
    tolerance=few_figures,
    tempco=few_figures,
    quantity=st.sampled_from([None, 0, 1, 1, 2]),
)
few_demands = st.builds(Demand, tolerance=few_figures, tempco=few_figures)


@given(
    st.lists(few_items, max_size=4),
    st.lists(st.tuples(st.sampled_from([1e3, 1e3, 2.2e3]), few_demands), max_size=3),
)
def test_there_are_enough_where_some_way_to_hand_them_out_serves_all(
    listed: list[StockItem], wanted: list[tuple[float, Demand]]
) -> None:
    stock = stock_of(*listed)
    values, asked = [value for value, _ in wanted], [demand for _, demand in wanted]
    assert enough_in_stock(stock, values, asked) == handed_out(stock, values, asked)


# One piece at 1 % and one at 5 %, handed out by eye.
@pytest.mark.parametrize(
    ("tolerances", "enough"),
    [
        ((), True),
        ((0.01, 0.05), True),
        ((0.05, 0.05), True),
        ((0.01, 0.01), False),
        ((0.05, 0.05, 0.05), False),
    ],
)
def test_loose_part_does_not_take_the_only_tight_one(tolerances: tuple[float, ...], enough: bool) -> None:
    stock = stock_of(
        StockItem(value=10e3, tolerance=0.01, quantity=1), StockItem(value=10e3, tolerance=0.05, quantity=1)
    )
    asked = [Demand(tolerance=tolerance) for tolerance in tolerances]
    assert enough_in_stock(stock, [10e3] * len(asked), asked) is enough


def test_value_that_is_not_in_stock_is_not_enough() -> None:
    assert not enough_in_stock(SMALL, [3.3e3], [ANYTHING])
    assert not enough_in_stock(SMALL, [2.2e3], [ANYTHING])  # none left
    assert enough_in_stock(SMALL, [1e3, 10e3], [ANYTHING, ANYTHING])
