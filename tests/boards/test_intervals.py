"""Intervals: against published figures, scipy.stats as an independent program, and seeded simulation."""

from __future__ import annotations

from math import nan, sqrt

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from biasband.boards.intervals import (
    Ranks,
    mean_interval,
    over_scramblings,
    quantile_ranks,
    yield_interval,
)
from biasband.errors import UsageError

SHARES = (0.00135, 0.025, 0.5, 0.95, 0.99865)

# --- a yield ------------------------------------------------------------------------------------------


def test_five_failures_in_ten_thousand_is_the_published_interval():
    # check_values.md: 0.0162 … 0.1166 % of failures; half of the last printed digit.
    found = yield_interval(10_000 - 5, 10_000)
    assert 100 * (1 - found.high) == pytest.approx(0.0162, abs=5e-5)
    assert 100 * (1 - found.low) == pytest.approx(0.1166, abs=5e-5)


def test_no_failure_in_a_hundred_thousand_shows_thirty_ppm_one_sided():
    # check_values.md: 30 ppm; the rule of three, 1 − 0.05^(1/N) = 29.957 ppm. 5 % on one side is 90 % on two.
    found = yield_interval(10**5, 10**5, confidence=0.9)
    assert 1e6 * (1 - found.low) == pytest.approx(29.957, abs=0.0005)  # half of the last digit
    assert found.high == 1.0


@pytest.mark.parametrize(
    ("held", "boards"), [(0, 1), (1, 1), (0, 50), (1, 50), (49, 50), (17, 40), (9973, 10_000)]
)
@pytest.mark.parametrize("confidence", [0.5, 0.9, 0.95, 0.999])
def test_yield_interval_is_the_exact_one_of_scipy(held, boards, confidence):
    # An independent program: it inverts the binomial's two tails by root finding.
    expected = stats.binomtest(held, boards).proportion_ci(confidence, method="exact")
    found = yield_interval(held, boards, confidence=confidence)
    assert found.low == pytest.approx(expected.low, abs=1e-10)  # its root finder stops near 1e-12
    assert found.high == pytest.approx(expected.high, abs=1e-10)


def test_yield_interval_of_a_million_million_boards_has_its_digits():
    # Five failures: the bounds of their number are Poisson's, half a χ² quantile (to 1/N = 1e-12 of itself):
    # 1.6235 of χ² with 10 and 11.6683 with 12 degrees (tables of the Poisson limits of 5).
    found = yield_interval(10**12 - 5, 10**12)
    # A yield this near 1 is a double: its distance from 1 has steps of 1.1e-16, that is 1e-4 failures.
    assert 1e12 * (1 - found.high) == pytest.approx(1.6235, abs=3e-4)
    assert 1e12 * (1 - found.low) == pytest.approx(11.6683, abs=3e-4)


def test_no_board_shows_nothing_of_a_yield():
    # By hand: with nothing drawn every share from 0 to 1 is as good.
    found = yield_interval(0, 0)
    assert (found.low, found.high) == (0.0, 1.0)


def test_batches_all_alike_count_as_their_batches():
    # 40 batches of 25, all alike within, of which 37 held: as 37 of 40 independent boards, by definition.
    expected = stats.binomtest(37, 40).proportion_ci(0.95, method="exact")
    found = yield_interval(37 * 25, 40 * 25, boards_per_batch=25)
    assert (found.low, found.high) == pytest.approx((expected.low, expected.high), abs=1e-10)


@pytest.mark.parametrize("alike", [True, False], ids=["alike", "half alike"])
def test_batch_interval_holds_the_yield_as_often_as_it_says(alike):
    rng, runs, batches, size, share = np.random.default_rng(4), 2000, 60, 20, 0.9
    common, own = rng.random((runs, batches, 1)), rng.random((runs, batches, size))
    # Half alike: each board takes the batch's number or one of its own, by a coin.
    drawn = np.where(alike | (rng.random(own.shape) < 0.5), common, own)
    held = np.sum(drawn < share, axis=(1, 2))
    found = [yield_interval(int(k), batches * size, boards_per_batch=size) for k in held]
    hit = np.mean([each.low <= share <= each.high for each in found])
    # A share of 2000 runs scatters by √(0.95·0.05/2000) = 0.5 %; three of them below 95 %.
    assert hit >= 0.95 - 0.015
    # Counted as if independent it is √20 = 4.5 times too narrow where alike: ± 0.44 deviations hold 34 %;
    # half alike is a correlation of ¼, a design effect of 1 + 19/4 and ± 0.82 deviations: 59 %.
    blind = np.mean([i.low <= share <= i.high for i in (yield_interval(int(k), 1200) for k in held)])
    assert blind < (0.5 if alike else 0.75)


# --- a quantile ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(("boards", "order"), [(59, 1), (93, 2), (124, 3)])
def test_wilks_boards_are_the_fewest_whose_order_bounds_the_quantile(boards, order):
    # Wilks 95/95 (check_values.md): 59, 93, 124 draws for the 1st, 2nd, 3rd largest. One-sided 95 % is 90 %.
    assert quantile_ranks(boards, 0.95, confidence=0.9).high == boards + 1 - order
    fewer = quantile_ranks(boards - 1, 0.95, confidence=0.9).high
    assert fewer == (None if order == 1 else boards - 1 + 2 - order)
    # And mirrored: the 1st, 2nd, 3rd smallest bound the 5 % quantile from below.
    assert quantile_ranks(boards, 0.05, confidence=0.9).low == order


def test_a_hundred_boards_do_not_reach_the_outer_quantiles():
    # (1 − 0.00135)^100 = 0.874 > 0.025: even the lowest board is rarely below the 0.135 % quantile. From
    # above: P(K ≥ 1) = 0.126 > 0.025 and P(K ≥ 2) = 1 − 0.874 − 0.118 = 0.008: the second.
    assert quantile_ranks(100, 0.00135) == Ranks(low=None, high=2)
    assert quantile_ranks(100, 0.99865) == Ranks(low=99, high=None)


def test_no_board_bounds_no_quantile():
    assert quantile_ranks(0, 0.5) == Ranks(None, None)


@pytest.mark.parametrize("share", SHARES)
@pytest.mark.parametrize("boards", [1, 10, 100, 3000])
def test_ranks_are_those_of_scipy_s_quantile_test(boards, share):
    # An independent program (binomial quantiles): on the values 1, 2, 3 … a bound is its own rank.
    expected = stats.quantile_test(np.arange(1.0, boards + 1), p=share).confidence_interval(0.95)
    found = quantile_ranks(boards, share)
    for ours, theirs in ((found.low, expected.low), (found.high, expected.high)):
        assert ours == (None if np.isnan(theirs) else theirs)


@pytest.mark.parametrize("share", SHARES)
@pytest.mark.parametrize("boards", [30, 1000, 100_000])
def test_ranks_are_the_nearest_whose_tails_hold(boards, share):
    # The slow twin: every tail of the binomial, summed by scipy.stats; the definition read off.
    count = np.arange(boards + 1)
    low = np.flatnonzero(stats.binom.cdf(count - 1, boards, share) <= 0.025)
    high = np.flatnonzero(stats.binom.sf(count, boards, share) <= 0.025) + 1  # P(K ≥ s), s = count + 1
    found = quantile_ranks(boards, share)
    assert found.low == (low.max() or None)
    assert found.high == (high.min() if high.min() <= boards else None)


@pytest.mark.parametrize("share", [0.00135, 0.5, 0.99865])
def test_ranks_of_a_million_million_boards_are_the_normal_ones(share):
    # De Moivre–Laplace with Cornish and Fisher's skewness: N·p ± z·σ + (z² − 1)(1 − 2p)/6, z = 1.95996.
    boards, z = 10**12, 1.959963984540054
    centre, deviation = boards * share, sqrt(boards * share * (1 - share))
    skew = (z * z - 1) * (1 - 2 * share) / 6
    found = quantile_ranks(boards, share)
    # A half to the next whole rank; a tail that is 1e-8 of itself off would move σ = 5e5 by 0.002.
    assert found.low == pytest.approx(centre - z * deviation + skew, abs=0.51)
    assert found.high == pytest.approx(centre + z * deviation + skew + 1, abs=0.51)


def test_quantile_lies_between_its_ranks_as_often_as_it_says():
    rng, runs, boards = np.random.default_rng(8), 4000, 200
    values = np.sort(rng.exponential(size=(runs, boards)), axis=1)
    for share in (0.1, 0.5, 0.9):
        ranks = quantile_ranks(boards, share)
        truth = -np.log(1 - share)
        hit = np.mean((values[:, ranks.low - 1] <= truth) & (truth <= values[:, ranks.high - 1]))
        # A share of 4000 scatters by 0.34 %, three of them. Above 95 %: the boards on either side of the
        # quantile are whole, and one more is at most 2·pmf at the rank, 1 to 2 %.
        assert 0.95 - 0.0103 <= hit <= 0.975


def test_ranks_of_batches_all_alike_lie_in_the_batches_that_bound_the_quantile():
    # 40 alike batches of 25 are 40 values, each 25 times over: batch j has the ranks 25·(j − 1) + 1 … 25·j.
    expected = stats.quantile_test(np.arange(1.0, 41.0), p=0.8).confidence_interval(0.95)
    found = quantile_ranks(40 * 25, 0.8, boards_per_batch=25)
    assert [-(-rank // 25) for rank in (found.low, found.high)] == [expected.low, expected.high]


@pytest.mark.parametrize("coin", [1.0, 0.5, 0.0], ids=["alike", "half alike", "independent"])
def test_quantile_of_batches_lies_between_its_ranks_as_often_as_it_says(coin):
    rng, runs, batches, size = np.random.default_rng(9), 2000, 50, 20
    common, own = rng.random((runs, batches, 1)), rng.random((runs, batches, size))
    drawn = np.where(rng.random(own.shape) < coin, common, own).reshape(runs, -1)
    drawn.sort(axis=1)
    for share in (0.2, 0.5, 0.9):
        ranks = quantile_ranks(batches * size, share, boards_per_batch=size)
        hit = np.mean((drawn[:, ranks.low - 1] <= share) & (share <= drawn[:, ranks.high - 1]))
        assert hit >= 0.95 - 0.015  # a share of 2000 scatters by 0.5 %, three of them


def test_one_batch_bounds_no_quantile():
    # By hand: one batch is one draw, which is as often above the median as below.
    assert quantile_ranks(200, 0.5, boards_per_batch=200) == Ranks(None, None)


@settings(deadline=None, max_examples=60)
@given(
    boards=st.integers(1, 3000), share=st.floats(0.01, 0.99), batch=st.integers(1, 40),
    confidence=st.floats(0.5, 0.999),
)  # fmt: skip
def test_ranks_are_where_the_yield_interval_stops_to_contain_the_share(boards, share, batch, confidence):
    options = {"boards_per_batch": batch, "confidence": confidence}
    ranks = quantile_ranks(boards, share, **options)
    slack = 1e-9  # the inverse beta function is good to about 1e-12
    if ranks.low is not None:  # r − 1 boards held are too few, r are not
        assert yield_interval(ranks.low - 1, boards, **options).high <= share + slack
        assert yield_interval(ranks.low, boards, **options).high >= share - slack
    else:
        assert yield_interval(0, boards, **options).high >= share - slack
    if ranks.high is not None:  # s boards held are too many, s − 1 are not
        assert yield_interval(ranks.high, boards, **options).low >= share - slack
        assert yield_interval(ranks.high - 1, boards, **options).low <= share + slack
    else:
        assert yield_interval(boards, boards, **options).low <= share + slack


# --- a mean -------------------------------------------------------------------------------------------


def test_mean_of_three_is_student_s_by_the_table():
    # Printed tables of t (memory): 4.303 for two degrees at 97.5 %; half of its last digit over √3.
    found = mean_interval(2.0, 1.0, 3)
    assert found.high - 2.0 == pytest.approx(4.303 / sqrt(3), abs=0.0003)
    assert 2.0 - found.low == pytest.approx(4.303 / sqrt(3), abs=0.0003)


def test_mean_of_a_million_million_has_the_normal_interval():
    # z = 1.959964 (tables); t with 1e12 degrees differs by z³/4e12.
    assert 1e6 * mean_interval(0.0, 1.0, 10**12).high == pytest.approx(1.959964, abs=5e-7)


def test_mean_interval_is_the_t_interval_of_scipy():
    values = np.random.default_rng(2).normal(5.0, 3.0, 37)
    expected = stats.ttest_1samp(values, 0.0).confidence_interval(0.99)
    found = mean_interval(float(values.mean()), float(values.std(ddof=1)), 37, confidence=0.99)
    assert (found.low, found.high) == pytest.approx((expected.low, expected.high), rel=1e-9)  # rounding


def test_mean_of_batches_all_alike_is_that_of_the_batches():
    batches = np.random.default_rng(3).normal(5.0, 3.0, 6)
    expected = stats.ttest_1samp(batches, 0.0).confidence_interval(0.95)
    boards = np.repeat(batches, 50)
    found = mean_interval(float(boards.mean()), float(boards.std(ddof=1)), 300, boards_per_batch=50)
    assert (found.low, found.high) == pytest.approx((expected.low, expected.high), rel=1e-9)  # rounding


@pytest.mark.parametrize(("boards", "batch"), [(0, 1), (1, 1), (20, 20), (19, 20)])
def test_mean_of_no_more_than_one_batch_has_no_interval(boards, batch):
    found = mean_interval(2.0, 1.0, boards, boards_per_batch=batch)
    assert np.isnan([found.low, found.high]).all()


def test_mean_without_a_figure_has_no_interval():
    found = mean_interval(nan, nan, 10)
    assert np.isnan([found.low, found.high]).all()


# --- scramblings --------------------------------------------------------------------------------------


def test_three_scramblings_are_student_s_by_the_table():
    found = over_scramblings([1.0, 2.0, 3.0])
    assert found.low == pytest.approx(2.0 - 4.303 / sqrt(3), abs=0.0003)  # t of two degrees, printed
    assert found.high == pytest.approx(2.0 + 4.303 / sqrt(3), abs=0.0003)


def test_sixteen_scramblings_are_the_t_interval_of_scipy():
    estimates = np.random.default_rng(6).normal(1e-3, 1e-9, 16)
    expected = stats.ttest_1samp(estimates, 0.0).confidence_interval(0.95)
    found = over_scramblings(list(estimates))
    # Its own sum rounds 1e-3 to 2e-19: 1e-9 relative to the spread of 1e-9 would be 1e-18.
    assert (found.low, found.high) == pytest.approx((expected.low, expected.high), abs=1e-17)


@pytest.mark.parametrize("estimates", [[], [1.0], [1.0, nan, 2.0]])
def test_fewer_than_two_scramblings_or_one_without_a_figure_have_no_interval(estimates):
    found = over_scramblings(estimates)
    assert np.isnan([found.low, found.high]).all()


def test_scramblings_that_agree_leave_nothing_between():
    found = over_scramblings([0.1] * 16)
    # By hand: no spread. A sum of 16 rounds to a few of the last digits.
    assert (found.low, found.high) == pytest.approx((0.1, 0.1), abs=1e-16)


def test_scrambled_sobol_interval_holds_the_integral_as_often_as_it_says():
    # ∫ Π (1 + (x_j − ½)) over three dimensions is 1: each factor's mean is 1.
    rng, runs, scramblings = np.random.default_rng(12), 150, 8
    hits = 0
    for _ in range(runs):
        sets = [stats.qmc.Sobol(3, rng=rng).random_base2(6) for _ in range(scramblings)]
        found = over_scramblings([float(np.mean(np.prod(points + 0.5, axis=1))) for points in sets])
        hits += found.low <= 1.0 <= found.high
    # A share of 150 runs scatters by 1.8 %: three of them, and 1 % for not being quite normal. Never to miss
    # would come once in 2000 (0.95^150).
    assert 0.95 - 0.064 <= hits / runs < 1.0


# --- what is refused ----------------------------------------------------------------------------------


def test_every_fault_of_a_yield_interval_is_said_at_once():
    message = (
        "confidence: above 0 and below 1; read 95\nboards_per_batch: from 1; read 0\n"
        "boards: from 0; read -1\nheld: from 0 to -1, the boards; read 3"
    )
    with pytest.raises(UsageError, match=f"^{message}$"):
        yield_interval(3, -1, boards_per_batch=0, confidence=95)


@pytest.mark.parametrize("held", [-1, 11])
def test_more_held_than_boards_is_refused(held):
    with pytest.raises(UsageError, match=rf"held: from 0 to 10, the boards; read {held}"):
        yield_interval(held, 10)


@pytest.mark.parametrize("share", [-0.1, 95.0, nan])
def test_share_out_of_range_is_refused(share):
    with pytest.raises(UsageError, match="share: from 0 to 1; read"):
        quantile_ranks(100, share)


def test_confidence_out_of_range_is_refused_by_every_interval():
    for ask in (
        lambda: quantile_ranks(10, 0.5, confidence=1.0),
        lambda: mean_interval(0.0, 1.0, 10, confidence=0.0),
        lambda: over_scramblings([1.0, 2.0], confidence=nan),
    ):
        with pytest.raises(UsageError, match="confidence: above 0 and below 1; read"):
            ask()


def test_poisson_limits_of_five_are_what_mpmath_finds():
    # Guards the literature figures of the test above: Σ_{k≥5} and Σ_{k≤5} of a Poisson count are 2.5 %.
    with mpmath.workdps(30):
        assert float(mpmath.gammainc(5, 0, 1.6235, regularized=True)) == pytest.approx(0.025, abs=1e-5)
        assert float(mpmath.gammainc(6, 11.6683, regularized=True)) == pytest.approx(0.025, abs=1e-5)
