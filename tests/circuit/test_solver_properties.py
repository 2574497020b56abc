"""Properties of the operating-point solver that hold for any stage (house.md, "Tests")."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from biasband.circuit import operating_point
from biasband.circuit.network import condense, rails
from biasband.circuit.operating_point import OperatingPoint, Region, solve
from biasband.circuit.solution import Problem, Status, isothermal, patient
from biasband.circuit.topology import TOPOLOGIES, wire
from biasband.stage import Transistor
from circuit.stages import TOPOLOGY_RESISTORS, Case, cases, ideal, real, together
from circuit.twin import junctions, network

FIELDS = (
    "base_emitter",
    "base_collector",
    "base_current",
    "collector_current",
    "junction_temperature",
)

DIVIDER = Case(
    topology="divider",
    resistances={"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3},
    supply=9.0,
    leakage=40e-9,
    transistor=real(early_voltage=70.0, thermal_resistance=280.0),
)


def spread(count: int, seed: int = 1, **fields: Any) -> list[Case]:
    """Boards of one divider: mild, saturated and cut off ones, cold and hot."""
    rng = np.random.default_rng(seed)
    boards = []
    for _ in range(count):
        ohms = {name: value * float(rng.uniform(0.8, 1.25)) for name, value in DIVIDER.resistances.items()}
        ohms["RC"] *= float(rng.choice([1.0, 1.0, 4.0]))
        part = real(
            float(rng.uniform(60.0, 500.0)),
            float(rng.uniform(0.57, 0.72)),
            early_voltage=70.0,
            thermal_resistance=280.0,
        )
        boards.append(
            replace(
                DIVIDER,
                resistances=ohms,
                supply=float(rng.choice([9.0, 9.9, 1.5])),
                temperature=float(rng.uniform(243.15, 373.15)),
                leakage=float(rng.uniform(0.0, 1e-7)),
                transistor=part,
                **fields,
            )
        )
    return boards


def solved(boards: list[Case]) -> OperatingPoint:
    """The operating points of boards of one stage."""
    first = boards[0]
    return solve(first.wiring, first.transistor, first.polarity, together(boards))


def assert_alike(one: OperatingPoint, other: OperatingPoint) -> None:
    """Every field is the same to the byte: neighbours in a chunk change nothing."""
    for name in (*FIELDS, "status"):
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name), err_msg=name)


@settings(max_examples=200, deadline=None)
@given(cases())
def test_kirchhoffs_current_law_holds_at_every_node_of_the_raw_network(case: Case) -> None:
    point = case.reading().point
    assume(point.status[0] != Status.RUNAWAY)
    assert point.status[0] == Status.SOLVED
    sign, wired = (1.0 if case.polarity == "npn" else -1.0), network(case)
    # Node voltages from the reported junction voltages, currents from the twin's laws at those.
    volts = {
        **wired.rails,
        "base": case.value("base_voltage"),
        "collector": case.value("collector_voltage"),
        "emitter": case.value("emitter_voltage"),
    }
    law = junctions(case, float(point.junction_temperature[0]))
    I_B, I_C = law.currents(float(point.base_emitter[0]), float(point.base_collector[0]))
    drawn = {"base": sign * I_B, "collector": sign * I_C, "emitter": -sign * (I_B + I_C)}
    for node in wired.free:
        leaving, conductance = drawn[node], 0.0
        for ohms, a, b in wired.branches:
            if node in (a, b):
                other = wired.place(b if node == a else a)
                leaving += (volts[node] - volts[other]) / ohms
                conductance += 1.0 / ohms
        # In volts at the node: two residuals of at most 1e-9 V, and rounding of currents of cancelling
        # junctions (1e-14 of a current that a saturated stage can multiply ten thousandfold).
        assert abs(leaving) / conductance < 5e-9, node


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_all_at_once_is_one_by_one(polarity: str) -> None:
    boards = spread(60, polarity=polarity)
    at_once, rows = solved(boards), [solved([board]) for board in boards]
    assert set(np.unique(at_once.status)) == {Status.SOLVED}
    columns = {name: np.concatenate([getattr(row, name) for row in rows]) for name in (*FIELDS, "status")}
    assert_alike(at_once, OperatingPoint(**columns))


def test_order_does_not_matter() -> None:
    boards = spread(80)
    order = np.random.default_rng(3).permutation(len(boards))
    forwards, shuffled = solved(boards), solved([boards[row] for row in order])
    for name in FIELDS:
        np.testing.assert_allclose(
            getattr(shuffled, name), getattr(forwards, name)[order], rtol=1e-12, atol=0.0
        )


@pytest.mark.parametrize("size", [1, 7, 64, 1000])
def test_chunk_size_does_not_matter(size: int, monkeypatch: pytest.MonkeyPatch) -> None:
    boards = spread(80)
    whole = solved(boards)
    monkeypatch.setattr(operating_point, "CHUNK", size)
    assert_alike(solved(boards), whole)


@settings(max_examples=80, deadline=None)
@given(cases(), st.floats(0.01, 100.0))
def test_scaling_every_impedance_leaves_the_voltages(case: Case, factor: float) -> None:
    assert isinstance(case.transistor, Transistor)
    heat = case.transistor.thermal_resistance
    scaled = replace(
        case,
        resistances={name: ohms * factor for name, ohms in case.resistances.items()},
        leakage=case.leakage / factor,
        transistor=replace(
            case.transistor,
            test_current=case.transistor.test_current / factor,
            thermal_resistance=None if heat is None else heat * factor,
        ),
    )
    one, other = case.reading().point, scaled.reading().point
    assert one.status[0] == other.status[0]
    assume(one.status[0] == Status.SOLVED)
    for node in ("base", "collector", "emitter"):
        # Two solves, each with residuals of 1e-9 V (tenfold with feedback) and 1e-6 K of some 0.1 V/K.
        assert scaled.value(f"{node}_voltage") == pytest.approx(case.value(f"{node}_voltage"), abs=2e-7)
    assert other.collector_current[0] * factor == pytest.approx(one.collector_current[0], rel=1e-5, abs=1e-12)


@settings(max_examples=80, deadline=None)
@given(cases(), st.booleans())
def test_pnp_mirrors_npn(case: Case, textbook: bool) -> None:
    transistor = ideal(case.gain) if textbook else case.transistor
    # A mirrored split supply has its rails reversed and changed in place.
    split = case.topology == "split-supply"
    npn = replace(case, polarity="npn", transistor=transistor, ripple=0.0)
    pnp = replace(npn, polarity="pnp")
    if split:
        pnp = replace(pnp, supply=-npn.negative_supply, negative_supply=-npn.supply)
    assume(npn.reading().point.status[0] == Status.SOLVED)
    top = 0.0 if split else case.supply
    for node in ("base", "collector", "emitter"):
        mirrored = top - npn.value(f"{node}_voltage")
        # The same arithmetic with a shift of the rails: residuals of 1e-9 V and 1e-6 K of some 0.1 V/K.
        assert pnp.value(f"{node}_voltage") == pytest.approx(mirrored, abs=2e-7), node
    for name in ("collector_current", "base_current", "collector_emitter_voltage"):
        assert pnp.value(name) == pytest.approx(npn.value(name), rel=1e-6, abs=2e-7), name


@pytest.mark.parametrize(
    "fault",
    [
        {"temperature": 0.0},
        {"temperature": np.nan},
        {"supply": np.nan},
        {"leakage": np.inf},
        {"gain": np.nan},
    ],
    ids=str,
)
@pytest.mark.parametrize("heat", [None, 280.0])
def test_unsolved_scenario_is_nan_not_error(fault: dict[str, float], heat: float | None) -> None:
    transistor = replace(DIVIDER.transistor, thermal_resistance=heat)
    scenarios = together([DIVIDER] * 3)
    for name, bad in fault.items():
        column = np.array(getattr(scenarios, name))
        column[1] = bad
        changed: dict[str, Any] = {name: column}
        scenarios = replace(scenarios, **changed)
    point = solve(DIVIDER.wiring, transistor, "npn", scenarios)
    assert point.status.tolist() == [Status.SOLVED, Status.UNSOLVED, Status.SOLVED]
    for name in FIELDS:
        assert np.isfinite(getattr(point, name)).tolist() == [True, False, True], name
    regions = operating_point.regions(point, saturation_voltage=0.2, cut_off_current=1e-6)
    assert regions.tolist() == [Region.ACTIVE, Region.UNSOLVED, Region.ACTIVE]


@pytest.mark.parametrize("fault", [{"gain": np.nan}, {"supply": np.nan}], ids=str)
def test_unsolved_scenario_of_an_ideal_transistor_is_told_too(fault: dict[str, float]) -> None:
    case = replace(DIVIDER, transistor=ideal(100.0))
    scenarios = together([case] * 2)
    for name, bad in fault.items():
        changed: dict[str, Any] = {name: np.array([getattr(case, name), bad])}
        scenarios = replace(scenarios, **changed)
    point = solve(case.wiring, case.transistor, "npn", scenarios)
    assert point.status.tolist() == [Status.SOLVED, Status.UNSOLVED]
    assert np.isnan(point.collector_current[1])


@settings(max_examples=60, deadline=None)
@given(cases(thermal=False))
def test_quick_path_is_the_patient_one(case: Case) -> None:
    assert isinstance(case.transistor, Transistor)
    part = together([case])
    ports = condense(case.wiring, part.resistances).ports(rails(case.polarity, part))
    problem = Problem.of(ports, case.transistor, part)
    with np.errstate(all="ignore"):  # as `solve` does around every chunk
        quick, slow = isothermal(problem, problem.ambient), patient(problem, problem.ambient)
    assert quick.solved[0]
    assert slow.solved[0]
    # Residuals of 1e-9 V each; collector feedback with a gain of 900 makes tenfold of them.
    assert quick.V_BE[0] == pytest.approx(slow.V_BE[0], abs=2e-8)
    assert quick.V_BC[0] == pytest.approx(slow.V_BC[0], abs=2e-8)


@settings(max_examples=100, deadline=None)
@given(cases(), st.floats(0.5, 0.8), st.one_of(st.none(), st.floats(0.05, 0.4)))
def test_saturated_ideal_transistor_is_held_at_its_saturation_voltage(
    case: Case, base_emitter: float, saturation: float | None
) -> None:
    transistor = replace(ideal(case.gain, base_emitter), saturation_voltage=saturation)
    textbook = replace(case, transistor=transistor)
    reading = textbook.reading()
    held = 0.2 if saturation is None else saturation  # physics.md section 8: about 0.2 V, common practice
    V_CE = reading.point.collector_emitter[0]
    assert V_CE > held - 1e-12  # rounding
    if V_CE < held + 1e-9:
        assert reading.regions(-np.inf)[0] == Region.SATURATED
    if V_CE > held + 1e-9 and reading.point.collector_current[0] > 0.0:
        assert reading.point.collector_current[0] == pytest.approx(
            case.gain * reading.point.base_current[0], rel=1e-12
        )


@pytest.mark.parametrize("name", TOPOLOGY_RESISTORS)
def test_missing_compulsory_resistor_is_named(name: str) -> None:
    compulsory = TOPOLOGIES[name].compulsory
    for missing in compulsory:
        rest = tuple(other for other in compulsory if other != missing)
        with pytest.raises(KeyError, match=missing):
            wire(TOPOLOGIES[name], rest)


def test_operating_point_takes_numbers_for_what_all_scenarios_share() -> None:
    scenarios = replace(
        together([DIVIDER] * 4), supply=9.0, ripple=0.0, temperature=298.15, negative_supply=0.0
    )
    point = solve(DIVIDER.wiring, DIVIDER.transistor, "npn", scenarios)
    assert_alike(point, solved([DIVIDER] * 4))
