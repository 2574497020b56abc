"""Sentences say which corners leave the active region, where, and how far the nearest one is from it."""

from dataclasses import replace

import pytest

from biasband.circuit.operating_point import Region
from biasband.files.stage_file import read_stage
from biasband.margins.records import Margin
from biasband.show.regions import region_sentences
from biasband.show.report import review_report
from biasband.show.table import Passage
from biasband.signoff.study import Review, review
from biasband.variation.causes import Causes
from biasband.variation.corners import Extreme
from tests.show.reviews import EVERY, FAILING, HIVE, reviewed

NAN = float("nan")


def check(of: Review, name: str) -> Margin:
    return next(row for row in of.rows if row.standing and row.quantity == name)


def with_check(of: Review, name: str, **changes) -> Review:
    """The review with one standing check changed."""
    old = check(of, name)
    return replace(of, rows=tuple(replace(row, **changes) if row is old else row for row in of.rows))


def with_corners(of: Review, **changes) -> Review:
    corners = replace(of.evidence.corners, **changes)
    return replace(of, evidence=replace(of.evidence, corners=corners))


def with_loop_gain(of: Review, gain: float, coordinates, causes) -> Review:
    name, evidence = "thermal_loop_gain", of.evidence
    found = replace(evidence.corners.ranges[name], high=Extreme(gain, coordinates, {}, interior=False))
    corners = replace(evidence.corners, ranges={**evidence.corners.ranges, name: found})
    shares = {**evidence.causes, name: Causes({}, causes)}
    return replace(of, evidence=replace(evidence, corners=corners, causes=shares))


def place(value: float, **coordinates: float) -> Extreme:
    return Extreme(value, coordinates, {}, interior=False)


def test_distances_to_all_three_ends_are_told_with_the_main_contributors():
    of = with_check(
        reviewed(HIVE), "saturation", margin=2.137, worst=place(2.437, gain=1.0, temperature=1.0, R1=-1.0),
        causes={"temperature": 0.5, "gain": 0.2, "R1": 0.01},
    )  # fmt: skip
    of = with_check(
        of,
        "cut_off",
        limit=1e-5,
        corners=7.326e-4,
        worst=place(7.326e-4, supply=-1.0),
        causes={"supply": 0.9},
    )
    of = with_loop_gain(of, 0.25, {"leakage": 1.0}, {"leakage": 0.7})
    # 732.6 µA over 10 µA; 1 − 0.25; at most three contributors each, those that matter alone.
    assert region_sentences(of) == (
        "Nearest over all corners: to saturation 2.14 V of V_CE (hot, h_FE high); to cut-off I_C 73.3 times "
        "its limit (supply low); to thermal runaway 0.750 of loop gain (leakage high).",
    )


def test_three_contributors_are_named_at_most():
    names = ("R1", "R2", "RC", "RE")
    of = with_check(
        reviewed(HIVE), "saturation", worst=place(2.0, **dict.fromkeys(names, -1.0)),
        causes=dict.fromkeys(names, 0.3),
    )  # fmt: skip
    assert "of V_CE (R1 low, R2 low, RC low);" in region_sentences(of)[0]


@pytest.mark.parametrize("name", EVERY)
def test_sample_s_distances_are_those_of_its_checks(name):
    of = reviewed(name)
    text = " ".join(region_sentences(of))
    times = float(text.split("I_C ")[1].split(" ")[0])
    row = check(of, "cut_off")
    assert times == pytest.approx(row.corners / row.limit, rel=0.005)  # three digits
    left = float(text.split("runaway ")[1].split(" ")[0])
    gain = of.evidence.corners.ranges["thermal_loop_gain"].high.value
    assert left == pytest.approx(1.0 - gain, abs=0.005)
    assert gain >= of.nominal.values["thermal_loop_gain"]


@pytest.mark.parametrize(
    ("name", "word", "region"),
    [("saturation", "Saturation", Region.SATURATED), ("cut_off", "Cut-off", Region.CUT_OFF)],
)
def test_region_that_is_reached_is_told_with_its_worst_corner(name, word, region):
    of = with_check(reviewed(HIVE), name, margin=-1e-6, worst=place(0.1, gain=1.0), causes={"gain": 0.9})
    of = with_corners(of, regions={Region.ACTIVE: 500, region: 12}, count=512)
    first, nearest = region_sentences(of)
    assert first == f"{word} in 12 of 512 corners, furthest: h_FE high."
    assert f"to {word.lower()} " not in nearest


def test_region_that_is_reached_inside_the_limits_only_says_so():
    of = with_check(reviewed(HIVE), "saturation", margin=-0.1)
    assert region_sentences(of)[0].startswith("Saturation inside the limits, in no corner, furthest: ")


def test_runaway_is_told_with_one_corner_in_which_every_contributor_has_its_place():
    base = reviewed(HIVE)
    nominal_at = {"R1": 151e3, "gain": 165.0, "temperature": 323.15, "leakage": 40e-9, "supply": 8.1}
    of = with_corners(
        base, regions={Region.RUNAWAY: 3, Region.ACTIVE: 5}, count=8, region_at={Region.RUNAWAY: nominal_at}
    )
    first, nearest = region_sentences(of)
    # hive: R1 150 kΩ, h_FE 260, 25 °C, no leakage and 9 V are nominal.
    assert first == (
        "Thermal runaway in 3 of 8 corners, one of them: supply low, hot, leakage high, h_FE low, R1 high."
    )
    assert "runaway" not in nearest


def test_everything_reached_leaves_no_distance():
    of = with_check(with_check(reviewed(HIVE), "saturation", margin=-1.0), "cut_off", margin=-1.0)
    of = with_corners(of, regions={Region.RUNAWAY: 1}, count=1, region_at={Region.RUNAWAY: {}})
    assert len(region_sentences(of)) == 3
    assert not any("Nearest" in text for text in region_sentences(of))


def test_runaway_is_not_looked_for_without_a_thermal_resistance_and_that_is_said():
    of = reviewed(HIVE)
    cold = replace(of.stage, transistor=replace(of.stage.transistor, thermal_resistance=None))
    text = region_sentences(replace(of, stage=cold))[0]
    assert text.endswith("thermal runaway not looked for, no thermal_resistance given.")


def test_no_solved_corner_and_no_cut_off_current_are_not_known():
    of = with_check(reviewed(HIVE), "saturation", margin=NAN, worst=place(NAN, R1=1.0), causes={})
    of = with_check(of, "cut_off", limit=0.0)
    text = region_sentences(of)[0]
    assert "to saturation n/a of V_CE (no corner has a value)" in text
    assert "I_C n/a times its limit" in text


def test_nothing_that_varies_is_as_nominal():
    of = with_check(reviewed(HIVE), "saturation", causes={})
    assert "of V_CE (as nominal)" in region_sentences(of)[0]


@pytest.mark.parametrize("name", [HIVE, FAILING])
def test_regions_stand_below_the_nominal_point_in_one_paragraph(name):
    of = reviewed(name)
    report = review_report(of)
    titles = [block.title for block in report]
    below = report[titles.index("Nominal point: active") + 1]
    assert below == Passage("", region_sentences(of))


HOT = """
[stage]
title = "hot stage"
topology = "base-resistor"
polarity = "npn"
[supply]
voltage = "20 V ± 5 %"
[ambient]
min = "0 degC"
max = "60 degC"
[transistor]
gain = { min = 100, max = 300 }
base_emitter_voltage = { min = "0.6 V", max = "0.7 V" }
test_current = "2 mA"
saturation_voltage = "0.2 V"
thermal_resistance = "300 K/W"
leakage = "1 uA"
[resistors]
tolerance = "5 %"
[resistors.RB]
value = "1M"
[resistors.RC]
value = "470"
[[require]]
id = "H-1"
quantity = "thermal_loop_gain"
at_most = 0.5
"""


def read_text(tmp_path, text):
    path = tmp_path / "stage.toml"
    path.write_text(text, encoding="utf-8")
    return read_stage(path)


def test_loop_gain_can_be_required_and_runaway_corners_are_found_and_named(tmp_path):
    of = review(read_text(tmp_path, HOT), boards=64)
    row = next(row for row in of.rows if row.id == "H-1")
    assert row.nominal == of.nominal.values["thermal_loop_gain"]
    assert row.worst.value > 0.5 and row.verdict == "fail"
    hot = of.evidence.corners.regions[Region.RUNAWAY]
    assert of.evidence.corners.ranges["thermal_loop_gain"].high.value < 1.0
    first = region_sentences(of)[0]
    assert first.startswith(f"Thermal runaway in {hot} of {of.evidence.corners.count} corners, one of them: ")
    # By hand: what heats is what carries more current, or what blocks less of it.
    assert " hot, leakage high, V_BE low, " in first
    assert "thermal_loop_gain" in of.spread


def test_cold_and_gentle_stage_holds_the_same_requirement(tmp_path):
    gentle = HOT.replace('"20 V ± 5 %"', '"5 V ± 5 %"').replace('"1 uA"', '"10 nA"')
    of = review(read_text(tmp_path, gentle), boards=64)
    row = next(row for row in of.rows if row.id == "H-1")
    assert row.verdict == "pass"
    assert Region.RUNAWAY not in of.evidence.corners.regions
