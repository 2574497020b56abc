"""The sets that are compared: all around the ideal values, as far as there are pieces for them."""

from __future__ import annotations

from dataclasses import replace
from itertools import permutations, product
from math import prod

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from variation.stages import with_resistor, with_resistors

from biasband.errors import PhysicallyImpossible, UsageError
from biasband.files.series_files import load_all
from biasband.stage import Stage, StockItem, Target
from biasband.values import candidates
from biasband.values.candidates import MOST_SETS, candidate_sets, stock_warnings
from biasband.values.choosing import choose
from biasband.values.device import refined
from biasband.values.ideal import Ideal, ideal
from biasband.values.shelf import shelves
from values.test_ideal import target_stage
from values.test_shelf import drawer, free_divider

SERIES = load_all()


def exact_of(of: Stage) -> Ideal:
    """The ideal values of a stage."""
    fixed = {r.name: r.value for r in of.resistors if r.value is not None}
    return ideal(of, of.target, fixed, refined(of))


def sets_of(of: Stage, *, home: tuple[float, ...] | None = None) -> list[tuple[float, ...]]:
    """Its candidate sets, home being the nearest values unless given."""
    exact, room = exact_of(of), shelves(of, SERIES)
    nearest = tuple(shelf.nearest(exact.steps[name].ohms) for name, shelf in room.items())
    return candidate_sets(of, exact, room, home or nearest)


def warned(of: Stage, values: dict[str, float]) -> list[str]:
    """What is said about a stock list and these values."""
    return list(stock_warnings(of, exact_of(of), shelves(of, SERIES), values))


def two_free() -> Stage:
    """A divider whose RC and RE are free."""
    return free_divider(fixed={"R1": 68e3, "R2": 13e3})


def test_sets_are_all_combinations_of_the_values_around_ascending() -> None:
    of = two_free()
    exact = exact_of(of)
    around = [shelf.around(exact.steps[name].ohms) for name, shelf in shelves(of, SERIES).items()]
    assert [len(values) for values in around] == [5, 5]
    assert sets_of(of) == sorted(product(*around))


def test_order_of_values_in_a_set_is_that_of_the_free_resistors() -> None:
    of = with_resistor(with_resistor(two_free(), "RC", search_steps=0), "RE", search_steps=1)
    (RC,), REs = {s[0] for s in sets_of(of)}, [s[1] for s in sets_of(of)]
    exact = exact_of(of).steps
    assert RC == pytest.approx(exact["RC"].ohms, rel=0.075)  # within the worst error of E24, 7.4 %
    assert REs[1] == pytest.approx(exact["RE"].ohms, rel=0.075)


def test_set_of_nearest_values_is_compared_though_it_lies_outside() -> None:
    of = two_free()
    far = (47.0, 1e6)
    assert set(sets_of(of, home=far)) == {*sets_of(of), far}
    assert sets_of(of, home=far) == sorted(sets_of(of, home=far))
    inside = sets_of(of)[3]
    assert sets_of(of, home=inside) == sets_of(of)  # not twice


def test_more_sets_than_can_be_compared_are_refused_before_they_are_made() -> None:
    of = with_resistors(free_divider(), search_steps=10)
    assert sum(1 for _ in product(range(21), repeat=4)) <= MOST_SETS  # 194 481: just allowed
    too_many = with_resistor(of, "RC", search_steps=100)
    with pytest.raises(UsageError, match=f"{21**3 * 201} sets of values to compare; at most {MOST_SETS}"):
        sets_of(too_many)
    with pytest.raises(UsageError, match="lower search_steps, or give some resistors their value"):
        choose(with_resistors(of, search_steps=100), SERIES)


def test_exactly_the_most_sets_are_allowed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(candidates, "MOST_SETS", 25)
    assert len(sets_of(two_free())) == 25
    monkeypatch.setattr(candidates, "MOST_SETS", 24)
    with pytest.raises(UsageError, match="25 sets of values to compare; at most 24"):
        sets_of(two_free())


# --- pieces ------------------------------------------------------------------------------------------


def pieces_serve(of: Stage, values: tuple[float, ...]) -> bool:
    """By trying every way to hand out the single pieces of the list."""
    free = [resistor for resistor in of.resistors if resistor.value is None]
    pieces = [
        item for item in of.stock.items
        for _ in range(len(free) if item.quantity is None else min(item.quantity, len(free)))
    ]  # fmt: skip
    return any(
        all(
            piece.value == value
            and (piece.tolerance is None or piece.tolerance <= resistor.tolerance)
            for piece, value, resistor in zip(given, values, free, strict=True)
        )
        for given in permutations(pieces, len(free))
    )  # fmt: skip


items = st.builds(
    StockItem,
    value=st.sampled_from([2.7e3, 3.3e3, 3.9e3]),
    tolerance=st.sampled_from([None, 0.01, 0.05]),
    quantity=st.sampled_from([0, 1, 2, None]),
)


@settings(max_examples=50, deadline=None)
@given(st.lists(items, min_size=1, max_size=4), st.sampled_from([0.01, 0.05]), st.sampled_from([0.01, 0.05]))
def test_sets_are_those_that_the_pieces_in_stock_serve(
    listed: list[StockItem], first: float, second: float
) -> None:
    of = replace(two_free(), stock=drawer(*listed))
    of = with_resistor(with_resistor(of, "RC", tolerance=first), "RE", tolerance=second)
    of = with_resistors(of, search_steps=9)
    every = product((2.7e3, 3.3e3, 3.9e3), repeat=2)
    expected = [values for values in every if pieces_serve(of, values)]
    if expected:
        assert sets_of(of, home=expected[0]) == expected
    else:
        with pytest.raises(PhysicallyImpossible, match=r"none of the|the one part|enough pieces for RC, RE"):
            sets_of(of)


def test_one_piece_for_two_resistors_is_told_with_the_file() -> None:
    of = replace(two_free(), stock=drawer(StockItem(value=3.3e3, quantity=1)))
    with pytest.raises(PhysicallyImpossible, match="enough pieces for RC, RE") as caught:
        sets_of(of)
    (fault,) = caught.value.faults
    assert (fault.file, fault.key) == ("invented.csv", "quantity")
    two = replace(of, stock=drawer(StockItem(value=3.3e3, quantity=2)))
    assert sets_of(two) == [(3.3e3, 3.3e3)]


def test_home_that_the_pieces_do_not_serve_is_left_out() -> None:
    of = replace(two_free(), stock=drawer(StockItem(value=3.3e3, quantity=1), 3.6e3))
    assert sets_of(of, home=(3.3e3, 3.3e3)) == [(3.3e3, 3.6e3), (3.6e3, 3.3e3), (3.6e3, 3.6e3)]
    contest = choose(of, SERIES).contest
    assert contest.sets == 3 and (3.3e3, 3.3e3) not in [each.values for each in contest.contenders]


def test_too_few_pieces_of_the_nearest_values_are_warned_of() -> None:
    of = replace(two_free(), stock=drawer(StockItem(value=3.3e3, quantity=1), 1e3))
    text = "the stock list has too few pieces of a value that more than one resistor has"
    assert text in warned(of, {"RC": 3.3e3, "RE": 3.3e3})
    assert text not in warned(of, {"RC": 3.3e3, "RE": 1e3})
    assert text not in warned(of, {"RC": 1e3, "RE": 1e3})  # not counted: does not run out


def test_stock_far_from_an_ideal_value_is_warned_of_with_how_far() -> None:
    exact = exact_of(two_free()).steps
    near, far = exact["RC"].ohms * 1.19, exact["RE"].ohms * 1.25
    of = replace(two_free(), stock=drawer(near, 100 * near))
    assert not [w for w in warned(of, {"RC": near, "RE": near}) if w.startswith("RC")]
    of = replace(two_free(), stock=drawer(far, exact["RC"].ohms))
    (warning,) = warned(of, {"RC": exact["RC"].ohms, "RE": far})
    assert warning.startswith("RE: the nearest in stock") and warning.endswith("+25 % off")
    below = replace(two_free(), stock=drawer(exact["RE"].ohms * 0.75, exact["RC"].ohms))
    (warning,) = warned(below, {"RC": exact["RC"].ohms, "RE": exact["RE"].ohms * 0.75})
    assert warning.endswith("-25 % off")


def test_series_never_runs_out_and_is_never_far() -> None:
    of = with_resistors(free_divider(), series="E3")  # its worst error is 48 %
    exact = exact_of(of)
    values = {name: shelf.nearest(exact.steps[name].ohms) for name, shelf in shelves(of, SERIES).items()}
    assert warned(of, values) == []


def test_choice_counts_the_sets_it_compared() -> None:
    of = target_stage("base-resistor", Target(collector_current=1e-3), names=("RB", "RC"))
    of = with_resistor(of, "RB", search_steps=3)
    steps = (7, 5)
    assert choose(of, SERIES).contest.sets in (prod(steps), prod(steps) + 1)  # home may lie outside
