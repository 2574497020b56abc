"""The vocabulary of quantities: power balance, signs, ripple, swings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from biasband.circuit.quantities import quantity_units, vocabulary
from biasband.circuit.reading import read
from biasband.circuit.solution import Status
from biasband.quantity import Kind
from biasband.stage import Signal
from circuit.stages import Case, cases, ideal, real, together, value

DIVIDER = Case(
    topology="divider",
    resistances={"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3},
    supply=9.0,
    transistor=real(early_voltage=70.0),
)
COUPLED = replace(DIVIDER, signal=Signal(load=47e3, source_resistance=600.0, bypassed=True))
FOLLOWER = replace(DIVIDER, topology="follower", resistances={"R1": 47e3, "R2": 56e3, "RE": 3.9e3})


def delivered(case: Case) -> float:
    """What the supplies deliver [W]; the negative one takes what no other rail does (Kirchhoff)."""
    reading = case.reading()
    power = (case.supply + case.ripple) * value(reading, "supply_current")
    if case.topology == "split-supply":
        # The negative rail takes the emitter current of an NPN, the collector current of a PNP.
        taker = "emitter_current" if case.polarity == "npn" else "collector_current"
        power -= case.negative_supply * value(reading, taker)
    return power


@settings(max_examples=150, deadline=None)
@given(cases(), st.booleans())
def test_supplies_deliver_what_transistor_and_resistors_turn_into_heat(case: Case, textbook: bool) -> None:
    if textbook:
        case = replace(case, transistor=ideal(case.gain))
    reading = case.reading()
    assume(reading.point.status[0] == Status.SOLVED)
    heat = value(reading, "transistor_power")
    for name in case.resistances:
        heat += value(reading, f"resistor_power.{name}")
    # Tellegen: exact but for residuals of 1e-9 V, at two ends of the smallest resistor a stray current
    # under the rails, and rounding.
    stray = 2e-9 / min(case.resistances.values())
    assert delivered(case) == pytest.approx(
        heat, rel=1e-9, abs=stray * (case.supply - case.negative_supply + 1.0)
    )


@settings(max_examples=60, deadline=None)
@given(cases())
def test_emitter_current_is_base_and_collector_current(case: Case) -> None:
    reading = case.reading()
    assume(reading.point.status[0] == Status.SOLVED)
    total = value(reading, "base_current") + value(reading, "collector_current")
    assert value(reading, "emitter_current") == pytest.approx(total, rel=1e-12)  # rounding


def test_vocabulary_holds_the_published_names_and_one_power_per_resistor() -> None:
    # formats.md, "Quantities".
    names = [
        "collector_voltage",
        "base_voltage",
        "emitter_voltage",
        "collector_emitter_voltage",
        "collector_current",
        "base_current",
        "emitter_current",
        "supply_current",
        "transistor_power",
        "junction_temperature",
        "thermal_loop_gain",
        "headroom_up",
        "headroom_down",
        "symmetric_peak_swing",
        "voltage_gain",
        "input_resistance",
        "output_resistance",
        "supply_feedthrough",
        "output_ripple",
    ]
    rows = vocabulary(("RC", "RE"))
    assert set(names) <= set(rows)
    assert {"resistor_power.RC", "resistor_power.RE"} <= set(rows)
    assert all(name == row.name for name, row in rows.items())
    kinds = quantity_units(("RC", "RE"))
    assert kinds["resistor_power.RC"] is Kind.POWER
    assert kinds["collector_voltage"] is Kind.VOLTAGE
    assert kinds["input_resistance"] is Kind.RESISTANCE


def test_ripple_moves_the_rail_where_no_capacitor_couples() -> None:
    with_ripple = replace(DIVIDER, ripple=0.05)
    higher = replace(DIVIDER, supply=9.05)
    for name in ("collector_voltage", "collector_current", "supply_current", "headroom_up"):
        assert with_ripple.value(name) == pytest.approx(higher.value(name), rel=1e-12)  # the same solve


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("ripple", [0.05, -0.05])
def test_coupled_ripple_widens_the_output_and_takes_from_the_headrooms_of_the_quiet_point(
    polarity: str, ripple: float
) -> None:
    quiet = Case(**{**vars(COUPLED), "polarity": polarity})
    rippled = replace(quiet, ripple=ripple)
    reading = rippled.reading()
    through = max(
        abs(float(np.ravel(side)[0])) for side in (reading.feedthrough_open, reading.feedthrough_short)
    )
    # physics.md section 4: output_ripple is the larger feed-through times the peak, 50 mV here.
    assert value(reading, "output_ripple") == pytest.approx(through * 0.05, rel=1e-12)
    rows = vocabulary(tuple(rippled.resistances))
    for name, lifts in (
        ("collector_voltage", True),
        ("headroom_up", False),
        ("headroom_down", False),
        ("symmetric_peak_swing", False),
    ):
        assert value(reading, name) == pytest.approx(quiet.value(name), rel=1e-12), name
        widens = rows[name].ripple
        assert widens is not None
        assert float(np.ravel(widens(reading))[0]) == pytest.approx(through * 0.05, rel=1e-12), name
        assert rows[name].ripple_lifts is lifts, name
    # Limits on voltage and power still use supply and peak.
    plain = replace(rippled, signal=None)
    for name in ("collector_emitter_voltage", "transistor_power", "resistor_power.R1"):
        assert value(reading, name) == pytest.approx(plain.value(name), rel=1e-12), name


def test_headrooms_are_the_formulas_of_physics_section_6() -> None:
    # The formulas written out here with the operating point's numbers; saturation at the assumed 0.2 V.
    case = replace(COUPLED, resistances={"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE1": 120.0, "RE2": 820.0})
    r_ac = 1.0 / (1.0 / 3.3e3 + 1.0 / 47e3)
    cut_off = case.value("collector_current") * r_ac
    saturation = (case.value("collector_emitter_voltage") - 0.2) * r_ac / (r_ac + 120.0)
    assert case.value("headroom_up") == pytest.approx(cut_off, rel=1e-12)
    assert case.value("headroom_down") == pytest.approx(saturation, rel=1e-12)
    assert case.value("symmetric_peak_swing") == pytest.approx(min(cut_off, saturation), rel=1e-12)
    mirrored = replace(case, polarity="pnp")  # a PNP collector goes up into saturation
    assert mirrored.value("headroom_up") == pytest.approx(saturation, rel=1e-9)  # two solves, 1e-9 V
    assert mirrored.value("headroom_down") == pytest.approx(cut_off, rel=1e-9)


def test_unbypassed_headroom_takes_the_whole_emitter_resistor() -> None:
    r_ac = 3.3e3
    saturation = (DIVIDER.value("collector_emitter_voltage") - 0.2) * r_ac / (r_ac + 1e3)
    assert DIVIDER.value("headroom_down") == pytest.approx(saturation, rel=1e-12)


def test_collector_feedback_headroom_counts_the_share_of_rb() -> None:
    case = replace(DIVIDER, topology="collector-feedback", resistances={"RB": 100e3, "RC": 3.3e3})
    r_ac = 1.0 / (1.0 / 3.3e3 + 1.0 / 100e3)
    case_current = replace(case, supply=5.0)
    assert case_current.value("headroom_up") == pytest.approx(
        case_current.value("collector_current") * r_ac, rel=1e-12
    )


def test_follower_headrooms_are_towards_the_collectors_rail_and_the_emitter_resistors() -> None:
    case = replace(FOLLOWER, signal=Signal(load=4.7e3, source_resistance=600.0))
    up = case.value("collector_emitter_voltage") - 0.2
    down = case.value("emitter_current") / (1.0 / 3.9e3 + 1.0 / 4.7e3)
    assert case.value("headroom_up") == pytest.approx(up, rel=1e-12)
    assert case.value("headroom_down") == pytest.approx(down, rel=1e-12)
    mirrored = replace(case, polarity="pnp")
    assert mirrored.value("headroom_down") == pytest.approx(up, rel=1e-9)
    assert mirrored.value("headroom_up") == pytest.approx(down, rel=1e-9)


def test_cut_off_headroom_is_never_above_what_the_supply_leaves() -> None:
    # With an ideal collector r_ac·I_C is exactly the drop over RC; through RB's base current it is less.
    for case in (
        DIVIDER,
        replace(DIVIDER, topology="collector-feedback", resistances={"RB": 470e3, "RC": 3.3e3}),
    ):
        assert case.value("headroom_up") <= case.supply - case.value("collector_voltage") + 1e-9


def test_numbers_and_arrays_read_alike() -> None:
    scenarios = replace(DIVIDER.scenarios, supply=9.0, ripple=0.0, leakage=0.0)
    reading = read(DIVIDER.stage, scenarios)
    assert value(reading, "supply_current") == pytest.approx(DIVIDER.value("supply_current"), rel=1e-15)


@pytest.mark.parametrize("case", [DIVIDER, COUPLED, FOLLOWER, replace(COUPLED, polarity="pnp", ripple=0.05)])
def test_neighbours_change_no_byte_of_any_quantity(case: Case) -> None:
    # A neighbour may be saturated, cut off or beyond solving: nothing is decided for all scenarios at once.
    warm = replace(case, transistor=real(early_voltage=70.0, thermal_resistance=280.0))
    name = next(iter(case.resistances))
    boards = [
        replace(warm, resistances={**case.resistances, name: ohms}, supply=volts)
        for ohms in (1.0, 20e3, 47e3, 68e3, 100e3, 10e6)
        for volts in (0.2, 9.0, 40.0)
    ]
    together_read = read(warm.stage, together(boards))
    for row, quantity in vocabulary(tuple(case.resistances)).items():
        whole = np.broadcast_to(np.asarray(quantity.read(together_read)), len(boards))
        for number in range(0, len(boards), 4):
            alone = np.ravel(quantity.read(read(warm.stage, together(boards[number : number + 1]))))[0]
            assert np.array_equal(alone, whole[number], equal_nan=True), (row, number)
