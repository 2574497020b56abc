"""The parts list as CSV: what a spreadsheet reads is what the review found, line by line."""

from __future__ import annotations

import csv
import io
from dataclasses import replace

import pytest

from biasband.parts.marking import markings
from biasband.show.parts_csv import COLUMNS, parts_csv
from biasband.signoff.intake import read_stage
from biasband.signoff.parts_list import PartLine, parts_list
from biasband.signoff.study import design
from biasband.stage import StockItem
from tests.show.reviews import FAILING, reviewed
from tests.show.reviews import SAMPLES as SAMPLES_FOLDER

SAMPLES = [FAILING, "soil_probe"]

TWELVE_DIGITS = 1e-11
"""Figures are written with twelve digits: half a unit in the twelfth, at worst of 1."""

NUMBERS = {
    "value_ohm": (1.0, "value"),
    "tolerance_percent": (100.0, "tolerance"),
    "tempco_ppm_per_kelvin": (1e6, "tempco"),
    "power_rating_watt": (1.0, "power_rating"),
    "power_worst_watt": (1.0, "power_worst"),
}
"""Columns: how many of their units are one SI unit, and where the figure stands in the record."""


def rows_of(lines):
    return list(csv.DictReader(io.StringIO(parts_csv(lines), newline="")))


def line(**more):
    """An invented line: three equal parts from a stock list."""
    facts = {
        "references": ("R1", "R2", "RE"), "value": 4990.0, "series": "E96", "tolerance": 0.001,
        "tempco": 25e-6, "power_rating": 0.125, "power_worst": 0.0123,
        "markings": markings(4990.0, tolerance=0.001, tempco=25e-6),
        "items": (StockItem(value=4990.0, quantity=40, price=0.07, location='drawer 3, "precision"'),) * 3,
    }  # fmt: skip
    return PartLine(**{**facts, **more})


@pytest.mark.parametrize("name", SAMPLES)
def test_figures_are_those_of_the_review(name):
    lines = reviewed(name).parts_list
    rows = rows_of(lines)
    for row, found in zip(rows, lines, strict=True):
        for column, (scale, attribute) in NUMBERS.items():
            figure = getattr(found, attribute)
            assert (row[column] == "") is (figure is None)
            if figure is not None:
                assert float(row[column]) == pytest.approx(scale * figure, rel=TWELVE_DIGITS)


@pytest.mark.parametrize("name", SAMPLES)
def test_every_resistor_of_the_stage_is_ordered_once(name):
    review = reviewed(name)
    rows = rows_of(review.parts_list)
    references = [reference for row in rows for reference in row["references"].split()]
    assert sorted(references) == sorted(resistor.name for resistor in review.stage.resistors)
    assert sum(int(row["quantity"]) for row in rows) == len(review.stage.resistors)
    for row in rows:
        for reference in row["references"].split():
            assert float(row["value_ohm"]) == review.stage.resistor(reference).value


def test_worst_power_is_the_largest_at_any_corner():
    review = reviewed(FAILING)
    for row in rows_of(review.parts_list):
        corners = [
            review.evidence.corners.ranges[f"resistor_power.{reference}"].high.value
            for reference in row["references"].split()
        ]
        assert float(row["power_worst_watt"]) == pytest.approx(max(corners), rel=TWELVE_DIGITS)


def test_equal_parts_share_a_line_with_the_largest_of_their_powers(tmp_path):
    stock = tmp_path / "house.csv"
    stock.write_text("value\n4k7\n", encoding="utf-8")
    stage = read_stage(SAMPLES_FOLDER / "hive_microphone.toml", stock=stock)
    found = design(replace(stage, snapping="nearest"))
    powers = {"R1": 0.002, "R2": 0.007, "RE": 0.001, "RC": 0.5}
    rows = {row["references"]: row for row in rows_of(parts_list(found, powers))}
    # RC is a part of its own: the stage asks 0.5 % of it, 1 % of the others.
    assert {name: row["quantity"] for name, row in rows.items()} == {"R1 R2 RE": "3", "RC": "1"}
    assert rows["R1 R2 RE"]["power_worst_watt"] == "0.007"


def test_power_that_was_not_looked_into_is_left_empty():
    rows = rows_of(parts_list(reviewed(FAILING).design, {}))
    assert rows and all(row["power_worst_watt"] == "" for row in rows)


def test_header_names_every_column_with_its_unit():
    first, *_ = parts_csv([line()]).splitlines()
    assert first.split(",") == list(COLUMNS)
    # What issue 3, "Parts list", asks for.
    for wanted in (
        "reference", "value_ohm", "series", "tolerance_percent", "tempco_ppm", "rating_watt", "worst_watt",
        "letter_code", "colour", "chip", "quantity", "price",
    ):  # fmt: skip
        assert wanted in first


def test_line_says_how_many_and_how_they_are_marked():
    (row,) = rows_of([line()])
    assert (row["references"], row["quantity"], row["series"]) == ("R1 R2 RE", "3", "E96")
    # IEC 60062: B and violet are 0.1 %, yellow as the sixth band 25 ppm/K; E96 place 68 is 499, B is 10¹.
    assert row["letter_code"] == "4K99B"
    assert row["colour_bands"] == "yellow white white brown violet yellow (+/-0.1 %, 25 ppm/K)"
    assert row["chip_marks"].split() == ["4991", "68B"]


def test_price_is_that_of_all_pieces():
    (row,) = rows_of([line()])
    assert float(row["price_each"]) == 0.07
    assert float(row["price_total"]) == pytest.approx(0.21, rel=TWELVE_DIGITS)  # 3 · 0.07


def test_text_with_separators_and_quotes_comes_back():
    (row,) = rows_of([line()])
    assert row["location"] == 'drawer 3, "precision"'


def test_what_is_not_known_is_empty():
    bare = line(
        series=None, tolerance=None, power_rating=None, power_worst=None, items=(), tempco=None,
        markings=markings(1e13),  # beyond every mark
    )  # fmt: skip
    (row,) = rows_of([bare])
    known = {"references", "quantity", "value_ohm"}
    assert {column for column, cell in row.items() if cell} == known


def test_item_without_a_price_costs_nothing_that_is_known():
    (row,) = rows_of([line(items=(StockItem(value=4990.0, location="A"),) * 3)])
    assert (row["price_each"], row["price_total"], row["location"]) == ("", "", "A")
    (free,) = rows_of([line(items=(StockItem(value=4990.0, price=0.0),) * 3)])
    assert (free["price_each"], free["price_total"]) == ("0", "0")


def test_line_from_two_rows_of_the_list_has_both_prices_and_places():
    one = StockItem(value=4990.0, quantity=1, price=0.01, location="A")
    two = StockItem(value=4990.0, quantity=1, price=0.5, location="B")
    (row,) = rows_of([line(references=("R1", "R2"), items=(one, two))])
    assert (row["price_each"], row["price_total"], row["location"]) == ("", "0.51", "A, B")  # 0.01 + 0.50
    assert row["stock"] == ""


def test_what_the_stock_lacks_is_said_and_has_no_price():
    one = StockItem(value=4990.0, quantity=1, price=0.01, location="A")
    (row,) = rows_of([line(references=("R1", "R2"), items=(one, None), pieces=1)])
    assert (row["price_total"], row["stock"]) == ("", "only 1 in stock")
    (row,) = rows_of([line(references=("R1",), items=(None,), pieces=0)])
    assert (row["price_each"], row["price_total"], row["stock"]) == ("", "", "not in stock")


def test_text_of_our_own_is_ascii_for_spreadsheets_that_guess_the_encoding():
    assert parts_csv([line()]).isascii()


def test_bands_fall_back_to_those_without_a_tempco():
    (row,) = rows_of([line(markings=markings(4990.0, tolerance=0.01))])
    assert row["colour_bands"] == "yellow white white brown brown (+/-1 %)"  # IEC 60062


def test_value_keeps_its_digits():
    (row,) = rows_of([replace(line(), value=1234567.8)])
    assert float(row["value_ohm"]) == 1234567.8
