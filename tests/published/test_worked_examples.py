"""Worked examples of one-transistor bias, each with its source.

Every row stands in the project's check values. *Published* is what the book prints, with a tolerance
that its rounding and its approximations (I_E = I_C, β for β + 1) deserve; *exact* is the active-region
model worked out there by an independent program and printed to four or five figures. V_BE is 0.7 V
unless given; the transistor is the ideal one.
"""

from __future__ import annotations

from dataclasses import dataclass

import pytest
from circuit.stages import Case, ideal

from biasband.circuit.solution import Status

BOYLESTAD = "Boylestad & Nashelsky, Electronic Devices and Circuit Theory"
BELL = "Bell, Electronic Devices and Circuits"
MALVINO = "Malvino, Electronic Principles"
NEAMEN = "Neamen, Electronic Circuit Analysis and Design"

ROUNDED = 0.006
"""A book's last figure, of the three that it prints, is good to half a unit: 0.5 % at the worst."""

BETA_PLUS_ONE = 0.02
"""Books that write β for β + 1, or I_E for I_C, are 1–2 % off (check values, introduction)."""

WORST_CASE_MALVINO = 0.02
"""'about 1.1 mA': base current left out and two figures."""


@dataclass(frozen=True)
class Example:
    """A stage, what the book prints about it and the exact figures, by quantity."""

    source: str
    case: Case
    published: dict[str, float]
    exact: dict[str, float]
    tolerance: float
    reason: str


def base_resistor(supply: float, gain: float, V_BE: float = 0.7, **ohms: float) -> Case:
    """A base-resistor stage."""
    return Case(topology="base-resistor", resistances=ohms, supply=supply, transistor=ideal(gain, V_BE))


def feedback(supply: float, gain: float, **ohms: float) -> Case:
    """A collector-feedback stage."""
    return Case(topology="collector-feedback", resistances=ohms, supply=supply, transistor=ideal(gain))


def divider(supply: float, gain: float, R1: float, R2: float, RC: float, RE: float) -> Case:
    """A divider stage."""
    ohms = {"R1": R1, "R2": R2, "RC": RC, "RE": RE}
    return Case(topology="divider", resistances=ohms, supply=supply, transistor=ideal(gain))


I_B, I_C, V_CE, V_C = "base_current", "collector_current", "collector_emitter_voltage", "collector_voltage"
BELL_BASE = {"RB": 470e3, "RC": 2.2e3}
BELL_FEEDBACK = {"RB": 270e3, "RC": 2.2e3}

EXAMPLES = [
    Example(
        f"{BOYLESTAD}, ex. 4.1",
        base_resistor(12.0, 50.0, RB=240e3, RC=2.2e3),
        {I_B: 47.08e-6, I_C: 2.35e-3, V_CE: 6.83},
        {I_B: 47.083e-6, I_C: 2.3542e-3, V_CE: 6.8208},
        ROUNDED,
        "the voltage follows from the rounded current",
    ),
    Example(
        f"{BOYLESTAD}, ex. 4.4 (memory)",
        base_resistor(20.0, 50.0, RB=430e3, RC=2e3, RE=1e3),
        {I_B: 40.1e-6, I_C: 2.01e-3, V_CE: 13.97},
        {I_C: 2.0062e-3, V_CE: 13.941},
        ROUNDED,
        "the voltage follows from the rounded current, I_E = I_C",
    ),
    Example(
        f"{BOYLESTAD}, ex. 4.5 (memory)",
        base_resistor(20.0, 100.0, RB=430e3, RC=2e3, RE=1e3),
        {I_B: 36.3e-6, I_C: 3.63e-3, V_CE: 9.11},
        {I_C: 3.6347e-3, V_CE: 9.060},
        ROUNDED,
        "I_E = I_C in the voltage",
    ),
    Example(
        f"{BOYLESTAD}, ex. 4.8 (memory)",
        divider(22.0, 100.0, 39e3, 3.9e3, 10e3, 1.5e3),
        {I_B: 8.38e-6, I_C: 0.84e-3, V_CE: 12.34},
        {I_B: 8.3846e-6, I_C: 0.83846e-3, V_CE: 12.345},
        ROUNDED,
        "two figures of current",
    ),
    Example(
        f"{BOYLESTAD}, ex. 4.12 (memory)",
        feedback(10.0, 90.0, RB=250e3, RC=4.7e3, RE=1.2e3),
        {I_C: 1.07e-3, V_CE: 3.69},
        {I_C: 1.0637e-3, V_CE: 3.655},
        BETA_PLUS_ONE,
        "β for β + 1",
    ),
    Example(
        f"{BOYLESTAD}, ex. 4.13 (memory)",
        feedback(10.0, 135.0, RB=250e3, RC=4.7e3, RE=1.2e3),
        {I_C: 1.2e-3, V_CE: 2.92},
        {I_C: 1.1930e-3, V_CE: 2.909},
        BETA_PLUS_ONE,
        "β for β + 1",
    ),
    *(
        Example(
            f"{BELL}, ex. 5-3 and 5-4, h_FE {gain:g}",
            base_resistor(18.0, gain, **BELL_BASE),
            {V_CE: published},
            {V_CE: exact},
            0.06 / published,
            "one decimal of voltage, from a current of three figures",
        )
        for gain, published, exact in [(50.0, 13.9, 13.951), (100.0, 9.9, 9.902), (200.0, 1.8, 1.804)]
    ),
    *(
        Example(
            f"{BELL}, ex. 5-5 and 5-6, h_FE {gain:g}",
            feedback(18.0, gain, **BELL_FEEDBACK),
            {V_CE: published},
            {V_CE: exact},
            0.06 / published,
            "one decimal of voltage, from a current of three figures",
        )
        for gain, published, exact in [(50.0, 12.9, 12.921), (100.0, 10.2, 10.190), (200.0, 7.3, 7.259)]
    ),
    *(
        Example(
            f"{BELL}, ex. 5-8 to 5-10, h_FE {gain:g}",
            divider(18.0, gain, 33e3, 12e3, 1.2e3, 1e3),
            {V_CE: published},
            {V_CE: exact},
            0.06 / published,
            "one decimal of voltage, from a current of three figures",
        )
        for gain, published, exact in [(50.0, 10.4, 10.390), (100.0, 9.7, 9.748), (200.0, 9.4, 9.382)]
    ),
    Example(
        f"{MALVINO}, ex. 8-1 and 8-3",
        divider(10.0, 200.0, 10e3, 2.2e3, 3.6e3, 1e3),
        {I_C: 1.1e-3, V_CE: 4.92},
        {I_C: 1.0880e-3, V_CE: 4.990},
        WORST_CASE_MALVINO,
        "base current left out; 'about'",
    ),
    Example(
        f"{MALVINO}, ex. 8-6, β → ∞",
        Case(
            topology="split-supply",
            resistances={"RB": 1.0, "RC": 10e3, "RE": 20e3},
            supply=15.0,
            negative_supply=-15.0,
            transistor=ideal(1e9),
        ),
        {I_C: 0.715e-3, V_C: 7.85},
        {I_C: 0.715e-3, V_C: 7.85},
        1e-6,
        "exact in the book: 14.3 V over 20 kΩ",
    ),
    *(
        Example(
            f"{NEAMEN}, ex. 3.14, β {gain:g}",
            divider(10.0, gain, 56e3, 12.2e3, 2e3, 0.4e3),
            published,
            {I_C: current, V_CE: volts},
            ROUNDED,
            "three figures",
        )
        for gain, published, current, volts in [
            (50.0, {}, 1.7898e-3, 5.690),
            (100.0, {I_C: 2.16e-3, V_CE: 4.81}, 2.1597e-3, 4.808),
            (150.0, {}, 2.3194e-3, 4.427),
        ]
    ),
]

PRINTED_CURRENT = 5e-5
"""The exact currents stand with four or five figures: half a unit of the fourth or fifth, at 1.06 mA."""

PRINTED_VOLTAGE = 0.00055
"""[V] The exact voltages stand with three decimals: half a unit, and rounding."""


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: example.source)
def test_published_answer_is_met_within_its_rounding(example: Example) -> None:
    for quantity, printed in example.published.items():
        assert example.case.value(quantity) == pytest.approx(printed, rel=example.tolerance), example.reason


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: example.source)
def test_exact_active_region_figure_is_met_to_its_last_digit(example: Example) -> None:
    assert example.case.reading().point.status[0] == Status.SOLVED
    for quantity, figure in example.exact.items():
        margin = PRINTED_CURRENT * figure if "current" in quantity else PRINTED_VOLTAGE
        assert example.case.value(quantity) == pytest.approx(figure, abs=margin), quantity


def test_base_emitter_sensitivity_of_a_base_resistor_stage() -> None:
    """Boylestad & Nashelsky, ex. 4.36: S(V_BE) = −β/R_B = −0.417e-3 S; 0.65 → 0.48 V moves I_C by 70.9 µA."""
    # The supply and RC leave the sensitivity alone as long as the transistor is active: 20 V and 2 kΩ here.
    warm, cold = (base_resistor(20.0, 100.0, V_BE, RB=240e3, RC=2e3).value(I_C) for V_BE in (0.48, 0.65))
    slope = (warm - cold) / (0.48 - 0.65)
    assert slope == pytest.approx(-0.417e-3, abs=0.0005e-3)  # printed to three figures
    assert slope == pytest.approx(-0.41667e-3, abs=0.000005e-3)  # exact: five figures
    assert warm - cold == pytest.approx(70.9e-6, abs=0.15e-6)  # from the rounded slope: 0.417e-3 · 0.17
    assert warm - cold == pytest.approx(70.8e-6, abs=0.05e-6)  # exact: three figures


def test_current_and_voltage_changes_of_a_base_resistor_stage() -> None:
    """Floyd, Electronic Devices, ex. 5-6: β 85 and 0.7 V → 100 and 0.6 V: ΔI_C +18.7 %, ΔV_CE −15.2 %."""
    before = base_resistor(12.0, 85.0, 0.7, RB=100e3, RC=560.0)
    after = base_resistor(12.0, 100.0, 0.6, RB=100e3, RC=560.0)
    current = 100.0 * (after.value(I_C) / before.value(I_C) - 1.0)
    voltage = 100.0 * (after.value(V_CE) / before.value(V_CE) - 1.0)
    assert current == pytest.approx(18.7, abs=0.05)  # published: one decimal
    assert voltage == pytest.approx(-15.2, abs=0.05)
    assert current == pytest.approx(18.69, abs=0.005)  # exact: two decimals
    assert voltage == pytest.approx(-15.18, abs=0.005)


@pytest.mark.parametrize(("gain", "milliamperes"), [(36.0, 1.75), (90.0, 2.25)])
def test_design_from_limits_holds_its_limits(gain: float, milliamperes: float) -> None:
    """Millman & Halkias, Integrated Electronics, ex. 9-2: I_C 1.75…2.25 mA over β 36…90, V_BE 0.65 V."""
    ohms = {"R1": 118e3, "R2": 24.3e3, "RC": 4e3, "RE": 1e3}
    case = Case(topology="divider", resistances=ohms, supply=20.0, transistor=ideal(gain, 0.65))
    # "about 118 k", "about 24.3 k": three figures each, in a difference of voltages; 1 %.
    assert case.value(I_C) == pytest.approx(milliamperes * 1e-3, rel=0.01)
