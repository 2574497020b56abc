"""Contributors: which axes a stage has, and what a coordinate means in ohms, volts and kelvin."""

from __future__ import annotations

import numpy as np
import pytest

from biasband.boards.draws import draws
from biasband.stage import Limits, Stage, Supply
from biasband.variation.contributors import axes, board_axes, realise, use_axes
from variation.stages import ROOM, ideal, limits, real, stage, with_resistor, with_resistors

ROUNDING = 1e-12
"""Relative: a handful of double operations."""

COLD, HOT = 263.15, 333.15  # ΔT = −35 K and +35 K
OHMS = {"RB": 470e3, "RC": 2.2e3}


def warm(**resistor: float | str) -> Stage:
    """A base-resistor stage between −10 and +60 °C."""
    return stage(
        "base-resistor", OHMS, ideal(100.0), 18.0, resistor=resistor, ambient=limits(COLD, ROOM, HOT)
    )


def names(axes_of: tuple) -> list[str]:
    """The names of axes."""
    return [axis.name for axis in axes_of]


@pytest.mark.parametrize("temperature", [-1.0, 1.0])
@pytest.mark.parametrize(("side", "sign"), [(-1.0, -1.0), (1.0, 1.0)])
def test_resistor_limit_is_the_product_of_tolerance_drift_and_tempco(temperature, side, sign):
    # physics.md 4: low = R·(1−t)(1−d)(1−c·|ΔT|), high likewise with plus; |ΔT| = 35 K at both ends.
    found = realise(
        warm(tolerance=0.05, life_drift=0.01, tempco=2e-4), {"RC": side, "temperature": temperature}
    )
    expected = 2.2e3 * (1 + sign * 0.05) * (1 + sign * 0.01) * (1 + sign * 2e-4 * 35.0)
    assert float(found.resistances["RC"]) == pytest.approx(expected, rel=ROUNDING)
    assert found.resistances["RB"] == 470e3


def test_tempco_takes_the_point_of_use_s_own_temperature():
    found = realise(warm(tempco=2e-4), {"RC": -1.0, "temperature": 0.0})
    assert float(found.resistances["RC"]) == 2.2e3  # ΔT = 0 at 25 °C


@pytest.mark.parametrize(("temperature", "rise"), [(-1.0, -35.0), (1.0, 35.0)])
def test_drawn_tempco_has_the_sign_of_the_temperature(temperature, rise):
    # physics.md 4: in Monte Carlo the three are separate draws and ΔT has its sign.
    x = {"RC.tolerance": 0.5, "RC.life_drift": -0.25, "RC.tempco": 1.0, "temperature": temperature}
    found = realise(warm(tolerance=0.05, life_drift=0.01, tempco=2e-4), x)
    expected = 2.2e3 * (1 + 0.5 * 0.05) * (1 - 0.25 * 0.01) * (1 + 2e-4 * rise)
    assert float(found.resistances["RC"]) == pytest.approx(expected, rel=ROUNDING)


def test_each_resistor_has_three_draws():
    drawn = {draw.name for draw in draws(warm(tolerance=0.05))}
    assert {"RC.tolerance", "RC.life_drift", "RC.tempco"} <= drawn


def grouped() -> Stage:
    """Both resistors of one reel: 100 ppm/K, tracking within 30 ppm/K."""
    return warm(tempco=1e-4, group="reel", tracking=3e-5)


def test_group_splits_the_tempco_into_one_common_and_one_own_axis_each():
    assert names(board_axes(grouped())) == ["RB", "RC", "group reel"]
    # physics.md 4: a common axis of ±(c − tracking), ±tracking per member: 70 and 30 ppm/K over 35 K.
    common = realise(grouped(), {"group reel": 1.0, "temperature": 1.0}).resistances
    own = realise(grouped(), {"RC": 1.0, "temperature": 1.0}).resistances
    assert float(common["RC"]) == pytest.approx(2.2e3 * (1 + 7e-5 * 35), rel=ROUNDING)
    assert float(common["RB"]) == pytest.approx(470e3 * (1 + 7e-5 * 35), rel=ROUNDING)
    assert float(own["RC"]) == pytest.approx(2.2e3 * (1 + 3e-5 * 35), rel=ROUNDING)
    assert own["RB"] == 470e3


def test_full_tempco_is_reached_with_both_axes_of_a_group():
    found = realise(grouped(), {"RC": -1.0, "group reel": -1.0, "temperature": 1.0})
    assert float(found.resistances["RC"]) == pytest.approx(2.2e3 * (1 - 1e-4 * 35), rel=ROUNDING)


def test_ratio_of_two_tracking_resistors_moves_by_the_tracking_alone():
    sides = [(a, b, g) for a in (-1.0, 1.0) for b in (-1.0, 1.0) for g in (-1.0, 1.0)]
    ratios = []
    for a, b, g in sides:
        found = realise(grouped(), {"RB": a, "RC": b, "group reel": g, "temperature": 1.0}).resistances
        ratios.append(float(found["RB"] / found["RC"]) / (470e3 / 2.2e3) - 1.0)
    # 2 · 30 ppm/K · 35 K = 0.21 %, times 1/(1 − common) of at most 0.35 %; untracked it would be 0.70 %.
    assert max(np.abs(ratios)) == pytest.approx(2.1e-3, rel=5e-3)


def test_resistors_without_a_group_share_nothing():
    assert names(board_axes(warm(tempco=1e-4))) == ["RB", "RC"]


def test_two_groups_have_two_common_axes():
    two = with_resistor(grouped(), "RC", group="array")
    assert names(board_axes(two))[-2:] == ["group reel", "group array"]


def test_limits_that_coincide_are_no_axis():
    assert axes(stage("base-resistor", OHMS, ideal(100.0), 18.0)) == ()


def test_tempco_is_no_axis_where_the_ambient_stays_at_25_degrees():
    still = with_resistors(stage("base-resistor", OHMS, ideal(100.0), 18.0), tempco=1e-4)
    assert axes(still) == ()


def test_tempco_is_an_axis_at_a_fixed_ambient_away_from_25_degrees():
    hot = stage(
        "base-resistor", OHMS, ideal(100.0), 18.0, resistor={"tempco": 1e-4}, ambient=Limits.exactly(HOT)
    )
    assert names(axes(hot)) == ["RB", "RC"]
    assert float(realise(hot, {"RC": -1.0}).resistances["RC"]) == pytest.approx(
        2.2e3 * (1 - 35e-4), rel=ROUNDING
    )


def test_board_and_use_are_told_apart():
    full = stage(
        "split-supply",
        {"RB": 100e3, "RC": 4.7e3, "RE": 8.2e3},
        real(leakage=40e-9),
        Supply(voltage=limits(8.1, 9.0, 9.9), ripple_peak=0.05, varies="by board"),
        resistor={"tolerance": 0.01},
        negative_supply=Supply(voltage=limits(-9.9, -9.0, -8.1)),
        ambient=limits(COLD, ROOM, HOT),
    )
    board = ["RB", "RC", "RE", "gain", "base_emitter_voltage", "supply", "leakage"]
    assert sorted(names(board_axes(full))) == sorted(board)
    assert sorted(names(use_axes(full))) == ["negative_supply", "ripple", "temperature"]


def test_nominal_is_typical_with_no_leakage_no_ripple_and_stated_resistors():
    full = stage(
        "base-resistor",
        OHMS,
        real(leakage=40e-9),
        Supply(voltage=limits(8.1, 9.0, 9.9), ripple_peak=0.05),
        resistor={"tolerance": 0.01, "tempco": 1e-4},
        ambient=limits(COLD, 313.15, HOT),
    )
    found = realise(full, {})
    assert dict(found.resistances) == OHMS  # physics.md 4: their stated value whatever the ambient
    assert (found.leakage, found.ripple, found.temperature) == (0.0, 0.0, 313.15)
    assert float(found.gain) == pytest.approx(260.0, rel=ROUNDING)


@pytest.mark.parametrize(("x", "expected"), [(-1.0, 0.0), (0.0, 20e-9), (1.0, 40e-9)])
def test_leakage_runs_from_nothing_to_its_maximum(x, expected):
    leaky = stage("base-resistor", OHMS, real(leakage=40e-9), 9.0)
    assert float(realise(leaky, {"leakage": x}).leakage) == pytest.approx(expected, abs=1e-21)


@pytest.mark.parametrize(
    ("x", "gain"),
    [(-1.0, 165.0), (-0.5, np.sqrt(165.0 * 260.0)), (0.5, np.sqrt(260.0 * 410.0)), (1.0, 410.0)],
)
def test_gain_is_linear_in_its_logarithm_on_each_side_of_typical(x, gain):
    found = realise(stage("base-resistor", OHMS, real(), 9.0), {"gain": np.array([x])})
    assert float(found.gain[0]) == pytest.approx(gain, rel=ROUNDING)


def test_limits_are_met_to_the_last_bit():
    odd = stage("base-resistor", OHMS, ideal(100.0, limits(0.57, 0.64, 0.72)), limits(8.1, 9.0, 9.9))
    x = np.array([-1.0, 0.0, 1.0])
    found = realise(odd, {"supply": x, "base_emitter_voltage": x})
    assert list(found.supply) == [8.1, 9.0, 9.9]
    assert list(found.base_emitter_voltage) == [0.57, 0.64, 0.72]


def test_stage_without_a_value_is_refused():
    empty = with_resistor(stage("base-resistor", OHMS, ideal(100.0), 18.0), "RC", value=None)
    with pytest.raises(ValueError, match="RC has no value yet"):
        realise(empty, {})
