"""Sampling: the same boards whatever the chunk, inside the corners, and what is counted of them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from scipy import stats
from variation.stages import (
    ROOM,
    coupled,
    ideal,
    limits,
    real,
    running_away,
    some,
    stage,
    varying_stages,
    with_resistor,
)

from biasband.boards import sampling
from biasband.boards.draws import coordinates, draws
from biasband.boards.sampling import Sample, Spread, sample
from biasband.boards.streams import uniform
from biasband.circuit.operating_point import Region
from biasband.circuit.reading import read
from biasband.circuit.topology import Node
from biasband.stage import Distribution, Limits, Stage, Supply
from biasband.variation.contributors import realise
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import NOMINAL_USE, points_of_use


def boards(of: Stage, *names: str, count: int = 1000, seed: int = 1) -> sampling.Boards:
    """Boards of a stage at all its points of use."""
    return sample(
        of, some(of, *names), points_of_use(of), boards=count, seed=seed, cut_off=cut_off_current(of)
    )


@pytest.mark.parametrize("chunk", [1, 7, 64, 333, 1000])
def test_result_is_the_same_bytes_for_any_chunk(monkeypatch, chunk):
    count = 60 if chunk == 1 else 1000
    whole = boards(coupled(), "collector_voltage", "transistor_power", count=count)
    monkeypatch.setattr(sampling, "CHUNK", chunk)
    parts = boards(coupled(), "collector_voltage", "transistor_power", count=count)
    for name in ("collector_voltage", "transistor_power"):
        for place in ("nominal_use", "lowest_in_use", "highest_in_use"):
            ours, theirs = (getattr(found.spread[name], place).values for found in (whole, parts))
            assert ours.tobytes() == theirs.tobytes()
    assert whole.regions == parts.regions


def test_first_boards_are_the_same_in_a_larger_sample():
    few, many = (boards(coupled(), "collector_voltage", count=n) for n in (100, 1000))
    name = "collector_voltage"
    assert np.array_equal(few.spread[name].nominal_use.values, many.spread[name].nominal_use.values[:100])


def test_another_contributor_does_not_reshuffle_the_others():
    plain = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, real(), 9.0, resistor={"tolerance": 0.01})
    more = replace(
        plain,
        transistor=real(leakage=40e-9),
        supply=Supply(voltage=limits(8.0, 9.0, 10.0), varies="by board"),
    )
    before, after = (coordinates(of, slice(0, 100), seed=1) for of in (plain, more))
    assert set(after) - set(before) == {"leakage", "supply"}
    for name, values in before.items():
        assert np.array_equal(values, after[name]), name


def test_every_stream_is_its_own():
    drawn = coordinates(coupled(), slice(0, 4000), seed=1)
    matrix = np.corrcoef(np.stack(list(drawn.values())))
    # Independent streams of 4000: a correlation has a standard deviation of 1/√4000 = 0.016; five of them.
    assert np.abs(matrix - np.eye(len(drawn))).max() < 5 / np.sqrt(4000)


def test_two_stages_are_drawn_alike_for_what_they_share():
    divider, resistor = coupled(), stage("base-resistor", {"RB": 1e6, "RC": 3.9e3}, real(), 9.0)
    one, other = (coordinates(of, slice(0, 50), seed=3) for of in (divider, resistor))
    for name in ("gain", "base_emitter_voltage", "RC.tolerance"):
        assert np.array_equal(one[name], other[name])


def test_seed_changes_the_boards_and_the_same_seed_does_not():
    one, same, other = (
        boards(coupled(), "collector_voltage", count=50, seed=seed)
        .spread["collector_voltage"]
        .nominal_use.values
        for seed in (1, 1, 2)
    )
    assert np.array_equal(one, same)
    assert not np.any(one == other)


def test_rows_can_be_drawn_from_anywhere():
    whole = uniform("R1.tolerance", slice(0, 101), 7)
    for start, stop in ((0, 3), (1, 2), (2, 9), (5, 101), (97, 101)):
        assert np.array_equal(uniform("R1.tolerance", slice(start, stop), 7), whole[start:stop])


def test_stream_is_numpy_s_own_of_its_seed_and_name():
    for seed, name in ((7, "R1.tolerance"), (8, "R1.tolerance"), (7, "gain"), (7, "R1.tolerance")):
        numpy_s = np.random.Generator(np.random.Philox(np.random.SeedSequence([seed, *name.encode()])))
        assert np.array_equal(uniform(name, slice(0, 101), seed), numpy_s.random(101))


@settings(deadline=None, derandomize=True, max_examples=15, suppress_health_check=[HealthCheck.too_slow])
@given(of=varying_stages())
def test_every_board_lies_inside_the_corners(of):
    names = ("collector_voltage", "base_voltage", "collector_current", "base_current", "resistor_power.")
    names = (*names[:-1], f"resistor_power.{of.resistors[0].name}")
    ranges = corners(of, some(of, *names), cut_off=0.0).ranges
    found = boards(of, *names, count=300)
    for name in names:
        low, high = ranges[name].low.value, ranges[name].high.value
        # Where nothing saturates these are extreme at a vertex; where something does, the search stops
        # within 1e-4 of the range.
        slack = 1e-4 * (high - low) + 1e-9 * abs(high)
        assert found.spread[name].lowest_in_use.quantile(0.0) >= low - slack, name
        assert found.spread[name].highest_in_use.quantile(1.0) <= high + slack, name


@settings(deadline=None, max_examples=40)
@given(of=varying_stages())
def test_every_draw_stays_between_the_contributor_s_limits(of):
    for point in points_of_use(of):
        drawn = realise(of, {**coordinates(of, slice(0, 200), seed=1), **point.coordinates})
        rise = abs(float(np.ravel(drawn.temperature)[0]) - ROOM)
        for resistor in of.resistors:
            t, d, c = resistor.tolerance, resistor.life_drift, resistor.tempco * rise
            ratio = np.asarray(drawn.resistances[resistor.name]) / resistor.value
            assert np.all(ratio >= (1 - t) * (1 - d) * (1 - c) - 1e-12)  # rounding
            assert np.all(ratio <= (1 + t) * (1 + d) * (1 + c) + 1e-12)
        assert np.all(
            (np.asarray(drawn.gain) >= 165 * (1 - 1e-12)) & (np.asarray(drawn.gain) <= 410 * (1 + 1e-12))
        )
        assert np.all((np.asarray(drawn.leakage) >= 0) & (np.asarray(drawn.leakage) <= of.transistor.leakage))


def test_in_use_contributors_are_never_drawn():
    names = {draw.name for draw in draws(coupled())}
    assert not names & {"temperature", "supply", "ripple", "negative_supply"}


def test_supply_by_board_is_drawn():
    supply = Supply(voltage=limits(8.1, 9.0, 9.9), varies="by board")
    assert "supply" in {draw.name for draw in draws(replace(coupled(), supply=supply))}


def test_every_board_is_solved_at_every_point_of_use_and_regions_are_counted():
    found = boards(coupled(), "collector_voltage", count=200)
    assert found.points == 5
    assert sum(found.regions.values()) == 5 * 200


def test_lowest_and_highest_in_use_are_those_of_the_points_of_use():
    of = coupled()
    found = boards(of, "base_voltage", count=64).spread["base_voltage"]
    drawn = coordinates(of, slice(0, 64), seed=1)
    uses = [realise(of, {**drawn, **point.coordinates}) for point in points_of_use(of)]
    each = np.stack([read(of, use).volts[Node.BASE] for use in uses])
    assert found.nominal_use.values == pytest.approx(each[0], abs=1e-8)  # residuals below 1e-9 V
    assert found.lowest_in_use.values == pytest.approx(each.min(axis=0), abs=1e-8)
    assert found.highest_in_use.values == pytest.approx(each.max(axis=0), abs=1e-8)


def test_yield_is_the_share_of_boards_that_hold_everywhere():
    low, high = np.array([1.0, 2.0, 3.0, np.nan, 2.5]), np.array([5.0, 9.0, 5.0, np.nan, 6.0])
    spread = Spread(Sample(low), Sample(low), Sample(high))
    # Boards 2 (9 > 6) and 4 (not solved) fail the upper limit, board 1 (1 < 1.5) the lower one.
    assert spread.inside(1.5, 6.0) == 2 / 5
    assert spread.inside(0.0, 100.0) == 4 / 5


def test_board_that_fails_at_one_point_of_use_shows_as_nan():
    of = running_away(Limits(low=ROOM, nominal=ROOM, high=358.15))
    found = boards(of, "collector_current", count=40)
    spread = found.spread["collector_current"]
    ran_away = np.isnan(spread.lowest_in_use.values)
    assert 0 < ran_away.sum() == np.isnan(spread.highest_in_use.values).sum()
    assert found.regions[Region.RUNAWAY] >= ran_away.sum()
    assert not np.isnan(spread.nominal_use.values).any()  # only the hot point fails
    assert spread.inside(0.0, np.inf) == pytest.approx(1.0 - ran_away.mean(), abs=1e-12)


def test_sample_figures_are_numpy_s_over_the_solved_boards():
    values = np.random.default_rng(5).normal(3.0, 2.0, 1001)
    values[::10] = np.nan
    found = Sample(values)
    solved = values[~np.isnan(values)]
    assert found.mean == pytest.approx(np.mean(solved), rel=1e-12)
    assert found.sd == pytest.approx(np.std(solved, ddof=1), rel=1e-12)
    for share in (0.0, 0.00135, 0.25, 0.5, 0.99865, 1.0):
        assert found.quantile(share) == np.quantile(solved, share)


def test_sample_of_nothing_is_nan():
    nothing = Sample(np.array([np.nan, np.nan]))
    assert np.isnan([nothing.mean, nothing.sd, nothing.quantile(0.5)]).all()
    assert np.isnan(Sample(np.array([1.0])).sd)


DISTRIBUTIONS = {
    "uniform": stats.uniform(-1.0, 2.0),
    "triangular": stats.triang(0.5, -1.0, 2.0),
    "normal": stats.truncnorm(-3.0, 3.0, 0.0, 1.0 / 3.0),
    "sine": stats.arcsine(-1.0, 2.0),
}
"""physics.md 4: `normal` means limits at ±3σ, truncated there."""


@pytest.mark.parametrize("name", DISTRIBUTIONS)
def test_drawn_tolerance_follows_its_distribution(name):
    of = with_resistor(coupled(), "RC", distribution=Distribution(name=name))
    drawn = coordinates(of, slice(0, 4000), seed=11)["RC.tolerance"]
    # Kolmogorov–Smirnov with a fixed seed; a wrong shape gives 1e-30 and less.
    assert stats.kstest(drawn, DISTRIBUTIONS[name].cdf).pvalue > 1e-3


def test_half_of_the_gains_lie_below_typical_and_are_uniform_in_the_logarithm():
    of = stage("base-resistor", {"RB": 1e6, "RC": 3.9e3}, real(gain=limits(100.0, 200.0, 800.0)), 9.0)
    gain = np.asarray(realise(of, coordinates(of, slice(0, 8000), seed=1)).gain)
    # Standard deviation of a share of 8000: 0.0056 at one half, 0.0048 at a quarter; four of them.
    assert np.mean(gain < 200.0) == pytest.approx(0.5, abs=4 * 0.0056)
    assert np.mean(gain < np.sqrt(100.0 * 200.0)) == pytest.approx(0.25, abs=4 * 0.0048)
    assert np.mean(gain < 400.0) == pytest.approx(0.75, abs=4 * 0.0048)


def test_in_use_extremes_are_those_of_a_worst_board_not_of_a_mixture():
    # Only the supply varies, in use: every board has the same lowest and highest.
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(100.0), limits(17.1, 18.0, 18.9))
    spread = boards(of, "collector_current", count=20).spread["collector_current"]
    assert set(spread.lowest_in_use.values) == {spread.lowest_in_use.values[0]}
    assert spread.lowest_in_use.mean == pytest.approx(100 * (17.1 - 0.7) / 470e3, rel=1e-12)
    assert spread.highest_in_use.mean == pytest.approx(100 * (18.9 - 0.7) / 470e3, rel=1e-12)


def test_sampling_at_nominal_use_alone_has_no_in_use_spread():
    of = coupled()
    found = sample(of, some(of, "base_voltage"), [NOMINAL_USE], boards=32, seed=1, cut_off=0.0)
    spread = found.spread["base_voltage"]
    assert np.array_equal(spread.lowest_in_use.values, spread.highest_in_use.values)
    assert isinstance(found.spread["base_voltage"].nominal_use.values, np.ndarray)
    assert found.points == 1


def test_ideal_gain_without_limits_draws_nothing_for_it():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(100.0), 18.0)
    assert "gain" not in {draw.name for draw in draws(of)}


@pytest.mark.parametrize("ambient", [358.15, 263.15])
def test_resistors_of_a_group_share_the_common_part_of_their_tempco(ambient):
    # Two 10 k of one reel that nothing else varies: 100 ppm/K each, of which 30 ppm/K is their own.
    tempco, tracking, rise, count = 100e-6, 30e-6, ambient - ROOM, 20_000
    of = stage(
        "base-resistor", {"RB": 10e3, "RC": 10e3}, ideal(100.0), 9.0,
        resistor={"tempco": tempco, "group": "reel", "tracking": tracking},
        ambient=Limits.exactly(ambient),
    )  # fmt: skip
    drawn = realise(of, coordinates(of, slice(0, count), seed=1)).resistances
    shift = {name: np.asarray(drawn[name]) / 10e3 - 1.0 for name in ("RB", "RC")}
    # By hand: shift = (t·x + (c − t)·g)·ΔT, x its own and g in common, uniform in [−1, 1]: variance 1/3.
    own, common = tracking**2, (tempco - tracking) ** 2
    expected = common / (common + own)  # 0.845
    # The standard deviation of a correlation is (1 − ρ²)/√N = 0.002; five of them.
    assert np.corrcoef(shift["RB"], shift["RC"])[0, 1] == pytest.approx(
        expected, abs=5 * (1.0 - expected**2) / np.sqrt(count)
    )
    for name in ("RB", "RC"):
        # A variance of N draws flatter than normal ones strays by less than √(2/N) of itself: 1 %; five.
        variance = (own + common) / 3.0 * rise**2
        assert np.var(shift[name]) == pytest.approx(variance, rel=5 * np.sqrt(2 / count))
        assert np.abs(shift[name]).max() <= tempco * abs(rise) * (1.0 + 1e-9)  # rounding


def test_resistors_of_two_groups_share_nothing():
    of = stage(
        "base-resistor", {"RB": 10e3, "RC": 10e3}, ideal(100.0), 9.0,
        resistor={"tempco": 100e-6, "tracking": 30e-6}, ambient=Limits.exactly(358.15),
    )  # fmt: skip
    of = with_resistor(with_resistor(of, "RB", group="one"), "RC", group="two")
    drawn = realise(of, coordinates(of, slice(0, 20_000), seed=1)).resistances
    # Independent draws: 1/√N = 0.007; five of them.
    assert abs(np.corrcoef(drawn["RB"], drawn["RC"])[0, 1]) < 5 / np.sqrt(20_000)
