"""Stopping: the worked cases of JCGM 101:2008, 7.9 (memory), and its rule run on its own clause 9.2."""

from __future__ import annotations

from math import inf, isnan, nan, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from biasband.boards.stopping import (
    SequenceFigures,
    least_sequence,
    narrow,
    numerical_tolerance,
    stable,
)
from biasband.errors import UsageError

# --- the numerical tolerance --------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("uncertainty", "digits", "expected"),
    [
        # JCGM 101:2008, 7.9.2, examples (memory): 0.00035 g to two digits and to one; 2 K to one digit.
        (0.00035, 2, 0.000005),
        (0.00035, 1, 0.00005),
        (2.0, 1, 0.5),
        # By hand: what rounds up to the next power of ten has that power's digits.
        (9.97, 2, 0.5),
        (9.94, 2, 0.05),
        (0.97, 1, 0.5),
        (1000.0, 2, 50.0),
        (99.4, 1, 50.0),
        (3e-12, 2, 5e-14),
    ],
)
def test_tolerance_is_half_a_unit_of_the_last_digit(uncertainty, digits, expected):
    assert numerical_tolerance(uncertainty, digits) == expected  # the nearest double to the decimal


@given(uncertainty=st.floats(1e-15, 1e15), digits=st.sampled_from([1, 2]))
def test_tolerance_stays_between_the_shares_that_its_digits_allow(uncertainty, digits):
    # By hand: u/10^l runs from 10^(d − 1), less the half of a tenth that rounds up to it, to 10^d; δ/u is
    # half of its inverse.
    ratio = numerical_tolerance(uncertainty, digits) / uncertainty
    most = 0.5 / (10 ** (digits - 1) - 0.05)
    assert 0.5 / 10**digits <= ratio * (1 + 1e-12)  # rounding
    assert ratio <= most * (1 + 1e-12)


def test_tolerance_of_nothing_is_nothing_and_of_no_figure_none():
    assert numerical_tolerance(0.0, 2) == 0.0
    assert isnan(numerical_tolerance(nan, 2))
    assert isnan(numerical_tolerance(inf, 2))


def test_every_fault_of_a_tolerance_is_said_at_once():
    with pytest.raises(UsageError, match=r"^digits: 1 or 2; read 3\nuncertainty: from 0; read -1$"):
        numerical_tolerance(-1.0, 3)


# --- the length of a sequence -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("coverage", "expected"),
    [
        (0.95, 10_000),  # J = 2000, so the clause's 10^4
        (0.99, 10_000),  # J = 10^4 exactly
        (0.9973, 37_038),  # 100/0.0027 = 37 037.04
        (0.999, 100_000),
        (0.9999, 1_000_000),  # 1 − 0.9999 in doubles would give 1 000 001
        (0.99999, 10_000_000),
        (0.5, 10_000),
    ],
)
def test_least_sequence_is_that_of_the_clause(coverage, expected):
    assert least_sequence(coverage) == expected
    assert least_sequence(np.float64(coverage)) == expected


@pytest.mark.parametrize("coverage", [0.0, 1.0, 95.0, -0.1, nan])
def test_coverage_out_of_range_is_refused(coverage):
    with pytest.raises(UsageError, match="coverage: above 0 and below 1; read"):
        least_sequence(coverage)


# --- the adaptive rule --------------------------------------------------------------------------------


def figures(*rows: tuple[float, float, float, float]) -> SequenceFigures:
    """One quantity; each row is a sequence's y, u(y), y_low, y_high."""
    table = np.array(rows, dtype=float).reshape(-1, 4)
    return SequenceFigures(*(table[:, [column]] for column in range(4)))


def moved(column: int, by: float) -> SequenceFigures:
    """Three sequences that differ in one figure: 1.0, 1.0 + by, 1.0 + 2·by."""
    table = np.ones((3, 4))
    table[:, column] += by * np.arange(3)
    return figures(*table)


@pytest.mark.parametrize("column", range(4), ids=["estimate", "uncertainty", "low", "high"])
def test_each_of_the_four_figures_keeps_the_run_going(column):
    # By hand: 1.0, 1.1, 1.2: Σ(…)² = 0.02, s = √(0.02/6) = 0.0577, 2s = 0.1155. u = 2: δ = 0.5 and 0.05.
    found = stable(moved(column, 0.1), np.array([2.0]), digits=1)
    assert found.deviation == pytest.approx([2 * sqrt(0.02 / 6)], rel=1e-12)  # rounding
    assert found.tolerance == [0.5]
    assert found.all
    assert not stable(moved(column, 0.1), np.array([2.0]), digits=2).all


def test_two_s_just_within_the_tolerance_is_stable_and_just_beyond_is_not():
    # Two sequences that differ by d: s = d/2, so 2s = d. u = 2 to two digits: δ = 0.05.
    for apart, expected in ((0.0499, True), (0.0501, False)):
        found = stable(figures((0, 1, 0, 0), (apart, 1, 0, 0)), np.array([2.0]), digits=2)
        assert found.all is expected


@pytest.mark.parametrize("rows", [[], [(1.0, 1.0, 0.0, 2.0)]])
def test_fewer_than_two_sequences_are_never_stable(rows):
    found = stable(figures(*rows), np.array([1.0]), digits=1)
    assert not found.all
    assert np.isnan(found.deviation).all()
    assert stable(figures((1, 1, 0, 2), (1, 1, 0, 2)), np.array([1.0]), digits=1).all


def test_what_does_not_vary_is_stable():
    # 0.1 over 10 000 draws by numpy's sums: deviations of about 1e-17, not exactly zero.
    draws = np.full((3, 10_000), 0.1)
    rounded = figures(*((x.mean(), x.std(ddof=1), *np.quantile(x, (0.025, 0.975))) for x in draws))
    assert stable(rounded, np.array([draws.std(ddof=1)]), digits=2).all
    assert stable(figures((5, 0, 5, 5), (5, 0, 5, 5)), np.array([0.0]), digits=2).all
    assert stable(figures((0, 0, 0, 0), (0, 0, 0, 0)), np.array([0.0]), digits=2).all  # 2s = δ = 0
    last_digits = figures((5, 0, 5, 5), (5 + 2e-15, 0, 5, 5))
    assert stable(last_digits, np.array([0.0]), digits=2).all
    assert not stable(figures((5, 0, 5, 5), (5 + 1e-9, 0, 5, 5)), np.array([0.0]), digits=2).all


@pytest.mark.parametrize("without", [nan, inf])
def test_quantity_that_has_not_solved_is_not_stable_and_gives_no_error(without):
    found = stable(figures((1, 1, 0, without), (1, 1, 0, without)), np.array([1.0]), digits=1)
    assert not found.all


def test_quantities_are_judged_each_by_its_own_and_all_together():
    rng = np.random.default_rng(3)
    table = rng.normal(size=(5, 4, 7)) * np.geomspace(1e-3, 10, 7)
    uncertainty = np.full(7, 2.0)
    found = stable(SequenceFigures(*np.moveaxis(table, 1, 0)), uncertainty, digits=2)
    # The slow twin: numpy's standard deviation of each column, δ = 0.05 by hand.
    for q in range(7):
        worst = max(2 * np.std(table[:, figure, q], ddof=1) / sqrt(5) for figure in range(4))
        assert found.deviation[q] == pytest.approx(worst, rel=1e-12)  # rounding
        assert found.each[q] == (worst <= 0.05)
    assert found.each.any()
    assert not found.each.all()
    assert found.all is False


def summary(draws: np.ndarray) -> tuple[float, float, float, float]:
    """y, u(y) and the ends of the symmetric 95 % interval, by numpy."""
    low, high = np.quantile(draws, (0.025, 0.975))
    return float(draws.mean()), float(draws.std(ddof=1)), float(low), float(high)


@pytest.mark.parametrize(("seed", "digits"), [(1, 1), (2, 2), (3, 2), (5, 2)])
def test_sum_of_four_normal_inputs_stops_within_its_own_tolerance(seed, digits):
    # JCGM 101:2008, 9.2.2: mean 0, u = 2.0, 95 % ±3.92. δ is 0.5 to one digit, 0.05 to two (half of 2 | 2.0).
    rng, sequences, found = np.random.default_rng(seed), [], None
    while found is None or not found.all:
        sequences.append(rng.normal(size=(4, least_sequence(0.95))).sum(axis=0))
        drawn = figures(*(summary(each) for each in sequences))
        found = stable(drawn, np.array([np.std(sequences, ddof=1)]), digits=digits)
        assert len(sequences) < 50  # four or five do (below); a rule that never stops is caught here
    tolerance = {1: 0.5, 2: 0.05}[digits]
    assert found.tolerance == [tolerance]
    # The rule's own claim: each average is within δ, of which 2s is at most the whole (two deviations).
    ours = [each.mean() for each in (drawn.estimate, drawn.uncertainty, drawn.low, drawn.high)]
    assert ours == pytest.approx([0.0, 2.0, -3.92, 3.92], abs=tolerance)
    # By hand: one sequence's end scatters by √(0.975·0.025/10⁴)/f = 0.053, f(3.92) = 0.0292. To one digit two
    # sequences are plenty; to two digits 2·0.053/√h ≤ 0.05 asks for 4 to 5 where luck does not help.
    assert len(sequences) == 2 or digits == 2


# --- a yield that is known well enough ----------------------------------------------------------------


def test_yield_is_known_to_its_farther_end():
    # check_values.md: 5 of 10 000: 0.0162 … 0.1166 % around 0.05 %: 0.0666 % to the farther end.
    assert narrow(9995, 10_000, 0.0667e-2)
    assert not narrow(9995, 10_000, 0.0665e-2)


def test_half_width_counts_both_ways():
    # Mirrored: 5 of 10 000 hold, and the farther end is the upper one.
    assert narrow(5, 10_000, 0.0667e-2)
    assert not narrow(5, 10_000, 0.0665e-2)


@pytest.mark.parametrize(("held", "boards"), [(0, 30), (30, 30), (15, 30), (2990, 3000)])
def test_half_width_is_that_of_scipy_s_exact_interval(held, boards):
    exact = stats.binomtest(held, boards).proportion_ci(0.95, method="exact")
    reach = max(exact.high - held / boards, held / boards - exact.low)
    assert narrow(held, boards, reach + 1e-9)  # its root finder stops near 1e-12
    assert not narrow(held, boards, reach - 1e-9)


def test_batches_are_known_less_well_than_their_boards():
    # 37 of 40 alike batches: 0.925 with 0.7961 … 0.9843 (scipy's exact interval), 0.129 to the farther end.
    exact = stats.binomtest(37, 40).proportion_ci(0.95, method="exact")
    reach = 37 / 40 - exact.low
    assert narrow(37 * 25, 40 * 25, reach + 1e-9, boards_per_batch=25)
    assert not narrow(37 * 25, 40 * 25, reach - 1e-9, boards_per_batch=25)
    assert narrow(37 * 25, 40 * 25, reach - 1e-9)


def test_no_board_is_not_known_to_any_width():
    assert not narrow(0, 0, 1.0)


def test_stopping_by_width_leaves_the_confidence_what_it_is():
    # Looked at after every chunk, the interval at the stop holds the true yield as often as it should.
    from biasband.boards.intervals import yield_interval

    rng, runs, chunk, truth = np.random.default_rng(1), 600, 1000, 0.99
    hits = 0
    for _ in range(runs):
        held = boards = 0
        while not boards or not narrow(held, boards, 0.002):
            held, boards = held + int(rng.binomial(chunk, truth)), boards + chunk
        interval = yield_interval(held, boards)
        hits += interval.low <= truth <= interval.high
        # By hand: 1.96·√(p(1 − p)/N) = 0.002 at N = 9508; p itself scatters by a tenth of 1 − p.
        assert 5_000 < boards < 20_000
    # A share of 600 runs scatters by 0.9 %; three of them.
    assert hits / runs >= 0.95 - 0.027


@pytest.mark.parametrize("half_width", [0.0, -0.1, nan])
def test_half_width_out_of_range_is_refused(half_width):
    with pytest.raises(UsageError, match="half_width: above 0; read"):
        narrow(5, 10, half_width)
