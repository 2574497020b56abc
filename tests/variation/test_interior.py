"""Extremes inside the box: found where a vertex does not show them, and never beaten by a random point."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings

from biasband.boards.sampling import coordinates
from biasband.circuit.operating_point import Region
from biasband.stage import Limits, Stage
from biasband.variation.contributors import RIPPLE, use_axes
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current, evaluate
from variation.stages import ideal, limits, some, stage, varying_stages, with_resistor

DRAWS = 400


def divider_voltage(R1: float) -> float:
    """V_C [V] of the divider below, by hand: active, or saturated with V_CE held at 0.2 V."""
    R2, RC, RE, beta, V_BE, V_sat, V_CC = 12e3, 3.3e3, 1e3, 100.0, 0.7, 0.2, 12.0
    thevenin, source = V_CC * R2 / (R1 + R2), R1 * R2 / (R1 + R2)
    I_B = (thevenin - V_BE) / (source + (beta + 1.0) * RE)
    V_C, V_E = V_CC - RC * beta * I_B, (beta + 1.0) * I_B * RE
    if V_C - V_E > V_sat:
        return V_C
    # Saturated: base, collector and emitter move as one node, Kirchhoff's current law at the emitter.
    V_E = ((thevenin - V_BE) / source + (V_CC - V_sat) / RC) / (1 / RE + 1 / source + 1 / RC)
    return V_E + V_sat


def saturating() -> Stage:
    """A divider that saturates somewhere within R1 = 40 kΩ ± 50 % (physics.md 5: 20…60 k)."""
    of = stage(
        "divider",
        {"R1": 40e3, "R2": 12e3, "RC": 3.3e3, "RE": 1e3},
        ideal(100.0, 0.7, saturation_voltage=0.2),
        12.0,
    )
    return with_resistor(of, "R1", tolerance=0.5)


def test_collector_is_lowest_where_saturation_begins_not_at_a_vertex():
    found = corners(saturating(), some(saturating(), "collector_voltage"), cut_off=0.0)
    volts = found.ranges["collector_voltage"]
    grid = np.array([divider_voltage(R1) for R1 in np.linspace(20e3, 60e3, 40001)])
    assert found.regions == {Region.ACTIVE: 1, Region.SATURATED: 1}
    assert volts.low.interior and not volts.high.interior
    # Steps of the search go down to 1e-4 of half the axis: 2 Ω of R1, at most 0.5 mV/Ω · 2 Ω.
    assert volts.low.value == pytest.approx(grid.min(), abs=1e-3)
    assert volts.high.value == pytest.approx(grid.max(), rel=1e-12)
    assert volts.low.value < min(divider_voltage(20e3), divider_voltage(60e3)) - 0.05


def test_interior_flag_is_off_where_everything_is_monotone():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 80.0, 120.0)), 18.0)
    found = corners(of, some(of, "collector_voltage", "collector_current"), cut_off=0.0)
    assert not any(both.interior for both in found.ranges.values())


def test_highest_power_lies_where_half_the_load_line_is_left():
    # P = V_CE·I_C + V_BE·I_B is highest where V_CE is near V_CC/2: (18/2)²/2200 = 36.8 mW.
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 100.0, 200.0)), 18.0)
    power = corners(of, some(of, "transistor_power"), cut_off=0.0).ranges["transistor_power"]
    beta = np.linspace(50.0, 200.0, 150001)
    I_B = (18.0 - 0.7) / 470e3
    exact = (18.0 - 2.2e3 * beta * I_B) * beta * I_B + 0.7 * I_B
    assert power.high.interior and not power.low.interior
    assert power.high.value == pytest.approx(exact.max(), rel=1e-6)  # a flat top: 1e-4 of the axis, squared
    assert power.high.at["gain"] == pytest.approx(beta[exact.argmax()], rel=1e-2)


def test_symmetric_swing_is_highest_on_the_ridge_where_up_equals_down():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 100.0, 200.0)), 18.0)
    names = ("symmetric_peak_swing", "headroom_up", "headroom_down")
    found = corners(of, some(of, *names), cut_off=0.0).ranges["symmetric_peak_swing"]
    assert found.high.interior
    assert found.high.value == pytest.approx(9.0, abs=1e-3)  # half of 18 V, V_CE(sat) = 0; steps of 1e-4


SIGNAL = ("voltage_gain", "supply_feedthrough", "output_ripple", "input_resistance", "output_resistance")
OPERATING = (
    "collector_voltage",
    "base_voltage",
    "emitter_voltage",
    "collector_emitter_voltage",
    "collector_current",
    "base_current",
    "transistor_power",
    "junction_temperature",
    "headroom_up",
    "headroom_down",
    "symmetric_peak_swing",
)


def anywhere(of: Stage, seed: int) -> dict[str, np.ndarray]:
    """Drawn boards in use anywhere in the box; coupled ripple is there at its peak or not at all."""
    x = dict(coordinates(of, slice(0, DRAWS), seed=seed))
    rng = np.random.default_rng(seed)
    for axis in use_axes(of):
        x[axis.name] = rng.uniform(-1.0, 1.0, DRAWS)
        if axis.name == RIPPLE:
            x[axis.name] = rng.choice([-1.0, 0.0, 1.0], DRAWS)
    return x


@settings(deadline=None, derandomize=True, max_examples=12, suppress_health_check=[HealthCheck.too_slow])
@given(of=varying_stages())
def test_no_random_point_of_the_box_beats_the_extremes(of):
    cut_off = cut_off_current(of)
    names = OPERATING
    found = corners(of, some(of, *names), cut_off=cut_off)
    outcome = evaluate(of, anywhere(of, 3), some(of, *names), cut_off=cut_off)
    for name in names:
        low, high = found.ranges[name].low.value, found.ranges[name].high.value
        # A local search: on a ridge or a flat top it stops within 1e-4 of the range (200 random stages:
        # 1e-9).
        slack = 1e-4 * (high - low) + 1e-9 * abs(high)
        assert np.nanmin(outcome.low[name]) >= low - slack, name
        assert np.nanmax(outcome.high[name]) <= high + slack, name


@settings(deadline=None, derandomize=True, max_examples=8, suppress_health_check=[HealthCheck.too_slow])
@given(of=varying_stages())
def test_no_random_point_beats_the_signal_extremes(of):
    cut_off = cut_off_current(of)
    found = corners(of, some(of, *SIGNAL), cut_off=cut_off)
    outcome = evaluate(of, anywhere(of, 4), some(of, *SIGNAL), cut_off=cut_off)
    for name in SIGNAL:
        low, high = found.ranges[name].low.value, found.ranges[name].high.value
        slack = 1e-4 * (high - low) + 1e-9 * abs(high)  # as above
        assert np.nanmin(outcome.low[name]) >= low - slack, name
        assert np.nanmax(outcome.high[name]) <= high + slack, name


def test_every_vertex_of_a_grid_is_within_the_extremes():
    of = stage(
        "divider",
        {"R1": 68e3, "R2": 13e3, "RC": 8.2e3, "RE": 820.0},
        ideal(limits(50.0, 150.0, 400.0), limits(0.6, 0.65, 0.7), saturation_voltage=0.2),
        Limits(low=8.0, nominal=9.0, high=10.0),
        resistor={"tolerance": 0.1},
    )
    names = ("collector_voltage", "transistor_power")
    found = corners(of, some(of, *names), cut_off=0.0)
    axis_names = ("R1", "R2", "RC", "RE", "gain", "base_emitter_voltage", "supply")
    grid = np.array(list(product((-1.0, 0.0, 1.0), repeat=len(axis_names))))
    x = {name: grid[:, k] for k, name in enumerate(axis_names)}
    outcome = evaluate(of, x, some(of, *names), cut_off=0.0)
    for name in names:
        both = found.ranges[name]
        slack = 1e-4 * (both.high.value - both.low.value)  # as above
        assert outcome.low[name].min() >= both.low.value - slack
        assert outcome.high[name].max() <= both.high.value + slack
