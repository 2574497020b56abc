"""The junction laws of physics.md section 2."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from biasband.circuit.flow import flow, flow_drift
from biasband.circuit.junction import Laws, Sheet, base_emitter_voltage, laws, sheet
from biasband.circuit.scenarios import Values
from biasband.stage import Transistor
from circuit.stages import Case, real, transistors
from circuit.twin import junctions as twin_junctions

ROOM = 298.15
temperatures = st.floats(233.15, 423.15)


def sheet_of(transistor: Transistor, leakage: float = 0.0) -> Sheet:
    """The data sheet, every figure at its nominal value."""
    return sheet(
        transistor,
        gain=transistor.gain.nominal,
        base_emitter_voltage=transistor.base_emitter_voltage.nominal,
        leakage=leakage,
    )


def law_of(transistor: Transistor, temperature: Values, leakage: float = 0.0) -> Laws:
    """The laws at a junction temperature, every figure at its nominal value."""
    return laws(sheet_of(transistor, leakage), temperature)


def imaginary(value: Values) -> float:
    """The imaginary part of what a complex step returns."""
    return float(np.imag(np.asarray(value)))


@settings(deadline=None)
@given(transistors())
def test_test_point_is_met_with_the_early_effect_too(transistor: Transistor) -> None:
    vbe = transistor.base_emitter_voltage.nominal
    assert transistor.test_voltage is not None
    at = flow(law_of(transistor, ROOM), vbe, vbe - transistor.test_voltage)
    # What the formula leaves out is I_S (e^{-vbe/V_T}, at most 4e-9 for 0.5 V), and the reverse junction's.
    assert at.collector == pytest.approx(transistor.test_current, rel=1e-7)
    # The reverse junction's I_S/β_R beside I_test/β: 5e3 times that, for β 1000 and β_R 0.2.
    assert at.collector / at.base == pytest.approx(transistor.gain.nominal, rel=3e-5)


@settings(deadline=None)
@given(transistors(), temperatures, st.floats(0.3, 0.75), st.floats(-20.0, -1.0))
def test_active_region_reduces_to_gain_times_base_current_and_leakage(
    transistor: Transistor, temperature: float, V_BE: float, V_BC: float
) -> None:
    plain = replace(transistor, early_voltage=None)
    law = law_of(plain, temperature, leakage=50e-9)
    at = flow(law, V_BE, V_BC)
    beta = law.forward_gain
    # I_S, which the reduction leaves out, comes with β and 1/β_R (at least 0.2): β·6·I_S at most.
    missing = 6.0 * (1.0 + beta) * law.saturation_current
    assert at.collector == pytest.approx(
        beta * at.base + (beta + 1.0) * law.leakage, rel=1e-9, abs=float(missing)
    )


@settings(deadline=None)
@given(transistors(), temperatures, st.floats(0.2, 0.75), st.floats(-10.0, 0.7))
def test_currents_are_those_of_the_scalar_twin(
    transistor: Transistor, temperature: float, V_BE: float, V_BC: float
) -> None:
    case = Case(topology="divider", resistances={}, supply=9.0, transistor=transistor, leakage=30e-9)
    I_B, I_C = twin_junctions(case, temperature).currents(V_BE, V_BC)
    at = flow(law_of(transistor, temperature, leakage=30e-9), V_BE, V_BC)
    # Rounding: a few units of 1e-16 in an exponent of up to 40, and two large currents that may cancel.
    scale = float(at.forward) + float(at.reverse) + 30e-9
    assert at.base == pytest.approx(I_B, rel=1e-10, abs=1e-11 * scale)
    assert at.collector == pytest.approx(I_C, rel=1e-10, abs=1e-11 * scale)


@settings(deadline=None)
@given(transistors(), temperatures, st.floats(0.3, 0.75), st.floats(-10.0, 0.7))
def test_slopes_of_the_currents_are_complex_step_derivatives(
    transistor: Transistor, temperature: float, V_BE: float, V_BC: float
) -> None:
    law, h = law_of(transistor, temperature, leakage=30e-9), 1e-30
    at = flow(law, V_BE, V_BC)
    by_be, by_bc = flow(law, V_BE + 1j * h, V_BC), flow(law, V_BE, V_BC + 1j * h)  # type: ignore[arg-type]
    # A complex step has no subtraction: rounding alone, of terms as large as both junctions' conductances.
    scale = float(1e-12 * (at.forward + at.reverse) / law.thermal_voltage)
    for slope, moved in (
        (at.base_be, by_be.base),
        (at.base_bc, by_bc.base),
        (at.collector_be, by_be.collector),
        (at.collector_bc, by_bc.collector),
    ):
        assert slope == pytest.approx(imaginary(moved) / h, rel=1e-10, abs=scale)


@settings(deadline=None)
@given(transistors(), temperatures, st.floats(0.3, 0.75), st.floats(-10.0, 0.7))
def test_drift_of_the_currents_is_the_complex_step_derivative(
    transistor: Transistor, temperature: float, V_BE: float, V_BC: float
) -> None:
    law, h = law_of(transistor, temperature, leakage=30e-9), 1e-30
    at = flow(law, V_BE, V_BC)
    drift = flow_drift(sheet_of(transistor, leakage=30e-9), at)
    moved = flow(law_of(transistor, temperature + 1j * h, leakage=30e-9), V_BE, V_BC)  # type: ignore[arg-type]
    # Rounding alone, of terms that move by up to some 20 % per kelvin.
    scale = float(1e-12 * (at.forward + at.reverse))
    assert drift.base == pytest.approx(imaginary(moved.base) / h, rel=1e-10, abs=scale)
    assert drift.collector == pytest.approx(imaginary(moved.collector) / h, rel=1e-10, abs=scale)


def test_linear_drift_is_minus_two_millivolts_per_kelvin_unless_given() -> None:
    # Common practice, physics.md section 2: 0.64 V − 2 mV/K · 40 K.
    assert base_emitter_voltage(real(), 0.64, 338.15) == pytest.approx(0.56, abs=1e-12)  # rounding


def test_band_gap_drift_at_600_millivolts_and_300_kelvin_is_published_slope() -> None:
    # physics.md section 2: slope at 0.60 V, 300 K: −1.96 mV/K (rounded to 0.01 mV/K).
    transistor, h = real(base_emitter_drift=None), 0.05
    # The V_BE at 25 °C for which the law passes through 0.60 V at 300 K, by bisection of the law itself.
    low, high = 0.5, 0.7
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (
            (middle, high) if base_emitter_voltage(transistor, middle, 300.0) < 0.60 else (low, middle)
        )
    slope = (
        base_emitter_voltage(transistor, low, 300.0 + h) - base_emitter_voltage(transistor, low, 300.0 - h)
    ) / (2.0 * h)
    assert slope == pytest.approx(-1.96e-3, abs=0.005e-3)
    # By hand from the law: (0.60 − 1.11)/300 − 3·k/q = −1.7000 − 0.2585 mV/K.
    assert slope == pytest.approx(-1.9585e-3, abs=0.0001e-3)


def test_both_drifts_leave_the_test_point_at_25_degrees() -> None:
    for drift in (-2e-3, None):
        assert base_emitter_voltage(real(base_emitter_drift=drift), 0.64, ROOM) == pytest.approx(
            0.64, abs=1e-15
        )


def test_gain_and_leakage_follow_their_temperature_laws() -> None:
    # physics.md section 2: slope of h_FE at 25 °C 0.5 %/K, leakage doubles every 10 K.
    h = 0.01
    warm, cold = law_of(real(), ROOM + h), law_of(real(), ROOM - h)
    assert (warm.forward_gain - cold.forward_gain) / (2.0 * h) == pytest.approx(
        260.0 * 5e-3, rel=1e-6
    )  # h² term
    assert law_of(real(), ROOM).forward_gain == pytest.approx(260.0, rel=1e-14)  # rounding
    assert law_of(real(), ROOM + 10.0, leakage=40e-9).leakage == pytest.approx(80e-9, rel=1e-12)  # rounding
    assert law_of(real(), ROOM - 20.0, leakage=40e-9).leakage == pytest.approx(10e-9, rel=1e-12)
