"""Capacitors as people and programs read them: formulas with numbers, parts to buy, JSON, CSV."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace
from functools import cache
from math import pi

import pytest

from biasband.quantity import Kind, parse
from biasband.show.capacitor_tables import capacitor_parts, capacitor_values, formula
from biasband.show.export import as_text, corners_json, design_json, drift_json, review_json
from biasband.show.layout import lines_of
from biasband.show.parts_csv import parts_csv
from biasband.show.prose import place
from biasband.show.report import design_report, review_report
from biasband.show.spelling import Spelling
from biasband.show.spread_json import spread_json
from biasband.show.surroundings import surroundings
from biasband.signoff.drifting import drift
from biasband.signoff.intake import read_stage
from biasband.signoff.parts_list import capacitors_list, exact_values, parts_list
from biasband.signoff.spreading import spread
from biasband.signoff.study import Review, corners, design, review
from biasband.stage import Capacitor, Requirement, Stage
from biasband.values.capacitors import CapacitorStep
from biasband.variation.corners import Extreme
from tests.show.reviews import HIVE, SAMPLES, reviewed

FOUR_DIGITS = 5e-4 * 1.001
NAMES = ["C_in", "C_out", "C_bypass"]
LOW = "low_corner_frequency"


def hive(*, required: bool = False, **given: float) -> Stage:
    """The hive microphone down to 50 Hz; the stage file has no capacitors."""
    of = read_stage(SAMPLES / f"{HIVE}.toml")
    of = replace(of, snapping="nearest", signal=replace(of.signal, lowest_frequency=50.0))
    facts = {"tolerance": 0.2, "temperature_change": 0.15, "temperature_distance": 35.0}
    capacitors = tuple(Capacitor(name=name, value=given.get(name), **facts) for name in of.signal.capacitors)
    limit = (Requirement(id="F", quantity=LOW, at_most=60.0),) if required else ()
    return replace(of, capacitors=capacitors, requirements=(*of.requirements, *limit))


@cache
def made(required: bool) -> Review:
    return review(hive(required=required), boards=2048)


def test_formula_has_its_numbers_and_what_they_come_to():
    step = CapacitorStep(farads=1.0 / (2.0 * pi * 45.0 * 34.7), frequency=45.0, resistance=34.7)
    # 1/(2π · 45 · 34.7) = 101.92 µF by hand.
    assert formula(step) == "1 / (2π f R) = 1 / (2π × 45 Hz × 34.7 Ω) = 101.9 µF"


def test_formula_says_what_is_left_and_by_how_much_it_was_raised():
    farads = 2.0 * 101.92e-6 / 0.68
    step = CapacitorStep(farads=farads, frequency=45.0, resistance=34.7, left=0.68, raised=2.0)
    assert formula(step) == (
        "raised / (2π f R left) = 2 / (2π × 45 Hz × 34.7 Ω × 68 %) = 299.8 µF: "
        "together they would miss the frequency"
    )


def cells(table, heading: str) -> list[str]:
    position = [column.heading for column in table.columns].index(heading)
    return [row.cells[position] for row in table.rows]


def test_design_shows_hand_refined_and_the_value_of_each():
    found = design(hive())
    (table,) = capacitor_values(found)
    assert cells(table, "part") == NAMES
    for heading, figures in (
        ("hand", [choice.hand.farads for choice in found.capacitors]),
        ("refined", [choice.ideal.farads for choice in found.capacitors]),
        ("value", [choice.value for choice in found.capacitors]),
    ):
        for text, farads in zip(cells(table, heading), figures, strict=True):
            assert parse(text, Kind.CAPACITANCE) == pytest.approx(farads, rel=FOUR_DIGITS)
    assert cells(table, "series") == ["E6"] * 3
    assert all(len(row.below) == 2 for row in table.rows) and table.notes


def test_given_capacitors_are_shown_as_given():
    found = design(hive(C_in=1e-5, C_out=1e-5, C_bypass=1e-3))
    (table,) = capacitor_values(found)
    assert cells(table, "series") == ["given"] * 3 and table.notes == ()
    (parts,) = capacitor_parts(found)
    assert cells(parts, "ideal") == ["given"] * 3 and cells(parts, "series") == [""] * 3


def test_parts_to_buy_say_what_to_order():
    found = design(hive())
    (table,) = capacitor_parts(found)
    assert cells(table, "tol.") == ["20 %"] * 3 and cells(table, "over ambient") == ["±15 %"] * 3
    bare = {"tolerance_stated": False, "temperature_change": 0.0}
    unstated = tuple(replace(capacitor, **bare) for capacitor in found.stage.capacitors)
    (table,) = capacitor_parts(replace(found, stage=replace(found.stage, capacitors=unstated)))
    assert cells(table, "tol.") == ["not stated"] * 3 and cells(table, "over ambient") == ["0 %"] * 3


def printed(report) -> str:
    return "\n".join(line.plain for line in lines_of(report, width=100, spelling=Spelling("utf-8")))


def test_reports_have_the_tables_where_there_are_capacitors_and_only_there():
    plain, found = reviewed(HIVE), made(required=False)
    assert capacitor_parts(plain.design) == () and capacitor_values(plain.design) == ()
    titles = [block.title for block in review_report(found)]
    assert titles.index("Capacitors to buy") == titles.index("Parts to buy") + 1
    assert "Capacitors" in [block.title for block in design_report(found.design)]
    assert "Capacitors to buy" not in [block.title for block in review_report(plain)]


def test_values_chosen_in_this_run_are_counted_with_the_resistors():
    first = review_report(made(required=False))[0]
    assert "values: 7 chosen in this run: freeze before ordering" in first.sentences


def test_surroundings_say_how_far_down():
    found = made(required=False)
    assert any("down to 50 Hz" in line for line in surroundings(found.stage, found.nominal))


def test_low_corner_is_nominal_always_and_followed_only_where_required():
    asked, not_asked = made(required=True), made(required=False)
    for found in (asked, not_asked):
        assert 0.0 < found.nominal.values[LOW] < 50.0
    assert LOW in asked.spread and LOW in asked.looked_into and LOW in asked.evidence.rss
    assert LOW not in not_asked.spread and LOW not in not_asked.evidence.corners.ranges
    (row,) = [row for row in asked.rows if row.quantity == LOW]
    assert row.kind is Kind.FREQUENCY and row.verdict == "pass"
    assert asked.nominal.values[LOW] < row.corners <= 50.0
    assert row.main_cause == "C_bypass"


def test_other_numbers_are_those_of_the_stage_without_capacitors():
    plain = review(replace(hive(), capacitors=()), boards=2048)
    found = made(required=False)
    for name, spread_of in plain.spread.items():
        assert (found.spread[name].highest_in_use.values == spread_of.highest_in_use.values).all()
        here, there = (each.evidence.corners.ranges[name] for each in (found, plain))
        for side in ("low", "high"):
            # An extreme inside the box is climbed to among more axes, and reached to 1e-9.
            expected = pytest.approx(getattr(there, side).value, rel=1e-8, abs=1e-15)
            assert getattr(here, side).value == expected
    assert found.nominal.values == {**plain.nominal.values, LOW: found.nominal.values[LOW]}


def parsed(result) -> dict:
    return json.loads(as_text(result), parse_constant=pytest.fail)


def test_json_holds_the_capacitors():
    found = parsed(review_json(made(required=True)))
    assert list(found["capacitors"]) == NAMES
    by_name = {choice.name: choice for choice in made(required=True).design.capacitors}
    for name, each in found["capacitors"].items():
        choice = by_name[name]
        assert (each["value"], each["chosen"], each["series"]) == (choice.value, True, "E6")
        assert (each["tolerance"], each["temperature_change"]) == (0.2, 0.15)
        assert (each["hand"], each["ideal"]) == (choice.hand.farads, choice.ideal.farads)
        assert each["formula"] == {
            "farads": choice.ideal.farads, "frequency": choice.ideal.frequency, "left": choice.ideal.left,
            "raised": 1.0, "resistance": choice.ideal.resistance, "text": formula(choice.ideal),
        }  # fmt: skip
    assert set(NAMES) <= set(found["corners"][LOW]["high_at"])
    assert LOW in found["nominal"] and LOW in found["causes"]


def test_every_analysis_as_json_has_them():
    of = hive()
    found, drawn, swept = corners(of), spread(of, boards=64), drift(of, points=2)
    words = found.corners.ranges
    results = [
        design_json(found.design), corners_json(found.design, found.corners, words),
        spread_json(drawn), drift_json(swept),
    ]  # fmt: skip
    assert [list(parsed(result)["capacitors"]) for result in results] == [NAMES] * 4
    assert LOW not in words and LOW not in drawn.estimates  # nothing requires it
    asked = corners(hive(required=True)).corners.ranges
    assert asked[LOW].high.value == made(required=True).evidence.corners.ranges[LOW].high.value
    assert parsed(review_json(reviewed(HIVE)))["capacitors"] == {}


def test_parts_list_as_csv_has_them_after_the_resistors():
    found = design(hive())
    text = parts_csv(parts_list(found, {}), capacitors_list(found))
    rows = list(csv.DictReader(io.StringIO(text, newline="")))[-3:]
    assert [row["references"] for row in rows] == NAMES
    for row, choice in zip(rows, found.capacitors, strict=True):
        assert float(row["value_farad"]) == choice.value and row["value_ohm"] == ""
        known = {"references", "quantity", "series", "tolerance_percent", "value_farad"}
        assert {column for column, cell in row.items() if cell} == known
        assert (row["quantity"], row["series"], row["tolerance_percent"]) == ("1", "E6", "20")


def test_exact_values_name_every_part():
    found = design(hive())
    values = exact_values(found)
    assert list(values) == ["R1", "R2", "RC", "RE", *NAMES]
    for choice in found.capacitors:
        assert parse(values[choice.name], Kind.CAPACITANCE) == choice.value


def test_place_of_a_capacitor_inside_its_limits_is_in_farads():
    inside = Extreme(1.0, {"C_in": 0.5}, {"C_in": 2.2e-6}, interior=True)
    assert place("C_in", inside) == "C_in inside (2.2 µF)"


def test_printed_design_names_rule_and_formulas():
    text = printed(design_report(design(hive())))
    assert "1 / (2π f R left)" in text and "snapped" not in text
    assert "Values are the next up in their series." in " ".join(text.split())
