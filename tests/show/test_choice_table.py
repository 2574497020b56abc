"""The table of compared values: the sets side by side, each with its worst case, read back and compared."""

from __future__ import annotations

import math
import re
from dataclasses import replace

import pytest

from biasband.quantity import Kind, parse
from biasband.show.choice_table import choice_table, typed
from tests.show.reviews import FAILING, reviewed
from tests.show.test_tables import cells

PASSING = "soil_probe"
"""A sample whose best sets pass; its choice, of 125 sets, is among the quick ones."""

THREE_DIGITS = 5e-3 * 1.001
"""Half a unit in the third digit, at worst of 1.00; and a little for the reading back."""


def contest_of(name):
    contest = reviewed(name).design.contest
    assert contest is not None and len(contest.contenders) == 3
    return contest


def table_of(contest, name=PASSING):
    return choice_table(contest, reviewed(name).stage)


def notes_of(contest, name=PASSING):
    return " ".join(table_of(contest, name).notes)


def apart(contest):
    """The same with a nearest set that is not among the contenders."""
    values = tuple(2.0 * ohms for ohms in contest.contenders[0].values)
    return replace(contest, nearest=replace(contest.contenders[-1], values=values))


def current_at(contest, share):
    """The same with a collector current of the chosen set that is this share of its target."""
    target = reviewed(PASSING).stage.target.collector_current
    first, *others = contest.contenders
    return replace(contest, contenders=(replace(first, current=share * target), *others))


@pytest.mark.parametrize("name", [PASSING, FAILING])
def test_rows_hold_the_sets_in_their_order(name):
    contest = apart(contest_of(name))
    sets = [*contest.contenders, contest.nearest]
    table = table_of(contest, name)
    assert cells(table, "set") == ["chosen", "2nd", "3rd", "nearest"]
    for place, resistor in enumerate(contest.names):
        # Preferred values are written out in full.
        assert [parse(text, Kind.RESISTANCE) for text in cells(table, resistor)] == [
            each.values[place] for each in sets
        ]
    currents = [parse(text, Kind.CURRENT) for text in cells(table, "I_C")]
    assert currents == pytest.approx([each.current for each in sets], rel=THREE_DIGITS)
    for text, each in zip(cells(table, "share"), sets, strict=True):
        # Whole per cent.
        assert float(text.removesuffix(" %")) == pytest.approx(100.0 * each.share, abs=0.5001)
    for text, each in zip(cells(table, "smallest margin"), sets, strict=True):
        assert each.smallest.quantity in text


def test_chosen_set_is_the_one_that_the_stage_got():
    review, contest = reviewed(PASSING), contest_of(PASSING)
    chosen = [parse(cells(table_of(contest), name)[0], Kind.RESISTANCE) for name in contest.names]
    assert chosen == [review.stage.resistor(name).value for name in contest.names]


def test_nearest_set_among_the_contenders_is_marked_there_and_not_repeated():
    contest = contest_of(PASSING)
    first, second, _ = contest.contenders
    first = replace(first, current=first.current)  # of equal values, though not the same record
    assert cells(table_of(replace(contest, nearest=first)), "set") == ["chosen, nearest", "2nd", "3rd"]
    assert cells(table_of(replace(contest, nearest=second)), "set") == ["chosen", "2nd, nearest", "3rd"]


def test_nearest_set_that_the_stock_has_not_is_no_row():
    contest = replace(contest_of(PASSING), nearest=None)
    assert cells(table_of(contest), "set") == ["chosen", "2nd", "3rd"]
    said = "The nearest set has no row: the stock list has too few pieces"
    assert said in notes_of(contest) and said not in notes_of(contest_of(PASSING))


def test_title_counts_the_sets():
    # Three free resistors, two steps to each side (issue 3): 5³.
    assert "125 sets" in table_of(contest_of(PASSING)).title
    assert "1 set by" in table_of(replace(contest_of(PASSING), sets=1)).title


def test_failing_set_has_its_tone_and_names_what_fails():
    contest = contest_of(FAILING)
    for row, each in zip(table_of(contest, FAILING).rows, contest.contenders, strict=False):
        assert each.failing and row.tone == "fail"
        assert any(column.toned for column in table_of(contest, FAILING).columns)
        (below,) = row.below
        assert below.startswith("FAILS ")
        assert all(below.count(margin.quantity) == 1 for margin in each.failing)
    for row, each in zip(table_of(contest_of(PASSING)).rows, contest_of(PASSING).contenders, strict=False):
        assert not each.failing and (row.tone, row.below) == ("", ())


def test_requirement_is_named_with_its_id_and_a_standing_check_without():
    contest = contest_of(FAILING)
    row = contest.contenders[0].smallest
    assert not row.standing
    assert cells(table_of(contest, FAILING), "smallest margin")[0] == f"{row.id} {row.quantity}"
    standing = replace(contest.contenders[0], smallest=replace(row, standing=True))
    changed = replace(contest, contenders=(standing,), nearest=None)
    assert cells(table_of(changed, FAILING), "smallest margin") == [row.quantity]


def test_that_no_set_passes_is_said_only_where_none_does():
    said = "No set passes"
    assert said in notes_of(contest_of(FAILING), FAILING)
    assert said not in notes_of(contest_of(PASSING))
    good, bad = contest_of(PASSING).contenders[0], contest_of(FAILING).contenders[0].failing
    some = replace(contest_of(PASSING), contenders=(good, replace(good, failing=bad)))
    assert said not in notes_of(some)


def test_set_without_a_share_has_no_percentage():
    contest = contest_of(PASSING)
    none = replace(contest.contenders[0], share=-math.inf)
    without = replace(contest, contenders=(none,), nearest=None)
    assert cells(table_of(without), "share") == ["none"]
    assert "share none: " in notes_of(without) and "share none: " not in notes_of(contest)


def test_swing_is_shown_where_it_decides():
    contest = contest_of(PASSING)
    assert "swing" not in [column.heading for column in table_of(contest).columns]
    swings = (2.2604, 2.24, 0.9)
    contenders = tuple(
        replace(each, swing=swing) for each, swing in zip(contest.contenders, swings, strict=True)
    )
    by_swing = replace(contest, contenders=contenders, by_swing=True, nearest=None)
    texts = cells(table_of(by_swing), "swing")
    assert [parse(text, Kind.VOLTAGE) for text in texts] == pytest.approx(swings, rel=THREE_DIGITS)
    # Issue 3: without requirements the choice maximises the worst swing, and says so.
    assert "No requirements" in notes_of(by_swing) and "swing" in notes_of(by_swing)
    assert "No requirements" not in notes_of(contest)


@pytest.mark.parametrize(
    ("share", "said"),
    [(1.0, None), (1.099, None), (0.901, None), (1.101, "+10 %"), (0.85, "-15 %"), (1.2, "+20 %")],
)
def test_current_more_than_a_tenth_off_its_target_is_said(share, said):
    notes = notes_of(current_at(contest_of(PASSING), share))
    assert ("off its target" in notes) is (said is not None)
    if said:
        assert f"I_C of the chosen set is {said} off" in notes


def test_unsolved_current_of_the_chosen_set_is_not_passed_over():
    notes = notes_of(current_at(contest_of(PASSING), math.nan))
    assert "I_C of the chosen set is not solved" in notes and "nan" not in notes


def pinned(table):
    """The values of the hint, as --keep reads them."""
    hints = [note for note in table.notes if "--keep" in note]
    return {name: parse(text, Kind.RESISTANCE) for note in hints for name, text in KEEP.findall(note)}


KEEP = re.compile(r"--keep (\w+)=(\S+)")


@pytest.mark.parametrize("name", [PASSING, FAILING])
def test_hint_pins_the_whole_second_set(name):
    # What is left free is chosen anew, so that fewer values would not promise this set.
    contest = contest_of(name)
    second = dict(zip(contest.names, contest.contenders[1].values, strict=True))
    assert pinned(table_of(contest, name)) == second


def test_single_set_has_no_hint():
    contest = contest_of(PASSING)
    assert pinned(table_of(replace(contest, contenders=contest.contenders[:1]))) == {}


@pytest.mark.parametrize("ohms", [0.01, 0.047, 0.1, 0.47, 4.7, 1e3, 3300.0, 4.99e6, 1e9, 1e13, 123456.0])
def test_typed_value_is_read_back(ohms):
    assert parse(typed(ohms), Kind.RESISTANCE) == ohms
    assert " " not in typed(ohms)
