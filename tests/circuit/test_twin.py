"""The vectorised solver against its slow scalar twin (`twin.py`: scipy's root finders on the raw network)."""

from __future__ import annotations

import pytest
from hypothesis import assume, given, settings

from biasband.circuit.operating_point import Region
from biasband.circuit.reading import CUT_OFF_SHARE
from biasband.circuit.solution import Status
from circuit.stages import Case, cases, real
from circuit.twin import Solver, Twin, warmed

AGREED = 2e-8
"""[V] Residuals stop below 1e-9 V; a stage of gain 900 with collector feedback moves ten times that."""

DIVIDER = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3}
EARLY = real(early_voltage=70.0)


def assert_same(case: Case, twin: Twin, *, volts: float) -> None:
    """The solver's point is the twin's."""
    point = case.reading().point
    assert point.status[0] == Status.SOLVED
    assert point.base_emitter[0] == pytest.approx(twin.v_be, abs=volts)
    assert point.base_collector[0] == pytest.approx(twin.v_bc, abs=volts)
    for node in ("base", "collector", "emitter"):
        assert case.value(f"{node}_voltage") == pytest.approx(twin.volts[node], abs=volts)
    assert point.junction_temperature[0] == pytest.approx(twin.T_j, abs=2e-6)


HARD = {
    "saturated": Case(topology="divider", resistances={**DIVIDER, "RC": 18e3}, supply=9.0, transistor=EARLY),
    "RC of two million ohm": Case(
        topology="divider", resistances={**DIVIDER, "RC": 2e6}, supply=9.0, transistor=EARLY
    ),
    "driven fifty times into saturation": Case(
        topology="base-resistor", resistances={"RB": 3.7e3, "RC": 22e3}, supply=36.0, transistor=EARLY
    ),
    "low supply": Case(topology="divider", resistances=DIVIDER, supply=0.4, transistor=EARLY),
    "cut off at a high supply": Case(
        topology="collector-feedback",
        resistances={"RB": 880e3, "R2": 5.1e3, "RC": 22e3},
        supply=21.0,
        transistor=EARLY,
    ),
    "hot and leaky, no base drive": Case(
        topology="split-supply",
        resistances={"RB": 1e6, "RC": 10e3, "RE": 20e3},
        supply=15.0,
        negative_supply=-0.4,
        temperature=398.15,
        leakage=1e-6,
        transistor=EARLY,
    ),
}


@pytest.mark.parametrize("name", HARD)
@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_hard_scenario_is_solved_as_by_nested_bracketing(name: str, polarity: str) -> None:
    case = Case(**{**vars(HARD[name]), "polarity": polarity})
    assert_same(case, Solver(case).at(case.temperature), volts=AGREED)


@settings(max_examples=200, deadline=None)
@given(cases(thermal=False))
def test_any_scenario_is_solved_as_by_nested_bracketing(case: Case) -> None:
    assert_same(case, Solver(case).at(case.temperature), volts=AGREED)


@settings(max_examples=40, deadline=None)
@given(cases())
def test_any_warm_scenario_is_solved_or_in_runaway_as_by_a_scan_of_temperature(case: Case) -> None:
    assume(case.transistor.thermal_resistance is not None)
    found = warmed(case, step=2.0)
    # Within 0.05 of G = 1, or of a fixed point that a step of the scan could miss, the two may differ.
    assume(abs(found.worst_gain - 1.0) > 0.05)
    assume(found.point is not None or found.nearest > 2.0)
    if found.point is None or found.worst_gain > 1.0:
        assert case.reading().point.status[0] == Status.RUNAWAY
    else:
        # 1e-6 K of junction temperature, times up to 0.1 V/K of a stage with little feedback.
        assert_same(case, found.point, volts=AGREED + 1e-7)


def test_regions_are_told_apart() -> None:
    usual = Case(topology="divider", resistances=DIVIDER, supply=9.0, transistor=EARLY)
    every = {"usual": usual, **HARD}
    regions = {name: case.reading().regions(CUT_OFF_SHARE * 1e-3)[0] for name, case in every.items()}
    assert regions["usual"] == Region.ACTIVE
    assert regions["saturated"] == Region.SATURATED
    assert regions["driven fifty times into saturation"] == Region.SATURATED
    assert regions["low supply"] == Region.CUT_OFF
    assert regions["cut off at a high supply"] == Region.CUT_OFF
