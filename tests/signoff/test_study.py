"""The whole story on one stage file: deterministic, sorted, warned of, and open to the Python API."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from variation.stages import ideal, limits, real, running_away, stage, with_resistor

import biasband as bb
from biasband.circuit.operating_point import Region
from biasband.errors import PhysicallyImpossible, UsageError
from biasband.files.stage_file import read_stage
from biasband.signoff.frames import corner_frame
from biasband.signoff.study import Review, review
from biasband.stage import Limits, Stage, Supply

SAMPLE = Path(__file__).parent.parent / "files" / "hive_microphone.toml"
BOARDS = 2**11


@pytest.fixture(scope="module")
def hive() -> Stage:
    """The stage of the format's description."""
    return read_stage(SAMPLE)


@pytest.fixture(scope="module")
def result(hive) -> Review:
    """Its review."""
    return review(hive, boards=BOARDS, seed=7)


def test_two_runs_are_equal(hive, result):
    again = review(hive, boards=BOARDS, seed=7)
    assert again.verdict == result.verdict
    assert again.warnings == result.warnings
    pd.testing.assert_frame_equal(again.margins, result.margins, check_exact=True)
    for name, spread in result.spread.items():
        assert again.spread[name].lowest_in_use.values.tobytes() == spread.lowest_in_use.values.tobytes()


def test_another_seed_changes_the_boards_and_not_the_corners(hive, result):
    other = review(hive, boards=BOARDS, seed=8)
    name = "collector_voltage"
    assert other.spread[name].nominal_use.mean != result.spread[name].nominal_use.mean
    assert other.evidence.corners == result.evidence.corners
    assert other.evidence.rss == result.evidence.rss


def test_rows_have_the_smallest_margin_first(result):
    shares = [-np.inf if row.margin_share is None else row.margin_share for row in result.rows]
    assert shares == sorted(shares)
    assert {row.standing for row in result.rows} == {True, False}


def test_rows_are_the_limits_asked_for_and_the_checks_made(result):
    asked = sorted((row.quantity, row.side) for row in result.rows if not row.standing)
    assert asked == [
        ("collector_voltage", "at_least"),
        ("collector_voltage", "at_most"),
        ("symmetric_peak_swing", "at_least"),
    ]
    checks = [row.quantity for row in result.rows if row.standing]
    assert sorted(checks) == sorted(check.name for check in result.standing.made)


def test_frozen_resistor_stays_and_the_others_are_chosen(result):
    assert result.stage.resistor("RC").value == 3300.0
    assert (result.design.frozen, result.design.chosen) == (1, 3)
    assert all(r.value is not None for r in result.stage.resistors)


def test_nominal_point_is_active_at_about_the_target(result):
    assert result.nominal.region is Region.ACTIVE
    # Chosen for the margins, from two steps of E24 (10 %) either way in R1, R2 and RE: within 25 %.
    assert result.nominal.values["collector_current"] == pytest.approx(1e-3, rel=0.25)


def test_three_methods_agree_where_they_must(result):
    for name in ("collector_voltage", "collector_current", "base_voltage", "emitter_voltage"):
        corners, rss = result.evidence.corners.ranges[name], result.evidence.rss[name]
        spread = result.spread[name]
        slack = 1e-9 * abs(corners.high.value)  # rounding; this stage stays active
        assert corners.low.value - slack <= rss.low <= rss.high <= corners.high.value + slack
        assert spread.lowest_in_use.quantile(0.0) >= corners.low.value - slack
        assert spread.highest_in_use.quantile(1.0) <= corners.high.value + slack


def test_no_board_lies_outside_the_corners(result):
    assert not any("outside the corner limits" in warning for warning in result.warnings)


def test_python_api_of_the_formats_works_as_written():
    stage_ = bb.read_stage(SAMPLE)
    found = bb.review(stage_, boards=2**8, seed=7)
    assert isinstance(found.margins, pd.DataFrame)
    spread = found.spread["collector_voltage"].nominal_use
    assert spread.quantile(0.5) == np.median(spread.values)
    assert 3.0 < spread.quantile(0.5) < 7.0


def test_margin_frame_holds_the_rows_in_order(result):
    frame = result.margins
    assert list(frame["quantity"]) == [row.quantity for row in result.rows]
    assert list(frame["verdict"]) == [row.verdict for row in result.rows]
    assert frame["margin"].tolist() == [row.margin for row in result.rows]
    assert {"id", "limit", "side", "judged_by", "nominal", "corners", "rss", "margin_share"} <= set(frame)


def test_corner_frame_is_indexed_by_quantity(result):
    corners = corner_frame(result.evidence.corners)
    found = result.evidence.corners.ranges["collector_voltage"]
    assert corners.loc["collector_voltage", "low"] == found.low.value
    assert corners.loc["collector_voltage", "low_at.gain"] == found.low.at["gain"]


def test_analyses_can_be_asked_for_alone(hive, result):
    assert bb.design(hive) == result.design
    found = bb.corners(hive).corners.ranges["collector_voltage"]
    assert found == result.evidence.corners.ranges["collector_voltage"]


def test_snap_finds_the_neighbours():
    # E12: 5.0 k lies between 4.7 and 5.6 k, whose geometric mean is 5.13 k.
    found = bb.snap(5e3, series="E12")
    assert (found.below, found.chosen, found.above) == (4.7e3, 4.7e3, 5.6e3)


@pytest.mark.parametrize(("more", "match"), [({"boards": 0}, "boards"), ({"seed": -1}, "seed")])
def test_numbers_that_cannot_be_sampled_with_are_refused(hive, more, match):
    with pytest.raises(UsageError, match=match):
        review(hive, **more)
    with pytest.raises(UsageError, match=match):
        bb.spread(hive, **more)


def test_impossible_target_is_refused(hive):
    # 10 mA through the fixed 3.3 k is 33 V, from a supply of 9 V.
    wish = replace(hive.target, collector_current=10e-3)
    with pytest.raises(PhysicallyImpossible, match="physically impossible"):
        review(replace(hive, target=wish), boards=2)


def plain(**transistor) -> Stage:
    """A divider in its middle, everything stated."""
    return stage(
        "divider", {"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE": 820.0}, real(**transistor),
        limits(8.1, 9.0, 9.9),
        resistor={"tolerance": 0.01}, ambient=limits(263.15, 298.15, 323.15),
    )  # fmt: skip


def warned(of: Stage) -> str:
    """All warnings of a review in one text."""
    return "\n".join(review(of, boards=4).warnings)


def test_group_of_one_is_warned_of():
    lonely = with_resistor(plain(), "RC", group="array", tracking=3e-5)
    assert "group array has one member, RC: there is nothing for it to track" in warned(lonely)
    both = with_resistor(lonely, "RE", group="array", tracking=3e-5)
    assert "one member" not in warned(both)


def test_stage_with_nothing_odd_has_no_warning():
    assert warned(plain(leakage=40e-9, thermal_resistance=280.0)) == ""


@pytest.mark.parametrize(
    ("transistor", "words"),
    [
        ({"saturation_voltage": None}, ("saturation_voltage", "0.2 V", "assumed")),
        ({"thermal_resistance": None}, ("thermal_resistance", "self-heating")),
        ({"leakage": 0.0}, ("leakage",)),
        ({"test_current": 50e-3, "test_voltage": 6.0}, ("test current",)),
        ({"test_current": 20e-6, "test_voltage": 6.0}, ("test current",)),
    ],
)
def test_what_was_assumed_or_stretched_is_warned_of(transistor, words):
    text = warned(plain(**{"leakage": 40e-9, "thermal_resistance": 280.0, **transistor}))
    assert len(text.splitlines()) == 1
    assert all(word in text for word in words)


def test_saturating_corners_are_warned_of_and_counted():
    of = plain(leakage=40e-9, thermal_resistance=280.0)
    of = replace(of, resistors=tuple(replace(r, value=7.5e3) if r.name == "RC" else r for r in of.resistors))
    found = review(of, boards=4)
    saturated = found.evidence.corners.regions[Region.SATURATED]
    assert any(f"{saturated} of {found.evidence.corners.count} corners saturate" in w for w in found.warnings)


def test_high_supply_is_warned_of():
    of = replace(
        plain(leakage=40e-9, thermal_resistance=280.0), supply=Supply(voltage=limits(60.0, 63.0, 66.0))
    )
    assert "60 V DC" in warned(of)


def test_missed_target_is_warned_of(hive):
    # RC fixed at 3k3 and mid-swing leave no freedom for an emitter voltage of supply/9.
    warnings = review(hive, boards=4).warnings
    assert any("emitter_voltage" in warning and "RC" in warning for warning in warnings)


def test_runaway_fails_and_is_told():
    of = replace(running_away(), transistor=replace(running_away().transistor, gain=Limits.exactly(260.0)))
    found = review(of, boards=4)
    assert found.verdict.outcome == "fail"
    assert any("runaway" in reason for reason in found.verdict.because)


def test_saturated_nominal_point_fails_said_first():
    of = stage(
        "base-resistor", {"RB": 100e3, "RC": 4.7e3}, ideal(100.0, saturation_voltage=0.2), 18.0,
        ambient=Limits.exactly(298.15),
    )  # fmt: skip
    found = review(of, boards=4)
    assert found.nominal.region is Region.SATURATED
    assert found.verdict.outcome == "fail"
    assert "nominal point" in found.verdict.because[0] and "saturated" in found.verdict.because[0]


def test_boards_join_the_point_of_use_of_an_interior_extreme():
    # Power peaks inside the supply's own range: 4 … 18 V in use on a stage that saturates at the top.
    of = stage(
        "divider", {"R1": 20e3, "R2": 12e3, "RC": 2.2e3, "RE": 1e3}, ideal(100.0, saturation_voltage=0.2),
        limits(4.0, 10.0, 18.0), ambient=Limits.exactly(298.15),
    )  # fmt: skip
    found = review(of, boards=4)
    power = found.evidence.corners.ranges["transistor_power"].high
    assert power.interior
    assert found.evidence.boards.points > 3  # nominal use, two limits and at least one within
    # 0.5 %: points of use are rounded to a hundredth of the half range, near a flat top.
    assert found.spread["transistor_power"].highest_in_use.quantile(1.0) == pytest.approx(
        power.value, rel=5e-3
    )


def test_monotone_stage_has_no_further_points_of_use():
    of = stage(
        "base-resistor", {"RB": 1e6, "RC": 1e3}, ideal(100.0, saturation_voltage=0.2),
        limits(17.1, 18.0, 18.9), ambient=Limits.exactly(298.15),
    )  # fmt: skip
    assert review(of, boards=4).evidence.boards.points == 3


STILL = """
[stage]
title = "Relay sniffer, invented"
topology = "collector-feedback"
polarity = "npn"
[supply]
voltage = "5 V ± 5 %"
[ambient]
min = "0 degC"
nominal = "25 degC"
max = "70 degC"
[transistor]
type = "invented"
gain = { min = 200, typ = 200, max = 200 }
test_current = "1 mA"
test_voltage = "5 V"
base_emitter_voltage = "0.65 V"
leakage = "0 A"
saturation_voltage = "0.2 V"
early_voltage = "80 V"
thermal_resistance = "250 K/W"
max_collector_emitter = "45 V"
max_current = "100 mA"
max_power = "500 mW"
max_junction = "150 degC"
source = "invented"
[target]
collector_current = "1 mA"
collector = "2.4 V"
[signal]
load = "22k"
[resistors]
series = "E12"
tolerance = "0 %"
tempco = "0 ppm/K"
life_drift = "0 %"
power_rating = "0.25 W"
[[require]]
id = "F-1"
quantity = "collector_voltage"
at_least = "1.8 V"
at_most = "3 V"
reason = "next stage"
[[require]]
id = "F-2"
quantity = "supply_current"
at_most = "1.5 mA"
reason = "battery"
[[require]]
id = "F-3"
quantity = "symmetric_peak_swing"
at_least = "1 V"
reason = "swing"
"""


def test_rss_meets_every_point_that_boards_meet(tmp_path):
    # No board differs from another, so RSS, which moves nothing, spans just what each of them meets in use.
    (tmp_path / "still.toml").write_text(STILL, encoding="utf-8")
    of = review(bb.read_stage(tmp_path / "still.toml"), boards=4)
    assert of.evidence.boards.points > 5  # the swing has an extreme inside the range of use
    for name, interval in of.evidence.rss.items():
        met = of.spread[name]
        assert interval.low == pytest.approx(met.lowest_in_use.lowest, rel=1e-12), name
        assert interval.high == pytest.approx(met.highest_in_use.highest, rel=1e-12), name
