"""Draws by batch: boards of a batch share its mean, whatever the chunk, and never leave the limits."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from variation.stages import ideal, limits, real, some, stage, with_resistor, with_resistors

from biasband.boards.draws import coordinates, draws
from biasband.boards.sampling import sample
from biasband.errors import UsageError
from biasband.stage import Distribution, Limits, Stage, Supply
from biasband.variation.contributors import axes, board_axes, realise
from biasband.variation.points_of_use import points_of_use

BATCH = Distribution(name="batch", within_batch=0.002)
BOARDS_PER_BATCH, COUNT = 8, 8000
BATCHES = COUNT // BOARDS_PER_BATCH


def batched(**more) -> Stage:
    """Two resistors of 1 %, boards of a batch within 0.2 % of its mean."""
    resistor = {"tolerance": 0.01, "distribution": BATCH, **more}
    return stage(
        "base-resistor", {"RB": 10e3, "RC": 10e3}, ideal(100.0), 9.0, resistor=resistor,
        boards_per_batch=BOARDS_PER_BATCH,
    )  # fmt: skip


def off(of: Stage, name: str, *, count: int = COUNT, seed: int = 1) -> np.ndarray:
    """How far a resistor of each board was made off its value, in batches: shape (B, n)."""
    drawn = realise(of, coordinates(of, slice(0, count), seed=seed)).resistances[name]
    return (np.asarray(drawn) / of.resistor(name).value - 1.0).reshape(-1, BOARDS_PER_BATCH)


@pytest.mark.parametrize("more", [{}, {"group": "array"}], ids=["alone", "in a group"])
def test_boards_of_a_batch_lie_around_its_mean(more):
    made = off(batched(**more), "RB")
    assert np.abs(made).max() <= 0.01 * (1.0 + 1e-12)  # the tolerance, and rounding
    assert np.ptp(made, axis=1).max() <= 2 * 0.002 * (1.0 + 1e-12)
    # Two independent uniform parts, ±0.8 % and ±0.2 %: the batch means have (0.8 %)²/3, and (0.2 %)²/3 over
    # eight boards beside it. A variance of B uniform draws strays by √(0.8/B) = 0.028; four of them.
    between = 0.008**2 / 3.0 + 0.002**2 / 3.0 / BOARDS_PER_BATCH
    assert np.var(made.mean(axis=1)) == pytest.approx(between, rel=4 * np.sqrt(0.8 / BATCHES))
    assert np.mean(np.var(made, axis=1, ddof=1)) == pytest.approx(0.002**2 / 3.0, rel=0.05)


def test_two_batches_have_two_means():
    means = off(batched(), "RB").mean(axis=1)
    # Independent means of 1000 batches: 1/√B = 0.032; four of them.
    assert abs(np.corrcoef(means[:-1], means[1:])[0, 1]) < 4 / np.sqrt(BATCHES)


def test_members_of_a_group_share_their_batch_mean():
    grouped = batched(group="array")
    one, other = off(grouped, "RB"), off(grouped, "RC")
    assert np.abs(one - other).max() <= 2 * 0.002 * (1.0 + 1e-12)
    # By hand: common/(common + own) = 0.8²/(0.8² + 0.2²) = 0.941; (1 − ρ²)/√B = 0.0036, five of them.
    assert np.corrcoef(one.ravel(), other.ravel())[0, 1] == pytest.approx(16 / 17, abs=5 * 0.0036)


@pytest.mark.parametrize("more", [{}, {"group": "array"}], ids=["alone", "two groups"])
def test_resistors_that_share_no_group_share_no_batch_mean(more):
    of = batched(**more)
    of = with_resistor(of, "RC", group="reel") if more else of
    one, other = off(of, "RB").mean(axis=1), off(of, "RC").mean(axis=1)
    assert abs(np.corrcoef(one, other)[0, 1]) < 4 / np.sqrt(BATCHES)  # independent: 1/√B, four of them


def everything() -> Stage:
    """Every kind of distribution at once, hot, with a supply by board."""
    ratio, volts = (Distribution(name="batch", within_batch=part) for part in (0.1, 0.01))
    transistor = real(
        gain=replace(limits(100.0, 200.0, 400.0), distribution=ratio),
        base_emitter_voltage=replace(limits(0.6, 0.64, 0.7), distribution=volts), leakage=40e-9,
        leakage_distribution=Distribution(name="triangular"),
    )  # fmt: skip
    supply = Supply(
        voltage=replace(limits(8.1, 9.0, 9.9), distribution=Distribution(name="normal")), varies="by board"
    )
    of = stage(
        "divider", {"R1": 68e3, "R2": 13e3, "RC": 3900.0, "RE": 820.0}, transistor, supply,
        resistor={
            "tolerance": 0.01, "distribution": BATCH, "group": "array", "tempco": 1e-4, "tracking": 3e-5,
            "life_drift": 0.005, "life_drift_distribution": Distribution(name="sine"),
        },
        ambient=limits(263.15, 298.15, 333.15), boards_per_batch=7,
    )  # fmt: skip
    of = with_resistor(of, "RC", distribution=Distribution(name="hollow", hollow_within=0.003), group=None)
    return with_resistor(of, "RE", group=None, tracking=None)


@settings(deadline=None)
@given(start=st.integers(0, 60), count=st.integers(1, 60))
def test_any_rows_are_the_same_bytes_as_in_the_whole(start, count):
    of = everything()
    whole, part = coordinates(of, slice(0, 120), seed=3), coordinates(of, slice(start, start + count), seed=3)
    for name, values in whole.items():
        assert values[start : start + count].tobytes() == part[name].tobytes(), name


def test_another_batch_contributor_reshuffles_nothing():
    before = everything()
    after = with_resistor(before, "R1", group="another", life_drift_distribution=Distribution(name="normal"))
    after = with_resistor(after, "RE", distribution=Distribution())
    one, other = (coordinates(of, slice(0, 100), seed=1) for of in (before, after))
    assert set(other) - set(one) == {"batch another", "group another.tempco"}
    for name in set(one) - {"R1.life_drift", "RE.tolerance"}:
        assert np.array_equal(one[name], other[name]), name


def test_boards_do_not_depend_on_the_number_sampled():
    few, many = (coordinates(everything(), slice(0, n), seed=1) for n in (10, 1000))
    assert all(np.array_equal(few[name], many[name][:10]) for name in few)


def test_coordinates_never_leave_the_limits():
    for name, x in coordinates(everything(), slice(0, 5000), seed=1).items():
        assert np.abs(x).max() <= 1.0, name
        assert np.unique(x).size > 100, name  # and none of them stands still


def test_each_figure_is_drawn_as_its_distribution_says():
    drawn = coordinates(everything(), slice(0, 20_000), seed=1)
    # Deviation of a shape in its coordinate; √(2/N) of a variance is 1 % or less of it, five of them.
    for name, variance in (("R1.life_drift", 1 / 2), ("leakage", 1 / 6), ("supply", 0.97333 / 9)):
        assert np.var(drawn[name]) == pytest.approx(variance, rel=5 * np.sqrt(2 / 20_000)), name
    assert np.abs(drawn["RC.tolerance"]).min() >= 0.3


def test_gain_and_base_emitter_voltage_of_a_batch_lie_around_its_mean():
    of = everything()
    found = realise(of, coordinates(of, slice(0, 7000), seed=1))
    gain = np.asarray(found.gain).reshape(-1, 7)
    volts = np.asarray(found.base_emitter_voltage).reshape(-1, 7)
    assert np.all(gain.max(axis=1) <= gain.min(axis=1) * 1.1**2 * (1.0 + 1e-12))
    assert np.ptp(volts, axis=1).max() <= 2 * 0.01 * (1.0 + 1e-12)
    # Of 1000 batches half lie below typical: 0.016 of standard deviation, four of them.
    assert np.mean(np.sqrt(gain.min(axis=1) * gain.max(axis=1)) < 200.0) == pytest.approx(0.5, abs=0.064)


def test_group_drawn_by_batch_splits_its_tolerance_into_a_common_and_an_own_axis():
    grouped = batched(group="array")
    assert [axis.name for axis in board_axes(grouped)] == ["RB", "RC", "batch array"]
    common = realise(grouped, {"batch array": -1.0}).resistances
    own = realise(grouped, {"RC": 1.0}).resistances
    both = realise(grouped, {"RC": -1.0, "batch array": -1.0}).resistances
    assert (common["RB"], common["RC"]) == pytest.approx((10e3 * 0.992,) * 2, rel=1e-12)
    assert (own["RB"], own["RC"]) == pytest.approx((10e3, 10e3 * 1.002), rel=1e-12)
    assert both["RC"] == pytest.approx(10e3 * 0.99, rel=1e-12)  # the whole tolerance


def test_batch_alone_moves_no_corner():
    # Ungrouped, the limits are R·(1 ∓ t), to the bit, however it is drawn.
    for side in (-1.0, 1.0):
        drawn, plain = (realise(of, {"RB": side}) for of in (batched(), batched(distribution=Distribution())))
        assert drawn.resistances["RB"] == plain.resistances["RB"]
    assert axes(batched()) == axes(batched(distribution=Distribution()))


def test_group_whose_boards_fill_the_tolerance_has_no_common_axis():
    full = batched(group="array", distribution=Distribution(name="batch", within_batch=0.01))
    assert [axis.name for axis in board_axes(full)] == ["RB", "RC"]
    still = batched(group="array", distribution=Distribution(name="batch", within_batch=0.0))
    assert [axis.name for axis in board_axes(still)] == ["batch array"]
    assert np.array_equal(off(still, "RB"), off(still, "RC"))


def test_boards_know_how_many_share_a_batch():
    def drawn(of: Stage):
        return sample(of, some(of, "base_voltage"), points_of_use(of), boards=20, seed=1, cut_off=0.0)

    assert (drawn(batched()).boards_per_batch, drawn(batched()).batches) == (8, 3)
    alone = drawn(batched(distribution=Distribution()))
    assert (alone.boards_per_batch, alone.batches) == (1, 20)  # nothing is drawn by batch


@pytest.mark.parametrize("number", [None, 0])
def test_batches_of_unknown_size_are_refused(number):
    of = replace(batched(), boards_per_batch=number)
    with pytest.raises(UsageError, match=f"boards_per_batch: from 1.*read {number}"):
        coordinates(of, slice(0, 1), seed=1)


def test_limits_that_coincide_are_never_drawn():
    exact = replace(Limits.exactly(100.0), distribution=Distribution(name="normal"))
    of = stage("base-resistor", {"RB": 10e3, "RC": 10e3}, ideal(exact), 9.0)
    assert "gain" not in {draw.name for draw in draws(of)}


def test_tempco_of_a_group_follows_its_distribution():
    of = with_resistors(
        everything(), group="array", tracking=3e-5, distribution=Distribution(),
        tempco_distribution=Distribution(name="sine"),
    )  # fmt: skip
    drawn = coordinates(of, slice(0, 20_000), seed=1)
    for name in ("R1.tempco", "group array.tempco"):
        assert np.var(drawn[name]) == pytest.approx(0.5, rel=5 * np.sqrt(2 / 20_000)), name  # as above
