"""Capacitors: each takes its share of the lowest frequency, the next value up, and together they meet it."""

from __future__ import annotations

from dataclasses import replace
from math import pi, sqrt

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st
from variation.stages import coupled, ideal, limits, real, stage

from biasband.boards.sampling import sample
from biasband.circuit.low_corner import low_corner_frequency, seen_resistances
from biasband.circuit.quantities import LOW_CORNER, vocabulary, words
from biasband.circuit.reading import read
from biasband.errors import PhysicallyImpossible
from biasband.files.series_files import load_all
from biasband.parts.series import nearest
from biasband.quantity import Kind, parse
from biasband.stage import Capacitor, Limits, Requirement, Signal, Stage, Supply, Target
from biasband.values.capacitors import choose_capacitors
from biasband.values.choosing import choose
from biasband.variation.contributors import axes, realise
from biasband.variation.corners import corners, vertices
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import points_of_use
from values.test_ideal import target_stage

SERIES = load_all()
CLASS = {"tolerance": 0.2, "temperature_change": 0.15, "temperature_distance": 35.0}
LEFT = 0.8 * 0.85
"""What is left of a capacitor of that class at worst."""


def wanting(of: Stage, frequency: float | None = 50.0, **given: float) -> Stage:
    """The stage with capacitors for a lowest frequency [Hz]; `given` has values [F]."""
    signal = replace(of.signal, lowest_frequency=frequency)
    capacitors = tuple(Capacitor(name=n, value=given.get(n), **CLASS) for n in signal.capacitors)
    return replace(of, signal=signal, capacitors=capacitors)


def low_corners(of: Stage):
    """The corners of the low corner frequency [Hz]."""
    return corners(of, {LOW_CORNER: words(of)[LOW_CORNER]}, cut_off=cut_off_current(of)).ranges[LOW_CORNER]


def nominal_resistances(of: Stage) -> dict[str, float]:
    bare = replace(of, capacitors=())
    seen = seen_resistances(read(bare, realise(bare, {})))
    return {name: float(np.ravel(ohms)[0]) for name, ohms in seen.items()}


def test_hand_formula_is_one_over_two_pi_f_r_with_shares_as_one_over_root_r():
    of = wanting(coupled())
    design = choose(of, SERIES)
    seen = nominal_resistances(of)
    whole = sum(1.0 / sqrt(ohms) for ohms in seen.values())
    for choice in design.capacitors:
        share = 1.0 / sqrt(seen[choice.name]) / whole
        assert choice.hand.frequency == pytest.approx(50.0 * share, rel=1e-12)  # the same arithmetic
        assert choice.hand.resistance == pytest.approx(seen[choice.name], rel=1e-12)
        assert choice.hand.farads == pytest.approx(1 / (2 * pi * 50.0 * share * seen[choice.name]), rel=1e-12)
    assert sum(choice.hand.frequency for choice in design.capacitors) == pytest.approx(50.0, rel=1e-12)


def test_refined_takes_the_least_resistance_at_any_corner_and_what_is_left_of_the_capacitor():
    of = wanting(coupled())
    bare, box = replace(of, capacitors=()), axes(replace(of, capacitors=()))
    places = vertices(box)
    scenarios = realise(bare, {axis.name: places[:, k] for k, axis in enumerate(box)})
    seen = seen_resistances(read(bare, scenarios))
    for choice in choose(of, SERIES).capacitors:
        step = choice.ideal
        assert step.resistance == pytest.approx(float(np.min(seen[choice.name])), rel=1e-12)
        assert step.left == pytest.approx(LEFT, rel=1e-15)
        assert step.raised == 1.0
        expected = 1.0 / (2.0 * pi * step.frequency * step.resistance * LEFT)
        assert step.farads == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("series", ["E3", "E6", "E12"])
def test_value_is_the_next_up_in_its_series(series):
    of = wanting(coupled())
    of = replace(of, capacitors=tuple(replace(c, series=series) for c in of.capacitors))
    for choice in choose(of, SERIES).capacitors:
        assert choice.chosen
        assert choice.value >= choice.ideal.farads
        assert nearest(SERIES[series], choice.value).chosen == choice.value
        below = nearest(SERIES[series], choice.value * (1.0 - 1e-9)).below
        assert below < choice.ideal.farads


def test_together_they_meet_the_frequency_at_every_corner_and_on_every_board():
    of = choose(wanting(coupled()), SERIES).stage
    found = low_corners(of)
    assert found.high.value <= 50.0
    measure = {LOW_CORNER: words(of)[LOW_CORNER]}
    boards = sample(of, measure, points_of_use(of), boards=2048, seed=3, cut_off=cut_off_current(of))
    drawn = boards.spread[LOW_CORNER]
    assert found.low.value <= drawn.lowest_in_use.lowest <= drawn.highest_in_use.highest <= found.high.value
    assert {"C_in", "C_out", "C_bypass"} <= set(found.high.at)
    assert found.high.coordinates["C_bypass"] == -1.0  # what is smallest lets least through


def test_shares_make_the_sum_of_capacitances_least():
    # Lagrange: Σ 1/(R·f) with Σ f held is least at f ∝ 1/√R; any other shares need more.
    steps = [choice.hand for choice in choose(wanting(coupled()), SERIES).capacitors]
    best = sum(step.farads for step in steps)
    assert best == pytest.approx(sum(1 / sqrt(s.resistance) for s in steps) ** 2 / (2 * pi * 50.0), rel=1e-12)
    for other in ((0.8, 0.1, 0.1), (0.1, 0.1, 0.8), (1 / 3, 1 / 3, 1 / 3)):
        assert best < sum(1 / (2 * pi * 50 * f * s.resistance) for f, s in zip(other, steps, strict=True))


def test_bypass_capacitor_leads():
    hertz = {choice.name: choice.hand.frequency for choice in choose(wanting(coupled()), SERIES).capacitors}
    assert hertz["C_bypass"] > 5.0 * max(hertz["C_in"], hertz["C_out"])


def test_given_values_stay_and_the_free_ones_share_what_they_leave():
    free = choose(wanting(coupled()), SERIES)
    given = choose(wanting(coupled(), C_bypass=1e-3), SERIES)
    by_name = {choice.name: choice for choice in given.capacitors}
    bypass = by_name["C_bypass"]
    assert (bypass.value, bypass.chosen, bypass.hand, bypass.ideal) == (1e-3, False, None, None)
    alone = 1.0 / (2.0 * pi * nominal_resistances(given.stage)["C_bypass"] * 1e-3)
    left = sum(choice.hand.frequency for choice in given.capacitors if choice.hand)
    assert left == pytest.approx(50.0 - alone, rel=1e-12)
    assert by_name["C_in"].value < free.capacitors[0].value
    assert low_corners(given.stage).high.value <= 50.0
    assert given.warnings == ()


def test_given_value_that_is_too_small_is_told_with_the_frequency_reached():
    design = choose(wanting(coupled(), C_bypass=22e-6), SERIES)
    (warning,) = design.warnings
    assert "above the 50 Hz wanted: C_bypass given too small" in warning
    # It is coldest at the worst corner, where the class has changed as much as it may; four digits are told.
    told = parse(warning.removeprefix("low_corner_frequency: ").split(" at worst")[0], Kind.FREQUENCY)
    assert told == pytest.approx(low_corners(design.stage).high.value, rel=5e-4)
    # The others get the tenth of the frequency that is always theirs.
    assert sum(c.ideal.frequency for c in design.capacitors if c.ideal) == pytest.approx(5.0, rel=1e-12)
    assert {c.ideal.raised for c in design.capacitors if c.ideal} == {1.0}


def test_without_a_frequency_given_values_are_taken_as_they_are():
    given = {"C_in": 1e-6, "C_out": 1e-6, "C_bypass": 1e-6}
    design = choose(wanting(coupled(), None, **given), SERIES)
    assert {choice.name: choice.value for choice in design.capacitors} == given
    assert design.warnings == () and design.chosen == 0


def feeding_back() -> Stage:
    """Collector feedback with a load that takes most of its loop's gain: capacitors act on each other."""
    ohms = {"RB": 24e3, "RC": 56e3}
    return stage("collector-feedback", ohms, real(), 16.0, signal=Signal(load=56.0))


def test_capacitors_that_act_on_each_other_are_raised_until_together_they_meet_it():
    of = wanting(feeding_back())
    steps = [choice.ideal for choice in choose_capacitors(of, SERIES).capacitors]
    assert sum(step.frequency for step in steps) == pytest.approx(50.0, rel=1e-12)  # adding up
    (raised,) = {step.raised for step in steps}
    assert raised > 1.5
    for step in steps:
        expected = raised / (2.0 * pi * step.frequency * step.resistance * LEFT)
        assert step.farads == pytest.approx(expected, rel=1e-12)
    design = choose(of, SERIES)
    assert low_corners(design.stage).high.value <= 50.0
    assert design.warnings == ()


@settings(deadline=None, max_examples=40, suppress_health_check=list(HealthCheck))
@given(
    st.sampled_from(["base-resistor", "collector-feedback", "divider", "split-supply", "follower"]),
    st.floats(0.3e-3, 3e-3),
    st.one_of(st.none(), st.floats(1e3, 1e5)),
    st.floats(0.0, 1e4),
    st.floats(5.0, 1e4),
)
def test_any_designed_stage_meets_its_frequency_or_says_by_how_much_not(
    topology, current, load, source_resistance, frequency
):
    target = Target(collector_current=current)
    signal = Signal(load=load, source_resistance=source_resistance, bypassed=topology != "follower")
    of = replace(target_stage(topology, target, signal=signal), snapping="nearest")
    try:
        design = choose(wanting(of, frequency), SERIES)
    except PhysicallyImpossible:
        assume(False)
    assert design.warnings == () or "low_corner" not in design.warnings[-1]
    assert low_corners(design.stage).high.value <= frequency * (1.0 + 1e-9)  # found to 1e-11
    again = choose(design.stage, SERIES)
    assert again.stage == design.stage and again.chosen == 0


def test_resistors_are_those_of_the_stage_without_capacitors():
    target = Target(collector_current=1e-3)
    signal = Signal(load=47e3, source_resistance=600.0, bypassed=True)
    of = target_stage("divider", target, signal=signal)
    with_them = replace(wanting(of), requirements=(Requirement(id="F", quantity=LOW_CORNER, at_most=20.0),))
    plain, found = choose(of, SERIES), choose(with_them, SERIES)
    assert found.parts == plain.parts and found.stage.resistors == plain.stage.resistors
    assert found.stage.requirements == with_them.requirements
    assert (found.chosen, plain.chosen) == (7, 4)


def test_frequency_that_no_capacitor_reaches_is_impossible():
    with pytest.raises(PhysicallyImpossible, match=r"C_in would have to be 1\.\d+ F.*\n.*C_bypass would"):
        choose(wanting(coupled(), 1e-3), SERIES)


def test_nothing_smaller_than_the_smallest_capacitor_is_taken():
    # 1/(2π · 1e10 Hz · 50 kΩ) is 0.0003 pF.
    assert min(c.value for c in choose(wanting(coupled(), 1e10), SERIES).capacitors) == 1e-12


def test_stage_that_has_no_signal_answers_has_no_capacitors():
    # An ideal transistor has no tangent.
    of = replace(coupled(), transistor=ideal(100.0))
    with pytest.raises(PhysicallyImpossible, match="no operating point for a signal to move"):
        choose(wanting(of), SERIES)


def test_given_capacitors_need_no_operating_point():
    of = wanting(replace(coupled(), transistor=ideal(100.0)), C_in=1e-6, C_out=1e-6, C_bypass=1e-4)
    design = choose(of, SERIES)
    assert (design.stage, design.warnings) == (of, ())


def test_all_given_and_too_small_is_told():
    given = {"C_in": 1e-6, "C_out": 1e-6, "C_bypass": 1e-6}
    (warning,) = choose(wanting(coupled(), **given), SERIES).warnings
    assert "C_in, C_out, C_bypass given too small" in warning


def test_saturated_corners_do_not_size_the_capacitors():
    # 3:1 of gain saturates a base-resistor stage at one end; its input is then all but short.
    of = stage(
        "base-resistor",
        {"RB": 680e3, "RC": 2.2e3},
        real(gain=limits(100.0, 200.0, 600.0)),
        Supply(voltage=Limits.exactly(9.0)),
        signal=Signal(source_resistance=0.0),
    )
    box = vertices(axes(of))
    reading = read(of, realise(of, {axis.name: box[:, k] for k, axis in enumerate(axes(of))}))
    seen, active = seen_resistances(reading)["C_in"], reading.regions(0.0) == 0
    assert active.any() and not active.all() and np.min(seen) < np.min(seen[active]) / 2.0
    (choice,) = choose(wanting(of), SERIES).capacitors
    assert choice.ideal.resistance == pytest.approx(float(np.min(seen[active])), rel=1e-12)


def test_corner_of_the_chosen_nominal_stage_is_in_the_vocabulary():
    of = choose(wanting(coupled()), SERIES).stage
    reading = read(of, realise(of, {}))
    row = vocabulary(("R1", "R2", "RC", "RE"), with_capacitors=True)[LOW_CORNER]
    assert float(np.ravel(row.read(reading))[0]) == float(low_corner_frequency(reading)[0]) < 50.0
