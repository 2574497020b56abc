"""Distributions: analytic moments and quantiles, and never a coordinate beyond the limits.

Outside figures: scipy.stats, and closed forms of JCGM 101:2008, clause 6.4 (rectangular 6.4.2, trapezoidal
6.4.4, triangular 6.4.5, arc sine 6.4.6); "truncated at ±3σ" and "hollow" are common practice.
"""

from __future__ import annotations

from math import log

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate, stats

from biasband.errors import UsageError
from biasband.stage import Distribution, Limits
from biasband.variation.distributions import (
    PLAIN,
    UNIFORM,
    Batch,
    Hollow,
    Trapezium,
    plain_shape,
    room_for_batch,
    shape_around,
    shape_between,
)

SHARES = np.array([0.0, 1e-4, 0.01, 0.1, 0.3, 0.5, 0.7, 0.9, 1.0 - 1e-4, 1.0])


def trapezium(within: float):
    """scipy's trapezoid on [−1, 1] for the sum of uniform parts `within` and 1 − `within`."""
    slope = min(within, 1.0 - within)
    return stats.trapezoid(slope, 1.0 - slope, -1.0, 2.0)


OUTSIDE = {
    "uniform": (PLAIN["uniform"], stats.uniform(-1.0, 2.0)),
    "triangular": (PLAIN["triangular"], stats.triang(0.5, -1.0, 2.0)),
    "normal": (PLAIN["normal"], stats.truncnorm(-3.0, 3.0, 0.0, 1.0 / 3.0)),
    "sine": (PLAIN["sine"], stats.arcsine(-1.0, 2.0)),
    "hollow within nothing": (Hollow(0.0), stats.uniform(-1.0, 2.0)),
    "trapezium 0.3": (Trapezium(0.3), trapezium(0.3)),
    "trapezium 0.8": (Trapezium(0.8), trapezium(0.8)),
    "trapezium 0.5": (Trapezium(0.5), stats.triang(0.5, -1.0, 2.0)),
    "trapezium 0": (Trapezium(0.0), stats.uniform(-1.0, 2.0)),
}


@pytest.mark.parametrize("name", OUTSIDE)
def test_moments_and_quantiles_are_those_of_the_outside(name):
    ours, theirs = OUTSIDE[name]
    assert ours.mean == pytest.approx(theirs.mean(), abs=1e-12)
    assert ours.variance == pytest.approx(theirs.var(), rel=1e-9)  # truncnorm's own digits
    assert ours.quantile(SHARES) == pytest.approx(theirs.ppf(SHARES), abs=1e-9)  # likewise


SHAPES = [*(ours for ours, _ in OUTSIDE.values()), Hollow(0.2), Hollow(0.9)]


@pytest.mark.parametrize("shape", SHAPES, ids=str)
def test_mean_and_variance_are_the_integrals_of_the_quantile(shape):
    # E[x] and E[x²] are integrals of the quantile over the shares; the break of a hollow shape is at ½.
    first = integrate.quad(lambda u: float(shape.quantile(np.array(u))), 0.0, 1.0, points=[0.5])[0]
    second = integrate.quad(lambda u: float(shape.quantile(np.array(u))) ** 2, 0.0, 1.0, points=[0.5])[0]
    assert shape.mean == pytest.approx(first, abs=1e-7)  # quad at the steep ends of the arc sine
    assert shape.variance == pytest.approx(second, rel=1e-7)


@pytest.mark.parametrize(
    ("name", "variance"),
    [("uniform", 1 / 3), ("triangular", 1 / 6), ("sine", 1 / 2)],
)
def test_variance_is_that_of_the_guide(name, variance):
    # JCGM 101:2008, 6.4: (b − a)²/12, (b − a)²/24 and (b − a)²/8 with b − a = 2.
    assert PLAIN[name].variance == pytest.approx(variance, rel=1e-12)


def test_hollow_is_two_uniform_halves():
    # Closed form: |x| uniform between h and 1, both signs alike.
    shape = Hollow(0.2)
    two_halves = stats.uniform(0.2, 0.8)
    upper = np.array([0.5, 0.6, 0.75, 0.99, 1.0])
    assert shape.quantile(upper) == pytest.approx(two_halves.ppf(2.0 * upper - 1.0), abs=1e-12)
    assert shape.quantile(1.0 - upper[1:]) == pytest.approx(-shape.quantile(upper[1:]), abs=1e-12)
    assert shape.variance == pytest.approx(two_halves.moment(2), rel=1e-12)


def test_nothing_is_drawn_from_the_middle_of_a_hollow_one():
    x = Hollow(0.2).quantile(np.linspace(0.0, 1.0, 10_001))
    assert np.abs(x).min() == pytest.approx(0.2, abs=1e-12)


SHARE = st.floats(0.0, 1.0)


@given(share=SHARE, inner=st.floats(0.0, 0.999), within=SHARE)
def test_no_shape_leaves_the_limits(share, inner, within):
    for shape in (*PLAIN.values(), Hollow(inner), Trapezium(within)):
        assert abs(float(shape.quantile(np.array(share)))) <= 1.0 + 1e-15  # rounding


@given(shares=st.lists(SHARE, min_size=2, max_size=2), inner=st.floats(0.0, 0.999), within=SHARE)
def test_quantile_never_falls(shares, inner, within):
    low, high = sorted(shares)
    for shape in (*PLAIN.values(), Hollow(inner), Trapezium(within)):
        x = shape.quantile(np.array([low, high]))
        assert x[0] <= x[1] + 1e-12  # rounding at the joints


DISTANCE = st.floats(0.01, 10.0)


@given(mean=SHARE, board=SHARE, below=DISTANCE, above=DISTANCE, part=SHARE)
def test_board_of_a_batch_stays_between_the_limits_and_near_its_batch(mean, board, below, above, part):
    within = part * min(below, above)
    batch = Batch(within, below, above)

    def offset(share: float) -> float:
        x = float(batch.coordinate(np.array([mean]), np.array([share]))[0])
        assert abs(x) <= 1.0
        return x * (below if x < 0.0 else above)

    # The middle board is the batch mean: no other is further from it than `within`.
    assert abs(offset(board) - offset(0.5)) <= within + 1e-9 * (below + above)  # rounding
    assert -below + within - 1e-9 * below <= offset(0.5) <= above - within + 1e-9 * above


def test_batches_and_boards_add_up_to_a_trapezium():
    draws = np.random.default_rng(3).random((2, 20_000))
    x = Batch(0.3e-2, 1e-2, 1e-2).coordinate(*draws)
    # Kolmogorov–Smirnov with a fixed seed; a wrong part within the batch gives 1e-30 and less.
    assert stats.kstest(x, trapezium(0.3).cdf).pvalue > 1e-3


def test_half_of_the_batches_lie_on_either_side_of_typical():
    # V_BE 0.60…0.64…0.72 V, boards within 20 mV: batch means fill 0.62…0.64 and 0.64…0.70 V evenly.
    batch = shape_between(volts(0.60, 0.64, 0.72, 0.02))
    u = np.array([0.0, 0.25, 0.5, 0.75, 1.0])
    x = batch.coordinate(u, np.full(5, 0.5))
    mean = 0.64 + x * np.where(x < 0.0, 0.04, 0.08)
    assert mean == pytest.approx([0.62, 0.63, 0.64, 0.67, 0.70], abs=1e-12)
    edge = batch.coordinate(np.array([0.0, 1.0, 0.5]), np.array([0.0, 1.0, 1.0]))
    assert edge == pytest.approx([-1.0, 1.0, 0.02 / 0.08], abs=1e-12)  # both limits; 20 mV above typical


def volts(low: float, nominal: float, high: float, within: float) -> Limits:
    """Limits that are drawn by batch."""
    drawn = Distribution(name="batch", within_batch=within)
    return Limits(low=low, nominal=nominal, high=high, distribution=drawn)


def test_gain_takes_its_part_within_a_batch_as_a_ratio():
    # h_FE 100…200…800, boards within a factor of 1.2: the best board of a nominal batch has 240.
    batch = shape_between(volts(100.0, 200.0, 800.0, 0.2), logarithmic=True)
    x = batch.coordinate(np.array([0.5, 0.5]), np.array([1.0, 0.0]))
    assert x == pytest.approx([log(1.2) / log(4.0), -log(1.2) / log(2.0)], abs=1e-12)


def test_room_for_a_batch_is_the_nearer_limit():
    assert room_for_batch(volts(0.60, 0.64, 0.72, 0.0)) == pytest.approx(0.04, abs=1e-12)
    assert room_for_batch(volts(100.0, 200.0, 800.0, 0.0), logarithmic=True) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize(
    ("within", "low"),
    [(0.05, 0.60), (0.001, 0.64)],  # beyond the nearer limit; no room at all on one side
)
def test_batch_without_room_is_refused(within, low):
    with pytest.raises(UsageError, match="within_batch: from 0 to"):
        shape_between(volts(low, 0.64, 0.72, within))


def test_batch_may_fill_the_nearer_side_but_for_rounding():
    # 0.72 − 0.64 is 0.07999999999999996 in doubles: 80 mV are meant.
    assert isinstance(shape_between(volts(0.56, 0.64, 0.72, 0.08)), Batch)


def test_distribution_that_needs_a_companion_is_refused_without_it():
    for name in ("hollow", "batch"):
        with pytest.raises(UsageError, match=f'"{name}" goes with'):
            Distribution(name=name)
    with pytest.raises(UsageError, match='"hollow" goes with'):
        Distribution(name="normal", hollow_within=0.01)
    with pytest.raises(UsageError, match='"batch" goes with'):
        Distribution(name="batch", within_batch=-0.01)


def test_shape_around_a_tolerance_measures_companions_by_it():
    # 5 % resistors, hollow within 1 %: a fifth of the way; boards within 0.3 of 1 %.
    hollow = shape_around(Distribution(name="hollow", hollow_within=0.01), 0.05)
    assert isinstance(hollow, Hollow) and hollow.inner == pytest.approx(0.2, rel=1e-12)
    assert shape_around(Distribution(name="sine"), 0.05) is PLAIN["sine"]
    assert shape_around(Distribution(), 0.05) is UNIFORM
    drawn = shape_around(Distribution(name="batch", within_batch=0.003), 0.01)
    assert drawn == Batch(0.003, 0.01, 0.01)


@pytest.mark.parametrize("tolerance", [0.01, 0.005, 0.0])
def test_hollow_wider_than_the_tolerance_is_refused(tolerance):
    with pytest.raises(UsageError, match="hollow: the middle removed is from 0 to below"):
        shape_around(Distribution(name="hollow", hollow_within=0.01), tolerance)


@pytest.mark.parametrize(
    "distribution",
    [Distribution(name="hollow", hollow_within=0.1), Distribution(name="batch", within_batch=0.1)],
)
def test_hollow_and_batch_are_no_plain_shapes(distribution):
    with pytest.raises(UsageError, match="not here; allowed: uniform, normal, triangular, sine"):
        plain_shape(distribution)
