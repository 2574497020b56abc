"""A sweep of the ambient: nominal line, slopes, and corners with the temperature held."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings

from biasband.circuit.operating_point import Region
from biasband.constants import BOLTZMANN, ELEMENTARY_CHARGE
from biasband.margins.holding import nominal
from biasband.stage import Limits, Stage
from biasband.variation.contributors import axes, realise
from biasband.variation.corners import corners, vertices
from biasband.variation.evaluation import evaluate
from biasband.variation.points_of_use import held_at
from biasband.variation.sweep import (
    corners_along,
    corners_at,
    last_point,
    nominal_line,
    slopes,
    without_point,
)
from tests.variation.stages import (
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

CUT_OFF = 1e-6


def test_held_stage_varies_in_everything_but_the_ambient() -> None:
    of = coupled()
    names = [axis.name for axis in axes(of)]
    names.remove("temperature")
    assert [axis.name for axis in axes(held_at(of, 320.0))] == names
    assert float(realise(held_at(of, 320.0), {}).temperature) == 320.0


def test_nominal_line_is_the_nominal_point_at_each_temperature() -> None:
    of = coupled()
    temperatures = np.array([240.0, 300.0, 350.0])
    names = ("collector_voltage", "collector_current", "voltage_gain")
    line = nominal_line(of, temperatures, some(of, *names), cut_off=CUT_OFF)
    for place, temperature in enumerate(temperatures):
        alone = nominal(held_at(of, float(temperature))).values
        for name in names:
            # One by one or together is the same arithmetic: elements do not know their neighbours.
            assert line.values[name][place] == pytest.approx(alone[name], rel=1e-12)
    assert list(line.region) == [Region.ACTIVE] * 3


def test_nominal_resistors_keep_their_stated_value_at_any_ambient() -> None:
    of = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(50.0), 12.0, resistor={"tempco": 1e-3})
    line = nominal_line(of, np.array([250.0, 350.0]), some(of, "collector_voltage"), cut_off=CUT_OFF)
    # Boylestad & Nashelsky, ex. 4.1, exact: 6.8208 V to the digits stated.
    assert line.values["collector_voltage"] == pytest.approx([6.8208, 6.8208], abs=5e-5)


def test_nominal_line_names_runaway_and_has_no_value_there() -> None:
    of = replace(running_away(), transistor=replace(running_away().transistor, thermal_resistance=9e4))
    line = nominal_line(of, np.array([298.15, 358.15]), some(of, "collector_current"), cut_off=CUT_OFF)
    assert Region.RUNAWAY in line.region
    assert np.array_equal(np.isnan(line.values["collector_current"]), line.region == Region.RUNAWAY)


@pytest.mark.parametrize("drift", [-2e-3, -1.7e-3])
def test_slope_is_that_of_the_closed_form(drift: float) -> None:
    """No RE, no Early effect: V_CC − V_BE(T, I) = RB·I/β, with V_BE = vbe(T) + V_T·ln(I/I_test).

    At I = I_test and 25 °C, dI/dT·(RB/β + V_T/I) = −d, by implicit differentiation.
    """
    plain = real(
        gain=Limits.exactly(100.0), base_emitter_voltage=Limits.exactly(0.65), early_voltage=None,
        gain_drift=0.0, thermal_resistance=None, base_emitter_drift=drift, test_current=1e-3,
    )  # fmt: skip
    of = stage("base-resistor", {"RB": (12.0 - 0.65) * 100.0 / 1e-3, "RC": 2.2e3}, plain, 12.0)
    V_T = BOLTZMANN * ROOM / ELEMENTARY_CHARGE
    expected = -drift / ((12.0 - 0.65) / 1e-3 + V_T / 1e-3)
    found = slopes(of, ROOM, some(of, "collector_current", "collector_voltage"))
    # 1e-4: 1e-9 V to either side of 11 V, per kelvin of 2 mV, and half a kelvin's curvature.
    assert found["collector_current"] == pytest.approx(expected, rel=1e-4)
    assert found["collector_voltage"] == pytest.approx(-2.2e3 * expected, rel=1e-4)


def test_slope_knows_self_heating() -> None:
    of = with_resistor(coupled(), "RC", value=330.0)  # V_CE hardly moves, so that power follows I_C
    cold = replace(of, transistor=replace(of.transistor, thermal_resistance=None))
    found, without = (slopes(each, ROOM, some(of, "junction_temperature")) for each in (of, cold))
    assert without["junction_temperature"] == pytest.approx(1.0, abs=1e-9)  # T_j is the ambient
    # P is about 1 mA · 7.5 V and rises by 2 mV/K of the 0.75 V across RE: 280 K/W · 7.5 mW / 375 K = 0.006.
    assert 1.003 < found["junction_temperature"] < 1.012


def brute_force(of: Stage, temperature: float, name: str) -> tuple[float, float]:
    """The extremes of a quantity over all vertices at a temperature, without any search."""
    held = held_at(of, temperature)
    box = axes(held)
    points = vertices(box)
    x = {axis.name: points[:, k] for k, axis in enumerate(box)}
    outcome = evaluate(held, x, some(of, name), cut_off=CUT_OFF)
    return float(np.nanmin(outcome.low[name])), float(np.nanmax(outcome.high[name]))


@pytest.mark.parametrize("temperature", [240.0, ROOM, 330.0])
def test_worst_case_is_no_narrower_than_every_combination_of_limits(temperature: float) -> None:
    of, names = coupled(), ("collector_voltage", "collector_current", "symmetric_peak_swing")
    found = corners_at(of, temperature, some(of, *names), cut_off=CUT_OFF).ranges
    for name in names:
        low, high = brute_force(of, temperature, name)
        assert found[name].low.value <= low + 1e-9 and found[name].high.value >= high - 1e-9
    # Voltages of an active stage are extreme at a vertex (physics, "Corners").
    low, high = brute_force(of, temperature, "collector_voltage")
    assert found["collector_voltage"].low.value == pytest.approx(low, rel=1e-9)
    assert found["collector_voltage"].high.value == pytest.approx(high, rel=1e-9)


@settings(max_examples=8, deadline=None, derandomize=True)
@given(of=varying_stages())
def test_worst_case_at_an_ambient_lies_within_that_over_all_ambients(of: Stage) -> None:
    measures = some(of, "collector_voltage", "collector_current")
    whole = corners(of, measures, cut_off=CUT_OFF).ranges
    inside = 0.5 * (of.ambient.low + of.ambient.high)
    for temperature in (of.ambient.low, inside, of.ambient.high):
        part = corners_at(of, temperature, measures, cut_off=CUT_OFF).ranges
        for name in measures:
            slack = 1e-6 * abs(whole[name].high.value)  # what the search of the box is polished to
            assert part[name].low.value >= whole[name].low.value - slack
            assert part[name].high.value <= whole[name].high.value + slack


def test_corners_along_are_the_corners_at_each_and_progress_is_told() -> None:
    of, told = coupled(), []
    measures, temperatures = some(of, "collector_current"), np.array([270.0, 300.0])
    found = corners_along(
        of, temperatures, measures, cut_off=CUT_OFF, sides={"collector_current": 1.0}, progress=told.append
    )
    for temperature, each in zip(temperatures, found, strict=True):
        alone = corners_at(of, float(temperature), measures, cut_off=CUT_OFF).ranges["collector_current"]
        assert each.ranges["collector_current"].high.value == alone.high.value
    assert told == [0.5, 1.0]


def test_corners_without_an_operating_point_are_named() -> None:
    of = running_away(limits(273.15, ROOM, 358.15))
    measures = some(of, "collector_current")
    assert without_point(corners_at(of, 358.15, measures, cut_off=0.0)) is Region.RUNAWAY
    assert without_point(corners_at(of, 290.0, measures, cut_off=0.0)) is None
    found = corners_at(of, 290.0, measures, cut_off=0.0)
    unsolved = replace(found, regions={Region.UNSOLVED: 1, Region.ACTIVE: 1})
    assert without_point(unsolved) is Region.UNSOLVED
    assert without_point(replace(found, regions={Region.UNSOLVED: 1, Region.RUNAWAY: 1})) is Region.RUNAWAY


@pytest.mark.parametrize(("inner", "outer"), [(290.0, 358.15), (300.0, 340.0)])
def test_last_point_has_operating_points_and_a_step_further_there_are_none(
    inner: float, outer: float
) -> None:
    of, measures = running_away(), some(running_away(), "collector_current")
    found = last_point(of, inner, outer, cut_off=0.0, exact=1e-3)
    assert inner < found < outer
    assert without_point(corners_at(of, found, measures, cut_off=0.0)) is None
    assert without_point(corners_at(of, found + 1e-3, measures, cut_off=0.0)) is Region.RUNAWAY
