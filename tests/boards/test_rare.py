"""Rare failures: probabilities that are known exactly, several regions, and what is said where nothing is."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq
from variation.stages import coupled, ideal, limits, some, stage, with_resistor

from biasband.boards.failing_places import failing_places
from biasband.boards.proposal import Proposal
from biasband.boards.rare import DRAWS, Rare, rare, rare_failures
from biasband.boards.sampling import sample
from biasband.boards.tilted_box import parts
from biasband.errors import UsageError
from biasband.stage import Distribution, Limits, Stage
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import NOMINAL_USE, points_of_use

Uniforms = Mapping[str, np.ndarray]


def names(count: int) -> list[str]:
    """Names of numbers."""
    return [f"u{k}" for k in range(count)]


def table(uniforms: Uniforms) -> np.ndarray:
    """The numbers as a table (N, K)."""
    return np.stack([*uniforms.values()], axis=1)


def agrees(found: Rare, exact: float) -> None:
    """Within four of its own errors (one in 16 000 strays further), and those at most a twentieth."""
    assert found.resolved
    assert found.standard_error < 0.05 * exact
    assert found.probability == pytest.approx(exact, abs=4.0 * found.standard_error)
    assert found.interval.low < found.probability < found.interval.high


def beyond(count: int, rest: float) -> Callable[[Uniforms], np.ndarray]:
    """Fails where the sum of `count` numbers exceeds count − rest: probability rest^K/K!, a simplex."""
    return lambda u: count - rest - table(u)[:, :count].sum(axis=1)


@pytest.mark.parametrize("count", [3, 6, 10])
@pytest.mark.parametrize("rest", [1.0, 0.4])
def test_sum_of_uniforms_fails_as_often_as_its_corner_is_large(count, rest):
    agrees(rare(beyond(count, rest), names(count), seed=1), rest**count / math.factorial(count))


@pytest.mark.parametrize("exact", [0.3, 1e-3, 1e-5, 1e-7, 1e-9])
def test_one_number_below_a_limit_has_the_limit_for_its_probability(exact):
    agrees(rare(lambda u: u["u0"] - exact, names(1), seed=1), exact)


def test_one_number_next_to_one_is_no_harder():
    agrees(rare(lambda u: (1.0 - u["u0"]) - 1e-7, names(1), seed=1), 1e-7)


def test_numbers_that_do_not_matter_do_not_matter():
    found = rare(beyond(3, 0.05), names(23), seed=1)
    agrees(found, 0.05**3 / 6.0)
    # Without them about 12 500 of the draws are effective; a quarter is left to what twenty may cost.
    assert found.effective_sample_size > 0.75 * 12_500


@pytest.mark.parametrize("seed", range(4))
def test_both_ends_of_a_number_are_found_though_far_apart(seed):
    def slack(u: Uniforms) -> np.ndarray:
        return np.maximum(np.minimum(u["u0"], 1.0 - u["u0"]) - 1e-3, u["u1"] - 1e-3)

    agrees(rare(slack, names(4), seed=seed), 2e-3 * 1e-3)


def test_opposite_corners_of_the_cube_are_found():
    def slack(u: Uniforms) -> np.ndarray:
        return np.minimum(table(u).max(axis=1), (1.0 - table(u)).max(axis=1)) - 0.03

    agrees(rare(slack, names(4), seed=1), 2.0 * 0.03**4)


@pytest.mark.parametrize("each", [1e-3, 1e-6])
def test_union_of_ways_to_fail_counts_each_once(each):
    found = rare(lambda u: table(u).min(axis=1) - each, names(3), seed=1)
    agrees(found, -math.expm1(3.0 * math.log1p(-each)))


@pytest.mark.parametrize("seed", range(3))
def test_five_ways_to_fail_keep_their_places_down_to_a_millionth(seed):
    found = rare(lambda u: table(u).min(axis=1) - 1e-6, names(5), seed=seed)
    agrees(found, -math.expm1(5.0 * math.log1p(-1e-6)))


def test_failures_in_the_middle_of_an_axis_are_found():
    def slack(u: Uniforms) -> np.ndarray:
        return np.maximum(np.abs(u["u0"] - 0.4) - 0.02, u["u1"] - 1e-5)

    agrees(rare(slack, names(3), seed=1), 0.04 * 1e-5)


def test_regions_of_unlike_size_are_both_found():
    # 1e-5 and 1e-6, apart: the lesser is a tenth of a population at most.
    found = rare(lambda u: np.minimum(u["u0"] / 10.0, 1.0 - u["u0"]) - 1e-6, names(3), seed=1)
    agrees(found, 1.1e-5)


def test_interval_covers_the_exact_probability_as_often_as_it_says():
    runs = [rare(beyond(3, 0.2), names(5), seed=seed, draws=2048) for seed in range(60)]
    exact = 0.2**3 / 6.0
    covered = sum(run.interval.low <= exact <= run.interval.high for run in runs)
    assert covered >= 51  # of 60 at 95 %: fewer comes with 0.07 % (binomial)
    # No bias: the mean of sixty lies within four of its own errors.
    errors = np.array([run.standard_error for run in runs])
    mean = np.mean([run.probability for run in runs])
    assert mean == pytest.approx(exact, abs=4.0 * np.sqrt(np.mean(errors**2) / len(runs)))
    # And the errors are those that the sixty show: a deviation of sixty is known to 1/√120 = 9 %; thrice.
    assert np.std([run.probability for run in runs]) == pytest.approx(np.mean(errors), rel=0.27)


def test_not_solved_counts_as_failing_and_is_counted():
    found = rare(lambda u: np.where(u["u0"] < 1e-4, np.nan, u["u0"]), names(2), seed=1)
    agrees(found, 1e-4)
    # About nine in ten draws lie around the failures, and none of those was solved.
    assert 0.5 * found.draws < found.unsolved < found.draws
    solved_too = rare(lambda u: np.where(u["u0"] < 5e-5, np.nan, u["u0"] - 1e-4), names(2), seed=1)
    agrees(solved_too, 1e-4)
    assert 0 < solved_too.unsolved < solved_too.draws


def test_nothing_solved_is_a_probability_of_one():
    found = rare(lambda u: np.full_like(u["u0"], np.nan), names(2), seed=1)
    assert found.probability == pytest.approx(1.0, abs=4.0 * found.standard_error + 1e-9)  # rounding
    assert found.standard_error < 1e-3
    assert found.unsolved == found.draws


@pytest.mark.parametrize("never", [lambda u: 1.0 + u["u0"], lambda u: np.ones_like(u["u0"])])
def test_where_nothing_fails_only_an_upper_bound_is_given(never):
    found = rare(never, names(3), seed=1)
    assert not found.resolved
    assert (found.probability, found.effective_sample_size) == (0.0, 0.0)
    # Clopper–Pearson without a failure, two-sided: 1 − 0.025^(1/N).
    assert found.interval.low == 0.0
    assert found.interval.high == pytest.approx(1.0 - 0.025 ** (1.0 / DRAWS), rel=1e-9)  # rounding


def test_failures_that_no_box_describes_are_not_called_resolved():
    # A thin curved shell all around: χ² of four normal numbers beyond 50, 3.6e-10 (its own exact tail).
    from scipy.special import ndtri

    def slack(u: Uniforms) -> np.ndarray:
        return 50.0 - np.sum(ndtri(np.clip(table(u), 1e-16, 1.0 - 1e-16)) ** 2, axis=1)

    found = rare(slack, names(4), seed=1)
    assert not found.resolved
    assert found.interval.low <= math.exp(-25.0) * 26.0 <= found.interval.high


def test_same_seed_gives_the_same_record_and_another_seed_another():
    one, again, other = (rare(beyond(3, 0.1), names(4), seed=seed) for seed in (1, 1, 2))
    assert one == again
    assert one.probability != other.probability


def test_cost_stays_within_its_bound():
    solved = []

    def slack(u: Uniforms) -> np.ndarray:
        solved.append(len(u["u0"]))
        return u["u0"] - 1e-9

    found = rare(slack, names(1), seed=1)
    assert sum(solved) == found.solved <= 2**17


@pytest.mark.parametrize(("count", "draws"), [(0, 1000), (1, 10)])
def test_no_numbers_or_too_few_draws_are_refused(count, draws):
    with pytest.raises(UsageError, match="at least one number and 100 draws"):
        rare(lambda u: np.ones(1), names(count), seed=1, draws=draws)


def test_proposal_is_a_density():
    # Drawn by it and weighted, any part of the cube has its volume: here two boxes of 0.5 and of 1e-3.
    found = failing_places(lambda u: table(u).min(axis=1) - 1e-4, names(2), seed=1).places
    proposal = Proposal.around([found[rows] for rows in parts(found)])
    uniforms = np.random.default_rng(1).random((400_000, 2))
    places = proposal.draw(uniforms)
    weights = proposal.weights(places)
    assert weights.max() <= 10.0 * (1.0 + 1e-9)  # one over the share of the whole cube
    for inside, volume in ((places[:, 0] < 0.5, 0.5), (places[:, 1] < 1e-3, 1e-3)):
        shares = np.where(inside, weights, 0.0)
        assert shares.mean() == pytest.approx(volume, abs=4.0 * shares.std() / np.sqrt(len(shares)))


def of_one_resistor(**more) -> Stage:
    """A base-resistor stage in which RB alone varies, by 5 %."""
    of = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(50.0), 12.0, **more)
    return with_resistor(of, "RB", tolerance=0.05)


def collector_voltage(RB: float, V_CC: float = 12.0) -> float:
    """V_C [V] by hand: `V_CC − RC·β·(V_CC − 0.7)/RB`."""
    return V_CC - 2.2e3 * 50.0 * (V_CC - 0.7) / RB


def failing(of: Stage, limit: float, *, lower: bool, points=(NOMINAL_USE,), seed: int = 1) -> Rare:
    """The probability that V_C fails a limit."""
    measure = some(of, "collector_voltage")["collector_voltage"]
    return rare_failures(of, measure, limit, points, lower=lower, seed=seed, cut_off=0.0)


@pytest.mark.parametrize("exact", [1e-2, 1e-5])
@pytest.mark.parametrize("lower", [True, False])
def test_stage_fails_as_often_as_its_one_resistor_is_beyond_the_threshold(exact, lower):
    share = exact if lower else 1.0 - exact
    agrees(failing(of_one_resistor(), collector_voltage(240e3 * (0.95 + 0.1 * share)), lower=lower), exact)


def test_board_is_judged_at_its_worst_point_of_use():
    of = of_one_resistor()
    of = replace(of, supply=replace(of.supply, voltage=limits(11.4, 12.0, 12.6)))

    def lowest(RB: float) -> float:
        return min(collector_voltage(RB, V_CC) for V_CC in (11.4, 12.0, 12.6))

    threshold = brentq(lambda RB: lowest(RB) - 6.3, 228e3, 252e3)
    assert threshold > 228e3  # else the test would be about nothing
    agrees(failing(of, 6.3, lower=True, points=points_of_use(of)), (threshold / 240e3 - 0.95) / 0.1)


def test_distribution_of_the_part_is_the_one_drawn():
    # Triangular: P(x < −1 + h) = h²/2, so h = 1e-3 is 5e-7.
    of = with_resistor(of_one_resistor(), "RB", distribution=Distribution(name="triangular"))
    agrees(failing(of, collector_voltage(240e3 * (1.0 - 0.05 * (1.0 - 1e-3))), lower=True), 5e-7)


def test_board_of_a_batch_is_a_board_of_its_own():
    # ±5 % as ±4 % of the batch and ±1 % within it: both uniform. Below −5 % + 0.1 %: (0.1²/2)/(8·2).
    batch = Distribution(name="batch", within_batch=0.01)
    of = with_resistor(of_one_resistor(boards_per_batch=1000), "RB", distribution=batch)
    agrees(failing(of, collector_voltage(240e3 * 0.951), lower=True), 0.1**2 / 2.0 / (8.0 * 2.0))


def test_pnp_mirrors_npn():
    npn, pnp = (of_one_resistor(polarity=polarity) for polarity in ("npn", "pnp"))
    limit = collector_voltage(240e3 * (0.95 + 0.1 * 1e-5))
    one, other = failing(npn, limit, lower=True), failing(pnp, 12.0 - limit, lower=False)
    # The same draws; a board at the limit may fall on either side of it by rounding.
    assert other.probability == pytest.approx(one.probability, rel=1e-3)


def test_whole_stage_agrees_with_plain_draws_where_both_can_see():
    of, name = coupled(), "symmetric_peak_swing"
    points, cut_off = points_of_use(of), cut_off_current(of)
    drawn = sample(of, some(of, name), points, boards=60_000, seed=5, cut_off=cut_off)
    lowest = drawn.spread[name].lowest_in_use
    limit = lowest.quantile(0.005)
    found = rare_failures(of, some(of, name)[name], limit, points, lower=True, seed=1, cut_off=cut_off)
    assert found.resolved
    # 300 plain failures: √300 = 6 %, four of them.
    assert found.probability == pytest.approx(float(np.mean(lowest.values < limit)), rel=0.25)


def test_stage_without_variation_never_fails():
    of = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(50.0), Limits.exactly(12.0))
    found = failing(of, 6.0, lower=True)
    assert not found.resolved and found.interval.low == 0.0


@pytest.mark.parametrize("seed", range(3))
def test_search_finds_like_regions_alike_often(seed):
    found = failing_places(lambda u: table(u).min(axis=1) - 1e-6, names(5), seed=seed)
    shares = np.bincount(found.places.argmin(axis=1), minlength=5) / len(found.places)
    # A fifth each: with some 500 independent places among them 0.018 of standard deviation, three of them.
    assert shares == pytest.approx(np.full(5, 0.2), abs=0.055)
    # Six levels, each a tenth to about 10 %: a quarter in all, three of them the other way (a factor).
    assert 0.5 < found.probability / 5e-6 < 2.0
