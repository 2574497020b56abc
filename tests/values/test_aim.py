"""Where the nodes stand, and the wishes that come to nothing, by hand with a textbook transistor."""

from __future__ import annotations

import pytest
from variation.stages import ideal as textbook

from biasband.stage import Stage, Target
from biasband.values.aim import Miss
from biasband.values.device import refined
from biasband.values.ideal import ideal
from values.test_ideal import target_stage

BETA, V_BE, V_SAT = 100.0, 0.7, 0.3
ROUNDING = 1e-9
"""Relative: the textbook transistor makes every equation linear, so only rounding is left."""


def by_hand(topology: str, target: Target, **more) -> Stage:
    """A 9 V stage of a textbook transistor: β 100, V_BE 0.7 V, V_CE(sat) 0.3 V."""
    return target_stage(topology, target, transistor=textbook(BETA, V_BE, saturation_voltage=V_SAT), **more)


def missed(of: Stage) -> dict[str, Miss]:
    """The misses of the ideal stage by quantity."""
    fixed = {r.name: r.value for r in of.resistors if r.value is not None}
    return {miss.quantity: miss for miss in ideal(of, of.target, fixed, refined(of)).aim.missed}


@pytest.mark.parametrize(("polarity", "emitter"), [("npn", 4.35), ("pnp", 9.0 - 4.35)])
def test_follower_stands_midway_between_its_rail_and_saturation(polarity, emitter):
    of = by_hand("follower", Target(collector_current=1e-3), polarity=polarity)
    step = ideal(of, of.target, {}, refined(of)).steps["RE"]
    # (9 V − 0.3 V)/2 = 4.35 V across RE, which carries I_C·(1 + 1/β) = 1.01 mA.
    assert step.ohms == pytest.approx(4.35 / 1.01e-3, rel=ROUNDING)
    ends = {step.high_node: step.high, step.low_node: step.low}
    assert ends["emitter"] == pytest.approx(emitter, rel=ROUNDING)


def emitter_resistor_for(I_C: float) -> float:
    """The RE [Ω] with which 68 k and 15 k decide on a collector current [A]."""
    I_B = I_C / BETA
    return ((9.0 * 15 / 83 - V_BE) / I_B - 68e3 * 15e3 / 83e3) / (BETA + 1)


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("off", [0.15, 0.05, -0.05, 0.002, -0.002])
def test_current_that_fixed_resistors_decide_is_missed_beyond_a_tenth_of_a_percent(polarity, off):
    fixed = {"R1": 68e3, "R2": 15e3, "RE": emitter_resistor_for((1 + off) * 0.5e-3)}
    miss = missed(by_hand("divider", Target(collector_current=0.5e-3), fixed=fixed, polarity=polarity))
    assert miss["collector_current"].reached == pytest.approx((1 + off) * 0.5e-3, rel=ROUNDING)
    assert miss["collector_current"].wished == 0.5e-3


def test_current_met_to_half_a_tenth_of_a_percent_is_met():
    fixed = {"R1": 68e3, "R2": 15e3, "RE": emitter_resistor_for(1.0005 * 0.5e-3)}
    assert "collector_current" not in missed(
        by_hand("divider", Target(collector_current=0.5e-3), fixed=fixed)
    )


@pytest.mark.parametrize(("polarity", "reached", "wished"), [("npn", 2.1, 1.0), ("pnp", 6.9, 8.0)])
def test_missed_emitter_voltage_is_told_to_the_stage_s_ground(polarity, reached, wished):
    # 1 mA through 3.3 k leaves 5.7 V: mid-swing where V_E = 2·5.7 − 9.3 = 2.1 V; a PNP's from 9 V down.
    aim = Target(collector_current=1e-3, emitter_voltage=1.0)
    miss = missed(by_hand("divider", aim, fixed={"RC": 3.3e3}, polarity=polarity))
    assert set(miss) == {"emitter_voltage"}
    assert miss["emitter_voltage"].reached == pytest.approx(reached, rel=ROUNDING)
    assert miss["emitter_voltage"].wished == pytest.approx(wished, rel=ROUNDING)


@pytest.mark.parametrize(("polarity", "wished", "reached"), [("npn", 6.0, 8.0), ("pnp", 3.0, 1.0)])
def test_missed_collector_voltage_is_told_to_the_stage_s_ground(polarity, wished, reached):
    # 1 mA through 1 k is 1 V from the collector's rail.
    aim = Target(collector_current=1e-3, collector=wished, emitter_voltage=1.0)
    miss = missed(by_hand("divider", aim, fixed={"RC": 1e3}, polarity=polarity))
    assert set(miss) == {"collector_voltage"}
    assert miss["collector_voltage"].reached == pytest.approx(reached, rel=ROUNDING)
    assert miss["collector_voltage"].wished == pytest.approx(wished, rel=ROUNDING)


@pytest.mark.parametrize("topology", ["base-resistor", "collector-feedback"])
@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_emitter_tied_to_its_rail_misses_no_emitter_voltage(topology, polarity):
    # No resistor, so the 1 V rule has nothing to place.
    of = by_hand(topology, Target(collector_current=1e-3), names=("RB", "RC"), polarity=polarity)
    assert missed(of) == {}
