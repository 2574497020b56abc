"""Monotone or not: node voltages of an active stage are, powers and swings past their crest are not."""

from __future__ import annotations

import numpy as np
import pytest
from variation.stages import coupled, ideal, limits, running_away, some, stage, with_resistor

from biasband.boards import monotone as room
from biasband.boards.monotone import Monotone, monotone
from biasband.circuit.quantities import Quantity
from biasband.quantity import Kind
from biasband.stage import IdealTransistor, Limits, Signal, Stage
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import NOMINAL_USE, points_of_use

VOLTAGES = ("collector_voltage", "base_voltage", "emitter_voltage", "collector_emitter_voltage")
CURRENTS = ("collector_current", "base_current", "emitter_current", "supply_current")


def looked(of: Stage, *names: str, seed: int = 1) -> dict[str, Monotone]:
    """What is found for these quantities of a stage."""
    points, cut_off = points_of_use(of), cut_off_current(of)
    return dict(monotone(of, some(of, *names), points, seed=seed, cut_off=cut_off))


def divider(transistor: IdealTransistor | None = None, **more) -> Stage:
    """An active divider in which every part varies, and the supply in use."""
    return stage(
        "divider",
        {"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE": 820.0},
        transistor or ideal(limits(165.0, 260.0, 410.0), limits(0.57, 0.64, 0.72)),
        limits(8.1, 9.0, 9.9),
        resistor={"tolerance": 0.02},
        **more,
    )


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_voltages_and_currents_of_an_active_divider_are_monotone(polarity):
    # physics.md 5: with V_BE constant they are linear-fractional in every parameter.
    for name, found in looked(divider(polarity=polarity), *VOLTAGES, *CURRENTS).items():
        assert found.holds and found.breaks_along is None and found.unsolved == 0, name


def test_voltages_stay_monotone_with_a_real_transistor_that_heats_itself():
    for name, found in looked(coupled(), "collector_voltage", "collector_current").items():
        assert found.holds, name


def crest(gain: Limits, polarity: str = "npn") -> Stage:
    """The stage of physics.md 5: 12 V, RB 240 k, RC 2.2 k, V_BE 0.7 V, no RE."""
    return stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(gain), 12.0, polarity=polarity)


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("name", ["transistor_power", "symmetric_peak_swing"])
def test_power_and_swing_are_not_monotone_past_half_the_load_line(name, polarity):
    # physics.md 5: h_FE 30…100 gives 12.6 and 7.7 mW at its ends, 16.4 mW at about 58.
    found = looked(crest(limits(30.0, 55.0, 100.0), polarity), name, "collector_voltage")
    assert found[name] == Monotone(False, found[name].looked_at, 0, "gain")
    assert found["collector_voltage"].holds


@pytest.mark.parametrize("name", ["transistor_power", "symmetric_peak_swing"])
def test_power_and_swing_are_monotone_on_one_side_of_the_crest(name):
    # The crest is at h_FE 58: 30…50 lies below it, 65…100 beyond.
    for gain in (limits(30.0, 40.0, 50.0), limits(65.0, 80.0, 100.0)):
        assert looked(crest(gain), name)[name].holds


def test_crest_next_to_a_limit_is_seen_by_the_short_step_there():
    # V_CE·I_C is highest at β = V_CC/(2·RC·I_B) = 57.9, + V_BE·I_B is nothing: 1.4 % of the upper half
    # of the axis below its limit. A step of half the axis rises on the whole and would see nothing.
    found = looked(crest(limits(30.0, 50.0, 58.2)), "transistor_power")["transistor_power"]
    assert found.breaks_along == "gain"


def saturating(resistance: float, tolerance: float) -> Stage:
    """A divider of which only R1 varies: it saturates where R1 is small (physics.md 5)."""
    of = stage(
        "divider",
        {"R1": resistance, "R2": 12e3, "RC": 3.3e3, "RE": 1e3},
        ideal(100.0, 0.7, saturation_voltage=0.2),
        12.0,
    )
    return with_resistor(of, "R1", tolerance=tolerance)


def test_collector_turns_where_saturation_begins():
    # physics.md 5: R1 20…60 k gives 3.583 and 7.579 V at its ends, 3.476 V where saturation begins.
    found = looked(saturating(40e3, 0.5), "collector_voltage")["collector_voltage"]
    assert not found.holds and found.breaks_along == "R1"


def test_collector_is_monotone_where_the_divider_stays_active():
    assert looked(saturating(50e3, 0.2), "collector_voltage")["collector_voltage"].holds


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
def test_headrooms_of_a_bypassed_stage_are_monotone(polarity):
    # Bypassed: I_C·r_ac one way and V_CE − V_CE(sat) the other, both linear-fractional.
    of = divider(polarity=polarity, signal=Signal(load=47e3, source_resistance=600.0, bypassed=True))
    for name, found in looked(of, "headroom_up", "headroom_down").items():
        assert found.holds, name


def test_what_does_not_move_at_all_counts_as_monotone():
    # V_BE constant and the emitter grounded: the base stands still.
    assert looked(crest(limits(30.0, 40.0, 50.0)), "base_voltage")["base_voltage"].holds


def test_every_point_of_use_is_looked_at():
    # The crest, by hand: β = V_CC·RB/(2·RC·(V_CC − 0.7)), 57.9 at 12 V and 59.8 at 8 V.
    gain = limits(58.5, 60.0, 61.0)
    of = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(gain), limits(8.0, 12.0, 12.5))
    power, cut_off = some(of, "transistor_power"), cut_off_current(of)
    assert monotone(of, power, [NOMINAL_USE], seed=1, cut_off=cut_off)["transistor_power"].holds
    assert not looked(of, "transistor_power")["transistor_power"].holds


def test_lowest_and_highest_of_a_rippled_measure_are_both_looked_at():
    # With x along R1's axis, value x + a·x² and ripple a·x²: x at the lowest, x + 2a·x² at the highest,
    # which turns at −1/4a, in the box for a = 1.
    def x(reading):
        return (np.asarray(reading.scenarios.resistances["R1"]) / 68e3 - 1.0) / 0.02

    of = divider()
    for ripple, holds in ((lambda r: 0.1 * x(r) ** 2, True), (lambda r: x(r) ** 2, False)):
        value = Quantity("rippled", Kind.NUMBER, lambda r, ripple=ripple: x(r) + ripple(r), ripple)
        found = monotone(of, {"rippled": value}, points_of_use(of), seed=1, cut_off=0.0)["rippled"]
        assert found.holds is holds


def test_which_way_may_change_from_line_to_line():
    # x·y rises with x where y > 0 and falls where y < 0; its extremes are at vertices all the same.
    of = divider()
    product = measure("product", lambda x, y: (x - 68e3) * (y - 13e3))
    assert monotone(of, product, points_of_use(of), seed=1, cut_off=0.0)["product"].holds


def measure(name: str, of_ohms) -> dict[str, Quantity]:
    """A quantity made of R1 and R2 alone."""

    def read(reading):
        ohms = reading.scenarios.resistances
        return np.asarray(of_ohms(ohms["R1"], ohms["R2"]), dtype=float)

    return {name: Quantity(name, Kind.NUMBER, read)}


@pytest.mark.parametrize(("depth", "holds"), [(1e-9, True), (1e-3, False)])
def test_turn_less_than_rounding_is_none(depth, holds):
    # Falls by `depth` of its size on the way to the middle of R2's axis, and rises again.
    of = divider()
    dip = measure("dip", lambda x, y: 1.0 + depth * np.abs(y / 13e3 - 1.0) / 0.02)
    found = monotone(of, dip, points_of_use(of), seed=1, cut_off=0.0)["dip"]
    assert (found.holds, found.breaks_along) == (holds, None if holds else "R2")


def test_deepest_turn_names_the_contributor():
    of = divider()
    bowl = measure("bowl", lambda x, y: 1.0 + 0.1 * (x / 68e3 - 1.0) ** 2 + (y / 13e3 - 1.0) ** 2)
    assert monotone(of, bowl, points_of_use(of), seed=1, cut_off=0.0)["bowl"].breaks_along == "R2"


def test_place_that_does_not_solve_makes_it_not_hold():
    of = with_resistor(running_away(), "RC", tolerance=0.01)
    found = looked(of, "collector_voltage")["collector_voltage"]
    assert not found.holds and found.unsolved > 0 and found.breaks_along is None


def test_value_missing_in_one_part_of_the_box_makes_it_not_hold():
    of = divider()
    hole = measure("hole", lambda x, y: np.where(x > 1.015 * 68e3, np.nan, x))
    found = monotone(of, hole, points_of_use(of), seed=1, cut_off=0.0)["hole"]
    assert not found.holds and 0 < found.unsolved < found.looked_at


def test_stage_that_does_not_vary_by_board_is_monotone():
    of = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(50.0), limits(11.0, 12.0, 13.0))
    assert looked(of, "collector_voltage")["collector_voltage"] == Monotone(True, 3, 0, None)


def test_places_are_counted_over_axes_lines_steps_and_points_of_use():
    found = looked(divider(), "collector_voltage")["collector_voltage"]
    # Six axes; 64 lines at random and 2⁵ edges; seven steps; nominal use and two limits of the supply.
    assert found.looked_at == 6 * (64 + 32) * 7 * 3


def test_same_seed_looks_at_the_same_places():
    one, again, other = (room._lines(room.board_axes(divider()), seed) for seed in (1, 1, 2))
    assert np.array_equal(one, again) and not np.array_equal(one, other)
    assert np.abs(one).max() == 1.0  # from limit to limit, never beyond
