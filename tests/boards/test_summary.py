"""Summaries against numpy on the same values: figures within what a tally's steps and bins allow."""

from __future__ import annotations

from functools import reduce
from math import inf, nan

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.boards.counting import tally
from biasband.boards.summary import Summary, Within, summary
from biasband.boards.tally import Scale, Tally
from boards.tallies import shown


def summarised(values: np.ndarray, scale: Scale, *, pieces: int = 1) -> Summary:
    """The summary of some values, tallied in pieces."""
    parts = np.array_split(values, pieces)
    tallies = [tally(shown(x=part), {"x": scale}, first_board=0) for part in parts if part.size]
    return summary(reduce(Tally.merged, tallies), scale, 0, 0)


SHAPES = {
    "even": lambda random, n: random.uniform(0.0, 1.0, n),
    "two heaps": lambda random, n: np.where(random.random(n) < 0.5, 0.1, 0.9) + 0.01 * random.random(n),
    "few": lambda random, n: random.choice([0.0, 0.25, 0.7, 1.0], n),
    "at the limits": lambda random, n: random.choice([0.0, 1.0], n),
    "narrow": lambda random, n: 0.4 + 1e-5 * random.normal(size=n),
}
"""Values between limits 0 and 1."""


@st.composite
def values_between(draw: st.DrawFn, *, beyond: float = 0.0) -> tuple[np.ndarray, Scale]:
    """Values and their scale, whose limits are (nearly) alike, far apart, or far from zero; some unsolved."""
    random = np.random.default_rng(draw(st.integers(0, 2**32)))
    shape, count = SHAPES[draw(st.sampled_from(sorted(SHAPES)))], draw(st.integers(1, 200))
    low = draw(st.sampled_from([0.0, -3.0, 5.0, 1e-9, 1e6]))
    width = draw(st.sampled_from([1e-12, 1e-6, 1.0, 1e4])) * max(abs(low), 1e-3)
    values = low + width * ((1.0 + 2.0 * beyond) * shape(random, count) - beyond)
    scale = Scale(low, low + width)
    values = values if beyond else np.clip(values, scale.low, scale.high)
    return np.where(random.random(count) < 0.05, nan, values), scale


def ulp(scale: Scale) -> float:
    """What rounding does to figures of such values: a few units in the last place of the largest."""
    return 8.0 * float(np.spacing(scale.largest))


@given(boards=values_between(), pieces=st.integers(1, 4))
def test_mean_and_deviation_are_numpy_s_to_a_step(boards, pieces):
    values, scale = boards
    found, solved = summarised(values, scale, pieces=pieces), values[~np.isnan(values)]
    assert found.solved == solved.size
    if solved.size:
        # Each value is off by half a step at most, and so is their mean.
        assert found.mean == pytest.approx(np.mean(solved), abs=0.5 * scale.step + ulp(scale))
    if solved.size > 1:
        # The deviation is a norm: off by that of the errors at most, half a step times √(n/(n − 1)) ≤ √2.
        assert found.sd == pytest.approx(np.std(solved, ddof=1), abs=scale.step / np.sqrt(2) + ulp(scale))


@given(boards=values_between(), share=st.floats(0.0, 1.0), pieces=st.integers(1, 4))
def test_quantile_between_the_limits_is_numpy_s_to_a_bin(boards, share, pieces):
    values, scale = boards
    solved = values[~np.isnan(values)]
    found = summarised(values, scale, pieces=pieces)
    for each in (0.0, share, 0.5, 0.99865, 1.0):
        if solved.size:  # the stated bound, and rounding of both
            assert found.quantile(each) == pytest.approx(
                np.quantile(solved, each), abs=scale.bin_width + ulp(scale)
            )


@given(boards=values_between(beyond=0.8), share=st.floats(0.0, 1.0))
def test_quantile_beyond_the_limits_is_known_to_the_farthest_board(boards, share):
    values, scale = boards
    solved = values[~np.isnan(values)]
    if solved.size:
        beyond = max(scale.low - solved.min(), solved.max() - scale.high, scale.bin_width)
        found = summarised(values, scale).quantile(share)
        assert found == pytest.approx(np.quantile(solved, share), abs=beyond + 2 * scale.step + ulp(scale))
        assert solved.min() - ulp(scale) <= found <= solved.max() + ulp(scale)


@given(boards=values_between(beyond=0.8) | values_between(), pieces=st.integers(1, 4))
def test_interval_at_a_rank_contains_the_board_of_that_rank(boards, pieces):
    values, scale = boards
    found = summarised(values, scale, pieces=pieces)
    for rank, value in enumerate(np.sort(values[~np.isnan(values)]), start=1):
        within = found.at_rank(rank)
        assert within.low <= value <= within.high, rank
        if scale.low <= value <= scale.high:
            assert within.high - within.low <= scale.bin_width + 2 * ulp(scale)  # both ends, rounded outwards


@pytest.mark.parametrize("off", [-0.49, -0.25, 0.25, 0.49])
@pytest.mark.parametrize("limit", ["low", "high"])
def test_interval_at_a_rank_contains_a_board_a_fraction_of_a_step_off_a_limit(limit, off):
    scale = Scale(2.0, 5.0)
    value = getattr(scale, limit) + off * scale.step
    found = summarised(np.array([0.0, value, value, 9.0]), scale)
    assert found.at_rank(2).low <= value <= found.at_rank(2).high
    assert found.at_rank(2).high - found.at_rank(2).low <= scale.bin_width + ulp(scale)


@pytest.mark.parametrize("low, high", [(-1.001, 1.007), (2.0, 5.0), (0.1003, 0.3007), (1e6, 1e6 + 1e-6)])
def test_interval_at_a_rank_contains_a_board_on_the_edge_of_a_bin(low, high):
    # Where an edge lies and on which side of it a value is counted are rounded apart: up to a unit in the
    # last place, found at one edge in fifty.
    scale = Scale(low, high)
    edges = scale.edges()[::4]
    for value in (edges, np.nextafter(edges, -inf), np.nextafter(edges, inf)):
        found = summarised(np.concatenate([[low - 1.0], value, [high + 1.0]]), scale)
        within = [found.at_rank(rank) for rank in range(2, value.size + 2)]
        assert all(each.low <= x <= each.high for each, x in zip(within, value, strict=True))


def test_boards_that_lie_evenly_in_a_bin_are_found_where_they_lie():
    scale, count = Scale(0.0, 1.0), 100
    start = scale.edges()[1000]
    values = start + scale.bin_width * (np.arange(count) + 0.5) / count
    found = summarised(np.concatenate([[0.0], values, [1.0]]), scale)
    expected = [np.quantile([0.0, *values, 1.0], share) for share in (0.1, 0.5, 0.77)]
    # Nothing but rounding, of numbers below 1.
    assert [found.quantile(share) for share in (0.1, 0.5, 0.77)] == pytest.approx(expected, abs=1e-14)


def test_quantile_across_a_gap_is_interpolated_between_two_boards():
    # By hand: the median of 1 and 4 is 2.5, whatever the bins.
    assert summarised(np.array([1.0, 4.0]), Scale(0.0, 5.0)).quantile(0.5) == pytest.approx(2.5, abs=1e-15)


def test_lowest_and_highest_are_quantiles_and_ranks_to_the_byte():
    values = np.random.default_rng(2).normal(3.0, 1.0, 500)  # a third lies beyond the limits
    found = summarised(values, Scale(2.0, 4.0))
    assert (found.quantile(0.0), found.quantile(1.0)) == (values.min(), values.max())
    assert found.at_rank(1) == Within(values.min(), values.min())
    assert found.at_rank(500) == Within(values.max(), values.max())


@pytest.mark.parametrize("scale", [Scale(5.0, 5.0), Scale(0.0, 9.0), Scale(nan, nan), Scale(-inf, inf)])
def test_measure_that_never_changes_is_that_value(scale):
    found = summarised(np.full(7, 5.0), scale)
    assert [found.mean, found.sd, found.quantile(0.3)] == [5.0, 0.0, 5.0]
    assert found.at_rank(3) == Within(5.0, 5.0)


def test_constant_that_is_solved_to_rounding_only_has_all_its_figures():
    values = 5.0 + 1e-13 * np.random.default_rng(1).normal(size=300)
    found = summarised(values, Scale(5.0, 5.0))
    # A step of the billionth to either side: 1e-14.
    assert found.mean == pytest.approx(values.mean(), abs=1e-14)
    assert found.sd == pytest.approx(values.std(ddof=1), abs=1e-14)
    assert found.quantile(0.5) == pytest.approx(np.median(values), abs=found.scale.bin_width)


@pytest.mark.parametrize("scale", [Scale(nan, nan), Scale(0.0, inf)])
def test_without_corner_limits_only_the_extremes_are_known(scale):
    found = summarised(np.array([1.0, 2.0, nan, 4.0]), scale)
    assert np.isnan([found.mean, found.sd, found.quantile(0.5)]).all()
    assert (found.lowest, found.highest) == (1.0, 4.0)
    assert found.at_rank(1) == Within(1.0, 1.0)
    assert found.at_rank(2) == Within(1.0, 4.0)


@pytest.mark.parametrize("scale", [Scale(0.0, 1.0), Scale(nan, nan)])
def test_where_no_board_solved_every_figure_is_nan(scale):
    found = summarised(np.full(3, nan), scale)
    within = found.at_rank(2)
    assert found.solved == 0
    figures = [found.mean, found.sd, found.quantile(0.5), found.lowest, found.highest]
    assert np.isnan([*figures, within.low, within.high]).all()


def test_one_board_has_no_deviation():
    found = summarised(np.array([0.3, nan]), Scale(0.0, 1.0))
    assert (found.mean, found.quantile(0.9)) == (0.3, 0.3)
    assert np.isnan(found.sd)


def test_deviation_far_from_zero_is_that_of_the_boards_not_of_rounding():
    # Steps from the middle: sums of squares around zero would lose all digits at 1e6 ± 1e-6.
    values = 1e6 + 1e-6 * np.random.default_rng(3).uniform(-1.0, 1.0, 1000)
    found = summarised(values, Scale(1e6 - 1e-6, 1e6 + 1e-6))
    assert found.sd == pytest.approx(np.std(values - 1e6, ddof=1), abs=found.scale.step)


def test_summary_is_of_the_measure_and_place_asked_for():
    scales = {"x": Scale(0.0, 10.0), "y": Scale(0.0, 100.0)}
    values = {"x": np.array([[1.0], [2.0], [3.0]]), "y": np.array([[10.0], [20.0], [30.0]])}
    counted = tally(shown(**values), scales, first_board=0)
    for row, (scale, expected) in enumerate(zip(scales.values(), ([1, 2, 3], [10, 20, 30]), strict=True)):
        assert [summary(counted, scale, row, place).mean for place in range(3)] == expected
