"""Pairs are offered where they are asked for, around the wanted value, and never chosen."""

from __future__ import annotations

from dataclasses import replace
from math import isnan

import pytest
from variation.stages import with_resistor

from biasband.files.series_files import load_all
from biasband.parts.pairs import pairs, pairs_among
from biasband.stage import Resistor, Stage, StockItem
from biasband.values.choosing import choose
from biasband.values.pairing import OFFERED, Offer, offers
from values.test_candidates import exact_of
from values.test_shelf import drawer, free_divider

SERIES = load_all()


def offered(of: Stage) -> dict[str, Offer]:
    """The offers of a stage by resistor."""
    steps = exact_of(of).steps if any(r.value is None for r in of.resistors) else {}
    return {offer.name: offer for offer in offers(of, steps, SERIES)}


def given(ohms: float, **more) -> Stage:
    """A divider whose file gives every value, and asks for pairs in place of RC [Ω]."""
    of = free_divider(fixed={"R1": 68e3, "R2": 13e3, "RC": ohms, "RE": 1e3})
    return with_resistor(of, "RC", pairs=True, **more)


def test_only_resistors_that_ask_are_offered_pairs() -> None:
    assert offered(free_divider()) == {}
    of = with_resistor(with_resistor(free_divider(), "RE", pairs=True), "R1", pairs=True)
    assert list(offered(of)) == ["R1", "RE"]


def test_free_resistor_is_offered_pairs_for_its_ideal_value() -> None:
    of = with_resistor(free_divider(), "RC", pairs=True, tolerance=0.01, tempco=1e-4)
    wanted = exact_of(of).steps["RC"].ohms
    offer = offered(of)["RC"]
    assert offer.wanted == wanted
    # The whole-series search is held against brute force in tests/parts/test_pairs.py.
    assert offer.pairs == pairs(SERIES["E24"], wanted, tolerance=0.01, tempco=1e-4, count=3)
    assert OFFERED == 3
    # Better than what one value of E24 can do at worst, 7.4 %, by far.
    assert abs(offer.pairs[0].error) < 0.005


def test_given_value_is_what_is_wanted_though_there_is_no_ideal_one() -> None:
    offer = offered(given(6.65e3))["RC"]
    assert (offer.wanted, offer.pairs[0].value) == (6.65e3, 6.65e3)
    assert offer.against[-1] == "Two parts and four solder joints instead of one part and two."


def test_preferred_value_needs_no_pair_and_that_is_said_first() -> None:
    assert "3.3 kΩ" in offered(given(3.3e3))["RC"].against[0]


def test_pairs_are_made_of_the_resistor_s_own_series_and_tolerance() -> None:
    best = offered(given(5e3, series="E12", tolerance=0.05, tempco=2e-4))["RC"].pairs[0]
    # E12: 10 k ∥ 10 k is 5 k exactly; alike parts move together: 5 %, 200 ppm/K.
    assert (best.first, best.second, best.connection, best.error) == (10e3, 10e3, "parallel", 0.0)
    assert best.tolerance_high == pytest.approx(0.05) and best.tempco == pytest.approx(2e-4)


def test_pairs_are_made_of_what_is_in_stock_where_there_is_a_list() -> None:
    of = replace(given(4e3, tolerance=0.01, tempco=1e-4), stock=drawer(1e3, 3e3, 12e3))
    offer = offered(of)["RC"]
    assert offer.pairs == pairs_among((1e3, 3e3, 12e3), 4e3, tolerance=0.01, tempco=1e-4, count=3)
    assert (offer.pairs[0].first, offer.pairs[0].second, offer.pairs[0].error) == (3e3, 1e3, 0.0)


@pytest.mark.parametrize("values", [(1e3,), (100e3, 1e6)])
def test_value_out_of_reach_of_every_pair_in_stock_is_warned_of(values: tuple[float, ...]) -> None:
    of = replace(given(4e3), stock=drawer(*values))
    offer = offered(of)["RC"]
    assert offer.pairs == ()
    design = choose(of, SERIES)
    assert design.offers == ()
    (warning,) = [text for text in design.warnings if "pairs" in text]
    assert warning.startswith("RC: no pairs to offer for 4 kΩ: stock: ") and "reach from" in warning


def test_only_piece_of_a_list_makes_no_pair_and_that_is_told() -> None:
    of = replace(given(4e3), stock=drawer(StockItem(value=4e3, quantity=1)))
    assert offered(of)["RC"].warning == "RC: no pairs to offer for 4 kΩ: stock has one piece alone"
    two = replace(of, stock=drawer(StockItem(value=4e3, quantity=2)))
    assert offered(two)["RC"].pairs[0].first == 4e3


def test_tolerance_and_tempco_that_are_not_stated_are_not_zero() -> None:
    best = offered(given(5e3, series="E12", tolerance_stated=False))["RC"].pairs[0]
    assert isnan(best.tolerance_high) and isnan(best.rss_low) and isnan(best.tempco)


def test_pair_in_stock_has_what_its_items_state() -> None:
    stock = drawer(StockItem(value=1e3, tolerance=0.001, tempco=25e-6), StockItem(value=3e3, tolerance=0.001))
    best = offered(replace(given(4e3, tolerance=0.01, tempco=1e-4), stock=stock))["RC"].pairs[0]
    assert best.tolerance_high == pytest.approx(0.001)
    assert best.tempco == pytest.approx(0.25 * 25e-6 + 0.75 * 100e-6)  # 1 of 4 kΩ at 25, 3 at the usual 100


def test_choice_hands_the_offers_on_and_takes_none_of_them() -> None:
    of = with_resistor(free_divider(), "RC", pairs=True)
    plain, design = choose(free_divider(), SERIES), choose(of, SERIES)
    assert [offer.name for offer in design.offers] == ["RC"]
    assert design.offers[0].wanted == exact_of(of).steps["RC"].ohms
    assert [r.value for r in design.stage.resistors] == [r.value for r in plain.stage.resistors]


def test_stage_whose_values_are_all_given_is_offered_pairs_too() -> None:
    design = choose(given(3.95e3), SERIES)
    assert [(offer.name, offer.wanted) for offer in design.offers] == [("RC", 3.95e3)]


def test_resistor_without_a_value_or_an_ideal_one_is_passed_over() -> None:
    of = replace(free_divider(), resistors=(Resistor(name="RC", pairs=True),))
    assert list(offers(of, {}, SERIES)) == []
