"""The sampling engine on the cases of JCGM 101:2008, clause 9, and the bounds of a yield.

Sources: JCGM 101:2008, "Propagation of distributions using a Monte Carlo method", clause 9 (figures from
memory, re-run for the project's check values); Clopper & Pearson, Biometrika 26 (1934); Wilks,
"Determination of
sample sizes for setting tolerance limits", Ann. Math. Statist. 12 (1941): 59, 93 and 124 draws.

The engine's own streams, distributions and quantiles are used: inputs are the draws of `sampling`, sums are
taken here. Draws are bounded, so that a normal input is one truncated at ±3σ.
"""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from variation.stages import ideal, stage, with_resistors

from biasband.boards.draws import coordinates
from biasband.boards.intervals import allowed_failures, yield_bound
from biasband.boards.sampling import Sample
from biasband.boards.streams import uniform
from biasband.stage import Distribution
from biasband.variation.distributions import UNIFORM

DRAWS = 10**6
LOW, HIGH = 0.025, 0.975
"""The probabilistically symmetric 95 % interval of the clause."""


def inputs(distribution: str, seed: int = 1) -> list[np.ndarray]:
    """Four independent inputs in ±1, drawn as the tolerances of four resistors."""
    of = stage("divider", {"R1": 1e4, "R2": 1e4, "RC": 1e3, "RE": 1e3}, ideal(100.0), 9.0)
    of = with_resistors(of, tolerance=0.01, distribution=Distribution(name=distribution))
    drawn = coordinates(of, slice(0, DRAWS), seed=seed)
    return [drawn[f"{name}.tolerance"] for name in ("R1", "R2", "RC", "RE")]


def test_sum_of_four_rectangular_inputs_of_unit_deviation():
    # JCGM 101, 9.2.3: exactly ±2√3·(2 − (3/5)^¼) = ±3.8794.
    total = Sample(sqrt(3.0) * np.sum(inputs("uniform"), axis=0))
    exact = 2.0 * sqrt(3.0) * (2.0 - 0.6**0.25)
    assert exact == pytest.approx(3.8794, abs=5e-5)
    # √(q(1−q)/N)/f with f(3.88) = 0.033: a standard deviation of 0.0047; three of them.
    assert total.quantile(LOW) == pytest.approx(-exact, abs=0.015)
    assert total.quantile(HIGH) == pytest.approx(exact, abs=0.015)
    assert total.sd == pytest.approx(2.0, abs=0.006)  # 1/√(2N) of 2, four of them
    assert total.mean == pytest.approx(0.0, abs=0.008)  # 2/√N, four of them


def test_sum_of_three_rectangular_inputs_and_one_ten_times_as_wide():
    # JCGM 101, 9.2.4: ±17.0 where first order gives ±19.9.
    one, two, three, wide = inputs("uniform")
    total = Sample(sqrt(3.0) * (one + two + three + 10.0 * wide))
    # f(17) = 0.026: a standard deviation of 0.006, beside half of the last printed digit.
    assert total.quantile(LOW) == pytest.approx(-17.0, abs=0.05 + 0.018)
    assert total.quantile(HIGH) == pytest.approx(17.0, abs=0.05 + 0.018)
    assert total.sd == pytest.approx(sqrt(103.0), rel=0.003)  # 1/√(2N), four of them


def test_sum_of_four_normal_inputs():
    # JCGM 101, 9.2.2: ±3.92 for N(0, 1). Ours are cut at ±3σ: their deviation is 0.98658 (variance
    # 1 − 6·φ(3)/(2Φ(3) − 1) = 0.97334), and the sum of four is nearly normal still.
    total = Sample(3.0 * np.sum(inputs("normal"), axis=0))
    deviation = sqrt(1.0 - 6.0 * 0.00443184841 / 0.99730020394)
    # 0.0064 of statistics (three standard deviations of 0.0043) and 0.01 for the sum not being quite normal.
    assert total.quantile(LOW) == pytest.approx(-3.92 * deviation, abs=0.0128 + 0.01)
    assert total.quantile(HIGH) == pytest.approx(3.92 * deviation, abs=0.0128 + 0.01)
    assert total.sd == pytest.approx(2.0 * deviation, abs=0.006)


def test_uncut_normal_inputs_by_the_engine_s_streams():
    # JCGM 101, 9.2.2 itself: the streams through the inverse normal, without the cut.
    from scipy.special import ndtri

    streams = [uniform(name, slice(0, DRAWS), 1) for name in ("R1", "R2", "R3", "R4")]
    total = Sample(np.sum(ndtri(np.maximum(streams, 1e-300)), axis=0))
    assert total.quantile(LOW) == pytest.approx(-3.92, abs=0.0128 + 0.005)  # and half the last printed digit
    assert total.quantile(HIGH) == pytest.approx(3.92, abs=0.0128 + 0.005)


def standard_normal(name: str) -> np.ndarray:
    """N(0, 1) from one of the engine's streams."""
    from scipy.special import ndtri

    return np.asarray(ndtri(np.maximum(uniform(name, slice(0, DRAWS), 1), 1e-300)))


def test_mass_calibration():
    # JCGM 101, 9.3: reference 100 000.000 mg (u 0.050 mg) and 1.234 mg (u 0.020 mg), air 1.20 ± 0.10 kg/m³,
    # densities (8 ± 1) and (8.00 ± 0.05)·10³ kg/m³: u = 0.0754 mg where first order gives 0.0539.
    m_R = 100_000.0 + 0.050 * standard_normal("m_R")
    small = 1.234 + 0.020 * standard_normal("small")
    air = 1.20 + 0.10 * UNIFORM.quantile(uniform("air", slice(0, DRAWS), 1))
    weighed = 8e3 + 1e3 * UNIFORM.quantile(uniform("weighed", slice(0, DRAWS), 1))
    reference = 8e3 + 50.0 * UNIFORM.quantile(uniform("reference", slice(0, DRAWS), 1))
    mass = Sample((m_R + small) * (1.0 + (air - 1.2) * (1.0 / weighed - 1.0 / reference)) - 100_000.0)
    # Half of the last printed digit and three standard deviations of 0.0754/√(2N).
    assert mass.sd == pytest.approx(0.0754, abs=0.00005 + 0.00016)
    assert mass.mean == pytest.approx(1.234, abs=0.0005)


def test_comparison_loss_of_two_zero_means():
    # JCGM 101, 9.4.2.2: δY = X1² + X2², u = 0.005, both means 0: mean 50e-6; 95 % shortest [0, 149.8e-6].
    loss = Sample((0.005 * standard_normal("X1")) ** 2 + (0.005 * standard_normal("X2")) ** 2)
    # An exponential of mean 50e-6: three standard deviations of 50e-6/√N.
    assert loss.mean == pytest.approx(50e-6, abs=3 * 50e-9)
    # Its 95 % quantile scatters by 50e-6·√(0.05·0.95/N)/0.05 = 0.22e-6; three of them.
    assert loss.quantile(0.95) == pytest.approx(149.8e-6, abs=0.7e-6)


def test_clopper_pearson_interval_of_five_in_ten_thousand():
    # 0.0162 … 0.1166 % of failures, two-sided 95 %: each side one-sided 97.5 %.
    highest = 1.0 - yield_bound(10_000 - 5, 10_000, confidence=0.975)
    # The lower bound of a failure rate is the lower bound of the "yield" of failures.
    lowest = yield_bound(5, 10_000, confidence=0.975)
    assert 100 * lowest == pytest.approx(0.0162, abs=5e-5)  # half of the last printed digit
    assert 100 * highest == pytest.approx(0.1166, abs=5e-5)


def test_no_failure_in_a_hundred_thousand_shows_thirty_ppm():
    # The rule of three: 1 − 0.05^(1/N) = 29.96 ppm.
    assert 1e6 * (1.0 - yield_bound(10**5, 10**5)) == pytest.approx(29.96, abs=0.005)


def test_nothing_held_shows_no_yield():
    assert yield_bound(0, 100) == 0.0


@pytest.mark.parametrize(("draws", "failures"), [(59, 0), (93, 1), (124, 2)])
def test_wilks_draws_allow_one_failure_less_than_the_order(draws, failures):
    # Wilks 95/95: with 59, 93, 124 draws the 1st, 2nd, 3rd largest is a bound; one draw fewer is not enough.
    assert allowed_failures(draws, 0.95) == failures
    assert allowed_failures(draws - 1, 0.95) == failures - 1


@pytest.mark.parametrize("required", [0.5, 0.9, 0.9973])
@pytest.mark.parametrize("boards", [20, 500, 5000])
def test_allowed_failures_is_where_the_bound_stops_to_reach(boards, required):
    scan = [f for f in range(boards + 1) if yield_bound(boards - f, boards) >= required]
    assert allowed_failures(boards, required) == (max(scan) if scan else -1)


@pytest.mark.parametrize("boards_per_batch", [3, 20, 200])
@pytest.mark.parametrize("required", [0.5, 0.95])
def test_allowed_failures_in_batches_is_where_their_bound_stops_to_reach(boards_per_batch, required):
    boards = 2000
    held = range(boards, -1, -1)
    bounds = [yield_bound(each, boards, boards_per_batch=boards_per_batch) for each in held]
    assert bounds == sorted(bounds, reverse=True)
    scan = [f for f, bound in enumerate(bounds) if bound >= required]
    found = allowed_failures(boards, required, boards_per_batch=boards_per_batch)
    assert found == (max(scan) if scan else -1)
