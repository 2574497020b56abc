"""RSS against a loop by hand: one contributor moved at a time, at every point of use."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from circuit import stages as cases
from circuit.twin import Solver

from biasband.circuit.reading import read
from biasband.stage import Limits, Stage, Supply
from biasband.variation.contributors import board_axes, realise, use_axes
from biasband.variation.points_of_use import points_of_use
from biasband.variation.rss import rss
from variation.stages import (
    ROOM,
    coupled,
    ideal,
    limits,
    real,
    running_away,
    some,
    stage,
    with_resistor,
    words,
)


def by_hand(of: Stage, name: str) -> tuple[float, float]:
    """The RSS interval of a quantity without ripple's width, by plain loops over physics.md 5."""
    quantity = words(of)[name]

    def value(x: dict[str, float]) -> float:
        return float(np.ravel(quantity.read(read(of, realise(of, x))))[0])

    lows, highs = [], []
    for point in points_of_use(of):
        use = {axis.name: point.coordinates.get(axis.name, 0.0) for axis in use_axes(of)}
        centre, down, up = value(use), 0.0, 0.0
        for axis in board_axes(of):
            moves = [value({**use, axis.name: side}) - centre for side in (-1.0, 1.0)]
            up += max(*moves, 0.0) ** 2
            down += min(*moves, 0.0) ** 2
        highs.append(centre + sqrt(up))
        lows.append(centre - sqrt(down))
    return min(lows), max(highs)


@pytest.mark.parametrize("name", ["collector_current", "transistor_power", "base_voltage", "voltage_gain"])
def test_rss_is_the_loop_by_hand(name):
    low, high = by_hand(coupled(), name)
    found = rss(coupled(), some(coupled(), name), cut_off=0.0)[name]
    assert found.low == pytest.approx(low, rel=1e-6)  # one scenario or many: residuals below 1e-9 V
    assert found.high == pytest.approx(high, rel=1e-6)


def test_moves_are_full_and_up_and_down_kept_apart():
    # I_C = β·17.3/470e3: h_FE 50…100…300 moves −1.84 mA and +7.36 mA; RB ± 5 % moves −0.175, +0.194 mA.
    of = stage(
        "base-resistor",
        {"RB": 470e3, "RC": 100.0},
        ideal(limits(50.0, 100.0, 300.0)),
        18.0,
        resistor={"tolerance": 0.05},
    )
    found = rss(of, some(of, "collector_current"), cut_off=0.0)["collector_current"]
    centre = 100 * 17.3 / 470e3
    down = sqrt((0.5 * centre) ** 2 + (centre * (1 - 1 / 1.05)) ** 2)
    up = sqrt((2.0 * centre) ** 2 + (centre * (1 / 0.95 - 1)) ** 2)
    assert found.low == pytest.approx(centre - down, rel=1e-12)
    assert found.high == pytest.approx(centre + up, rel=1e-12)


def test_contributor_that_moves_one_way_only_adds_to_one_side():
    # P = V_CE·I_C at V_CE = V_CC/2: moving RB either way lowers it, so nothing goes up.
    middle = ideal(9.0 / (17.3 / 1e6) / 1e3)
    of = with_resistor(stage("base-resistor", {"RB": 1e6, "RC": 1e3}, middle, 18.0), "RB", tolerance=0.05)
    found = rss(of, some(of, "transistor_power"), cut_off=0.0)["transistor_power"]
    base = 0.7 * 17.3 / 1e6

    def power(ohms: float) -> float:
        current = 9e-3 * 1e6 / ohms
        return (18.0 - 1e3 * current) * current + base * 1e6 / ohms

    # Upwards only the base's own power moves: 12 µW · 5 % of 81 mW.
    assert found.high == pytest.approx(power(1e6), rel=1e-5)
    assert found.low == pytest.approx(min(power(0.95e6), power(1.05e6)), rel=1e-9)


def leaky() -> Stage:
    """A base-resistor stage between 25 and 85 °C in which only leakage differs from board to board."""
    transistor = real(gain=Limits.exactly(260.0), base_emitter_voltage=Limits.exactly(0.64), leakage=40e-9)
    return stage(
        "base-resistor",
        {"RB": 1.2e6, "RC": 2.2e3},
        transistor,
        9.0,
        ambient=Limits(low=ROOM, nominal=ROOM, high=358.15),
    )


def twin_voltage(temperature: float, leakage: float) -> float:
    case = cases.Case(
        topology="base-resistor",
        resistances={"RB": 1.2e6, "RC": 2.2e3},
        supply=9.0,
        transistor=leaky().transistor,
        temperature=temperature,
        leakage=leakage,
    )
    return Solver(case).at(temperature).volts["collector"]


def test_leakage_is_one_sided_and_moved_at_every_point_of_use():
    # physics.md 5: moved at nominal ambient only it would shift V_C by little, at 85 °C by volts.
    found = rss(leaky(), some(leaky(), "collector_voltage"), cut_off=0.0)["collector_voltage"]
    assert found.low == pytest.approx(twin_voltage(358.15, 40e-9), abs=2e-8)  # residuals below 1e-9 V
    assert found.high == pytest.approx(twin_voltage(ROOM, 0.0), abs=2e-8)
    assert twin_voltage(ROOM, 0.0) - twin_voltage(ROOM, 40e-9) < 0.1 < 1.0 < found.high - found.low


def test_envelope_without_board_contributors_is_the_points_of_use():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(100.0), limits(17.1, 18.0, 18.9))
    found = rss(of, some(of, "collector_current"), cut_off=0.0)["collector_current"]
    assert found.low == pytest.approx(100 * (17.1 - 0.7) / 470e3, rel=1e-12)
    assert found.high == pytest.approx(100 * (18.9 - 0.7) / 470e3, rel=1e-12)


def test_stage_that_does_not_vary_has_an_interval_of_one_value():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(100.0), 18.0)
    found = rss(of, some(of, "collector_current"), cut_off=0.0)["collector_current"]
    assert found.low == found.high == pytest.approx(100 * 17.3 / 470e3, rel=1e-12)


def test_unsolved_move_is_nan_not_a_number():
    found = rss(running_away(), some(running_away(), "collector_current"), cut_off=0.0)
    assert np.isnan(found["collector_current"].high)


def test_supply_by_board_is_moved_like_a_tolerance():
    supply = Supply(voltage=limits(17.1, 18.0, 18.9), varies="by board")
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(90.0, 100.0, 110.0)), supply)
    found = rss(of, some(of, "collector_current"), cut_off=0.0)["collector_current"]
    centre = 100 * 17.3 / 470e3
    moved = sqrt((0.1 * centre) ** 2 + (100 * 0.9 / 470e3) ** 2)
    assert found.high == pytest.approx(centre + moved, rel=1e-12)
