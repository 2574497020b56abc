"""Corners: all 2^n combinations against brute force by a scalar twin, and what is told of each extreme."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from circuit import stages as cases
from circuit.twin import Solver
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from biasband.circuit.operating_point import Region
from biasband.circuit.reading import Reading, read
from biasband.circuit.topology import Node
from biasband.stage import Limits, Signal, Supply
from biasband.variation.contributors import axes, realise
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current, evaluate
from variation.stages import (
    ROOM,
    coupled,
    ideal,
    limits,
    real,
    running_away,
    some,
    stage,
    varying_stages,
    with_resistor,
    with_resistors,
    words,
)

SLOW = settings(deadline=None, derandomize=True, max_examples=8, suppress_health_check=[HealthCheck.too_slow])

BELL = {"RB": 470e3, "RC": 2.2e3}
"""Bell, Electronic Devices and Circuits, ex. 5-4: 18 V, all V_BE 0.7 V."""


def extremes(of, *names):
    """The ranges of some quantities."""
    return corners(of, some(of, *names), cut_off=cut_off_current(of)).ranges


@pytest.mark.parametrize(("supply", "count"), [(Limits.exactly(18.0), 16), (limits(17.1, 18.0, 18.9), 32)])
def test_corners_are_two_to_the_number_of_axes(supply, count):
    # RB, RC, gain, V_BE make four axes, the supply the fifth.
    of = stage(
        "base-resistor",
        BELL,
        ideal(limits(50.0, 100.0, 200.0), limits(0.6, 0.7, 0.8)),
        supply,
        resistor={"tolerance": 0.05},
    )
    found = corners(of, {}, cut_off=0.0)
    assert found.count == count == sum(found.regions.values())


def test_stage_that_does_not_vary_has_one_corner_at_nominal():
    of = stage("base-resistor", BELL, ideal(100.0), 18.0)
    found = corners(of, some(of, "collector_voltage"), cut_off=0.0)
    both = found.ranges["collector_voltage"]
    assert found.count == 1
    # Bell 5-4: 9.9 V; exactly 18 − 2200·100·17.3/470e3.
    assert both.low.value == both.high.value == pytest.approx(18.0 - 2.2e3 * 100 * 17.3 / 470e3, rel=1e-12)
    assert not both.interior


def test_closed_form_corners_and_the_combination_that_gave_each():
    of = stage(
        "base-resistor",
        BELL,
        ideal(limits(50.0, 100.0, 150.0), limits(0.6, 0.7, 0.8)),
        limits(17.1, 18.0, 18.9),
        resistor={"tolerance": 0.05},
    )
    current = extremes(of, "collector_current")["collector_current"]
    # I_C = β·(V_CC − V_BE)/RB, by hand at the obvious combinations.
    assert current.low.value == pytest.approx(50 * (17.1 - 0.8) / (1.05 * 470e3), rel=1e-12)
    assert current.high.value == pytest.approx(150 * (18.9 - 0.6) / (0.95 * 470e3), rel=1e-12)
    told = {"RB": 1.05 * 470e3, "gain": 50.0, "base_emitter_voltage": 0.8, "supply": 17.1}
    assert {name: current.low.at[name] for name in told} == pytest.approx(told, rel=1e-12)
    assert current.low.coordinates["RB"] == 1.0
    assert not current.interior


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_brute_force_by_the_scalar_twin_finds_the_same_extremes(polarity):
    transistor = real(gain=limits(165.0, 260.0, 410.0), leakage=200e-9)
    of = stage(
        "divider",
        {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 820.0},
        transistor,
        limits(8.1, 9.0, 9.9),
        ambient=limits(263.15, ROOM, 333.15),
        polarity=polarity,
    )
    of = with_resistor(of, "R1", tolerance=0.05, tempco=2e-4)
    brute = {"collector": [], "base": []}
    sides = {
        "gain": (165.0, 410.0),
        "vbe": (0.57, 0.72),
        "leak": (0.0, 200e-9),
        "supply": (8.1, 9.9),
        "temperature": (263.15, 333.15),
        "R1": (-1, 1),
    }
    for gain, vbe, leak, supply, temperature, r1 in product(*sides.values()):
        R1 = 68e3 * (1 + r1 * 0.05) * (1 + r1 * 2e-4 * 35.0)
        fixed = replace(transistor, gain=Limits.exactly(gain), base_emitter_voltage=Limits.exactly(vbe))
        case = cases.Case(
            topology="divider",
            resistances={"R1": R1, "R2": 13e3, "RC": 3.3e3, "RE": 820.0},
            supply=supply,
            transistor=fixed,
            polarity=polarity,
            temperature=temperature,
            leakage=leak,
        )
        volts = Solver(case).at(temperature).volts
        for node, kept in brute.items():
            kept.append(volts[node])
    found = extremes(of, "collector_voltage", "base_voltage")
    for node, values in brute.items():
        # The solver stops at residuals below 1e-9 V; an active divider moves no more than ten times that.
        assert found[f"{node}_voltage"].low.value == pytest.approx(min(values), abs=2e-8)
        assert found[f"{node}_voltage"].high.value == pytest.approx(max(values), abs=2e-8)


def test_told_combination_gives_the_told_value():
    of = coupled()
    cut_off = cut_off_current(of)
    for name, found in corners(of, words(of), cut_off=cut_off).ranges.items():
        for end, side in ((found.low, "low"), (found.high, "high")):
            again = getattr(evaluate(of, end.coordinates, some(of, name), cut_off=cut_off), side)[name]
            # One scenario or many: residuals below 1e-9 V, over quantities of 0.1 V and more.
            assert float(again[0]) == pytest.approx(end.value, rel=1e-6), (name, side)


def test_ripple_without_signal_moves_the_rail():
    of = stage("base-resistor", BELL, ideal(100.0), Supply(voltage=Limits.exactly(18.0), ripple_peak=0.5))
    found = extremes(of, "collector_current")["collector_current"]
    assert found.low.value == pytest.approx(100 * (17.5 - 0.7) / 470e3, rel=1e-12)
    assert found.high.value == pytest.approx(100 * (18.5 - 0.7) / 470e3, rel=1e-12)
    assert found.high.at["supply"] == 18.0  # formats.md: without ripple
    assert found.high.at["ripple"] == 0.5


def rippling(signal: Signal | None):
    """A divider in which nothing but ripple of 50 mV varies."""
    plain = real(gain=Limits.exactly(260.0), base_emitter_voltage=Limits.exactly(0.64))
    return stage(
        "divider",
        {"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE": 820.0},
        plain,
        Supply(voltage=Limits.exactly(9.0), ripple_peak=0.05),
        signal=signal,
    )


COUPLES = Signal(source_resistance=10e3, bypassed=True)


def feedthroughs() -> tuple[float, float]:
    """|dV_C/dV_CC| with capacitors open, from two solved supplies, and short, from g_m and r_π by hand."""

    def at(volts: float) -> Reading:
        quiet = replace(rippling(None), supply=Supply(voltage=Limits.exactly(volts)))
        return read(quiet, realise(quiet, {}))

    below, above, here = at(8.999), at(9.001), at(9.0).point
    opened = float((above.volts[Node.COLLECTOR] - below.volts[Node.COLLECTOR])[0]) / 0.002
    V_T = 1.380649e-23 * 298.15 / 1.602176634e-19
    g_m = float(here.collector_current[0]) / V_T
    r_pi = V_T / float(here.base_current[0])
    early = 70.0 - float(here.base_collector[0])  # r_o = (V_A − V_BC)/I_C
    g_o = float(here.collector_current[0]) / early
    G_B = 1 / 68e3 + 1 / 13e3 + 1 / 10e3 + 1 / r_pi
    base = (1 / 68e3) / G_B
    shorted = (1 / 3.9e3 - g_m * base) / (1 / 3.9e3 + g_o)
    return abs(opened), abs(shorted)


def test_coupled_ripple_moves_the_output_by_the_larger_feedthrough():
    of = rippling(COUPLES)
    opened, shorted = feedthroughs()
    assert shorted > 3.0 * opened  # the case is the one that physics.md 4 warns of
    quiet = float(read(rippling(None), realise(rippling(None), {})).volts[Node.COLLECTOR][0])
    found = extremes(of, "collector_voltage")["collector_voltage"]
    # 1 %: the textbook g_m, r_π, r_o by hand leave out the base's share of the Early effect.
    assert quiet - found.low.value == pytest.approx(0.05 * shorted, rel=0.01)
    assert found.high.value - quiet == pytest.approx(0.05 * shorted, rel=0.01)


def test_ripple_without_signal_moves_the_output_by_the_open_feedthrough():
    opened, _ = feedthroughs()
    found = extremes(rippling(None), "collector_voltage")["collector_voltage"]
    # 1 %: a difference over ±50 mV against one over ±1 mV.
    assert found.high.value - found.low.value == pytest.approx(0.1 * opened, rel=0.01)


def bypassed_quiet() -> Reading:
    """The coupled stage on a supply without ripple."""
    quiet = replace(rippling(COUPLES), supply=Supply(voltage=Limits.exactly(9.0)))
    return read(quiet, realise(quiet, {}))


def test_coupled_ripple_comes_off_the_headrooms():
    of = rippling(COUPLES)
    names = ("headroom_up", "headroom_down", "symmetric_peak_swing")
    ripple = extremes(of, "output_ripple")["output_ripple"].high.value
    for name, found in extremes(of, *names).items():
        without = float(np.ravel(words(rippling(COUPLES))[name].read(bypassed_quiet()))[0])
        assert found.low.value == pytest.approx(without - ripple, rel=1e-9)  # one point, solved twice
        assert found.high.value <= without + 1e-9


def test_voltage_and_power_keep_supply_and_peak_where_ripple_couples():
    plain, of = rippling(None), rippling(COUPLES)
    names = ("collector_emitter_voltage", "transistor_power", "supply_current")
    for name, found in extremes(of, *names).items():
        assert found.high.value == pytest.approx(extremes(plain, name)[name].high.value, rel=1e-9)


def test_regions_are_counted_and_one_corner_of_each_is_told():
    of = stage("base-resistor", BELL, ideal(limits(50.0, 100.0, 300.0)), 18.0)
    found = corners(of, {}, cut_off=1e-6)
    # β·(18 − 0.7)/470e3·2200 = 24.3 V at 300: saturated; 4.05 V at 50: active.
    assert found.regions == {Region.ACTIVE: 1, Region.SATURATED: 1}
    assert found.region_at[Region.SATURATED]["gain"] == pytest.approx(300.0, rel=1e-12)
    assert found.region_at[Region.ACTIVE]["gain"] == pytest.approx(50.0, rel=1e-12)


def test_saturated_ideal_corner_holds_the_collector_at_its_saturation_voltage():
    of = stage("base-resistor", BELL, ideal(limits(50.0, 100.0, 300.0), saturation_voltage=0.2), 18.0)
    found = extremes(of, "collector_voltage")["collector_voltage"]
    assert found.low.value == pytest.approx(0.2, abs=1e-12)


@SLOW
@given(of=varying_stages(), wider=st.sampled_from([1.2, 2.0]))
def test_wider_tolerance_never_helps_a_corner(of, wider):
    names = ("collector_voltage", "collector_current", "transistor_power", "symmetric_peak_swing")
    wide = replace(
        of, resistors=tuple(replace(r, tolerance=max(0.01, r.tolerance) * wider) for r in of.resistors)
    )
    narrow, broad = extremes(of, *names), extremes(wide, *names)
    for name in names:
        low, high = narrow[name].low.value, narrow[name].high.value
        # An interior extreme is searched, not solved for: it is found to 1e-4 of the range.
        slack = 1e-4 * (high - low) + 1e-9
        assert broad[name].low.value <= low + slack
        assert broad[name].high.value >= high - slack


def test_runaway_corner_is_counted_and_left_out_of_the_extremes():
    # Half the load line is 10 V · 100 mA: 1 W at 500 K/W cannot be; without leakage the stage stays cold.
    found = corners(running_away(), some(running_away(), "collector_current"), cut_off=0.0)
    assert found.regions[Region.RUNAWAY] == found.regions[Region.ACTIVE] == 1
    assert found.ranges["collector_current"].high.at["leakage"] < 0.1e-6
    assert np.isfinite(found.ranges["collector_current"].high.value)


def test_axes_and_coordinates_share_their_names():
    of = with_resistors(coupled(), group="reel", tracking=3e-5)
    found = extremes(of, "collector_voltage")["collector_voltage"].low
    assert set(found.coordinates) == {axis.name for axis in axes(of)}
