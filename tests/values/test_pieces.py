"""Pieces that given values use up are not there for those to choose."""

from __future__ import annotations

from dataclasses import replace

import pytest
from variation.stages import with_resistor

from biasband.errors import PhysicallyImpossible, UsageError
from biasband.files.series_files import load_all
from biasband.stage import Stage, StockItem
from biasband.values.choosing import choose
from biasband.values.keeping import keep
from biasband.values.pieces import pieces_for
from values.test_shelf import drawer, free_divider

SERIES = load_all()


def counted(**more) -> StockItem:
    return StockItem(**{"value": 10e3, "quantity": 1, **more})


def in_stock(of: Stage, *items: StockItem | float) -> Stage:
    return replace(of, stock=drawer(*items))


def test_piece_of_a_kept_value_is_not_chosen_again() -> None:
    # R1 takes the only 68 kΩ; the nearest to R2's ideal would be 68 kΩ again, had it a second piece.
    of = in_stock(free_divider(), counted(value=68e3), 47e3, 2e3, 1e3)
    design = choose(keep(of, {"R1": 68e3, "RE": 1e3}, SERIES), SERIES)
    assert design.stage.resistor("R2").value != 68e3
    assert 68e3 not in {values for each in design.contest.contenders for values in each.values}
    nearest = design.contest.nearest
    assert nearest is None or 68e3 not in nearest.values


def test_piece_of_a_value_of_the_stage_file_is_not_chosen_again() -> None:
    of = in_stock(free_divider(fixed={"R1": 68e3, "RE": 1e3}), counted(value=68e3), 12e3, 3.9e3)
    assert not pieces_for(of, ("R2", "RC")).enough((68e3, 3.9e3))
    assert pieces_for(of, ("R2", "RC")).enough((12e3, 3.9e3))


def test_value_of_the_stage_file_that_is_not_in_stock_claims_nothing() -> None:
    of = in_stock(free_divider(fixed={"R1": 68e3, "RE": 1e3}), counted(value=12e3), counted(value=3.9e3))
    assert pieces_for(of, ("R2", "RC")).enough((12e3, 3.9e3))
    tight = with_resistor(of, "R1", value=12e3, tolerance=0.001)  # nor one that none in stock can be
    loose = in_stock(tight, counted(value=12e3, tolerance=0.05), counted(value=3.9e3))
    assert pieces_for(loose, ("R2", "RC")).enough((12e3, 3.9e3))


def test_values_of_the_stage_file_that_the_list_has_too_few_of_leave_the_rest_to_choose() -> None:
    of = in_stock(free_divider(fixed={"R1": 68e3, "RE": 68e3}), counted(value=68e3), 12e3, 3.9e3)
    assert pieces_for(of, ("R2", "RC")).enough((12e3, 3.9e3))
    assert not pieces_for(of, ("R2", "RC")).enough((68e3, 3.9e3))


def test_that_too_few_are_left_beside_the_values_given_is_told() -> None:
    of = in_stock(free_divider(), counted(value=68e3))
    with pytest.raises(PhysicallyImpossible, match="enough pieces for R2, RC, RE beside the values given"):
        choose(keep(of, {"R1": 68e3}, SERIES), SERIES)


def test_more_kept_values_than_pieces_are_refused() -> None:
    of = in_stock(free_divider(), counted())
    with pytest.raises(UsageError, match="too few pieces of 10 kΩ in stock for R1, RC, RE") as caught:
        keep(of, {"R1": 10e3, "RC": 10e3, "RE": 10e3}, SERIES)
    assert len(str(caught.value).splitlines()) == 2  # one of the three has its piece
    assert keep(of, {"R1": 10e3}, SERIES).resistor("R1").kept


def test_kept_value_whose_piece_the_stage_file_uses_is_refused() -> None:
    of = in_stock(free_divider(fixed={"RE": 10e3}), counted())
    with pytest.raises(UsageError, match="R1: too few pieces of 10 kΩ in stock for RE, R1"):
        keep(of, {"R1": 10e3}, SERIES)
    enough = in_stock(of, counted(quantity=2))
    assert keep(enough, {"R1": 10e3}, SERIES).resistor("R1").value == 10e3


def test_what_is_not_counted_does_not_run_out() -> None:
    of = in_stock(free_divider(), 10e3)
    assert keep(of, {"R1": 10e3, "RC": 10e3, "RE": 10e3}, SERIES).resistor("RC").value == 10e3
    assert pieces_for(free_divider(), ("R1", "R2")).enough((1e3, 1e3))  # no list: nothing runs out


@pytest.mark.parametrize("value", [0.0, -3.3e3, 1e300, float("nan"), float("inf")])
def test_kept_value_is_not_called_a_value_to_snap(value: float) -> None:
    with pytest.raises(UsageError, match="RC: a resistance must be above 0 and finite") as caught:
        keep(free_divider(), {"RC": value}, SERIES)
    assert "to snap" not in str(caught.value)
