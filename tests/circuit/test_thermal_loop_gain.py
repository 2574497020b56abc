"""The thermal loop gain G = R_θJA·dP/dT_j as a quantity, resistors held (physics.md section 2)."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings

from biasband.circuit.quantities import quantity_units
from biasband.circuit.solution import Status
from biasband.quantity import Kind
from biasband.stage import Signal
from circuit.stages import Case, cases, ideal, real, value
from circuit.twin import Solver, warmed

G = "thermal_loop_gain"

FORTY_VOLTS = Case(
    topology="divider",
    resistances={"R1": 150e3, "R2": 6.8e3, "RC": 220.0, "RE": 470.0},
    supply=40.0,
    leakage=40e-9,
    transistor=real(early_voltage=70.0, thermal_resistance=280.0),
)
"""A 40 V divider with both figures of that in physics.md section 2, which does not state its resistors."""

RUNNING_AWAY = Case(
    topology="base-resistor",
    resistances={"RB": 250e3, "RC": 10.0},
    supply=20.0,
    transistor=real(thermal_resistance=300.0),
)
"""No fixed point below 250 °C (tests/circuit/test_heat.py holds the scalar twin to it)."""


def slope(case: Case, T: float, *, h: float = 0.01) -> float:
    """R_θ·ΔP/ΔT_j by the scalar twin, which shares no code with the package."""
    solver, R = Solver(case), case.transistor.thermal_resistance or 0.0
    return R * (solver.at(T + h).power - solver.at(T - h).power) / (2.0 * h)


def test_forty_volt_divider_has_the_figures_of_the_physics() -> None:
    # physics.md section 2: 50.3 °C, G = 0.047, as rounded there.
    assert FORTY_VOLTS.value("junction_temperature") - 273.15 == pytest.approx(50.3, abs=0.05)
    assert FORTY_VOLTS.value(G) == pytest.approx(0.047, abs=0.0005)
    found = warmed(FORTY_VOLTS)  # brentq and a scan, outside the package
    assert found.point is not None
    # A central difference over 0.02 K: its curvature is far below 1e-4 of it.
    assert FORTY_VOLTS.value(G) == pytest.approx(slope(FORTY_VOLTS, found.point.T_j), rel=1e-4)
    assert slope(FORTY_VOLTS, 422.15) > 1.0  # far above the stable point: harmless
    assert FORTY_VOLTS.reading().point.status[0] == Status.SOLVED


@settings(max_examples=60, deadline=None)
@given(cases())
def test_loop_gain_is_the_finite_difference_of_the_power_over_the_junction_temperature(case: Case) -> None:
    point = case.reading().point
    assume(point.status[0] == Status.SOLVED)
    R = case.transistor.thermal_resistance or 0.0
    expected = slope(case, float(point.junction_temperature[0]))
    # A central difference over 0.02 K: curvature (1e-6 of the slope's scale) and rounding of the power.
    scale = R * (1e-6 * abs(float(point.power[0])) + 1e-12)
    assert case.value(G) == pytest.approx(expected, rel=1e-4, abs=scale)


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_junction_follows_the_ambient_by_one_over_one_minus_the_gain(polarity: str) -> None:
    # T_j = T_a + R·P(T_j) differentiated: dT_j/dT_a = 1/(1 − G); P does not know T_a itself.
    # A stage with a gain that is not small: 12 V across a transistor with nothing in its emitter.
    case = Case(
        topology="base-resistor",
        resistances={"RB": 330e3, "RC": 100.0},
        supply=12.0,
        leakage=100e-9,
        transistor=real(thermal_resistance=400.0),
        polarity=polarity,
    )
    h = 0.02
    up, down = (replace(case, temperature=298.15 + T).value("junction_temperature") for T in (h, -h))
    assert case.value(G) > 0.5
    # T_j is settled to 1e-6 K, 5e-5 of the way; the curvature over 0.04 K is as small.
    assert (up - down) / (2.0 * h) == pytest.approx(1.0 / (1.0 - case.value(G)), rel=3e-4)


@pytest.mark.parametrize("none", [None, 0.0])
def test_without_thermal_resistance_there_is_no_loop(none: float | None) -> None:
    cold = replace(FORTY_VOLTS, transistor=real(early_voltage=70.0, thermal_resistance=none))
    assert cold.value(G) == 0.0
    assert not np.signbit(cold.value(G))


def test_ideal_transistor_and_what_is_not_solved_are_nan() -> None:
    assert np.isnan(replace(FORTY_VOLTS, transistor=ideal(100.0)).value(G))
    assert RUNNING_AWAY.reading().point.status[0] == Status.RUNAWAY
    assert np.isnan(RUNNING_AWAY.value(G))


@pytest.mark.parametrize("heat", [None, 280.0])
def test_unsolved_scenario_is_nan_with_and_without_thermal_resistance(heat: float | None) -> None:
    case = replace(FORTY_VOLTS, transistor=real(thermal_resistance=heat))
    reading = case.reading()
    nothing = np.full(1, np.nan)
    lost = replace(
        reading.point,
        base_emitter=nothing,
        base_collector=nothing,
        junction_temperature=nothing,
        status=np.full(1, Status.UNSOLVED, dtype=np.int8),
    )

    with np.errstate(all="ignore"):
        assert np.isnan(value(replace(reading, point=lost), G))


def test_every_scenario_has_its_own_gain_and_a_plain_number_for_a_kind() -> None:
    assert quantity_units(("RC",))[G] is Kind.NUMBER
    colder = replace(FORTY_VOLTS, temperature=263.15)
    assert colder.value(G) != FORTY_VOLTS.value(G)


def test_ripple_moves_the_rail_that_the_gain_is_read_at() -> None:
    # Power is judged at supply + ripple (physics.md section 4), and so is its slope.
    rippled = replace(FORTY_VOLTS, ripple=0.5, signal=Signal())  # that capacitors couple changes nothing
    assert rippled.value(G) == pytest.approx(replace(FORTY_VOLTS, supply=40.5).value(G), rel=1e-12)
