"""Choosing: preferred values, the rest designed anew after each, fixed ones untouched, misses told."""

from __future__ import annotations

from dataclasses import replace

import pytest
from circuit.stages import value
from hypothesis import HealthCheck, assume, given, settings
from variation.stages import with_resistor, with_resistors

from biasband.errors import PhysicallyImpossible
from biasband.files.series_files import load_all
from biasband.parts.series import nearest
from biasband.stage import Signal, Target
from biasband.values.choosing import choose
from biasband.values.device import refined
from biasband.values.ideal import ideal
from values.test_ideal import MET, ideal_stage, solved, target_stage, targets

SERIES = load_all()


@settings(
    deadline=None, max_examples=60, suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much]
)
@given(of=targets())
def test_chosen_values_are_preferred_fixed_ones_stay_and_choosing_again_changes_nothing(of):
    try:
        design = choose(of, SERIES)
    except PhysicallyImpossible:
        assume(False)
    for before, after in zip(of.resistors, design.stage.resistors, strict=True):
        if before.value is not None:
            assert after.value == before.value
        else:
            assert nearest(SERIES[after.series], after.value).chosen == after.value
    again = choose(design.stage, SERIES)
    assert again.stage == design.stage
    assert again.chosen == 0 and again.frozen == len(of.resistors)


@pytest.mark.parametrize("series", ["E6", "E12", "E96"])
def test_each_resistor_is_snapped_to_its_own_series(series):
    of = with_resistors(target_stage("divider", Target(collector_current=1e-3)), series="E24")
    of = with_resistor(of, "RC", series=series)
    design = choose(of, SERIES)
    assert (
        design.stage.resistor("RC").value == nearest(SERIES[series], design.stage.resistor("RC").value).chosen
    )
    assert design.chosen == 4 and design.frozen == 0


def test_rest_is_designed_anew_after_each_snap():
    of = with_resistors(target_stage("divider", Target(collector_current=1.2e-3)), series="E3")
    of = replace(of, snapping="nearest")
    design = choose(of, SERIES)
    values = {r.name: r.value for r in design.stage.resistors}
    # By hand, from the emitter to the base: each given the ones already snapped.
    held: dict[str, float] = {}
    for name in ("RE", "RC", "R2", "R1"):
        steps = ideal(of, of.target, held, refined(of)).steps
        held[name] = nearest(SERIES["E3"], steps[name].ohms).chosen
    assert values == held
    at_once = {
        n: nearest(SERIES["E3"], s.ohms).chosen
        for n, s in ideal(of, of.target, {}, refined(of)).steps.items()
    }
    assert values != at_once  # the case is one in which it matters


def test_snapping_finer_comes_nearer_to_the_target():
    def off(series: str) -> float:
        of = with_resistors(target_stage("divider", Target(collector_current=1e-3)), series=series)
        of = replace(of, snapping="nearest")
        return abs(value(solved(choose(of, SERIES).stage), "collector_current") / 1e-3 - 1.0)

    assert off("E192") < 0.02 < 0.5  # two steps of 1.2 %, derived anew after each


def test_parts_tell_hand_ideal_and_chosen():
    of = target_stage("divider", Target(collector_current=1e-3), fixed={"RC": 3.3e3})
    parts = {part.name: part for part in choose(of, SERIES).parts}
    assert not parts["RC"].chosen and parts["RC"].value == 3.3e3
    assert parts["RC"].hand is None and parts["RC"].ideal is None
    for name in ("R1", "R2", "RE"):
        assert parts[name].chosen and parts[name].hand and parts[name].ideal


def test_fixed_collector_resistor_keeps_current_and_collector_and_gives_up_the_emitter():
    # Mid-swing with RC 3.3 k at 1 mA: V_C 5.7 V wants V_E = 2·5.7 − 9.3 = 2.1 V, so 1 V is missed.
    of = target_stage("divider", Target(collector_current=1e-3, emitter_voltage=1.0), fixed={"RC": 3.3e3})
    reading = solved(ideal_stage(of))
    assert value(reading, "collector_current") == pytest.approx(1e-3, rel=MET)
    assert value(reading, "collector_voltage") == pytest.approx(5.7, rel=MET)
    assert value(reading, "emitter_voltage") == pytest.approx(2.1, rel=MET)
    (warning,) = choose(of, SERIES).warnings
    for figure in ("emitter_voltage", "RC", "1 V", "2.1 V"):
        assert figure in warning


def test_fixed_divider_keeps_the_current_and_gives_up_the_emitter():
    of = target_stage(
        "divider", Target(collector_current=1e-3, emitter_voltage=1.0), fixed={"R1": 68e3, "R2": 12e3}
    )
    reading = solved(ideal_stage(of))
    assert value(reading, "collector_current") == pytest.approx(1e-3, rel=MET)
    assert value(reading, "headroom_up") == pytest.approx(9.0 - value(reading, "collector_voltage"), rel=MET)
    assert any("emitter_voltage" in warning for warning in choose(of, SERIES).warnings)


def test_fixed_base_and_emitter_decide_the_current_and_the_miss_is_told_with_figures():
    fixed = {"R1": 68e3, "R2": 12e3, "RE": 1e3}
    of = target_stage("divider", Target(collector_current=1e-3), fixed=fixed)
    reached = value(solved(ideal_stage(of)), "collector_current")
    # (9 V · 12/80 − 0.62 V) over 1 k and the divider's 10.2 k/260 is about 0.7 mA.
    assert reached == pytest.approx(0.7e-3, rel=0.02)
    assert f"{reached * 1e6:.1f}" == "698.3"
    (warning,) = [w for w in choose(of, SERIES).warnings if w.startswith("collector_current")]
    for figure in ("R1", "R2", "RE", "1 mA", "698.3 µA"):
        assert figure in warning


def test_given_voltage_of_the_collector_outranks_the_emitter_s():
    aim = Target(collector_current=1e-3, collector=6.0, emitter_voltage=1.0)
    of = target_stage("divider", aim, fixed={"R2": 47e3, "R1": 180e3})
    reading = solved(ideal_stage(of))
    assert value(reading, "collector_current") == pytest.approx(1e-3, rel=MET)
    assert value(reading, "collector_voltage") == pytest.approx(6.0, rel=MET)


def test_collector_voltage_that_the_fixed_resistor_decides_is_a_warning():
    aim = Target(collector_current=1e-3, collector=6.0, emitter_voltage=1.0)
    of = target_stage("divider", aim, fixed={"RC": 1e3})
    design = choose(of, SERIES)
    assert value(solved(ideal_stage(of)), "collector_voltage") == pytest.approx(8.0, rel=MET)
    assert any("collector_voltage" in w and "6 V" in w and "8 V" in w for w in design.warnings)


def test_collector_voltage_missed_with_a_grounded_emitter_is_a_warning_too():
    # 1 mA through the fixed 1 k: V_C 8 V, whatever the target of 5 V says (physics.md 4: never a silent
    # change).
    aim = Target(collector_current=1e-3, collector=5.0)
    of = target_stage("base-resistor", aim, names=("RB", "RC"), fixed={"RC": 1e3})
    assert value(solved(ideal_stage(of)), "collector_voltage") == pytest.approx(8.0, rel=MET)
    assert any("collector_voltage" in w and "5 V" in w and "8 V" in w for w in choose(of, SERIES).warnings)


@pytest.mark.parametrize("topology", ["divider", "base-resistor", "split-supply", "follower"])
def test_free_stage_has_nothing_to_warn_of(topology):
    assert choose(target_stage(topology, Target(collector_current=1e-3)), SERIES).warnings == ()


def test_stage_without_target_is_taken_as_it_is():
    of = ideal_stage(target_stage("divider", Target(collector_current=1e-3)))
    design = choose(replace(of, target=None), SERIES)
    assert design.frozen == 4 and design.chosen == 0 and design.warnings == ()


def test_impossible_target_is_refused():
    of = target_stage("divider", Target(collector_current=1e-3, emitter_voltage=12.0))
    with pytest.raises(PhysicallyImpossible, match="not between the rails"):
        choose(of, SERIES)


def test_bypassed_stage_can_be_designed_and_snapped():
    of = target_stage(
        "divider",
        Target(collector_current=1e-3, collector="max-swing"),
        signal=Signal(load=4.7e3, bypassed=True),
    )
    design = choose(of, SERIES)
    # Steps of E24 are 5 % each way; four of them, derived anew after each, stay within 10 %.
    assert value(solved(design.stage), "collector_current") == pytest.approx(1e-3, rel=0.1)
