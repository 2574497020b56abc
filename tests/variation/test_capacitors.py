"""Capacitors as contributors: their limits, their draws, and nothing changed where there are none."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.boards.draws import coordinates, draws
from biasband.errors import UsageError
from biasband.stage import Capacitor, Limits, Stage
from biasband.variation.contributors import RIPPLE, TEMPERATURE, axes, board_axes, realise
from biasband.variation.corners import values_at
from variation.stages import ROOM, coupled

NAMES = ("C_in", "C_out", "C_bypass")
CHANGE = {"temperature_change": 0.3, "temperature_distance": 35.0}


def with_capacitors(of: Stage, **facts: float) -> Stage:
    """The stage with 10 µF everywhere."""
    capacitors = tuple(Capacitor(name=name, value=1e-5, **facts) for name in NAMES)
    return replace(of, capacitors=capacitors)


FULL = with_capacitors(coupled(), tolerance=0.2, **CHANGE)
"""The ambient goes from −10 to 50 °C, 35 K below 25 °C and 25 K above."""


def capacitance(of: Stage, **x: float) -> float:
    return float(np.ravel(realise(of, x).capacitances["C_in"])[0])


@pytest.mark.parametrize(
    ("x", "share"),
    [
        ({}, 1.0),
        ({"C_in": -1.0}, 0.8),
        ({"C_in": 1.0}, 1.2),
        ({"C_in": -1.0, TEMPERATURE: -1.0}, 0.8 * 0.7),  # −10 °C: the whole change
        ({"C_in": 1.0, TEMPERATURE: -1.0}, 1.2 * 1.3),
        ({"C_in": -1.0, TEMPERATURE: 1.0}, 0.8 * (1.0 - 0.3 * 25.0 / 35.0)),  # 50 °C: as much as is due
        ({"C_in.tolerance": -1.0, TEMPERATURE: -1.0}, 0.8),
        ({"C_in.temperature_change": -1.0, TEMPERATURE: -1.0}, 0.7),
        ({"C_in.temperature_change": -1.0}, 1.0),
        ({"C_out": -1.0, TEMPERATURE: -1.0}, 1.0),
    ],
)
def test_capacitance_at_coordinates(x, share):
    assert capacitance(FULL, **x) == pytest.approx(1e-5 * share, rel=1e-14)  # rounding


def test_change_goes_no_further_beyond_its_distance():
    wider = replace(FULL, ambient=Limits(low=173.15, nominal=ROOM, high=323.15))
    held = replace(FULL, ambient=Limits.exactly(ROOM - 17.5))
    assert capacitance(wider, C_in=-1.0, temperature=-1.0) == pytest.approx(1e-5 * 0.8 * 0.7, rel=1e-14)
    assert capacitance(held, C_in=-1.0) == pytest.approx(1e-5 * 0.8 * 0.85, rel=1e-14)


def test_least_share_is_what_is_left_at_worst():
    assert FULL.capacitors[0].least_share == pytest.approx(0.56, rel=1e-15)
    assert Capacitor(name="C_in", tolerance=0.2, temperature_change=0.3).least_share == 0.8


def test_capacitors_are_by_board_and_each_its_own_axis():
    with_them, without = ({axis.name for axis in board_axes(of)} for of in (FULL, coupled()))
    assert with_them - without == set(NAMES)
    # Leakage stays the last by-board axis, the in-use ones come after.
    assert [axis.name for axis in axes(FULL)][-4:] == ["leakage", TEMPERATURE, "supply", RIPPLE]


@pytest.mark.parametrize(
    ("facts", "varies"),
    [
        ({}, False),
        ({"tolerance": 0.1}, True),
        (CHANGE, True),
        ({"temperature_change": 0.3}, False),  # no distance at which it is reached
    ],
)
def test_capacitor_that_cannot_vary_is_no_axis(facts, varies):
    of = with_capacitors(coupled(), **facts)
    assert ("C_in" in {axis.name for axis in axes(of)}) is varies
    room = replace(of, ambient=Limits.exactly(ROOM))
    assert ("C_in" in {axis.name for axis in axes(room)}) is ("tolerance" in facts)


def test_values_of_an_extreme_name_the_capacitors():
    assert values_at(FULL, {"C_out": -1.0})["C_out"] == pytest.approx(8e-6, rel=1e-14)
    assert not set(NAMES) & set(values_at(coupled(), {}))


def test_draws_of_others_stay_what_they_are():
    plain, more = (coordinates(of, slice(0, 100), seed=5) for of in (coupled(), FULL))
    assert {f"{name}.{what}" for name in NAMES for what in ("tolerance", "temperature_change")} == (
        set(more) - set(plain)
    )
    for name, drawn in plain.items():
        assert np.array_equal(drawn, more[name]), name
    assert len({draw.name for draw in draws(FULL)}) == len(draws(FULL))


@given(st.integers(0, 1000), st.floats(-1.0, 1.0))
def test_no_board_is_outside_the_limits_of_its_temperature(seed, temperature):
    drawn = coordinates(FULL, slice(0, 50), seed=seed)
    found = np.asarray(realise(FULL, {**drawn, TEMPERATURE: temperature}).capacitances["C_in"])
    low, high = (capacitance(FULL, C_in=side, temperature=temperature) for side in (-1.0, 1.0))
    assert np.all((low <= found) & (found <= high))


def test_tolerance_and_temperature_are_drawn_apart():
    drawn = coordinates(FULL, slice(0, 4096), seed=1)
    both = np.corrcoef(drawn["C_in.tolerance"], drawn["C_in.temperature_change"])[0, 1]
    assert abs(both) < 4.0 / np.sqrt(4096.0)  # four standard errors


def test_capacitor_without_a_value_cannot_be_realised():
    of = replace(FULL, capacitors=(replace(FULL.capacitors[0], value=None), *FULL.capacitors[1:]))
    with pytest.raises(UsageError, match="C_in has no value yet: design the stage first"):
        realise(of, {})


def test_part_of_scenarios_takes_the_capacitances_along():
    scenarios = realise(FULL, {"C_in": np.array([-1.0, 0.0, 1.0])})
    assert len(scenarios) == 3
    part = scenarios.part(np.array([True, False, True]))
    assert np.ravel(part.capacitances["C_in"]).tolist() == pytest.approx([8e-6, 12e-6], rel=1e-14)
