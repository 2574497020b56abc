"""Self-heating: the fixed point, the lowest of several, and runaway as a status (physics.md section 2)."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from biasband.circuit.heat import power_slope
from biasband.circuit.network import condense, rails
from biasband.circuit.operating_point import Region
from biasband.circuit.solution import Problem, Status, patient
from biasband.stage import Transistor
from circuit.stages import Case, cases, real, together
from circuit.twin import Solver, warmed

HOT_DIVIDER = Case(
    topology="divider",
    resistances={"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3},
    supply=12.0,
    temperature=333.15,
    leakage=40e-9,
    transistor=real(early_voltage=70.0, thermal_resistance=280.0),
)


def powered(supply: float, base_ohms: float, collector_ohms: float = 47.0, heat: float = 300.0) -> Case:
    """A base-resistor stage with a grounded emitter, which nothing holds back from heating."""
    return Case(
        topology="base-resistor",
        resistances={"RB": base_ohms, "RC": collector_ohms},
        supply=supply,
        leakage=100e-9,
        transistor=real(thermal_resistance=heat),
    )


@settings(max_examples=60, deadline=None)
@given(cases())
def test_junction_temperature_is_ambient_plus_the_power_it_causes(case: Case) -> None:
    point = case.reading().point
    if point.status[0] != Status.SOLVED:
        return
    # In deep cut-off the constant leakage of the model delivers a whisper, which cools nothing.
    rise = (case.transistor.thermal_resistance or 0.0) * max(point.power[0], 0.0)
    # Solved until it moves less than 1e-6 K; a loop gain near minus one leaves twice that as a gap.
    assert point.junction_temperature[0] == pytest.approx(case.temperature + rise, abs=3e-6)


def test_without_thermal_resistance_the_junction_is_at_ambient() -> None:
    for none in (None, 0.0):
        cold = replace(HOT_DIVIDER, transistor=real(early_voltage=70.0, thermal_resistance=none))
        assert cold.value("junction_temperature") == cold.temperature


def test_lowest_of_two_fixed_points_is_taken() -> None:
    case = powered(20.0, 1.2e6)
    solver, R = Solver(case), 300.0
    gaps = {T: case.temperature + R * solver.at(T).power - T for T in (298.15, 370.0, 420.0)}
    # By the scalar twin the gap changes sign twice: a fixed point below 370 K, another one above.
    assert gaps[298.15] > 0.0 > gaps[370.0]
    assert gaps[420.0] > 0.0
    found = warmed(case)
    assert found.point is not None
    assert found.worst_gain < 1.0
    assert case.value("junction_temperature") == pytest.approx(found.point.T_j, abs=2e-6)  # settled to 1e-6 K


def test_stage_without_a_fixed_point_below_250_degrees_is_in_runaway() -> None:
    case = replace(powered(20.0, 250e3, collector_ohms=10.0), leakage=0.0)
    assert warmed(case).point is None  # independent: brentq and a scan over T_j
    reading = case.reading()
    assert reading.point.status[0] == Status.RUNAWAY
    assert reading.regions(1e-9)[0] == Region.RUNAWAY
    assert np.isnan(reading.point.collector_current[0])
    assert np.isnan(reading.point.junction_temperature[0])


def test_loop_gain_above_one_on_the_way_to_saturation_is_runaway() -> None:
    case = replace(powered(20.0, 1e6, collector_ohms=300.0, heat=400.0), leakage=2e-6)
    found = warmed(case)
    # The scan does find a fixed point, where the collector resistor leaves no more power, but passes G = 1.
    assert found.point is not None
    assert found.worst_gain > 1.0
    assert case.reading().point.status[0] == Status.RUNAWAY


def test_loop_gain_above_one_far_beyond_a_stable_point_is_harmless() -> None:
    case = powered(20.0, 1.2e6)
    solver, R = Solver(case), 300.0
    hot = R * (solver.at(415.0).power - solver.at(414.0).power)
    assert hot > 1.0
    assert case.reading().point.status[0] == Status.SOLVED


@settings(max_examples=40, deadline=None)
@given(
    supply=st.floats(5.0, 40.0),
    base_ohms=st.floats(np.log(1e5), np.log(3e6)).map(lambda power: float(np.exp(power))),
    collector_ohms=st.floats(10.0, 2000.0),
    heat=st.floats(50.0, 500.0),
)
def test_runaway_is_called_exactly_where_a_scan_of_temperature_calls_it(
    supply: float, base_ohms: float, collector_ohms: float, heat: float
) -> None:
    case = powered(supply, base_ohms, collector_ohms, heat)
    found = warmed(case, step=2.0)
    # Within 0.05 of G = 1 the scan's finite differences over 2 K decide nothing.
    if abs(found.worst_gain - 1.0) < 0.05 or (found.point is None and found.nearest < 2.0):
        return
    runs_away = found.point is None or found.worst_gain > 1.0
    assert case.reading().point.status[0] == (Status.RUNAWAY if runs_away else Status.SOLVED)


@settings(max_examples=60, deadline=None)
@given(cases(thermal=False))
def test_power_slope_is_the_finite_difference_of_the_scalar_twin(case: Case) -> None:
    solver, T, h = Solver(case), case.temperature, 0.01
    expected = (solver.at(T + h).power - solver.at(T - h).power) / (2.0 * h)
    assert isinstance(case.transistor, Transistor)
    part = together([case])
    ports = condense(case.wiring, part.resistances).ports(rails(case.polarity, part))
    problem = Problem.of(ports, case.transistor, part)
    slope = power_slope(problem, problem.ambient, patient(problem, problem.ambient))[0]
    # A central difference over 0.02 K: curvature (1e-6 of the slope's scale) and rounding of the power.
    scale = abs(solver.at(T).power)
    assert slope == pytest.approx(expected, rel=1e-4, abs=1e-6 * scale + 1e-12)


SHALLOW = powered(31.25, 2796138.734430808, 560.0, 376.0)
"""Its gap R·P − (T_j − T_a) dips below zero near 349 K, rises again, and falls for good in saturation."""


def gap(case: Case, T: float) -> float:
    """T_a + R_θ·P(T) − T [K] by the scalar twin."""
    return case.temperature + (case.transistor.thermal_resistance or 0.0) * Solver(case).at(T).power - T


def test_fixed_point_in_a_shallow_dip_between_two_steps_of_the_climb_is_found() -> None:
    found = warmed(SHALLOW, step=0.1)
    assert found.point is not None
    # By the twin G stays below one up to the dip, which is shallower than 50 mK and less than 2.5 K wide;
    # a climb to 250 °C in 32 steps strides 7 K over it.
    assert found.worst_gain < 1.0
    assert -0.05 < gap(SHALLOW, found.point.T_j + 0.2) < 0.0 < gap(SHALLOW, found.point.T_j + 2.5)
    point = SHALLOW.reading().point
    assert point.status[0] == Status.SOLVED
    # Settled to 1e-6 K of the gap, which 1 − G = 0.06 makes 2e-5 K of the temperature.
    assert point.junction_temperature[0] == pytest.approx(found.point.T_j, abs=2e-5)


def test_gain_above_one_on_a_short_way_into_saturation_is_runaway() -> None:
    case = Case(
        topology="base-resistor",
        resistances={"RB": 1.8e6, "RC": 182.0},
        supply=11.15,
        temperature=357.0,
        leakage=0.293e-6,
        transistor=real(gain=564.0, thermal_resistance=250.8),
    )
    found = warmed(case, step=0.25)
    assert found.point is not None
    assert found.worst_gain > 1.1
    # The first step is no long one, and in saturation the power is less than at ambient: G is negative on
    # average and at the hot end, and small as the slope of that first step. Only that it falls tells.
    assert 18.0 < found.point.T_j - case.temperature < gap(case, case.temperature) < 35.0
    assert case.reading().point.status[0] == Status.RUNAWAY
    assert np.isnan(case.reading().point.junction_temperature[0])


def test_gain_above_one_on_a_long_way_is_runaway_though_it_is_negative_at_both_ends() -> None:
    case = powered(30.0, 100074.66886630584, 10.0, 380.0)
    found = warmed(case, step=2.0)
    assert found.point is not None
    assert gap(case, case.temperature) > 40.0  # the plain first step is a long way
    assert found.worst_gain > 1.0
    assert case.reading().point.status[0] == Status.RUNAWAY


def test_junction_that_takes_a_whisper_of_power_from_the_network_stays_at_ambient() -> None:
    case = Case(
        topology="divider",
        resistances={"R1": 1e6, "R2": 1e3, "RC": 1e6, "RE": 10.0},
        supply=0.2,
        temperature=358.15,
        leakage=1e-6,
        transistor=real(thermal_resistance=500.0),
    )
    # The leakage pulls the collector below the base: V_CE·I_C is negative, by the twin 1.4 mK worth.
    assert -2e-3 < gap(case, case.temperature) < -1e-3
    for ambient in (358.15, 298.15):
        here = replace(case, temperature=ambient)
        assert here.value("junction_temperature") == ambient  # exactly: nothing cools below ambient
