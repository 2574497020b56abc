"""Pairs of preferred values: the best proved the best against all pairs, and what a pair is like.

Every expected figure is Ohm's law written out here a second time (series R1 + R2, parallel
R1·R2 / (R1 + R2)), or worked by hand beside the check; what a designer holds against a pair is
common practice.
"""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Decimal
from fractions import Fraction
from functools import cache
from itertools import product
from math import inf, log, nan, sqrt
from typing import Any, NamedTuple

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from biasband.errors import UsageError
from biasband.files.series_files import load_series
from biasband.parts.pair_reasons import against
from biasband.parts.pairs import Pair, pairs, pairs_among
from biasband.parts.series import nearest

DRAWER = (1.0, 1.5, 2.2, 3.3, 4.7, 6.8, 10.0, 15.0)
"""[Ω] Invented."""

ROUNDING = 1e-12
"""Room for a few roundings of a double (each 1.1e-16), divided by shares and tolerances above 1e-3."""

OHMS = {"series": lambda a, b: a + b, "parallel": lambda a, b: a * b / (a + b)}

# Decimal values of few figures, so that exact hits and exact ties are frequent.
FEW_FIGURES = st.builds(
    lambda figures, exponent: float(Decimal(figures).scaleb(exponent)), st.integers(1, 60), st.integers(-2, 3)
)
DRAWERS = st.lists(FEW_FIGURES, min_size=1, max_size=9, unique=True).map(lambda drawn: tuple(sorted(drawn)))
TOLERANCES = st.sampled_from([0.0, 0.001, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 0.9])
OHMS_DRAWN = st.sampled_from([1.0, 2.2, 47.0, 100.0, 330.0, 1e3, 6.8e3])


@st.composite
def drawn_pairs(draw: st.DrawFn) -> tuple[Pair, tuple[float, ...], tuple[float, ...]]:
    """A pair, and the tolerances and tempcos of its first and second part."""
    values = tuple(sorted({draw(OHMS_DRAWN), draw(OHMS_DRAWN)}))
    tolerances = tuple(draw(TOLERANCES) for _ in values)
    tempcos = tuple(draw(st.sampled_from([0.0, 1e-5, 1e-4, 5e-3])) for _ in values)
    found = pairs_among(values, values[0], tolerance=tolerances, tempco=tempcos, count=6)
    pair = draw(st.sampled_from(found))
    places = [values.index(ohms) for ohms in (pair.first, pair.second)]
    return pair, tuple(tolerances[each] for each in places), tuple(tempcos[each] for each in places)


class Total(NamedTuple):
    """A pair's total, exactly, and how it ranks among equally near ones."""

    ohms: Fraction
    rank: tuple[int, Fraction, Fraction, bool]
    pair: tuple[float, float, str]


@cache
def all_totals(values: tuple[float, ...]) -> list[Total]:
    """Every pair there is; doubles are read as the decimals they are written as."""
    found = []
    for connection, one, other in product(("series", "parallel"), values, values):
        if one >= other:
            first, second = Fraction(str(one)), Fraction(str(other))
            ohms = OHMS[connection](first, second)
            rank = (len({one, other}), first / second, ohms, connection == "parallel")
            found.append(Total(ohms, rank, (one, other, connection)))
    return found


def brute_force(values: tuple[float, ...], value: float, count: int) -> list[tuple[float, float, str]]:
    """All pairs sorted by the order that is promised, ties included."""
    wanted = Fraction(str(value))

    def order(total: Total) -> tuple[Any, ...]:
        return max(total.ohms, wanted) / min(total.ohms, wanted), total.rank

    return [total.pair for total in sorted(all_totals(values), key=order)[:count]]


def ends(found: Sequence[Pair]) -> list[tuple[float, float, str]]:
    return [(pair.first, pair.second, pair.connection) for pair in found]


def three_decades(name: str) -> tuple[float, ...]:
    """100 Ω to 100 kΩ, from the mantissas alone."""
    mantissas = load_series(name).mantissas
    return (*(float(each.scaleb(decade)) for decade in (2, 3, 4) for each in mantissas), 1e5)


# ---- the best is the best


@settings(deadline=None)  # all pairs, some thousand fractions, on a busy machine
@given(
    st.sampled_from(["E12", "E24"]),
    st.one_of(
        st.floats(50.0, 2e5),
        st.builds(
            lambda figures, exponent: figures * 10.0**exponent, st.integers(100, 999), st.integers(0, 2)
        ),
    ),
    st.integers(1, 12),
)
def test_pairs_of_a_series_are_those_of_brute_force(name: str, value: float, count: int) -> None:
    found = pairs(load_series(name), value, tolerance=0.05, count=count, lowest=100.0, highest=1e5)
    assert ends(found) == brute_force(three_decades(name), value, count)


@settings(deadline=None)
@given(DRAWERS, st.data(), st.one_of(st.just(1), st.integers(1, 20)))
def test_pairs_among_any_values_are_those_of_brute_force(
    values: tuple[float, ...], data: st.DataObject, count: int
) -> None:
    exact_hits = [float(total.ohms) for total in all_totals(values)]
    value = data.draw(st.one_of(st.sampled_from(exact_hits), FEW_FIGURES))
    assume(values[0] / 2 <= value <= 2 * values[-1])
    found = pairs_among(values, value, tolerance=0.01, count=count)
    assert ends(found) == brute_force(values, value, count)


@given(DRAWERS, st.integers(1, 100))
def test_pairs_are_different_and_no_more_than_there_are(values: tuple[float, ...], count: int) -> None:
    found = ends(pairs_among(values, values[0], tolerance=0.01, count=count))
    assert len(set(found)) == len(found) == min(count, len(values) * (len(values) + 1))


def test_sum_that_doubles_miss_is_exact_and_ranks_so() -> None:
    # 0.1 + 0.2 is not 0.3 in doubles, 0.05 + 0.25 is; exactly both are, and 2:1 is more equal than 5:1.
    found = pairs_among((0.05, 0.1, 0.2, 0.25), 0.3, tolerance=0.0, count=2)
    assert ends(found) == [(0.2, 0.1, "series"), (0.25, 0.05, "series")]
    assert [(pair.total, pair.error) for pair in found] == [(0.3, 0.0), (0.3, 0.0)]


def test_pairs_that_are_apart_by_less_than_a_double_shows_are_told_apart() -> None:
    # Over 1e12, the sums with 1e-4 and 1.1e-4 are 1 + 1e-16 and 1 + 1.1e-16, both the double 1.0 (half its
    # step is 1.11e-16). The nearer one wins, although the other is the more equal.
    found = pairs_among((1e-4, 1.1e-4, 1e12), 1e12, tolerance=0.0, count=2)
    assert ends(found) == [(1e12, 1e-4, "series"), (1e12, 1.1e-4, "series")]


# By hand: 5 + 1 = 6, and 12 ∥ 4 = 3, each with a neighbour of the second part one unit further up.
@pytest.mark.parametrize(
    ("values", "value", "best"),
    [((1.0, 2.0, 5.0), 6.0, (5.0, 1.0, "series")), ((4.0, 5.0, 12.0), 3.0, (12.0, 4.0, "parallel"))],
)
def test_second_part_that_is_exactly_right_is_found(
    values: tuple[float, ...], value: float, best: tuple[float, float, str]
) -> None:
    assert ends(pairs_among(values, value, tolerance=0.05, count=1)) == [best]


def test_equal_pair_comes_before_other_exact_pairs() -> None:
    # By hand: 10 ∥ 10, 3 + 2 and 15 ∥ 7.5 are 5 exactly; the larger over the smaller is 1, 1.5 and 2.
    found = pairs_among((2e3, 3e3, 7.5e3, 10e3, 15e3), 5e3, tolerance=0.05, count=3)
    assert ends(found) == [(10e3, 10e3, "parallel"), (3e3, 2e3, "series"), (15e3, 7.5e3, "parallel")]


def test_lower_total_comes_first_between_two_equally_far_pairs() -> None:
    # 100 ∥ 100 = 50 and 100 + 100 = 200 are a factor of two away from 100, both of two equal parts.
    assert [pair.total for pair in pairs_among((100.0,), 100.0, tolerance=0.05)] == [50.0, 200.0]


def test_series_comes_first_between_two_pairs_of_the_same_total() -> None:
    found = pairs_among((500.0, 2000.0), 1000.0, tolerance=0.05, count=2)
    assert ends(found) == [(500.0, 500.0, "series"), (2000.0, 2000.0, "parallel")]


def test_every_place_from_lowest_to_highest_is_searched_and_no_other() -> None:
    # E3 is 1.0 2.2 4.7 (check values): from 4.7 to 22 Ω three values, 3 · 4 / 2 pairs, two connections.
    found = pairs(load_series("E3"), 10.0, tolerance=0.2, count=100, lowest=4.7, highest=22.0)
    assert len(found) == 12
    assert {pair.first for pair in found} == {pair.second for pair in found} == {4.7, 10.0, 22.0}


@pytest.mark.parametrize(("value", "part"), [(20e6, 10e6), (0.5, 1.0)])
def test_usual_range_reaches_from_half_an_ohm_to_twenty_megohm(value: float, part: float) -> None:
    best = pairs(load_series("E24"), value, tolerance=0.05, count=1)[0]
    assert (best.first, best.second, best.total, best.error) == (part, part, value, 0.0)


@settings(deadline=None)
@given(st.integers(50, 200_000), st.sampled_from([-2, -1, 1, 2, 3]))
def test_pairs_commute_with_ten(value: int, decades: int) -> None:
    def found(shift: int) -> tuple[Pair, ...]:
        lowest, highest = (float(Decimal(end).scaleb(shift)) for end in (100, 100_000))
        wanted = float(Decimal(value).scaleb(shift))
        return pairs(load_series("E12"), wanted, tolerance=0.05, lowest=lowest, highest=highest)

    for here, there in zip(found(0), found(decades), strict=True):
        assert (there.connection, there.error) == (here.connection, here.error)
        for ohms in ("first", "second"):
            assert float(Decimal(repr(getattr(here, ohms))).scaleb(decades)) == getattr(there, ohms)


# ---- what a pair is like


@given(drawn_pairs())
def test_total_and_error_are_ohms_law(drawn: tuple[Pair, Any, Any]) -> None:
    pair = drawn[0]
    assert pair.first >= pair.second
    assert pair.total == pytest.approx(OHMS[pair.connection](pair.first, pair.second), rel=ROUNDING)
    assert pair.error == pytest.approx(pair.total / pair.value - 1, abs=ROUNDING * pair.total / pair.value)


@given(drawn_pairs())
def test_worst_case_is_the_extreme_of_the_four_corners(drawn: tuple[Pair, Any, Any]) -> None:
    pair, (t1, t2), _ = drawn
    ohms = OHMS[pair.connection]
    corners = [
        ohms(pair.first * (1 + one * t1), pair.second * (1 + other * t2)) / pair.total - 1
        for one, other in product((-1, 1), (-1, 1))
    ]
    assert pair.tolerance_low == pytest.approx(min(corners), abs=ROUNDING)
    assert pair.tolerance_high == pytest.approx(max(corners), abs=ROUNDING)


@given(drawn_pairs())
def test_rss_moves_each_part_alone_and_stays_within_the_worst_case(drawn: tuple[Pair, Any, Any]) -> None:
    pair, (t1, t2), _ = drawn
    ohms = OHMS[pair.connection]
    for side, rss, worst in ((-1, pair.rss_low, pair.tolerance_low), (1, pair.rss_high, pair.tolerance_high)):
        one = ohms(pair.first * (1 + side * t1), pair.second) / pair.total - 1
        other = ohms(pair.first, pair.second * (1 + side * t2)) / pair.total - 1
        assert side * rss <= side * worst
        assert side * rss == pytest.approx(min(sqrt(one**2 + other**2), side * worst), abs=ROUNDING)


@given(drawn_pairs())
def test_tolerance_is_never_wider_than_the_wider_part_nor_tighter_than_the_tighter(
    drawn: tuple[Pair, Any, Any],
) -> None:
    pair, tolerances, tempcos = drawn
    for reached in (-pair.tolerance_low, pair.tolerance_high):
        assert min(tolerances) <= reached <= max(tolerances)
    assert min(tempcos) <= pair.tempco <= max(tempcos)
    assert 0 <= pair.tempco_rss <= pair.tempco * (1 + ROUNDING)


@given(drawn_pairs())
def test_tempco_is_weighed_by_each_parts_share(drawn: tuple[Pair, Any, Any]) -> None:
    # Series R1·c1 + R2·c2 over R; parallel the same of the conductances.
    pair, _, tempcos = drawn
    weights = [ohms if pair.connection == "series" else 1 / ohms for ohms in (pair.first, pair.second)]
    terms = [weight * tempco / sum(weights) for weight, tempco in zip(weights, tempcos, strict=True)]
    assert pair.tempco == pytest.approx(sum(terms), abs=ROUNDING)
    assert pair.tempco_rss == pytest.approx(sqrt(terms[0] ** 2 + terms[1] ** 2), abs=ROUNDING)


@given(drawn_pairs())
def test_shares_are_those_of_the_power(drawn: tuple[Pair, Any, Any]) -> None:
    # 1 V across the pair: I²R of each in series, V²/R of each in parallel.
    pair = drawn[0]
    for ohms, share in ((pair.first, pair.first_share), (pair.second, pair.second_share)):
        power = ohms / pair.total**2 if pair.connection == "series" else 1 / ohms
        assert share == pytest.approx(power * pair.total, rel=ROUNDING)


@given(drawn_pairs())
def test_shares_are_the_sensitivities_of_the_total(drawn: tuple[Pair, Any, Any]) -> None:
    # d ln total / d ln R by central differences. The step of 1e-4 is wrong by its square, 1e-8.
    pair, step, ohms = drawn[0], 1e-4, OHMS[drawn[0].connection]
    up, down = 1 + step, 1 - step
    width = log(up / down)
    first = log(ohms(pair.first * up, pair.second) / ohms(pair.first * down, pair.second)) / width
    second = log(ohms(pair.first, pair.second * up) / ohms(pair.first, pair.second * down)) / width
    assert (pair.first_share, pair.second_share) == pytest.approx((first, second), abs=1e-8)
    assert pair.first_share + pair.second_share == pytest.approx(1, abs=ROUNDING)


@pytest.mark.parametrize(("connection", "total"), [("series", 200.0), ("parallel", 50.0)])
def test_two_equal_parts_double_or_halve_and_keep_their_tolerance(connection: str, total: float) -> None:
    pair = pairs_among((100.0,), total, tolerance=0.05, tempco=1e-4, count=1)[0]
    assert (pair.connection, pair.total, pair.error) == (connection, total, 0.0)
    assert (pair.first_share, pair.second_share) == (0.5, 0.5)
    assert (pair.tolerance_low, pair.tolerance_high, pair.tempco) == (-0.05, 0.05, 1e-4)
    assert pair.tempco_rss == pytest.approx(1e-4 / sqrt(2), rel=ROUNDING)


def test_tolerances_of_two_kinds_are_weighed() -> None:
    # By hand, 300 Ω ± 10 % and 100 Ω ± 2 %. Series: ±32 Ω of 400. Parallel: 270·98/368 and 330·102/432
    # over 75.
    by_connection = {
        pair.connection: pair
        for pair in pairs_among((100.0, 300.0), 400.0, tolerance=(0.02, 0.1), count=6)
        if pair.first != pair.second
    }
    series, parallel = by_connection["series"], by_connection["parallel"]
    assert (series.tolerance_low, series.tolerance_high) == (-0.08, 0.08)
    assert series.rss_high == pytest.approx(sqrt(30**2 + 2**2) / 400, rel=ROUNDING)
    assert parallel.tolerance_low == pytest.approx(270 * 98 / 368 / 75 - 1, abs=ROUNDING)
    assert parallel.tolerance_high == pytest.approx(330 * 102 / 432 / 75 - 1, abs=ROUNDING)
    assert (parallel.first_share, parallel.second_share) == (0.25, 0.75)


@given(st.lists(st.sampled_from(DRAWER), min_size=1, max_size=6, unique=True), st.data())
def test_value_that_is_alone_never_stands_with_itself_and_the_rest_is_searched_whole(
    values: list[float], data: st.DataObject
) -> None:
    values = sorted(values)
    alone = data.draw(st.sets(st.sampled_from(values)))
    wanted = data.draw(st.floats(values[0] / 2, 2 * values[-1]))
    every = [
        (total, first, second)
        for first in values
        for second in values
        if second < first or (second == first and first not in alone)
        for total in (first + second, first * second / (first + second))
    ]
    best = sorted(abs(log(total / wanted)) for total, _, _ in every)[:3]
    found = pairs_among(values, wanted, tolerance=0.01, count=3, alone=alone)
    assert [abs(log(pair.total / wanted)) for pair in found] == pytest.approx(best, abs=1e-12)  # roundings
    assert all(pair.first != pair.second or pair.first not in alone for pair in found)


# ---- what speaks against it

TWO_PARTS = "Two parts and four solder joints instead of one part and two."


def test_gain_within_the_tolerance_is_held_against_the_pair() -> None:
    # E12: 4.7 kΩ is 6 % below 5 kΩ, 10 kΩ ∥ 10 kΩ is exact.
    series = load_series("E12")
    wide, tight = (pairs(series, 5e3, tolerance=each, count=1)[0] for each in (0.1, 0.01))
    said = (
        "4.7 kΩ alone is off by 6 %, the pair by 0 %: the gain is within the pair's own tolerance of ±10 %."
    )
    assert against(wide, nearest(series, 5e3)) == (said, TWO_PARTS)
    assert against(tight, nearest(series, 5e3)) == (TWO_PARTS,)


# 100 Ω decides 100/101 of the sum with 1 Ω, and 1e4/(1e4 + 100) of the current beside 10 kΩ.
@pytest.mark.parametrize(
    ("values", "value", "trimmer"), [((1.0, 100.0), 101.0, "1 Ω"), ((100.0, 10e3), 99.0, "10 kΩ")]
)
def test_part_that_trims_less_than_the_tolerance_is_named(
    values: tuple[float, ...], value: float, trimmer: str
) -> None:
    single = nearest(load_series("E24"), value)
    reasons = against(pairs_among(values, value, tolerance=0.01, count=1)[0], single)
    assert len(reasons) == 3
    assert reasons[1] == (
        "100 Ω decides 99 % of the total and takes as much of the power; "
        f"{trimmer} trims 0.99 %, within the tolerance of ±1 %."
    )
    finer = against(pairs_among(values, value, tolerance=0.005, count=1)[0], single)
    assert not any("trims" in reason for reason in finer)


def test_pair_that_is_no_nearer_than_the_single_value_is_said_to_be() -> None:
    # 300 ∥ 100 = 75 Ω is 6.25 % below 80 Ω, 82 Ω of E24 2.5 % above.
    pair = pairs_among((100.0, 300.0), 80.0, tolerance=0.05, count=1)[0]
    reasons = against(pair, nearest(load_series("E24"), 80.0))
    assert reasons == ("82 Ω alone is off by 2.5 %, the pair by 6.25 %: no nearer.", TWO_PARTS)


def test_single_value_that_is_exact_is_said_to_be() -> None:
    series = load_series("E24")
    for pair in pairs(series, 3.9e3, tolerance=0.01, count=50):
        said = "3.9 kΩ alone is the wanted value exactly: no pair is nearer."
        assert against(pair, nearest(series, 3.9e3))[0] == said


@settings(deadline=None)
@given(st.integers(2, 10_000_000), TOLERANCES)
def test_reasons_are_one_to_three_sentences(value: int, tolerance: float) -> None:
    series = load_series("E12")
    for pair in pairs(series, float(value), tolerance=tolerance):
        reasons = against(pair, nearest(series, float(value)))
        assert 1 <= len(reasons) <= 3
        assert all(reason.endswith(".") for reason in reasons)


def test_single_value_for_something_else_is_refused() -> None:
    pair = pairs_among((100.0, 300.0), 75.0, tolerance=0.05, count=1)[0]
    with pytest.raises(UsageError, match="a pair for 75 Ω, a snap of 80 Ω"):
        against(pair, nearest(load_series("E24"), 80.0))


# ---- bad input


@pytest.mark.parametrize("value", [0.0, -4700.0, inf, -inf, nan, 1e300, 5e-324])
def test_value_that_is_no_resistance_is_refused(value: float) -> None:
    with pytest.raises(UsageError, match=r"the value must be from 0\.0001 to 1e\+12 Ω"):
        pairs(load_series("E24"), value, tolerance=0.05)
    with pytest.raises(UsageError, match=r"the value must be from 0\.0001 to 1e\+12 Ω"):
        pairs_among((100.0,), value, tolerance=0.05)


@pytest.mark.parametrize(("value", "read"), [(0.4999, "499.9 mΩ"), (20.000001e6, "20.000001 MΩ")])
def test_value_out_of_reach_says_what_can_be_reached(value: float, read: str) -> None:
    with pytest.raises(UsageError, match=f"reach from 500 mΩ to 20 MΩ, not {read}"):
        pairs(load_series("E24"), value, tolerance=0.05)


@pytest.mark.parametrize("count", [0, -1, 101])
def test_count_out_of_range_is_refused(count: int) -> None:
    with pytest.raises(UsageError, match=f"count must be from 1 to 100, not {count}"):
        pairs(load_series("E24"), 1e3, tolerance=0.05, count=count)


@pytest.mark.parametrize(
    ("lowest", "highest"),
    [(1e4, 1e3), (0.0, 1e3), (-1.0, 1e3), (1.0, inf), (1.0, 1e13), (nan, 1e3), (1.0, nan)],
)
def test_range_that_is_none_is_refused(lowest: float, highest: float) -> None:
    with pytest.raises(UsageError, match="lowest and highest must ascend"):
        pairs(load_series("E24"), 1e3, tolerance=0.05, lowest=lowest, highest=highest)


def test_range_without_a_preferred_value_is_refused() -> None:
    with pytest.raises(UsageError, match=r"E24 has no value from 1\.05 to 1\.06 Ω"):
        pairs(load_series("E24"), 1.055, tolerance=0.05, lowest=1.05, highest=1.06)


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ((), "at least one value"),
        ((200.0, 100.0), "must ascend, none twice"),
        ((100.0, 100.0), "must ascend, none twice"),
        ((0.0, 100.0), "every part must be from"),
        ((100.0, inf), "every part must be from"),
        ((nan,), "every part must be from"),
    ],
)
def test_values_that_are_no_drawer_are_refused(values: tuple[float, ...], message: str) -> None:
    with pytest.raises(UsageError, match=message):
        pairs_among(values, 100.0, tolerance=0.05)


@pytest.mark.parametrize("tolerance", [-0.01, 1.0, nan, inf])
def test_tolerance_out_of_range_is_refused(tolerance: float) -> None:
    with pytest.raises(UsageError, match="every tolerance must be from 0 to below 1"):
        pairs(load_series("E24"), 1e3, tolerance=tolerance)


@pytest.mark.parametrize("tempco", [-1e-6, nan, inf])
def test_tempco_out_of_range_is_refused(tempco: float) -> None:
    with pytest.raises(UsageError, match="every tempco must be 0 or above"):
        pairs(load_series("E24"), 1e3, tolerance=0.05, tempco=tempco)


def test_tolerances_that_do_not_match_the_values_are_refused() -> None:
    with pytest.raises(UsageError, match="2 values need as many tolerances and tempcos, not 1 and 3"):
        pairs_among((100.0, 200.0), 100.0, tolerance=(0.05,), tempco=(0.0, 0.0, 0.0))


def test_all_faults_are_said_at_once() -> None:
    with pytest.raises(UsageError, match=r"lowest and highest.*the value must.*count must"):
        pairs(load_series("E24"), 0.0, tolerance=0.05, count=0, lowest=10.0, highest=1.0)
    with pytest.raises(UsageError, match=r"the value must.*must ascend.*every tolerance.*every tempco"):
        pairs_among((2.0, 1.0), nan, tolerance=2.0, tempco=-1.0)
