"""The gain curve of physics.md section 2: h_FE against collector current, in the laws and in the solve."""

from __future__ import annotations

import itertools
from dataclasses import replace
from math import exp, log
from typing import Any, cast

import mpmath as mp  # type: ignore[import-untyped]
import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from biasband.circuit import operating_point
from biasband.circuit.active import active_region
from biasband.circuit.flow import flow, flow_drift
from biasband.circuit.gain_curve import GainScaling
from biasband.circuit.heat import power_slope
from biasband.circuit.junction import Laws, laws, sheet
from biasband.circuit.network import condense, rails
from biasband.circuit.reading import read
from biasband.circuit.solution import Problem, Status, isothermal
from biasband.errors import UsageError
from biasband.gain_curve import MOST_POINTS, GainCurve
from biasband.stage import Signal, Transistor
from circuit import oracle
from circuit.stages import Case, cases, real, together
from circuit.test_twin import AGREED, HARD, assert_same
from circuit.twin import Solver, junctions, warmed

CURVE = GainCurve(((0.1e-3, 180.0), (1e-3, 240.0), (10e-3, 260.0), (50e-3, 150.0)))
"""An invented small-signal transistor."""

SAGGING = GainCurve(((0.2e-3, 300.0), (2e-3, 200.0), (2.2e-3, 60.0), (20e-3, 40.0)))
"""A steep piece between two gentle ones: plain Newton steps would leap from one side of it to the other."""

DIVIDER = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3}
BENT = real(early_voltage=70.0, gain_curve=CURVE)


@st.composite
def curves(draw: st.DrawFn) -> GainCurve:
    """Any curve of a transistor that one could measure, and steeper ones."""
    place = draw(st.floats(log(1e-6), log(1e-2)))
    points = [(exp(place), draw(st.floats(20.0, 600.0)))]
    for _ in range(draw(st.integers(1, 6))):
        step = draw(st.floats(0.05, 3.0))
        slope = draw(st.floats(-2.0, 0.9))
        points.append((points[-1][0] * exp(step), points[-1][1] * exp(slope * step)))
    return GainCurve(tuple(points))


def bent(case: Case, curve: GainCurve | None) -> Case:
    """The case with a gain curve."""
    return replace(case, transistor=replace(cast(Transistor, case.transistor), gain_curve=curve))


def law_of(transistor: Transistor, temperature: float, leakage: float = 30e-9) -> Laws:
    """The laws at a junction temperature [K]."""
    figures = sheet(
        transistor,
        gain=transistor.gain.nominal,
        base_emitter_voltage=transistor.base_emitter_voltage.nominal,
        leakage=leakage,
    )
    return laws(figures, temperature)


def at(curve: GainCurve, current: float, *, test_current: float = 1.5e-3) -> tuple[float, float]:
    """The factor and the slope at a current."""
    scaled = GainScaling.of(curve, test_current=test_current).at(current)
    return float(scaled.factor), float(scaled.slope)


# The curve itself


def test_factor_at_a_point_is_the_ratio_of_the_points_gain_to_that_at_the_test_current() -> None:
    for current, gain in CURVE.points:
        # By hand: the ratio to the point's own 240. Rounding of a logarithm and its exponential.
        assert at(CURVE, current, test_current=1e-3)[0] == pytest.approx(gain / 240.0, rel=1e-13)


def test_between_points_logarithms_are_interpolated() -> None:
    # The geometric mean of two currents has the geometric mean of their gains.
    middle = (1e-3 * 10e-3) ** 0.5
    assert at(CURVE, middle, test_current=1e-3)[0] == pytest.approx((240.0 * 260.0) ** 0.5 / 240.0, rel=1e-13)
    assert at(CURVE, middle)[1] == pytest.approx(log(260.0 / 240.0) / log(10.0), rel=1e-13)


@pytest.mark.parametrize(("current", "gain"), [(1e-7, 180.0), (0.0, 180.0), (-1.0, 180.0), (2.0, 150.0)])
def test_beyond_its_ends_the_curve_is_held(current: float, gain: float) -> None:
    factor, slope = at(CURVE, current, test_current=1e-3)
    assert factor == pytest.approx(gain / 240.0, rel=1e-13)
    assert slope == 0.0


def test_test_current_beyond_the_ends_is_taken_at_the_end() -> None:
    assert at(CURVE, 1e-6, test_current=1e-5)[0] == pytest.approx(1.0, rel=1e-13)
    assert at(CURVE, 50e-3, test_current=0.2)[0] == pytest.approx(1.0, rel=1e-13)


@given(curves(), st.floats(1e-7, 1.0), st.floats(1e-5, 0.1))
def test_factor_is_that_of_the_scalar_twin(curve: GainCurve, current: float, test_current: float) -> None:
    transistor = real(test_current=test_current, gain_curve=curve)
    law = junctions(Case(topology="divider", resistances={}, supply=9.0, transistor=transistor), 298.15)
    # Rounding of logarithms of a few units, in powers of up to two.
    assert at(curve, current, test_current=test_current)[0] == pytest.approx(
        law.gain_at(current) / law.beta, rel=1e-11
    )


def test_step_ends_just_beyond_the_first_kink_on_its_way() -> None:
    scaling = GainScaling.of(CURVE, test_current=1e-3)
    kinks = [log(current) for current, _ in CURVE.points]
    here = np.array([kinks[0] - 1.0, kinks[3] + 1.0, kinks[1] + 0.1, kinks[1] + 0.1, kinks[1], kinks[1]])
    there = np.array([kinks[3] + 1, kinks[0] - 1, kinks[1] + 0.2, kinks[1], kinks[2] + 1, kinks[0] - 1])
    ends = here + scaling.up_to_kink(here, there) * (there - here)
    # By hand: the first kink in the direction of the step; none on the third's and fourth's way.
    assert ends == pytest.approx(
        [kinks[0], kinks[3], kinks[1] + 0.2, kinks[1], kinks[2], kinks[0]], abs=2e-12
    )
    up, down = ends[0] - kinks[0], ends[1] - kinks[3]
    assert up > 0.0 > down  # beyond it, not on it


BAD_CURVES = {
    "one point": (((1e-3, 240.0),), "from 2 to 100 points make a curve, not 1"),
    "no point": ((), "not 0"),
    "too many": (tuple((k * 1e-3, 100.0) for k in range(1, MOST_POINTS + 2)), "not 101"),
    "unsorted": (((2e-3, 200.0), (1e-3, 240.0)), "current of point 2 is not above that of point 1"),
    "same twice": (((1e-3, 240.0), (1e-3, 240.0)), "current of point 2 is not above"),
    "negative current": (((-1e-3, 240.0), (1e-3, 240.0)), "no positive figure"),
    "no gain": (((1e-3, 0.0), (2e-3, 240.0)), "no positive figure"),
    "not a number": (((1e-3, float("nan")), (2e-3, 240.0)), "no positive figure"),
    "endless": (((1e-3, 240.0), (float("inf"), 240.0)), "no positive figure"),
    "gain as fast as current": (((1e-3, 100.0), (2e-3, 200.0)), "rises as fast .* from point 1 to point 2"),
}


@pytest.mark.parametrize("name", BAD_CURVES)
def test_points_that_are_no_curve_are_refused(name: str) -> None:
    points, words = BAD_CURVES[name]
    with pytest.raises(UsageError, match=words):
        GainCurve(points)


def test_every_fault_of_a_curve_is_told() -> None:
    with pytest.raises(UsageError, match=r"point 2 .*; h_FE rises .* point 2 to point 3"):
        GainCurve(((2e-3, 200.0), (1e-3, 100.0), (2e-3, 400.0)))


# The laws


temperatures = st.floats(233.15, 423.15)


@settings(deadline=None)
@given(curves(), temperatures, st.floats(0.2, 0.8), st.floats(-10.0, 0.7))
def test_currents_are_those_of_the_scalar_twin(
    curve: GainCurve, temperature: float, V_BE: float, V_BC: float
) -> None:
    transistor = replace(BENT, gain_curve=curve)
    case = Case(topology="divider", resistances={}, supply=9.0, transistor=transistor, leakage=30e-9)
    I_B, I_C = junctions(case, temperature).currents(V_BE, V_BC)
    got = flow(law_of(transistor, temperature), V_BE, V_BC)
    # Rounding: a few units of 1e-16 in an exponent of up to 40, and large currents that may cancel.
    scale = float(got.forward) + float(got.reverse) + 30e-9
    assert got.base == pytest.approx(I_B, rel=1e-10, abs=1e-11 * scale)
    assert got.collector == pytest.approx(I_C, rel=1e-10, abs=1e-11 * scale)


@settings(deadline=None)
@given(curves(), temperatures, st.floats(0.2, 0.8), st.floats(-10.0, 0.7))
def test_slopes_of_the_base_current_are_those_of_forty_digit_differences(
    curve: GainCurve, temperature: float, V_BE: float, V_BC: float
) -> None:
    transistor = replace(BENT, gain_curve=curve)
    got = flow(law_of(transistor, temperature), V_BE, V_BC)
    here = log(got.forward * (1.0 - V_BC / 70.0))
    assume(min(abs(here - log(current)) for current, _ in curve.points) > 1e-6)  # no slope at a kink

    with mp.workdps(40):

        def base(v_be: Any, v_bc: Any, T: Any = temperature) -> Any:
            return digits(transistor, "30e-9").currents(v_be, v_bc, T)[0]

        by_be, by_bc, by_T = (
            float(mp.diff(base, (mp.mpf(V_BE), mp.mpf(V_BC), mp.mpf(temperature)), order))
            for order in ((1, 0, 0), (0, 1, 0), (0, 0, 1))
        )
    figures = sheet(transistor, gain=260.0, base_emitter_voltage=0.64, leakage=30e-9)
    drift = flow_drift(figures, got)
    # Rounding of exponents of up to 40, in terms as large as both junctions' conductances.
    scale = float(1e-12 * (got.forward + got.reverse) / law_of(transistor, temperature).thermal_voltage)
    assert got.base_be == pytest.approx(by_be, rel=1e-9, abs=scale)
    assert got.base_bc == pytest.approx(by_bc, rel=1e-9, abs=scale)
    assert drift.base == pytest.approx(by_T, rel=1e-9, abs=scale)


@settings(deadline=None)
@given(curves(), st.floats(0.2, 0.9), st.floats(-10.0, 0.9))
def test_base_current_rises_with_base_emitter_voltage_in_saturation_too(
    curve: GainCurve, V_BE: float, V_BC: float
) -> None:
    # What makes the operating point one: h_FE rises by less than the current (here up to its 0.9th power).
    assert flow(law_of(replace(BENT, gain_curve=curve), 298.15), V_BE, V_BC).base_be > 0.0


# The operating point


@settings(max_examples=200, deadline=None)
@given(cases(thermal=False), curves())
def test_any_scenario_is_solved_as_by_nested_bracketing(case: Case, curve: GainCurve) -> None:
    case = bent(case, curve)
    assert_same(case, Solver(case).at(case.temperature), volts=STEEPLY)


STEEPLY = 10.0 * AGREED
"""[V] A curve of slope 0.9 makes a base current's error tenfold in the collector."""


@pytest.mark.parametrize("curve", [CURVE, SAGGING], ids=["usual", "sagging"])
@pytest.mark.parametrize("name", HARD)
@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_hard_scenario_is_solved_as_by_nested_bracketing(
    name: str, polarity: str, curve: GainCurve
) -> None:
    case = bent(Case(**{**vars(HARD[name]), "polarity": polarity}), curve)
    assert_same(case, Solver(case).at(case.temperature), volts=AGREED)


@settings(max_examples=30, deadline=None)
@given(cases(), curves())
def test_any_warm_scenario_is_solved_or_in_runaway_as_by_a_scan_of_temperature(
    case: Case, curve: GainCurve
) -> None:
    assume(case.transistor.thermal_resistance is not None)
    case = bent(case, curve)
    found = warmed(case, step=2.0)
    # Within 0.05 of G = 1, or of a fixed point that a step of the scan could miss, the two may differ.
    assume(abs(found.worst_gain - 1.0) > 0.05)
    assume(found.point is not None or found.nearest > 2.0)
    if found.point is None or found.worst_gain > 1.0:
        assert case.reading().point.status[0] == Status.RUNAWAY
    else:
        # 1e-6 K of junction temperature, times up to 0.1 V/K of a stage with little feedback.
        assert_same(case, found.point, volts=STEEPLY + 1e-7)


@pytest.mark.parametrize("drive", np.geomspace(0.02, 20.0, 25))
@pytest.mark.parametrize("topology", ["base-resistor", "divider"])
def test_usual_stage_is_solved_by_the_one_equation_alone(topology: str, drive: float) -> None:
    # From 30 µA to 30 mA through the kinks: in the few steps that the active region allows itself.
    ohms = {"RB": 300e3 / drive, "RC": 500.0 / drive, "RE": 100.0 / drive}
    if topology == "divider":
        ohms = {"R1": 10e3 / drive, "R2": 2.2e3 / drive, "RC": 500.0 / drive, "RE": 150.0 / drive}
    case = Case(topology=topology, resistances=ohms, supply=9.0, transistor=BENT)
    ports = condense(case.wiring, case.scenarios.resistances).ports(rails(case.polarity, case.scenarios))
    problem = Problem.of(ports, BENT, case.scenarios)
    bias, _ = active_region(ports, problem.laws(case.temperature))
    assert bias.solved.all()


def test_hot_stage_of_small_current_and_large_resistors_is_solved_as_by_nested_bracketing() -> None:
    # I_S is a fiftieth of the current here, and the base current's own drop moves the Early factor.
    case = Case(
        topology="collector-feedback", resistances={"RB": 3e5, "RC": 2e6}, supply=20.0, temperature=398.15,
        transistor=real(10.0, 0.6, test_current=10e-3, early_voltage=15.0,
                        gain_curve=GainCurve(((1e-4, 10.0), (1e-2, 100.0)))),
    )  # fmt: skip
    assert_same(case, Solver(case).at(case.temperature), volts=AGREED)


def test_flat_curve_is_none() -> None:
    usual = Case(topology="divider", resistances=DIVIDER, supply=9.0, transistor=BENT)
    for name, case in {**HARD, "usual": usual}.items():
        flat = bent(case, GainCurve(((1e-5, 77.0), (1e-3, 77.0), (1e-2, 77.0)))).reading().point
        plain = bent(case, None).reading().point
        # Both are within 1e-9 V of the solution, by two ways of writing one equation; Newton's last step is
        # quadratic, so that they agree far better where the point is well conditioned.
        assert flat.base_emitter == pytest.approx(plain.base_emitter, abs=1e-9), name
        assert flat.base_collector == pytest.approx(plain.base_collector, abs=1e-9), name
        law = law_of(real(gain_curve=GainCurve(((1e-3, 77.0), (1e-2, 77.0)))), 298.15)
        for voltages in ((0.6, -5.0), (0.7, 0.6), (0.3, -1.0)):
            curved, straight = flow(law, *voltages), flow(replace(law, curve=None), *voltages)
            for each in ("base", "collector", "base_be", "base_bc", "collector_be", "collector_bc"):
                assert getattr(curved, each) == pytest.approx(getattr(straight, each), rel=1e-12, abs=0.0)


def test_at_the_test_current_nothing_changes() -> None:
    # A base fed 1.5 mA / 260 by 10 MΩ at V_CE = 6 V: the data sheet's own test point.
    RB, V_BE = 10e6, 0.64
    case = Case(
        topology="base-resistor",
        resistances={"RB": RB, "RC": (RB * 1.5e-3 / 260.0 + V_BE - 6.0) / 1.5e-3},
        supply=RB * 1.5e-3 / 260.0 + V_BE,
        transistor=real(early_voltage=70.0),
    )
    for curve in (None, CURVE, SAGGING):
        # I_S, which the test point leaves out, is 1e-11 of the current; with the gain 1e-9.
        assert bent(case, curve).value("collector_current") == pytest.approx(1.5e-3, rel=1e-8)


@pytest.mark.parametrize("slope", [-1.5, -0.3, 0.3, 0.8])
def test_power_law_of_the_gain_gives_the_closed_form_of_a_base_resistor_stage(slope: float) -> None:
    # h_FE = 260·(I_C/1.5 mA)^m, so that I_C^(1−m) = 260·I_B / 1.5 mA^m, by hand.
    ends = (1e-6, 0.1)
    curve = GainCurve(tuple((I_C, 260.0 * (I_C / 1.5e-3) ** slope) for I_C in ends))
    case = Case(
        topology="base-resistor",
        resistances={"RB": 4e9, "RC": 1e3},
        supply=12e3,  # V_BE is 5e-5 of it: nearly an ideal current into the base
        transistor=real(gain_curve=curve),
    )
    I_B = (12e3 - case.value("base_voltage")) / 4e9
    expected = (260.0 * I_B / 1.5e-3**slope) ** (1.0 / (1.0 - slope))
    # I_S·(1 + 1/β_R) goes beside the base current: 1e-8 of it, five times with a slope of 0.8.
    assert case.value("collector_current") == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize(("supply", "factor"), [(2.0, 180.0 / 240.0), (4000.0, 150.0 / 240.0)])
def test_stage_beyond_the_ends_has_the_gain_of_the_end(supply: float, factor: float) -> None:
    transistor = real(test_current=1e-3, gain_curve=CURVE)
    case = Case(
        topology="base-resistor", resistances={"RB": 10e6, "RC": 1.0}, supply=supply, transistor=transistor
    )
    ratio = case.value("collector_current") / case.value("base_current")
    assert not CURVE.points[0][0] <= case.value("collector_current") <= CURVE.points[-1][0]
    # No Early effect, no leakage: β is h_FE but for I_S·(1 + 1/β_R) in the base, 1e-9 of its current.
    assert ratio == pytest.approx(260.0 * factor, rel=1e-6)


@pytest.mark.parametrize("place", range(4))
@pytest.mark.parametrize("curve", [CURVE, SAGGING], ids=["usual", "sagging"])
@pytest.mark.parametrize("beside", [0.0, 1e-13, -1e-13, 1e-9, -1e-9, 1e-3, -1e-3])
def test_stage_at_a_kink_of_the_curve_is_solved(curve: GainCurve, place: int, beside: float) -> None:
    current, gain = curve.points[place]
    gain *= 260.0 / junctions(Case(topology="divider", resistances={}, supply=9.0,
                                   transistor=real(gain_curve=curve)), 298.15).h_FE(1.5e-3)  # fmt: skip
    V_BE = 0.64 + 0.0256926 * log(current / 1.5e-3)
    for RB in (1e4, 1e6):
        case = Case(
            topology="base-resistor",
            resistances={"RB": RB, "RC": 10.0},
            supply=(RB * current / gain + V_BE) * (1.0 + beside),
            transistor=real(gain_curve=curve),
        )
        assert_same(case, Solver(case).at(case.temperature), volts=AGREED)


def test_steep_piece_between_gentle_ones_is_solved_from_either_side() -> None:
    curve = GainCurve(((1e-3, 250.0), (1.01e-3, 25.0), (1.02e-3, 24.0), (1.03e-3, 2.0)))
    drives = np.geomspace(1e-6, 1e-3, 400)
    base = Case(
        topology="base-resistor", resistances={"RB": 1e6, "RC": 10.0}, supply=1.0,
        transistor=real(gain_curve=curve),
    )  # fmt: skip
    many = [replace(base, supply=float(1e6 * I_B + 0.6)) for I_B in drives]
    point = read(base.stage, together(many)).point
    assert (point.status == Status.SOLVED).all()
    assert (np.diff(point.collector_current) > 0.0).all()  # more drive, more current


@pytest.mark.parametrize(
    ("ohms", "rails_", "temperature", "gain", "V_BE"),
    [
        ((2.238e6, 5.442e3, 145.4), (6.125, -11.17), 316.7, 367.0, 0.516),
        ((25.95e3, 3.148e3, 266.0), (30.68, -18.85), 303.7, 11.83, 0.735),
        ((679.3e3, 3.882e3, 434.2), (37.48, -18.19), 384.6, 195.5, 0.760),
    ],
)
def test_step_is_cut_along_its_own_direction(
    ohms: tuple[float, ...], rails_: tuple[float, float], temperature: float, gain: float, V_BE: float
) -> None:
    # Found by a search: with each voltage limited before the cut, or one of them not cut at all, Newton's
    # steps go to and fro at a kink.
    case = Case(
        topology="split-supply", resistances=dict(zip(("RB", "RC", "RE"), ohms, strict=True)),
        supply=rails_[0], negative_supply=rails_[1], temperature=temperature,
        transistor=real(gain, V_BE, test_current=50e-3, early_voltage=93.0,
                        gain_curve=GainCurve(((0.187e-3, 200.0), (3.92e-3, 4180.0), (57.5e-3, 1.0)))),
    )  # fmt: skip
    assert_same(case, Solver(case).at(case.temperature), volts=STEEPLY)


def test_pnp_is_the_mirror_image() -> None:
    npn = Case(
        topology="split-supply", resistances={"RB": 22e3, "RC": 3.9e3, "RE": 8.2e3}, supply=9.0,
        negative_supply=-7.0, transistor=replace(BENT, thermal_resistance=280.0), leakage=40e-9,
    )  # fmt: skip
    pnp = replace(npn, polarity="pnp", supply=7.0, negative_supply=-9.0)
    for name in ("base_voltage", "collector_voltage", "emitter_voltage"):
        assert pnp.value(name) == pytest.approx(-npn.value(name), abs=1e-9)  # solved to that
    assert pnp.value("collector_current") == pytest.approx(npn.value("collector_current"), rel=1e-9)


@pytest.mark.parametrize("thermal", [None, 400.0])
def test_any_chunk_size_gives_the_same_bytes(monkeypatch: pytest.MonkeyPatch, thermal: float | None) -> None:
    rng = np.random.default_rng(3)
    transistor = replace(BENT, gain_curve=SAGGING, thermal_resistance=thermal)
    usual = Case(topology="divider", resistances=DIVIDER, supply=9.0, transistor=transistor)
    scenarios = replace(
        together([usual] * 200),
        resistances={name: ohms * rng.uniform(0.1, 4.0, 200) for name, ohms in DIVIDER.items()},
    )
    whole = read(usual.stage, scenarios).point
    for size in (1, 7, 64):
        monkeypatch.setattr(operating_point, "CHUNK", size)
        point = read(usual.stage, scenarios).point
        for name, values in vars(point).items():
            assert values.tobytes() == getattr(whole, name).tobytes(), name


def test_shapes_may_be_numbers_or_arrays() -> None:
    usual = Case(topology="divider", resistances=DIVIDER, supply=9.0, transistor=BENT)
    one = usual.scenarios
    numbers = replace(
        one,
        resistances={name: float(ohms[0]) for name, ohms in cast(Any, one.resistances).items()},
        **{name: float(np.ravel(getattr(one, name))[0]) for name in (
            "gain", "base_emitter_voltage", "leakage", "supply", "ripple", "negative_supply", "temperature")},
    )  # fmt: skip
    found, expected = (read(usual.stage, each).point.collector_current for each in (numbers, one))
    assert found == expected


# Small signal and heat


@settings(max_examples=60, deadline=None)
@given(cases(thermal=False), curves())
def test_feedthrough_is_the_finite_difference_of_the_operating_point(case: Case, curve: GainCurve) -> None:
    case = replace(bent(case, curve), ripple=0.0)
    output = "emitter_voltage" if case.topology == "follower" else "collector_voltage"
    h = 1e-4
    up, down = (replace(case, supply=case.supply + step) for step in (h, -h))
    currents = [each.value("collector_current") for each in (down, up)]
    assume(not any(min(currents) * 0.99 < I_C < max(currents) * 1.01 for I_C, _ in curve.points))  # a kink
    difference = (up.value(output) - down.value(output)) / (2.0 * h)
    # Each end is solved to some 2e-8 V, of 2e-4 V apart; the h² term where a junction turns off.
    assert case.value("supply_feedthrough") == pytest.approx(difference, rel=2e-3, abs=2e-3)


def test_small_signal_gain_of_the_base_current_is_h_fe_times_one_over_one_less_the_slope() -> None:
    # i_c/i_b = β/(1 − m) where h_FE goes as I_C^m: differentiate I_B = I_C/β(I_C). No Early effect.
    slope = log(260.0 / 240.0) / log(10.0)
    transistor = real(gain_curve=CURVE)
    at_ = flow(law_of(transistor, 298.15, leakage=0.0), 0.66, -5.0)
    beta = float(at_.collector) / float(at_.base)
    # What I_S adds to both currents: 1e-9 of them.
    assert at_.collector_be / at_.base_be == pytest.approx(beta / (1.0 - slope), rel=1e-7)


def test_voltage_gain_of_a_current_driven_stage_knows_the_slope_of_the_curve() -> None:
    # A source of 10 MΩ, emitter bypassed, no divider to speak of: gain −(i_c/i_b)·RC/(10 MΩ + r_π…), by hand.
    case = Case(
        topology="base-resistor", resistances={"RB": 1.5e6, "RC": 2e3, "RE": 100.0}, supply=9.0,
        transistor=real(gain_curve=CURVE), signal=Signal(bypassed=True, source_resistance=1e7),
    )  # fmt: skip
    reading = case.reading()
    I_C, I_B = case.value("collector_current"), case.value("base_current")
    slope, V_T = log(260.0 / 240.0) / log(10.0), 8.617333262e-5 * 298.15
    r_pi = V_T / (I_B * (1.0 - slope))
    across = 1.0 / (1.0 / r_pi + 1.0 / 1.5e6)
    gain = -I_C / V_T * 2e3 * across / (across + 1e7)
    assert 1e-3 < I_C < 10e-3 and reading.point.status[0] == Status.SOLVED
    assert case.value("voltage_gain") == pytest.approx(gain, rel=1e-6)  # I_S beside the base current: 1e-9


@settings(max_examples=60, deadline=None)
@given(cases(thermal=False), curves())
def test_slope_of_the_power_is_a_finite_difference(case: Case, curve: GainCurve) -> None:
    case, h = bent(case, curve), 1e-2
    ports = condense(case.wiring, case.scenarios.resistances).ports(rails(case.polarity, case.scenarios))
    problem = Problem.of(ports, cast(Transistor, case.transistor), case.scenarios)
    T = np.array([case.temperature])
    with np.errstate(all="ignore"):
        cold, here, hot = (isothermal(problem, T + step) for step in (-h, 0.0, h))
        slope = power_slope(problem, T, here)
    currents = [float(cold.I_C[0]), float(hot.I_C[0])]
    assume(not any(min(currents) * 0.99 < I_C < max(currents) * 1.01 for I_C, _ in curve.points))  # a kink
    difference = float(hot.power[0] - cold.power[0]) / (2.0 * h)
    # Voltages are solved to 2e-8 V across a few ohms at least, 0.02 K apart; h² term of up to 1e-4 of it.
    least = 2e-8 * max(abs(float(here.I_C[0])) + abs(float(here.I_B[0])), 1e-9) * 1e2 / h
    assert slope[0] == pytest.approx(difference, rel=5e-3, abs=least + 1e-12)


def test_runaway_is_named_with_a_curve_and_a_falling_one_prevents_it() -> None:
    # A base resistor, no RE, 40 V: with the gain as it is the stage burns; falling to a tenth, it cannot.
    case = Case(
        topology="base-resistor", resistances={"RB": 200e3, "RC": 10.0}, supply=40.0,
        transistor=real(thermal_resistance=300.0, leakage=1e-9, test_current=1.5e-3), leakage=1e-9,
    )  # fmt: skip
    rising = GainCurve(((1e-3, 200.0), (0.1, 900.0)))
    falling = GainCurve(((1e-3, 200.0), (2e-3, 180.0), (5e-3, 10.0)))
    assert bent(case, rising).reading().point.status[0] == Status.RUNAWAY
    cool = bent(case, falling)
    assert_same(cool, cast(Any, warmed(cool).point), volts=AGREED + 1e-7)


# Forty digits


class BentProblem(oracle.Problem):
    """The 40-digit problem with a gain curve, its own writing of physics.md section 2."""

    def __init__(self, case: dict[str, Any]) -> None:
        super().__init__(case)
        self.points = [(mp.mpf(I_C), mp.mpf(gain)) for I_C, gain in case["curve"]]

    def h_FE(self, current: Any) -> Any:
        """Straight in logarithms between points, held beyond."""
        (first, at_first), (last, at_last) = self.points[0], self.points[-1]
        if current <= first:
            return at_first
        if current >= last:
            return at_last
        low, high = next(pair for pair in itertools.pairwise(self.points) if pair[1][0] >= current)
        share = (mp.log(current) - mp.log(low[0])) / (mp.log(high[0]) - mp.log(low[0]))
        return mp.exp(mp.log(low[1]) + share * (mp.log(high[1]) - mp.log(low[1])))

    def currents(self, v_be: Any, v_bc: Any, T: Any) -> tuple[Any, Any]:
        """The base current's forward part divided by the curve's ratio."""
        I_B, I_C = super().currents(v_be, v_bc, T)
        d, T0 = self.device, mp.mpf("298.15")
        V_T, V_A = mp.mpf("1.380649e-23") * T / mp.mpf("1.602176634e-19"), d.get("early_voltage", mp.inf)
        early = 1 + (d["test_voltage"] - d["vbe"]) / V_A
        I_S = d["test_current"] / early * mp.exp(-(d["vbe"] + d["drift"] * (T - T0)) / V_T)
        beta = d["gain"] / early * (T / T0) ** (d["gain_drift"] * T0)
        forward = I_S * mp.exp(v_be / V_T)
        ratio = self.h_FE(mp.re(forward * (1 - v_bc / V_A))) / self.h_FE(d["test_current"])
        return I_B + (forward - I_S) / beta * (1 / ratio - 1), I_C


def digits(transistor: Transistor, leakage: str) -> BentProblem:
    """The 40-digit laws of a transistor, without a network to speak of."""
    return BentProblem({
        "topology": "follower", "polarity": "npn", "V+": "9", "T": "298.15", "start": ["0.6", "5", "1e-3"],
        "R": {"R1": "1e3", "R2": "1e3", "RE": "1e3"},
        "transistor": {**oracle.FULL, "leakage": leakage},
        "curve": cast(GainCurve, transistor.gain_curve).points,
    })  # fmt: skip


FORTY = {
    "divider, warm from itself": {
        "topology": "divider", "polarity": "npn", "V+": "9", "T": "323.15", "transistor": oracle.FULL,
        "R": {"R1": "68e3", "R2": "13e3", "RC": "3.3e3", "RE": "1e3"}, "start": ["0.58", "5", "0.9e-3"],
        "curve": CURVE.points,
    },
    "base resistor, PNP, on the falling side": {
        "topology": "base-resistor", "polarity": "pnp", "V+": "12", "T": "298.15",
        "transistor": {**oracle.FULL, "thermal_resistance": "100"},
        "R": {"RB": "82e3", "RC": "150", "RE": "22"}, "start": ["0.72", "6", "25e-3"],
        "curve": CURVE.points,
    },
}  # fmt: skip


@pytest.mark.parametrize("name", FORTY)
def test_operating_point_is_that_of_forty_digits(name: str) -> None:
    row = FORTY[name]
    with mp.workdps(oracle.WORKING_DIGITS):
        problem = BentProblem(row)
        node, v_be, _, _, I_C, T_j = problem.state(problem.solve())
        expected = {"base_voltage": node["B"], "collector_voltage": node["C"], "emitter_voltage": node["E"]}
    case = Case(
        topology=row["topology"], polarity=row["polarity"], supply=float(row["V+"]),
        temperature=float(row["T"]), resistances={key: float(ohms) for key, ohms in row["R"].items()},
        leakage=40e-9,
        transistor=replace(BENT, thermal_resistance=float(row["transistor"]["thermal_resistance"])),
    )  # fmt: skip
    # 1e-6 K of junction temperature moves these stages' nodes by up to some 40 mV/K.
    for quantity, volts in expected.items():
        assert case.value(quantity) == pytest.approx(float(volts), abs=5e-8), quantity
    assert case.reading().point.base_emitter[0] == pytest.approx(float(v_be), abs=5e-8)
    assert case.value("collector_current") == pytest.approx(float(I_C), rel=1e-7)
    assert not 1.4e-3 < float(I_C) < 1.6e-3  # where the curve says nothing
    assert case.value("junction_temperature") == pytest.approx(float(T_j), abs=1e-6)
