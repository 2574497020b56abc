"""The closed-form stability factors against finite differences of the full solve, on any stage."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from biasband.circuit.reading import read
from biasband.circuit.stability import StabilityFactors, stability_factors
from tests.circuit.stages import Case, cases, ideal, real, together

CLOSE = 1e-6
"""What the brief asks for; steps are chosen below so that truncation and rounding stay under 1e-7."""

NO_STEP = Case(
    topology="divider",
    resistances={"R1": 33e3, "R2": 12e3, "RC": 1.2e3, "RE": 1e3},
    supply=18.0,
    transistor=ideal(100.0),
)


def factors(case: Case) -> StabilityFactors:
    """The factors of one case, as plain numbers."""
    found = stability_factors(case.reading(), leakage=case.leakage)
    return StabilityFactors(*(float(np.ravel(value)[0]) for value in vars(found).values()))


def current(case: Case) -> float:
    """I_C [A] of the full solve."""
    return float(case.reading().point.collector_current[0])


def slope(case: Case, **moved: tuple[float, float]) -> float:
    """A central difference of I_C, one figure of the scenario moved to either side."""
    ((name, (centre, step)),) = moved.items()
    around = np.array([centre - step, centre + step])
    scenarios = replace(together([case, case]), **{name: around})
    low, high = read(case.stage, scenarios).point.collector_current
    return float(high - low) / (2.0 * step)


@st.composite
def ideal_cases(draw: st.DrawFn) -> Case:
    """Any stage with a textbook transistor that is well inside the active region."""
    case = draw(cases(thermal=False))
    gain, V_BE = draw(st.floats(10.0, 900.0)), draw(st.floats(0.5, 0.8))
    case = replace(case, transistor=ideal(gain, V_BE), leakage=0.0)
    point = case.reading().point
    # A volt from saturation and some drive left: the steps below do not leave the region.
    assume(point.collector_emitter[0] > 1.0 and point.base_current[0] > 1e-9)
    return case


@given(case=ideal_cases())
def test_slope_of_current_against_gain_is_the_factor(case: Case) -> None:
    # I_C is βU/(z11 + β·z12): a relative step s is off by s² = 1e-8 at most.
    beta = case.gain
    assert factors(case).beta == pytest.approx(beta, rel=1e-12)
    assert slope(case, gain=(beta, 1e-4 * beta)) == pytest.approx(factors(case).gain, rel=CLOSE)


@given(case=ideal_cases())
def test_slope_of_current_against_base_emitter_voltage_is_the_factor(case: Case) -> None:
    # I_C is linear in V_BE; the step is small where little drive is left.
    V_BE, drive = case.base_emitter_voltage, current(case) / -factors(case).base_emitter
    found = slope(case, base_emitter_voltage=(V_BE, min(1e-3, 0.1 * drive)))
    assert found == pytest.approx(factors(case).base_emitter, rel=CLOSE)


def cold(case: Case) -> Case:
    """The case with a real junction so cold that V_BE is constant: 86 nV of V_T beside volts of drive.

    No temperature law is left in it: gain and V_BE do not drift, leakage doubles in 1e12 K.
    """
    transistor = real(
        case.gain, case.base_emitter_voltage, base_emitter_drift=0.0, gain_drift=0.0, leakage_doubling=1e12
    )
    return replace(case, transistor=transistor, temperature=1e-3)


@settings(max_examples=40)
@given(case=ideal_cases(), leakage=st.sampled_from([0.0, 1e-7]))
def test_slope_of_current_against_leakage_is_the_factor(case: Case, leakage: float) -> None:
    case = replace(cold(case), leakage=leakage)
    point = case.reading().point
    assume(np.isfinite(point.collector_current[0]) and point.collector_emitter[0] > 0.5)
    expected = factors(case)
    # I_C is linear in I_CO: the step takes 1 % of the room to saturation and of the base's drive, so that
    # the 1e-9 V that points are solved to is small beside what it moves.
    step = 0.01 * min(point.base_current[0], point.collector_current[0] / expected.leakage)
    ports_move = step * expected.leakage * sum(case.resistances.values())
    assume(ports_move > 1e-2)  # 1e-9 V beside it is 1e-7
    found = slope(case, leakage=(leakage + step, step))
    # However cold, V_T is there: 86 nV beside the volts that drive the base.
    drive = point.collector_current[0] / -expected.base_emitter
    slack = (1e-5 if ports_move < 0.1 else CLOSE) + 86e-9 / drive
    assert found == pytest.approx(expected.leakage, rel=slack)


def test_factors_with_leakage_flowing_are_those_of_the_equation() -> None:
    """By hand for the divider: R_B 8.8 k, R_E 1 k, V_oc 4.8 V, β 100, I_CO 1 µA.

    D = 9.8 k + 100 k; I_C = (100·4.1 + 101·9.8e3·1e-6)/109.8e3; S(β) is its derivative by β.
    """
    case = replace(cold(NO_STEP), leakage=1e-6)
    D, over, own = 109.8e3, 4.8 - 0.7, 9.8e3 * 1e-6
    I_C = (100.0 * over + 101.0 * own) / D
    assert current(case) == pytest.approx(I_C, rel=1e-6)  # 86 nV beside volts
    found = factors(case)
    assert found.beta == pytest.approx(100.0, rel=1e-6)
    assert found.leakage == pytest.approx(101.0 * 9.8e3 / D, rel=1e-6)
    assert found.base_emitter == pytest.approx(-100.0 / D, rel=1e-6)
    assert found.gain == pytest.approx((over + own - I_C * 1e3) / D, rel=1e-6)


@given(ratio=st.floats(0.1, 100.0), beta=st.floats(10.0, 900.0))
def test_divider_has_the_textbook_form(ratio: float, beta: float) -> None:
    # S(I_CO) = (β+1)·(1 + R_B/R_E)/(β + 1 + R_B/R_E); Boylestad & Nashelsky, "Bias stabilization" (memory).
    R_E = 1e3
    resistances = {"R1": 2 * ratio * R_E, "R2": 2 * ratio * R_E, "RC": 10.0, "RE": R_E}
    case = replace(NO_STEP, resistances=resistances, transistor=ideal(beta))
    expected = (beta + 1.0) * (1.0 + ratio) / (beta + 1.0 + ratio)
    assert factors(case).leakage == pytest.approx(expected, rel=1e-12)


@given(case=ideal_cases(), scale=st.floats(0.1, 10.0))
def test_scaling_all_resistors_scales_the_factors(case: Case, scale: float) -> None:
    scaled = {name: scale * ohms for name, ohms in case.resistances.items()}
    one, other = factors(case), factors(replace(case, resistances=scaled))
    assert other.leakage == pytest.approx(one.leakage, rel=1e-9)  # a ratio of resistances
    assert other.base_emitter * scale == pytest.approx(one.base_emitter, rel=1e-9)
    assert other.gain * scale == pytest.approx(one.gain, rel=1e-9)
