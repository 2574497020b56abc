"""Boards that agree: what is frozen stays, and the rest is drawn from its distribution given that."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from variation.stages import ROOM, ideal, limits, real, stage, varying_stages, with_resistor

from biasband.boards.agreeing import agreeing, board_contributors
from biasband.boards.draws import coordinates, draws
from biasband.boards.pick_freeze import Board
from biasband.stage import Capacitor, Distribution, Signal, Stage, Supply
from biasband.variation.contributors import realise, tempcos, tolerances

COUNT = 8000
WARM = limits(263.15, ROOM, 323.15)
SHAPES = ["uniform", "normal", "triangular", "sine", "mixed"]


def array(shape: str = "uniform", *, own: float = 0.4, count: int = 2) -> Stage:
    """Resistors of one array whose tempcos of 100 ppm/K share all but a part; gain that differs as well.

    Mixed: R1's own part is triangular, all else is uniform.
    """
    named = Distribution(name="uniform" if shape == "mixed" else shape)
    ohms = {"R1": 68e3, "R2": 13e3, "RC": 3900.0, "RE": 820.0}
    of = stage(
        "divider", ohms, ideal(limits(165.0, 260.0, 410.0)), 9.0,
        resistor={"tempco": 1e-4, "tempco_distribution": named}, ambient=WARM,
    )  # fmt: skip
    for name in list(ohms)[:count]:
        of = with_resistor(of, name, group="array", tracking=own * 1e-4)
    return (
        with_resistor(of, "R1", tempco_distribution=Distribution(name="triangular"))
        if shape == "mixed"
        else of
    )


def two(of: Stage, *, count: int = COUNT) -> tuple[Board, Board]:
    """Two independent sets of boards."""
    return coordinates(of, slice(0, count), seed=1), coordinates(of, slice(0, count), seed=2)


def redrawn(of: Stage, *names: str, count: int = COUNT) -> tuple[Board, Board, Board]:
    """Boards, others, and those between them that agree with the first in these contributors."""
    board, other = two(of, count=count)
    frozen = {each: np.full(count, each in names) for each in board_contributors(of)}
    return board, other, agreeing(of)(frozen, board, other)


def tempco_of(of: Stage, name: str, x: Board) -> np.ndarray:
    """What a resistor's tempco is on each board [1/K]."""
    split = tempcos(of.resistor(name))
    return split.own * x[f"{name}.tempco"] + split.common * x["group array.tempco"]


def made_of(of: Stage, name: str, x: Board) -> np.ndarray:
    """How far a resistor was made off on each board."""
    split = tolerances(of.resistor(name))
    return split.own * x[f"{name}.tolerance"] + split.common * x[f"batch {of.resistor(name).group}"]


def correlation_by_integration(shape: str, own: float) -> float:
    """`V(E[c|t])/V(c)`, t = own·x + (1 − own)·c with x and c of one shape, by weighing 801 values of c.

    For the shapes of JCGM 101 (6.4.2 to 6.4.6); the normal one has its 3σ at 1.
    """
    density = {
        "uniform": lambda x: 0.5 * (np.abs(x) <= 1.0),
        "normal": lambda x: np.exp(-4.5 * x**2) * (np.abs(x) <= 1.0),
        "triangular": lambda x: np.clip(1.0 - np.abs(x), 0.0, None),
    }[shape]
    c = np.linspace(-1.0, 1.0, 801)
    totals = np.linspace(-1.0, 1.0, 801)[:, None]
    joint = density(c) * density((totals - (1.0 - own) * c) / own)
    of_total = joint.sum(axis=1)
    expected = np.divide((joint * c).sum(axis=1), of_total, out=np.zeros_like(of_total), where=of_total > 0.0)
    told = (of_total * expected**2).sum() / of_total.sum()
    return float(told / ((density(c) * c**2).sum() / density(c).sum()))


def test_contributors_are_parts_and_figures_that_differ_from_board_to_board():
    of = stage(
        "divider", {"R1": 68e3, "R2": 13e3, "RC": 3900.0, "RE": 820.0}, real(leakage=40e-9),
        Supply(voltage=limits(8.1, 9.0, 9.9), ripple_peak=0.05),
        resistor={"tolerance": 0.01}, ambient=WARM,
        signal=Signal(load=47e3, source_resistance=600.0),
        capacitors=(Capacitor(name="C_in", value=1e-6, tolerance=0.1), Capacitor(name="C_out", value=1e-6)),
    )  # fmt: skip
    named = ("R1", "R2", "RC", "RE", "C_in", "gain", "base_emitter_voltage", "leakage")
    assert board_contributors(of) == named
    by_board = replace(of, supply=replace(of.supply, varies="by board"))
    assert set(board_contributors(by_board)) == {*named, "supply"}
    assert board_contributors(with_resistor(of, "RC", tolerance=0.0)) == ("R1", "R2", *named[3:])


@pytest.mark.parametrize("own", [0.0, 0.4])
def test_groups_are_no_contributors_and_members_without_a_part_of_their_own_are(own):
    assert board_contributors(array(own=own)) == ("R1", "R2", "RC", "RE", "gain")


@given(varying_stages())
@settings(max_examples=60, deadline=None)
def test_boards_that_agree_in_everything_behave_alike_hot_and_cold(of):
    board, other = two(of, count=20)
    anew = agreeing(of)({name: np.full(20, True) for name in board_contributors(of)}, board, other)
    for side in (-1.0, 1.0):
        ambient = {"temperature": np.array(side)}
        one, same = realise(of, {**board, **ambient}), realise(of, {**anew, **ambient})
        for r in of.resistors:  # each is a product of a few roundings
            assert np.allclose(same.resistances[r.name], one.resistances[r.name], rtol=1e-13, atol=0.0)
        for figure in ("gain", "base_emitter_voltage", "leakage", "supply", "negative_supply"):
            assert np.array_equal(getattr(same, figure), getattr(one, figure))


@given(varying_stages())
@settings(max_examples=60, deadline=None)
def test_boards_that_agree_in_nothing_are_the_other_ones(of):
    board, other = two(of, count=20)
    anew = agreeing(of)({name: np.full(20, False) for name in board_contributors(of)}, board, other)
    assert set(anew) == {draw.name for draw in draws(of)}
    for name, x in anew.items():
        assert np.array_equal(x, other[name])


@pytest.mark.parametrize("shape", SHAPES)
def test_frozen_member_keeps_what_it_does_and_the_others_do_not(shape):
    of = array(shape)
    board, other, anew = redrawn(of, "R1")
    # 1e-4/K, to rounding.
    assert np.allclose(tempco_of(of, "R1", anew), tempco_of(of, "R1", board), rtol=0.0, atol=1e-17)
    assert np.array_equal(anew["R2.tempco"], other["R2.tempco"])
    assert np.array_equal(anew["gain"], other["gain"])
    assert not np.allclose(anew["group array.tempco"], board["group array.tempco"], atol=0.1)


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("held", [("R1",), ("R1", "R2"), ("R1", "R2", "RC")])
def test_redrawn_boards_are_boards_like_any(shape, held):
    # Drawn given a board that is itself drawn: over all boards the distribution is what it was.
    from scipy.stats import ks_2samp

    _, _, anew = redrawn(array(shape, count=3), *held)
    fresh = coordinates(array(shape, count=3), slice(0, COUNT), seed=3)
    for name in ("group array.tempco", "R1.tempco", "R2.tempco", "RC.tempco"):
        assert ks_2samp(anew[name], fresh[name]).pvalue > 1e-4  # 60 of these pass by chance 994 times in 1000
        # Own and shared draws of one board are independent; 4.5/√N.
        if name != "group array.tempco":
            assert abs(np.corrcoef(anew[name], anew["group array.tempco"])[0, 1]) < 4.5 / np.sqrt(COUNT)


@pytest.mark.parametrize("shape", ["uniform", "normal", "triangular"])
@pytest.mark.parametrize("own", [0.1, 0.4, 0.7])
def test_shared_draw_given_one_member_is_as_numerical_integration_has_it(shape, own):
    # Two draws given the same member are independent: their covariance is V(E[c|t]).
    board, _, anew = redrawn(array(shape, own=own), "R1")
    found = np.corrcoef(board["group array.tempco"], anew["group array.tempco"])[0, 1]
    # A correlation of N pairs strays by less than 1/√N; 4.5 of them; 0.002 for the 801 values.
    expected = correlation_by_integration(shape, own)
    assert found == pytest.approx(expected, abs=4.5 / np.sqrt(COUNT) + 0.002)


def test_sine_given_one_member_is_as_bins_have_it():
    # Densities without bounds are not weighed in values but counted: the mean of c in 400 bins of t.
    of = array("sine")
    drawn = coordinates(of, slice(0, 400_000), seed=5)
    c, t = drawn["group array.tempco"], tempco_of(of, "R1", drawn)
    bins = np.digitize(t, np.quantile(t, np.linspace(0.0, 1.0, 401)[1:-1]))
    means = np.bincount(bins, weights=c) / np.bincount(bins)
    expected = np.mean(means[bins] ** 2) / 0.5
    board, _, anew = redrawn(of, "R1")
    found = np.corrcoef(board["group array.tempco"], anew["group array.tempco"])[0, 1]
    # 4.5/√N, and 0.005 for the bins: each mean of 1000 draws adds 0.0007, and a bin's width takes some.
    assert found == pytest.approx(expected, abs=4.5 / np.sqrt(COUNT) + 0.005)


@pytest.mark.parametrize("members", [2, 3])
def test_more_members_say_more_of_what_they_share(members):
    # Uniform parts: c is uniform in an interval, whose half width squared over three is what is left.
    of = array(own=0.3, count=3)
    board, _, anew = redrawn(of, *("R1", "R2", "RC")[:members])
    reach = 0.3 / 0.7
    own = np.stack([board[f"{name}.tempco"] for name in ("R1", "R2", "RC")[:members]])
    c = board["group array.tempco"]
    low = np.maximum(-1.0, (c + (own - 1.0) * reach).max(axis=0))
    high = np.minimum(1.0, (c + (own + 1.0) * reach).min(axis=0))
    share = (anew["group array.tempco"] - low) / (high - low)
    # Uniform whatever the interval: mean and variance of N uniform numbers, 4.5 standard errors each.
    assert np.mean(share) == pytest.approx(0.5, abs=4.5 * np.sqrt(1.0 / 12.0 / COUNT))
    assert np.var(share) == pytest.approx(1.0 / 12.0, abs=4.5 * np.sqrt(1.0 / 180.0 / COUNT))
    assert -1e-9 < share.min() < share.max() < 1.0 + 1e-9  # rounding, over intervals of 0.01 and more


def test_member_without_a_part_of_its_own_gives_the_shared_one_away():
    board, _, anew = redrawn(array(own=0.0), "R1")
    assert np.allclose(anew["group array.tempco"], board["group array.tempco"], rtol=0.0, atol=1e-15)


def test_batch_mean_is_redrawn_like_a_shared_tempco():
    of = array()
    for name in ("R1", "R2"):
        within = Distribution(name="batch", within_batch=0.004)
        of = with_resistor(of, name, tolerance=0.01, distribution=within)
    of = replace(of, boards_per_batch=1)
    board, other, anew = redrawn(of, "R2")
    assert np.allclose(made_of(of, "R2", anew), made_of(of, "R2", board), rtol=0.0, atol=1e-15)
    assert np.array_equal(anew["R1.tolerance"], other["R1.tolerance"])
    found = np.corrcoef(board["batch array"], anew["batch array"])[0, 1]
    # As above.
    expected = correlation_by_integration("uniform", 0.4)
    assert found == pytest.approx(expected, abs=4.5 / np.sqrt(COUNT) + 0.002)


def test_boards_are_redrawn_row_by_row():
    of = array()
    board, other = two(of, count=10)
    names, rows = board_contributors(of), np.arange(10) % 2 == 0
    mixed = agreeing(of)({name: rows & (name == "R1") for name in names}, board, other)
    held = agreeing(of)({name: np.full(10, name == "R1") for name in names}, board, other)
    free = agreeing(of)({name: np.full(10, False) for name in names}, board, other)
    for name, x in mixed.items():
        assert np.array_equal(x, np.where(rows, held[name], free[name]))
