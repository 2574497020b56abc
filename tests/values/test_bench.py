"""The bench holds many sets at once as one at a time is held, and its shares are bounds."""

from __future__ import annotations

from dataclasses import replace
from math import nan

import numpy as np
import pytest
from variation.stages import limits, running_away, some, stage, with_resistors

from biasband.circuit.reading import read
from biasband.margins.checks import standing_checks
from biasband.margins.requirements import limits_of
from biasband.stage import Signal, Stage, Supply
from biasband.values import bench as benches
from biasband.values.bench import Bench, Scores, bench, hold_sets
from biasband.variation.contributors import realise
from biasband.variation.evaluation import evaluate
from values.rivals import (
    CURRENT,
    GAIN,
    NINE,
    ONE_MILLIAMPERE,
    SMALL,
    SWING,
    TEMPERATE,
    VOLTAGE,
    Small,
    asks,
    at_corners,
    divider,
    every_set,
    steady,
    valued,
)

FOUND_TWICE = 1e-6
"""Relative: extremes equal to 1e-9 of their value are one to the corner search, and a margin may be a
thousandth of the value."""

FIGURES = ("slack", "worst", "nearest", "farthest", "current", "swing")


def of_all() -> Stage:
    """Two sides, a gain by magnitude (inverting), coupled ripple, and limits that move with the ambient."""
    hot = limits(263.15, 298.15, 383.15)  # the ratings fall above 70 °C
    of = divider(
        asks(VOLTAGE, at_least=3.0, at_most=7.0),
        asks(GAIN, at_least=50.0, at_most=150.0),
        asks(SWING, at_least=1.0),
        transistor=steady(max_power=20e-3, max_junction=423.15, thermal_resistance=280.0),
        supply=Supply(voltage=NINE, ripple_peak=0.1),
        ambient=hot,
        signal=Signal(load=10e3, source_resistance=600.0, bypassed=True),
    )
    return with_resistors(of, power_rating=0.02)


NAMES = ("R2", "RE")
SETS = np.array([[12e3, 820.0], [13e3, 750.0], [15e3, 680.0], [13e3, 910.0], [33e3, 470.0]])
"""The last one saturates."""


@pytest.fixture(scope="module")
def laid() -> Bench:
    """The bench of that stage."""
    return bench(valued(of_all(), NAMES, SETS[1]), NAMES)


def everywhere(on: Bench) -> np.ndarray:
    """All corners."""
    return np.arange(len(on.corners))


def only(scores: Scores, *, at: int) -> dict[str, np.ndarray]:
    """The figures of one set."""
    return {name: getattr(scores, name)[at] for name in FIGURES}


# --- as one set at one corner is held ------------------------------------------------------------


def slow_slacks(of: Stage, corner: dict[str, float]) -> list[float]:
    """One set at one corner: the distance of every limit's value from it, in the order of the rows."""
    x, found = {name: np.array([at]) for name, at in corner.items()}, []
    cut_off = 0.01e-3  # 1 % of the target
    nominal = evaluate(of, {}, some(of, GAIN), cut_off=cut_off).low[GAIN].item()
    for requirement in of.requirements:
        outcome = evaluate(of, x, some(of, requirement.quantity), cut_off=cut_off)
        low, high = (side[requirement.quantity].item() for side in (outcome.low, outcome.high))
        if requirement.quantity == GAIN and nominal < 0.0:
            low, high = -high, -low
        sides = limits_of(requirement)
        found += [low - limit if side == "at_least" else limit - high for side, limit in sides]
    reading = read(of, realise(of, x))
    for check in standing_checks(of, cut_off=cut_off).made:
        value, limit = (np.ravel(each(reading))[0] for each in (check.value.read, check.limit))
        found.append(float(value - limit if check.side == "at_least" else limit - value))
    return found


def test_slack_is_the_least_of_a_loop_over_corners_and_sets(laid: Bench) -> None:
    scores = hold_sets(laid, SETS, everywhere(laid))
    corners = [dict(zip((axis.name for axis in laid.box), row, strict=True)) for row in laid.corners]
    assert len(corners) == 16 and scores.slack.shape == (5, len(laid.rows))
    for k, values in enumerate(SETS):
        slow = np.array([slow_slacks(valued(of_all(), NAMES, values), corner) for corner in corners])
        # 1e-9: points are solved to 1 nV, and a scenario alone may stop one step sooner.
        assert scores.slack[k] == pytest.approx(slow.min(axis=0), abs=1e-9)
        there = np.take_along_axis(slow, scores.worst[k][None, :], axis=0)[0]
        assert there == pytest.approx(slow.min(axis=0), abs=1e-9)


def test_distances_of_nominal_lie_between_those_from_every_limit_it_can_have(laid: Bench) -> None:
    scores = hold_sets(laid, SETS, everywhere(laid))
    rows = [row.quantity.removeprefix("value of ") for row in laid.rows]
    k = rows.index("resistor_power.RC")
    for each, values in enumerate(SETS):
        of = valued(of_all(), NAMES, values)
        power = evaluate(of, {}, some(of, "resistor_power.RC"), cut_off=0.0).low["resistor_power.RC"].item()
        # 20 mW up to 70 °C; at 110 °C (155 − 110)/(155 − 70) of it is left, linearly.
        assert scores.farthest[each, k] == pytest.approx(20e-3 - power, rel=1e-9)
        assert scores.nearest[each, k] == pytest.approx(20e-3 * 45 / 85 - power, rel=1e-9)
        voltage = evaluate(of, {}, some(of, VOLTAGE), cut_off=0.0).low[VOLTAGE].item()
        assert scores.nearest[each, :2] == pytest.approx([voltage - 3.0, 7.0 - voltage], rel=1e-9)
        assert scores.farthest[each, :2] == pytest.approx([voltage - 3.0, 7.0 - voltage], rel=1e-9)


def test_gain_of_an_inverting_stage_is_held_by_its_magnitude(laid: Bench) -> None:
    scores = hold_sets(laid, SETS[:1], everywhere(laid))
    gain = evaluate(valued(of_all(), NAMES, SETS[0]), {}, some(of_all(), GAIN), cut_off=0.0).low[GAIN].item()
    rows = [row.quantity for row in laid.rows]
    k = rows.index(GAIN)
    assert gain < 0.0
    assert scores.nearest[0, k : k + 2] == pytest.approx([-gain - 50.0, 150.0 + gain], rel=1e-9)


def test_current_is_nominal_and_swing_the_smallest_at_any_corner(laid: Bench) -> None:
    scores = hold_sets(laid, SETS, everywhere(laid))
    for k, values in enumerate(SETS):
        of = valued(of_all(), NAMES, values)
        nominal = evaluate(of, {}, some(of, CURRENT), cut_off=0.0).low[CURRENT].item()
        assert scores.current[k] == pytest.approx(nominal, rel=1e-9)
        swings = [
            evaluate(
                of, {axis.name: np.array([at]) for axis, at in zip(laid.box, row, strict=True)},
                some(of, SWING), cut_off=0.0,
            ).low[SWING].item()
            for row in laid.corners
        ]  # fmt: skip
        assert scores.swing[k] == pytest.approx(min(swings), abs=1e-9)


def test_rows_are_the_limits_asked_for_then_the_checks_made(laid: Bench) -> None:
    made = standing_checks(of_all(), cut_off=0.0).made
    asked = [(VOLTAGE, "at_least"), (VOLTAGE, "at_most"), (GAIN, "at_least"), (GAIN, "at_most")]
    asked.append((SWING, "at_least"))
    found = [(row.quantity.removeprefix("value of "), row.side) for row in laid.rows]
    assert found == [*asked, *((check.name, check.side) for check in made)]
    assert [bool(row.check) for row in laid.rows] == [False] * 5 + [True] * len(made)
    assert [row.by_magnitude for row in laid.rows[:5]] == [False, False, True, True, False]


def test_stage_in_which_nothing_varies_has_one_corner() -> None:
    of = stage("base-resistor", {"RB": 1.2e6, "RC": 3.9e3}, steady(gain=limits(260.0, 260.0, 260.0)), 9.0,
               target=ONE_MILLIAMPERE)  # fmt: skip
    on = bench(of, ("RC",))
    scores = hold_sets(on, np.array([[3.9e3], [3.3e3]]), everywhere(on))
    assert len(on.corners) == 1
    assert scores.shares == pytest.approx(np.ones((2, len(on.rows))), rel=1e-9)


# --- bounds are bounds ----------------------------------------------------------------------------


def bench_of(small: Small) -> Bench:
    """The bench of a small contest."""
    return bench(valued(small.stage, small.names, small.sets[-1]), small.names)


@pytest.mark.parametrize("name", SMALL)
def test_share_at_some_corners_is_never_below_that_at_all_and_that_never_below_the_exact_one(
    name: str,
) -> None:
    small, on = SMALL[name], bench_of(SMALL[name])
    values, draw = np.array(small.sets), np.random.default_rng(1)
    at_all = hold_sets(on, values, everywhere(on))
    for count in (1, 2, 4):
        some_of = np.sort(draw.choice(len(on.corners), size=count, replace=False))
        at_some = hold_sets(on, values, some_of)
        assert np.all(at_some.shares >= at_all.shares)
        assert np.all(at_some.swing >= at_all.swing)
        assert np.all((at_some.slack < 0.0) <= (at_all.slack < 0.0))
    for rival, bounds, swing in zip(every_set(name), at_all.shares, at_all.swing, strict=True):
        exact = {(row.quantity, row.side, row.standing, row.limit): row for row in rival.rows}
        assert len(exact) == len(on.rows)
        for k, row in enumerate(on.rows):
            share = at_corners(_row_like(row, rival.rows))
            assert bounds[k] >= share - FOUND_TWICE * max(1.0, abs(share)) or share == bounds[k]
        assert not swing < rival.swing - FOUND_TWICE
        failing = sum(not row.passes_at_corners for row in rival.rows)
        assert np.sum(bounds < 0.0) <= max(failing, sum(at_corners(row) < 0.0 for row in rival.rows))


def _row_like(row: benches.Row, rows: tuple) -> object:
    """The exact row of the same limit."""
    name = row.check.removeprefix("check ") if row.check else row.quantity
    (same,) = (
        each
        for each in rows
        if (each.quantity, each.side, each.standing) == (name, row.side, bool(row.check))
    )
    return same


def test_bound_of_a_moving_limit_is_not_the_exact_share() -> None:
    """The derated resistor: the bound takes the limit where it is kindest, or it would be none."""
    name = "derated resistor"
    on = bench_of(SMALL[name])
    scores = hold_sets(on, np.array(SMALL[name].sets), everywhere(on))
    k = [row.quantity for row in on.rows].index("value of resistor_power.RC")
    assert on.rows[k].limits == pytest.approx((0.125 * 25 / 85, 0.125))  # at 130 °C, and up to 70 °C
    exact = [at_corners(_row_like(on.rows[k], rival.rows)) for rival in every_set(name)]
    assert np.max(scores.shares[:, k] - exact) > 0.1


@pytest.mark.parametrize(
    ("slack", "nearest", "farthest", "share"),
    [
        (1.0, 2.0, 4.0, 0.5),  # the limit nearest to nominal makes the most of a margin
        (-1.0, 2.0, 4.0, -0.25),  # and the farthest the least of a failure
        (1.0, -1.0, 4.0, np.inf),  # nominal may be just within
        (-1.0, -1.0, 4.0, -0.25),
        (-1.0, -2.0, -1.0, -np.inf),  # nominal fails wherever the limit is
        (0.0, 2.0, 2.0, 0.0),
        (1.0, -1.0, 0.0, -np.inf),  # on its limit: no distance to share
        (nan, 2.0, 4.0, -np.inf),
        (nan, nan, nan, -np.inf),
        (1.0, nan, nan, -np.inf),
    ],
)
def test_share_is_the_largest_that_it_can_be(
    slack: float, nearest: float, farthest: float, share: float
) -> None:
    cell = (np.array([[x]]) for x in (slack, 0, nearest, farthest))
    assert Scores(*cell, np.zeros(1), np.zeros(1)).shares.item() == share


# --- corners without an operating point ----------------------------------------------------------


def test_runaway_at_a_corner_is_minus_infinity_not_a_crash() -> None:
    """With 100 Ω and its leakage the stage runs away at 85 °C; with 2.2 kΩ it does not."""
    of = replace(running_away(), target=ONE_MILLIAMPERE, requirements=(asks(VOLTAGE, at_least=1.0),))
    on = bench(valued(of, ("RC",), (100.0,)), ("RC",))
    values = np.array([[100.0], [2.2e3]])
    scores = hold_sets(on, values, everywhere(on))
    assert np.all(np.isnan(scores.slack[0])) and np.all(scores.shares[0] == -np.inf)
    assert np.all(np.isfinite(scores.shares[1]))
    (leaky,) = np.flatnonzero(on.corners[:, 0] == 1.0)
    assert np.all(scores.worst[0] == leaky)
    assert np.isnan(scores.swing[0]) and np.isfinite(scores.swing[1])
    # Nominal, without leakage, stands; and so does the other corner.
    assert np.all(np.isfinite(scores.current))
    cold = np.flatnonzero(on.corners[:, 0] == -1.0)
    kinder = hold_sets(on, values, cold)
    assert np.all(np.isfinite(kinder.shares))
    for worse in (kinder.worse(hold_sets(on, values, np.array([leaky]))), scores.worse(kinder)):
        assert np.array_equal(worse.slack, scores.slack, equal_nan=True)
        assert np.array_equal(worse.worst, scores.worst)
        assert np.array_equal(worse.swing, scores.swing, equal_nan=True)


# --- in parts, or at once ---------------------------------------------------------------------------


@pytest.mark.parametrize("size", [1, 17, 40, 51])
def test_any_chunk_size_gives_the_same(laid: Bench, size: int, monkeypatch: pytest.MonkeyPatch) -> None:
    whole = hold_sets(laid, SETS, everywhere(laid))
    monkeypatch.setattr(benches, "CHUNK", size)
    told: list[float] = []
    parts = hold_sets(laid, SETS, everywhere(laid), progress=told.append)
    per_chunk = max(size // 17, 1)  # nominal and 16 corners a set
    assert told == [min(start + per_chunk, 5) / 5 for start in range(0, 5, per_chunk)]
    for name in FIGURES:
        # 1e-9: points are solved to 1 nV, and vector instructions round by their place in a chunk.
        assert getattr(parts, name) == pytest.approx(getattr(whole, name), rel=1e-9, abs=1e-9), name


def test_corners_in_two_halves_are_all_corners(laid: Bench) -> None:
    whole = hold_sets(laid, SETS, everywhere(laid))
    first, second = (hold_sets(laid, SETS, part) for part in (np.arange(0, 16, 2), np.arange(1, 16, 2)))
    for both in (first.worse(second), second.worse(first)):
        for name in ("slack", "nearest", "farthest", "current", "swing"):
            # 1e-12: the same points, at other places of a vector.
            assert getattr(both, name) == pytest.approx(getattr(whole, name), rel=1e-12, abs=1e-12)
        again = hold_sets(laid, SETS, np.unique(both.worst))
        assert again.slack == pytest.approx(whole.slack, rel=1e-12, abs=1e-12)


def test_scores_of_some_sets_are_put_in_and_taken_out_and_leave_the_first_as_they_were(laid: Bench) -> None:
    whole = hold_sets(laid, SETS, everywhere(laid))
    before = only(whole, at=0)
    other = hold_sets(laid, SETS[[4, 3]], everywhere(laid))
    changed = whole.with_rows(np.array([0, 2]), other)
    for name in FIGURES:
        assert np.array_equal(getattr(changed.rows(np.array([0, 2])), name), getattr(other, name))
        kept = np.array([1, 3, 4])
        assert np.array_equal(getattr(changed.rows(kept), name), getattr(whole.rows(kept), name))
        assert np.array_equal(getattr(whole, name)[0], before[name])


def test_box_is_the_one_of_the_ambient_too() -> None:
    """Unlike what a set of values changes, what varies is the stage's: corners by contributor."""
    on = bench(valued(divider(ambient=TEMPERATE), NAMES, SETS[0]), NAMES)
    assert [axis.name for axis in on.box] == ["gain", "temperature", "supply"]
    assert sorted(map(tuple, on.corners)) == [(a, b, c) for a in (-1, 1) for b in (-1, 1) for c in (-1, 1)]
