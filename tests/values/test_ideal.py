"""Ideal values: re-solved with the real model the ideal stage stands where the target wants it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from circuit.stages import TOPOLOGY_RESISTORS, value
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st
from variation.stages import real, with_resistor

from biasband.circuit.reading import Reading, read
from biasband.errors import PhysicallyImpossible
from biasband.stage import Limits, Resistor, Signal, Stage, Supply, Target
from biasband.values.device import hand, refined
from biasband.values.ideal import ideal
from biasband.variation.contributors import realise

MET = 1e-3
"""physics.md 7: the ideal stage meets its target to 0.1 %."""


def target_stage(
    topology: str,
    target: Target,
    *,
    names: tuple[str, ...] | None = None,
    supply: float = 9.0,
    negative: float = -9.0,
    fixed: dict[str, float] | None = None,
    **more,
) -> Stage:
    """A stage of the invented transistor with its resistors to be designed but for the fixed ones."""
    parts = TOPOLOGY_RESISTORS[topology][0] if names is None else names
    split = topology == "split-supply"
    figures = {
        "title": "target",
        "topology": topology,
        "polarity": "npn",
        "supply": Supply(voltage=Limits.exactly(supply)),
        "negative_supply": Supply(voltage=Limits.exactly(negative)) if split else None,
        "transistor": real(),
        "resistors": tuple(Resistor(name=name, value=(fixed or {}).get(name)) for name in parts),
        "target": target,
        **more,
    }
    return Stage(**figures)


def ideal_stage(of: Stage) -> Stage:
    """The stage with the ideal values in place of the missing ones."""
    fixed = {r.name: r.value for r in of.resistors if r.value is not None}
    steps = ideal(of, of.target, fixed, refined(of)).steps
    for name, step in steps.items():
        of = with_resistor(of, name, value=step.ohms)
    return of


def solved(of: Stage) -> Reading:
    """The stage solved at nominal."""
    return read(of, realise(of, {}))


def rails(of: Stage) -> tuple[float, float]:
    """The real voltages of the collector's and the emitter's rail."""
    low = of.negative_supply.voltage.nominal if of.negative_supply else 0.0
    ends = (of.supply.voltage.nominal, low)
    return ends if of.polarity == "npn" else ends[::-1]


@st.composite
def targets(draw: st.DrawFn) -> Stage:
    """Any reasonable target in any topology and polarity."""
    topology = draw(st.sampled_from(sorted(TOPOLOGY_RESISTORS)))
    emitter = draw(
        st.sampled_from(
            [
                {},
                {"emitter_voltage": 0.7},
                {"emitter_voltage": 2.0},
                {"supply_over": 9.0},
                {"supply_over": 3.0},
            ]
        )
    )
    supply = draw(st.floats(5.0, 24.0))
    polarity = draw(st.sampled_from(["npn", "pnp"]))
    place = draw(st.sampled_from(["mid-swing", 0.5, 0.7]))
    if place != "mid-swing":
        place = supply * (place if polarity == "npn" else 1.0 - place)
    return target_stage(
        topology,
        Target(
            collector_current=draw(st.floats(1e-4, 5e-3)),
            collector=place,
            divider_current_ratio=draw(st.sampled_from([5.0, 10.0, 20.0])),
            **emitter,
        ),
        names=draw(st.sampled_from(TOPOLOGY_RESISTORS[topology])),
        supply=supply,
        negative=-draw(st.floats(5.0, 15.0)),
        polarity=polarity,
        transistor=real(thermal_resistance=draw(st.sampled_from([None, 280.0]))),
        fixed={"RE1": 47.0},
    )


@settings(
    deadline=None, max_examples=150, suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much]
)
@given(of=targets())
def test_ideal_stage_meets_current_collector_and_emitter(of):
    try:
        reading = solved(ideal_stage(of))
    except PhysicallyImpossible:
        assume(False)
    upper, lower = rails(of)
    target, frame = of.target, 1.0 if of.polarity == "npn" else -1.0
    V_E, V_C = (value(reading, f"{node}_voltage") for node in ("emitter", "collector"))
    assert value(reading, "collector_current") == pytest.approx(target.collector_current, rel=MET)
    names = {r.name for r in of.resistors}
    across = frame * (V_E - lower)
    wished = target.emitter_voltage or (
        of.supply.voltage.nominal / target.supply_over if target.supply_over else None
    )
    if of.topology == "follower":
        # Without a wish the output stands midway between its rail and where the transistor saturates.
        middle = 0.5 * (frame * (upper - lower) - 0.3)
        assert across == pytest.approx(middle if wished is None else wished, rel=MET)
        return
    if not names & {"RE", "RE2"}:
        assert across == pytest.approx(0.0, abs=1e-12)
    elif wished is not None or of.topology != "split-supply":
        assert across == pytest.approx(1.0 if wished is None else wished, rel=MET)
    if target.collector == "mid-swing":
        to_cut_off, to_saturation = frame * (upper - V_C), frame * (V_C - V_E) - 0.3
        assert to_cut_off == pytest.approx(to_saturation, rel=MET)
    else:
        assert V_C == pytest.approx(target.collector, rel=MET)


def test_split_supply_base_follows_a_tenth_of_gain_times_emitter_resistor():
    of = ideal_stage(target_stage("split-supply", Target(collector_current=1e-3)))
    reading = solved(of)
    beta = value(reading, "collector_current") / value(reading, "base_current")
    # physics.md 7: R_TH = 0.1·β·RE (common practice).
    assert of.resistor("RB").value == pytest.approx(0.1 * beta * of.resistor("RE").value, rel=MET)


@pytest.mark.parametrize("ratio", [5.0, 10.0, 30.0])
def test_lower_divider_resistor_carries_a_multiple_of_the_base_current(ratio):
    of = ideal_stage(target_stage("divider", Target(collector_current=1e-3, divider_current_ratio=ratio)))
    reading = solved(of)
    current = value(reading, "base_voltage") / of.resistor("R2").value
    assert current == pytest.approx(ratio * value(reading, "base_current"), rel=MET)


def test_hand_column_is_the_hand_calculation():
    # V_E 1 V, V_B 1.7 V, I_B = 1 mA/260, ten of it through R2 and R1; V_C = (9 + 0.3 + 1)/2.
    of = target_stage("divider", Target(collector_current=1e-3))
    steps = ideal(of, of.target, {}, hand(of)).steps
    divider = 10 * 1e-3 / 260
    expected = {"RE": 1e3, "RC": (9.0 - 5.15) / 1e-3, "R2": 1.7 / divider, "R1": 7.3 / divider}
    assert {name: step.ohms for name, step in steps.items()} == pytest.approx(expected, rel=1e-12)


def test_step_shows_the_numbers_of_its_formula():
    of = target_stage(
        "divider",
        Target(collector_current=1e-3),
        fixed={"RE1": 100.0},
        names=("R1", "R2", "RC", "RE1", "RE2"),
    )
    for device in (hand, refined):
        for step in ideal(of, of.target, {"RE1": 100.0}, device(of)).steps.values():
            assert step.ohms == pytest.approx((step.high - step.low) / step.current - step.beside, rel=1e-12)
            assert step.beside == (100.0 if step.resistor == "RE2" else 0.0)


def test_second_emitter_part_makes_up_what_the_first_leaves():
    names = ("R1", "R2", "RC", "RE1", "RE2")
    aim = Target(collector_current=1e-3, emitter_voltage=1.5)
    of = ideal_stage(target_stage("divider", aim, names=names, fixed={"RE1": 220.0}))
    whole = ideal_stage(target_stage("divider", aim))
    assert of.resistor("RE1").value == 220.0
    assert 220.0 + of.resistor("RE2").value == pytest.approx(whole.resistor("RE").value, rel=1e-9)


LOADS = [None, Signal(load=4.7e3, bypassed=True), Signal(load=4.7e3), Signal(bypassed=True)]


@pytest.mark.parametrize("signal", LOADS)
@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("topology", ["base-resistor", "divider", "split-supply"])
def test_maximum_swing_has_equal_headrooms_and_the_published_current(signal, polarity, topology):
    aim = Target(collector_current=1e-3, collector="max-swing", emitter_voltage=1.0)
    of = ideal_stage(target_stage(topology, aim, signal=signal, polarity=polarity))
    reading = solved(of)
    up, down = value(reading, "headroom_up"), value(reading, "headroom_down")
    assert up == pytest.approx(down, rel=MET)
    # physics.md 6: I_CQ = (V_CC − V_CE(sat))/(R_ac + R_dc), V_CC rail to rail; taken with I_E = I_C.
    RC, RE = of.resistor("RC").value, of.resistor("RE").value
    load = signal.load if signal else None
    r_ac = RC if load is None else RC * load / (RC + load)
    r_e = 0.0 if signal and signal.bypassed else RE
    span = abs(rails(of)[0] - rails(of)[1])
    wanted = (span - 0.3) / (r_ac + r_e + RC + RE)
    # 1 %: I_E is I_C·(1 + 1/β), β about 260.
    assert value(reading, "collector_current") == pytest.approx(wanted, rel=0.01)


def test_maximum_swing_with_a_second_emitter_part_sees_only_the_first():
    names = ("R1", "R2", "RC", "RE1", "RE2")
    aim = Target(collector_current=1e-3, collector="max-swing")
    signal = Signal(load=4.7e3, bypassed=True)
    of = ideal_stage(target_stage("divider", aim, names=names, fixed={"RE1": 220.0}, signal=signal))
    reading = solved(of)
    assert value(reading, "headroom_up") == pytest.approx(value(reading, "headroom_down"), rel=MET)


def test_loaded_follower_at_maximum_swing_has_equal_headrooms():
    aim = Target(collector_current=2e-3, collector="max-swing")
    of = ideal_stage(target_stage("follower", aim, supply=12.0, signal=Signal(load=2.2e3)))
    reading = solved(of)
    assert value(reading, "headroom_up") == pytest.approx(value(reading, "headroom_down"), rel=MET)


IMPOSSIBLE = {
    "emitter above the supply": target_stage("divider", Target(collector_current=1e-3, emitter_voltage=12.0)),
    "collector above the supply": target_stage("divider", Target(collector_current=1e-3, collector=11.0)),
    "emitter leaves no drive": target_stage("divider", Target(collector_current=1e-3, emitter_voltage=8.8)),
    "fixed emitter part above the whole": target_stage(
        "divider",
        Target(collector_current=1e-3, emitter_voltage=1.0),
        names=("R1", "R2", "RC", "RE1", "RE2"),
        fixed={"RE1": 1500.0},
    ),
    "supply below the base-emitter voltage": target_stage(
        "base-resistor", Target(collector_current=1e-3, collector=0.3), names=("RB", "RC"), supply=0.5
    ),
}


@pytest.mark.parametrize("name", IMPOSSIBLE)
def test_impossible_target_says_what_and_why(name):
    of = IMPOSSIBLE[name]
    with pytest.raises(PhysicallyImpossible, match="physically impossible") as caught:
        ideal_stage(of)
    fault = caught.value.faults[0]
    assert fault.key.startswith(("resistors.", "target."))
    assert "would have to be -" in fault.problem or "not between the rails" in fault.problem


def test_every_impossible_resistor_is_told_at_once():
    # 8.4 V at the emitter put the base above the 9 V supply, and 20 kΩ alone would drop 20 V at 1 mA.
    of = target_stage(
        "divider",
        Target(collector_current=1e-3, emitter_voltage=8.4),
        names=("R1", "R2", "RC", "RE1", "RE2"),
        fixed={"RE1": 20e3},
    )
    with pytest.raises(PhysicallyImpossible, match="RE2") as caught:
        ideal_stage(of)
    assert {fault.key for fault in caught.value.faults} == {"resistors.RE2", "resistors.R1"}


def test_no_early_voltage_and_band_gap_law_are_met_too():
    plain = replace(real(), early_voltage=None, test_voltage=None, base_emitter_drift=None)
    warm = Limits(low=263.15, nominal=313.15, high=323.15)
    of = ideal_stage(target_stage("divider", Target(collector_current=1e-3), transistor=plain, ambient=warm))
    assert value(solved(of), "collector_current") == pytest.approx(1e-3, rel=MET)
    assert np.all([r.value > 0.0 for r in of.resistors])
