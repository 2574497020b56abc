"""A contrast: the lesson against closed forms, what is recast and what is not, what each is best at."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import cache
from pathlib import Path

import pandas as pd
import pytest

import biasband as bb
from biasband.boards.outside import Outside
from biasband.circuit.operating_point import Region
from biasband.circuit.topology import TOPOLOGIES
from biasband.errors import PhysicallyImpossible, UsageError
from biasband.files.stage_file import read_stage
from biasband.gain_curve import GainCurve
from biasband.signoff import contrasting
from biasband.signoff.contrasting import Contrast, Contrasted, contrast
from biasband.signoff.intake import known_series
from biasband.signoff.merits import MERITS, strengths
from biasband.signoff.recasting import recast, target_of
from biasband.signoff.steadiness import steadiness
from biasband.signoff.study import review
from biasband.stage import Capacitor, Limits, Requirement, Stage, Target
from biasband.values.choosing import choose
from tests.variation.stages import ROOM, coupled, ideal, limits, real, running_away, stage, with_resistor

SAMPLES = Path(__file__).parents[2] / "samples"
BOARDS = 2048
"""Enough for a yield of 99.73 % to be shown: that takes 1109 boards, ln 0.05 / ln 0.9973."""

MARGIN = Requirement(id="R-1", quantity="symmetric_peak_swing", at_least=0.5)


@cache
def sample(name: str) -> Stage:
    """A sample's stage."""
    return read_stage(SAMPLES / f"{name}.toml")


@cache
def contrasted(name: str) -> Contrast:
    """The contrast of a sample, with few boards."""
    return contrast(sample(name), boards=BOARDS)


def quick(**more: object) -> Stage:
    """A bypassed divider with a target whose free values are snapped to the nearest: no search."""
    free = tuple(replace(r, value=None) for r in coupled().resistors)
    target = Target(collector_current=1e-3, emitter_voltage=1.0)
    given = {"target": target, "requirements": (MARGIN,), "snapping": "nearest", "resistors": free}
    return replace(coupled(), **{**given, **more})


def row(found: Contrast, topology: str) -> Contrasted:
    """The row of a topology."""
    return next(each for each in found.rows if each.topology == topology)


def trial(found: Contrast, topology: str) -> contrasting.Trial:
    """The trial of a topology, which has one."""
    tried = row(found, topology).trial
    assert tried is not None
    return tried


def values(found: Contrast, topology: str) -> dict[str, float]:
    """The values [Ω] that a topology got."""
    return {part.name: part.value for part in trial(found, topology).design.parts}


# The lesson.


@pytest.mark.parametrize("name", ["hive_microphone", "metal_detector", "organ_vibrato_repair"])
def test_base_resistor_alone_follows_the_gain_and_a_divider_with_emitter_resistor_does_not(name: str) -> None:
    found = contrasted(name)
    followed = {t: trial(found, t).steadiness.followed for t in ("base-resistor", "divider")}
    # Floyd, Electronic Devices: I_C of base bias depends on β directly, that of a stiff divider hardly
    # (memory). More than nine tenths of the way follows; a quarter, V_BE's drift included, does not.
    assert followed["base-resistor"] > 0.9
    assert followed["divider"] < 0.25


def test_current_of_a_textbook_base_resistor_spreads_by_the_gain_itself() -> None:
    # I_C = β·(V_CC − V_BE)/RB: 40…120, a factor of 3; V_C = 12 − RC·I_C with 11.3 V over 240 k.
    ohms = {"RB": 240e3, "RC": 1e3}
    found = steadiness(stage("base-resistor", ohms, ideal(limits(40.0, 60.0, 120.0)), 12.0))
    assert found.current_ratio == pytest.approx(3.0, rel=1e-9)  # the solver's residual
    assert found.followed == pytest.approx(1.0, rel=1e-9)
    V_C = [12.0 - 1e3 * beta * 11.3 / 240e3 for beta in (120.0, 40.0)]
    ends = found.ranges["collector_voltage"]
    assert [ends.low.value, ends.high.value] == pytest.approx(V_C, rel=1e-9)


def test_current_of_a_textbook_divider_spreads_as_its_closed_form() -> None:
    # I_C = β·(V_TH − V_BE)/(R_TH + (β + 1)·RE): the factor depends on R_TH, RE and β alone.
    ohms = {"R1": 33e3, "R2": 12e3, "RC": 1.2e3, "RE": 1e3}
    found = steadiness(stage("divider", ohms, ideal(limits(50.0, 100.0, 300.0)), 18.0))
    R_TH = 33e3 * 12e3 / 45e3
    ends = [beta / (R_TH + (beta + 1.0) * 1e3) for beta in (50.0, 300.0)]
    assert found.current_ratio == pytest.approx(ends[1] / ends[0], rel=1e-9)
    assert found.followed == pytest.approx(math.log(ends[1] / ends[0]) / math.log(6.0), rel=1e-9)


def test_gain_itself_spreads_by_its_limits_and_its_drift() -> None:
    # 165…410 at 0.5 %/K of 298.15 K: β ∝ T^1.49; without self-heating T is the ambient, −10…50 °C.
    cool = replace(coupled(), transistor=replace(coupled().transistor, thermal_resistance=None))
    expected = 410.0 / 165.0 * (323.15 / 263.15) ** (0.005 * 298.15)
    assert steadiness(cool).gain_ratio == pytest.approx(expected, rel=1e-12)


def test_nothing_but_gain_and_ambient_moves_the_steadiness() -> None:
    noisy = coupled()
    still = replace(
        noisy,
        resistors=tuple(replace(r, tolerance=0.0, tempco=0.0, life_drift=0.0) for r in noisy.resistors),
        supply=replace(noisy.supply, voltage=Limits.exactly(9.0), ripple_peak=0.0),
        transistor=replace(noisy.transistor, base_emitter_voltage=Limits.exactly(0.64), leakage=0.0),
    )
    assert steadiness(noisy) == steadiness(still)
    narrow = replace(noisy, ambient=Limits.exactly(ROOM))
    assert steadiness(narrow).current_ratio < steadiness(noisy).current_ratio


def test_without_any_spread_of_the_gain_nothing_follows_it() -> None:
    found = steadiness(stage("base-resistor", {"RB": 240e3, "RC": 1e3}, ideal(100.0), 12.0))
    assert found.current_ratio == pytest.approx(1.0, abs=1e-12) and math.isnan(found.followed)


def test_runaway_between_the_limits_leaves_no_range() -> None:
    heated = replace(
        running_away(), transistor=real(thermal_resistance=3000.0, gain=limits(50.0, 260.0, 5000.0))
    )
    found = steadiness(replace(heated, ambient=limits(298.15, 298.15, 390.0)))
    assert found.missing is Region.RUNAWAY and math.isnan(found.current_ratio) and math.isnan(found.followed)


# The rows.


def test_every_topology_has_a_row_the_own_one_first() -> None:
    found = contrasted("organ_vibrato_repair")
    names = [each.topology for each in found.rows]
    assert names[0] == "collector-feedback" and sorted(names) == sorted(TOPOLOGIES)


@pytest.mark.parametrize("name", ["hive_microphone", "metal_detector", "ice_warner"])
def test_own_row_says_what_a_review_says(name: str) -> None:
    own, whole = contrasted(name).rows[0].trial, review(sample(name), boards=BOARDS)
    assert own is not None
    assert own.verdict == whole.verdict
    assert [part.value for part in own.design.parts] == [part.value for part in whole.design.parts]
    assert [each.quantity for each in own.held.rows] == [each.quantity for each in whole.rows]
    # The search of the box ends within its last step of an extreme, wherever it came from.
    theirs = [each.margin for each in whole.rows]
    assert [each.margin for each in own.held.rows] == pytest.approx(theirs, rel=1e-6)
    swing = whole.evidence.corners.ranges["symmetric_peak_swing"].low.value
    assert own.swing == pytest.approx(swing, rel=1e-6)


def test_values_given_are_those_of_the_own_topology_alone() -> None:
    found = contrasted("metal_detector")
    assert values(found, "divider")["RC"] == 1500.0
    assert row(found, "divider").differs == ()
    others = [trial(found, name) for name in ("base-resistor", "collector-feedback", "follower")]
    assert all(part.chosen for each in others for part in each.design.parts)


def test_other_topologies_have_what_they_cannot_do_without_and_no_more() -> None:
    found = contrasted("hive_microphone")
    assert list(values(found, "base-resistor")) == ["RB", "RC"]
    assert list(values(found, "collector-feedback")) == ["RB", "RC"]
    assert list(values(found, "follower")) == ["R1", "R2", "RE"]
    assert list(values(contrasted("soil_probe"), "base-resistor")) == ["RB", "RC", "RE"]  # its own
    assert contrasted("soil_probe").rows[0].differs == ("with RE, which this topology can do without",)


def test_resistors_are_of_their_namesakes_grade_else_of_most() -> None:
    found = trial(contrasted("hive_microphone"), "base-resistor").design.stage
    assert (found.resistor("RC").tolerance, found.resistor("RB").tolerance) == (0.005, 0.01)
    array = recast(sample("wind_mast"), target_of(sample("wind_mast")), TOPOLOGIES["divider"]).stage
    assert all(each.group is None and each.tracking is None for each in array.resistors)


def test_topology_without_its_negative_supply_is_a_row_with_the_reason() -> None:
    lone = row(contrasted("hive_microphone"), "split-supply")
    assert lone.trial is None and not lone.passes
    assert lone.problem == "needs a negative supply, and the stage has none"
    kept = contrasted("wind_mast")
    assert row(kept, "split-supply").passes
    assert row(kept, "divider").differs == ("the negative supply is not used",)
    assert trial(kept, "divider").design.stage.negative_supply is None


def test_target_that_no_resistors_meet_is_a_row_with_the_reason() -> None:
    found = contrast(quick(target=Target(collector_current=1e-3, collector=0.5)), boards=1)
    lone = row(found, "divider")
    assert lone.trial is None and "would need the collector at 500 mV" in lone.problem
    assert "not between" in lone.problem
    assert row(found, "base-resistor").trial is not None  # its emitter is on ground


def test_follower_is_not_bypassed_and_says_so() -> None:
    found = row(contrasted("hive_microphone"), "follower")
    assert found.differs == ("RE is not bypassed, the output stands on it",)
    assert found.trial is not None
    # An emitter follower's gain is a little below one (common practice); bypassed it would be nothing.
    assert 0.9 < found.trial.nominal.values["voltage_gain"] < 1.0
    beacon = row(contrasted("beacon_receiver"), "follower")
    assert "RE is one resistor, not RE1 and RE2" in beacon.differs
    assert trial(contrasted("beacon_receiver"), "base-resistor").design.stage.signal.bypassed is False


@pytest.mark.parametrize(
    ("quantity", "topology", "reason"),
    [
        ("collector_voltage", "follower", "the output is the emitter"),
        ("emitter_voltage", "follower", "the output is the emitter"),
        ("emitter_voltage", "base-resistor", "the emitter is tied to a rail"),
        ("resistor_power.R2", "collector-feedback", "there is no R2"),
        ("low_corner_frequency", "divider", "capacitors are left out"),
        ("collector_voltage", "base-resistor", ""),
        ("resistor_power.R2", "follower", ""),
        ("voltage_gain", "follower", ""),
    ],
)
def test_limit_that_means_nothing_is_left_out_and_named(quantity: str, topology: str, reason: str) -> None:
    asked = Requirement(id="R-9", quantity=quantity, at_most=1.0)
    with_it = quick(
        requirements=(MARGIN, asked), capacitors=tuple(map(_capacitor, coupled().signal.capacitors))
    )
    new = recast(with_it, target_of(with_it), TOPOLOGIES[topology])
    assert [(left.id, left.quantity, left.reason) for left in new.left_out] == (
        [("R-9", quantity, reason)] if reason else []
    )
    assert (asked in new.stage.requirements) is not bool(reason)
    assert new.stage.capacitors == ()


def _capacitor(name: str) -> Capacitor:
    return Capacitor(name=name, value=1e-5)


@pytest.mark.parametrize(
    ("name", "topology", "place"),
    [
        # The probe's output stands at 3.2 V, so 3.2 V are across a follower's RE.
        ("soil_probe", "follower", {"emitter_voltage": 3.2, "collector": "mid-swing"}),
        # PNP, 5 V: 2.4 V across RE put the output at 2.6 V, where the collector is wanted then.
        ("river_gauge", "divider", {"emitter_voltage": None, "collector": 2.6}),
        # RE on −12 V does other work than RE on ground.
        ("wind_mast", "divider", {"emitter_voltage": None, "collector": 6.0}),
        ("hive_microphone", "collector-feedback", {"supply_over": 9.0, "collector": "mid-swing"}),
        ("hive_microphone", "follower", {"supply_over": None, "collector": "mid-swing"}),
    ],
)
def test_target_means_the_place_of_the_output(name: str, topology: str, place: dict[str, object]) -> None:
    new = recast(sample(name), target_of(sample(name)), TOPOLOGIES[topology]).stage.target
    assert new is not None and new.collector_current == sample(name).target.collector_current
    for key, value in place.items():
        found = getattr(new, key)
        assert found == (pytest.approx(value, rel=1e-12) if isinstance(value, float) else value)


def test_voltage_across_the_emitter_resistor_of_a_split_supply_is_not_wished_for_elsewhere() -> None:
    deep = replace(
        sample("wind_mast"), target=Target(collector_current=1e-3, emitter_voltage=11.0, collector=6.0)
    )
    new = recast(deep, target_of(deep), TOPOLOGIES["divider"]).stage.target
    assert new == Target(collector_current=1e-3, collector=6.0)


def test_output_beyond_the_rails_of_a_follower_is_a_row_with_the_reason() -> None:
    low = replace(sample("wind_mast"), target=Target(collector_current=1e-3, collector=-1.0))
    with pytest.raises(UsageError, match=r"place of the output, -1 V, is not between its rails"):
        recast(low, target_of(low), TOPOLOGIES["follower"])


# A target that is lent.


def test_stage_without_target_lends_its_nominal_point() -> None:
    found, here = contrasted("ice_warner"), review(sample("ice_warner"), boards=1).nominal.values
    assert found.lent and not contrasted("hive_microphone").lent
    assert found.target.collector_current == here["collector_current"]
    assert found.target.collector == here["collector_voltage"]
    assert found.target.emitter_voltage == pytest.approx(here["emitter_voltage"], rel=1e-12)
    # The ideal values meet the lent target, E96 and E24 come within their steps of it.
    reached = trial(found, "base-resistor").nominal.values["collector_current"]
    assert reached == pytest.approx(found.target.collector_current, rel=0.05)


@pytest.mark.parametrize(
    ("changed", "reason"),
    [
        ({"RC": 82e3}, "it is saturated"),
        ({"R2": 100.0}, r"it is cut off, V_CE is 9 V of the 9 V from rail to rail"),
    ],
)
def test_nominal_point_that_is_no_use_lends_no_target(changed: dict[str, float], reason: str) -> None:
    useless = coupled()
    for name, ohms in changed.items():
        useless = with_resistor(useless, name, value=ohms)
    with pytest.raises(PhysicallyImpossible, match=f"target: missing, .* cannot lend one: {reason}"):
        contrast(useless, boards=1)


def test_nominal_point_in_runaway_lends_no_target() -> None:
    hot = replace(
        running_away(), transistor=replace(running_away().transistor, leakage=0.0, thermal_resistance=9e3)
    )
    with pytest.raises(PhysicallyImpossible, match="cannot lend one: it is in thermal runaway"):
        target_of(hot)


def test_neither_target_nor_values_is_refused() -> None:
    with pytest.raises(UsageError, match="no target, and no values"):
        contrast(quick(target=None), boards=1)


# How values are chosen.


def test_own_topology_gets_the_whole_choice_and_the_others_the_best_at_the_corners() -> None:
    contests = {
        row.topology: row.trial.design.contest for row in contrasted("hive_microphone").rows if row.trial
    }
    held = {name: len(each.contenders) for name, each in contests.items() if each is not None}
    assert held == {"divider": 3, "base-resistor": 1, "collector-feedback": 1, "follower": 1}
    assert contests["divider"].nearest is not None and contests["follower"].nearest is None


@pytest.mark.parametrize("topology", ["divider", "base-resistor"])
def test_single_finalist_is_the_winner_where_all_is_judged_by_corners(topology: str) -> None:
    of = recast(quick(snapping="margin"), quick().target, TOPOLOGIES[topology]).stage
    lone, whole = choose(of, known_series(of), finalists=1), choose(of, known_series(of))
    assert lone.parts == whole.parts
    assert lone.contest is not None and whole.contest is not None
    assert lone.contest.contenders == whole.contest.contenders[:1]


def test_board_beyond_an_end_that_was_not_looked_for_is_no_defect() -> None:
    low = Outside("voltage_gain", board=3, value=-2.0, limit=-1.0)
    high = Outside("voltage_gain", board=4, value=2.0, limit=1.0)
    looked = {
        side: [*contrasting._looked_for((low, high), {"voltage_gain": side})] for side in (-1.0, 0.0, 1.0)
    }
    assert looked == {-1.0: [low], 0.0: [low, high], 1.0: [high]}


# What each is best at.


def figures(**given: float) -> dict[str, float]:
    """Figures of a stage; equal ones for all that are not given."""
    return {**{merit.figure: 1.0 for merit in MERITS}, **given}


def test_best_of_each_merit_is_the_smallest_or_the_largest_as_it_should_be() -> None:
    small, large = figures(**{m.figure: 1.0 for m in MERITS}), figures(**{m.figure: 2.0 for m in MERITS})
    first, second = strengths([small, large])
    assert {each.merit.figure for each in first} == {
        "parts", "supply_current", "current_ratio", "output_resistance"
    }  # fmt: skip
    assert {each.merit.figure for each in second} == {
        "swing", "voltage_gain", "input_resistance", "margin_share"
    }  # fmt: skip
    assert {each.place for each in (*first, *second)} == {1}


def test_figures_that_read_the_same_are_equally_good_and_say_nothing() -> None:
    first, second, third = strengths([figures(swing=2.001), figures(swing=2.0), figures(swing=1.5)])
    assert [each.place for each in first] == [each.place for each in second] == [1]
    assert [(each.merit.figure, each.place) for each in third] == [("swing", 3)]
    assert strengths([figures(), figures()]) == ((), ())


def test_figure_that_is_not_known_is_not_compared() -> None:
    first, second, third = strengths([figures(swing=math.nan), figures(swing=1.0), figures(swing=2.0)])
    assert first == () and [each.place for each in (*second, *third)] == [2, 1]


def test_those_that_pass_are_compared_with_each_other_only() -> None:
    found = contrasted("hive_microphone")
    assert [each.topology for each in found.passing] == ["divider", "collector-feedback", "follower"]
    failing = row(found, "base-resistor")
    assert failing.strengths == ()  # though it has the least supply current but one, and the fewest parts
    best = {s.merit.figure for s in row(found, "collector-feedback").strengths if s.place == 1}
    assert "parts" in best
    supply = {each.topology: each.trial.figures["supply_current"] for each in found.passing}
    least = min(supply, key=lambda name: supply[name])
    assert "supply_current" in {s.merit.figure for s in row(found, least).strengths if s.place == 1}


def test_where_none_passes_all_are_compared() -> None:
    hopeless = Requirement(id="R-2", quantity="symmetric_peak_swing", at_least=8.0)
    found = contrast(quick(requirements=(hopeless,)), boards=1)
    assert found.passing == () and all(each.strengths for each in found.rows if each.trial)


def test_margin_of_a_topology_with_a_limit_left_out_is_not_compared() -> None:
    found = contrasted("hive_microphone")
    follower = row(found, "follower")
    assert follower.left_out and follower.passes
    assert follower.trial.figures["margin_share"] > trial(found, "divider").figures["margin_share"]
    assert "margin_share" not in {each.merit.figure for each in follower.strengths}


# The run.


def test_two_runs_are_equal() -> None:
    first, again = contrast(quick(), boards=64, seed=3), contrast(quick(), boards=64, seed=3)
    pd.testing.assert_frame_equal(first.table, again.table, check_exact=True)
    assert [each.strengths for each in first.rows] == [each.strengths for each in again.rows]


def test_table_has_a_row_per_topology() -> None:
    table = contrasted("hive_microphone").table
    assert table.index[0] == "divider" and len(table) == len(TOPOLOGIES)
    assert table.loc["divider", "verdict"] == "pass"
    assert "negative supply" in table.loc["split-supply", "problem"]
    assert bb.contrast is contrast


@pytest.mark.parametrize(
    "requirements", [(), (Requirement(id="R-1", quantity="voltage_gain", at_least=0.5),)]
)
def test_swing_is_there_whatever_is_required(requirements: tuple[Requirement, ...]) -> None:
    found = contrast(quick(snapping="margin", requirements=requirements), boards=1)
    for each in (row(found, "follower"), row(found, "base-resistor")):
        assert each.trial is not None
        whole = review(each.trial.design.stage, boards=1).evidence.corners.ranges["symmetric_peak_swing"]
        # The search of the box ends within its last step of an extreme, wherever it came from.
        assert each.trial.swing == pytest.approx(whole.low.value, rel=1e-6)


def test_boards_are_drawn_only_where_a_yield_is_required() -> None:
    drawn = {name: trial(contrasted(name), "divider").held.evidence.boards.boards for name in
             ("hive_microphone", "beacon_receiver")}  # fmt: skip
    assert drawn == {"hive_microphone": BOARDS, "beacon_receiver": 1}


def test_progress_never_falls_and_ends_at_one() -> None:
    told: list[float] = []
    contrast(sample("soil_probe"), boards=1, progress=told.append)
    assert told == sorted(told) and told[-1] == 1.0 and len(set(told)) > len(TOPOLOGIES)


def test_interruption_is_passed_on() -> None:
    def interrupted(done: float) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        contrast(quick(), boards=1, progress=interrupted)


@pytest.mark.parametrize(
    ("boards", "seed", "what"), [(0, 1, "boards: from 1"), (1, -1, "seed: a whole number")]
)
def test_boards_and_seed_that_cannot_be_sampled_with_are_refused(boards: int, seed: int, what: str) -> None:
    with pytest.raises(UsageError, match=what):
        contrast(quick(), boards=boards, seed=seed)


def test_pnp_stage_is_the_mirror_image() -> None:
    # Without ripple, which rides on the positive rail alone, PNP is NPN with every sign reversed.
    npn = quick()
    npn = replace(npn, supply=replace(npn.supply, ripple_peak=0.0))
    pnp = replace(npn, polarity="pnp")
    for mine, theirs in zip(contrast(npn, boards=1).rows, contrast(pnp, boards=1).rows, strict=True):
        assert mine.topology == theirs.topology and (mine.trial is None) is (theirs.trial is None)
        if mine.trial is not None and theirs.trial is not None:
            assert mine.trial.figures == pytest.approx(theirs.trial.figures, rel=1e-9)


def test_stage_with_a_gain_curve_is_warned_of_its_ends() -> None:
    curve = GainCurve(((1e-3, 240.0), (2e-3, 260.0)))
    found = contrast(quick(transistor=replace(coupled().transistor, gain_curve=curve)), boards=1)
    assert any("gain curve" in each for each in trial(found, "base-resistor").warnings)
