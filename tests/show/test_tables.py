"""Tables hold what the review found: their figures are read back and compared."""

import math
from dataclasses import replace

import pytest

from biasband.circuit.operating_point import Region
from biasband.quantity import Kind, parse
from biasband.show.analysis_tables import corners_table, design_table
from biasband.show.parts_table import parts_table
from biasband.show.review_tables import margin_table, nominal_table, summary_table
from biasband.show.summary import Attempt
from biasband.show.table import Table, code, difference, percent, whole_percent, yield_percent
from biasband.signoff.parts_list import parts_list
from tests.show.reviews import EVERY, FAILING, HIVE, SPLIT, reviewed

NAN = float("nan")
FOUR_DIGITS = 5e-4 * 1.001
"""Half a unit in the fourth digit, at worst of 1.000; and a little for the reading back."""
THREE_DIGITS = 10.0 * FOUR_DIGITS


def cells(table: Table, heading: str) -> list[str]:
    position = [column.heading for column in table.columns].index(heading)
    return [row.cells[position] for row in table.rows]


def read_back(text: str, kind: Kind) -> float:
    return parse(text.lstrip("≥≤ ").replace("°C", "degC"), kind)


@pytest.mark.parametrize("name", EVERY)
def test_margin_table_holds_the_review(name):
    review = reviewed(name)
    table = margin_table(review)
    for heading in ("limit", "nominal", "corners", "RSS"):
        for text, row in zip(cells(table, heading), review.rows, strict=True):
            if row.standing and heading == "RSS":
                assert text == ""
                continue
            # A temperature is rounded in °C, far from 0 °C: 0.05 K is half the fourth digit of 100 °C.
            slack = 0.05 if row.kind is Kind.TEMPERATURE else 1e-12
            assert read_back(text, row.kind) == pytest.approx(
                getattr(row, heading.lower()), rel=FOUR_DIGITS, abs=slack
            )


@pytest.mark.parametrize("name", EVERY)
def test_margins_are_in_the_tables_order_with_their_signs(name):
    review = reviewed(name)
    table = margin_table(review)
    assert cells(table, "verdict") == ["FAIL" if row.verdict == "fail" else "pass" for row in review.rows]
    assert [text[0] for text in cells(table, "limit")] == [
        "≥" if row.side == "at_least" else "≤" for row in review.rows
    ]
    for text, row in zip(cells(table, "margin"), review.rows, strict=True):
        kind = Kind.TEMPERATURE_DIFFERENCE if row.kind is Kind.TEMPERATURE else row.kind
        assert parse(text, kind) == pytest.approx(row.margin, rel=THREE_DIGITS)
    for text, row in zip(cells(table, "share"), review.rows, strict=True):
        assert row.margin_share is not None
        assert float(text.removesuffix(" %")) == pytest.approx(100.0 * row.margin_share, abs=0.5001)


def test_passing_check_has_no_second_line_and_every_requirement_has():
    for name in EVERY:
        for row, shown in zip(reviewed(name).rows, margin_table(reviewed(name)).rows, strict=True):
            assert bool(shown.below) is (not row.standing or row.verdict == "fail")


def with_row(**changes):
    review = reviewed(HIVE)
    return replace(review, rows=(replace(review.rows[0], **changes),))


def test_requirement_that_fails_at_corners_only_says_both():
    judged = {"judged_by": "yield", "yield_at_least": 0.9973, "passes_at_corners": False}
    table = margin_table(with_row(limit=7.0, side="at_most", margin=0.326, **judged))
    assert "pass by yield, FAILS AT CORNERS" in table.rows[0].below
    # What decides comes first, with the value that is judged: 7 V less the margin of the row.
    assert table.rows[0].below[0] == "judged by yield, at least 99.730 %: 6.674 V"
    assert (table.rows[0].tone, cells(table, "verdict")) == ("doubt", ["pass"])


def test_nominal_value_beyond_its_limit_has_no_share():
    table = margin_table(with_row(margin=-1.0, margin_share=None))
    assert cells(table, "share") == ["none"]
    assert "the nominal value is itself on or beyond the limit" in table.rows[0].below


def test_what_was_not_solved_reads_as_not_known():
    worst = replace(reviewed(HIVE).rows[0].worst, value=NAN)
    unsolved = dict.fromkeys(("nominal", "corners", "rss", "margin"), NAN)
    table = margin_table(with_row(**unsolved, margin_share=None, worst=worst))
    for heading in ("nominal", "corners", "RSS", "margin", "share"):
        assert cells(table, heading) == ["n/a"]
    assert cells(table, "verdict") == ["FAIL"]
    assert table.rows[0].below[0] == "worst: no corner has a value here"


def test_reason_of_a_requirement_is_kept_as_written():
    assert "reason: [red]hive[/red]" in margin_table(with_row(reason="[red]hive[/red]")).rows[0].below


def test_parts_table_says_what_to_buy():
    review = reviewed(HIVE)
    table = parts_table(review.parts_list, review.design)
    for text, part in zip(cells(table, "value"), review.design.parts, strict=True):
        assert parse(text, Kind.RESISTANCE) == part.value
    assert cells(table, "part") == ["R1", "R2", "RC", "RE"]
    assert all(text != "given" for text in cells(table, "ideal"))
    power = [
        review.evidence.corners.ranges[f"resistor_power.{part.name}"].high.value
        for part in review.design.parts
    ]
    shown = [parse(text, Kind.POWER) for text in cells(table, "worst power")]
    assert shown == pytest.approx(power, rel=FOUR_DIGITS)


def test_given_part_has_no_ideal_and_claims_no_series():
    review = reviewed("organ_vibrato_repair")
    table = parts_table(review.parts_list, review.design)
    assert set(cells(table, "ideal")) == {"given"}
    assert set(cells(table, "series")) == {""}


def test_what_a_resistor_does_not_state_is_said_not_to_be_stated():
    review = reviewed(HIVE)
    bare = replace(review.stage.resistors[0], tolerance_stated=False, tempco=0.0, power_rating=None)
    stage = replace(review.stage, resistors=(bare, *review.stage.resistors[1:]))
    design = replace(review.design, stage=stage)
    table = parts_table(parts_list(design, {}), design)
    assert {cells(table, heading)[0] for heading in ("tol.", "tempco", "rating")} == {"not stated"}
    assert "worst power" not in [column.heading for column in table.columns]  # no corners were looked into


def test_nominal_table_holds_every_quantity():
    review = reviewed(SPLIT)
    table = nominal_table(review)
    names = [text.split(" (")[0] for text in cells(table, "quantity")]
    assert names == list(review.quantities)
    assert {"voltage_gain (inverting)", "distortion (clipping)"} <= set(cells(table, "quantity"))
    for text, (name, quantity) in zip(cells(table, "value"), review.quantities.items(), strict=True):
        slack = 0.05 if quantity.kind is Kind.TEMPERATURE else 1e-12
        assert read_back(text, quantity.kind) == pytest.approx(
            review.nominal.values[name], rel=FOUR_DIGITS, abs=slack
        )


def test_nominal_table_names_the_region():
    review = reviewed(HIVE)
    assert nominal_table(review).title == "Nominal point: active"
    cut = replace(review, nominal=replace(review.nominal, region=Region.CUT_OFF))
    assert nominal_table(cut).title == "Nominal point: cut off"


def test_corners_table_holds_the_extremes():
    review = reviewed(HIVE)
    table = corners_table(review.evidence.corners, review.looked_into)
    for row, (name, quantity) in zip(table.rows, review.looked_into.items(), strict=True):
        found = review.evidence.corners.ranges[name]
        slack = 0.05 if quantity.kind is Kind.TEMPERATURE else 1e-12
        for text, extreme in ((row.cells[1], found.low), (row.cells[2], found.high)):
            assert read_back(text, quantity.kind) == pytest.approx(extreme.value, rel=FOUR_DIGITS, abs=slack)
    count = review.evidence.corners.count
    assert table.title == f"{count} corners: {count} active"


def test_design_table_shows_hand_refined_and_chosen():
    design = reviewed(HIVE).design
    table = design_table(design)
    for heading, field in (("hand", "hand"), ("refined", "ideal")):
        for text, part in zip(cells(table, heading), design.parts, strict=True):
            assert parse(text, Kind.RESISTANCE) == pytest.approx(getattr(part, field).ohms, rel=FOUR_DIGITS)
    assert all(
        row.below[0].startswith("hand: ") and row.below[1].startswith("refined: ") for row in table.rows
    )


def test_summary_has_one_row_per_file_bad_ones_too():
    attempts = [
        Attempt("a.toml", reviewed(HIVE)),
        Attempt("b.toml", reviewed(FAILING)),
        Attempt("c.toml", None, "no such file"),
    ]
    table = summary_table(attempts)
    assert cells(table, "verdict") == ["pass", "FAIL", "bad input"]
    assert cells(table, "stage file") == ["a.toml", "b.toml", "c.toml"]
    assert cells(table, "smallest margin")[0].endswith(" %, R-1 collector_voltage")


@pytest.mark.parametrize(
    ("share", "shown"),
    [
        (1.0, "100 %"), (0.9999999, "99.999 %"), (0.99995, "99.995 %"), (0.5, "50.000 %"),
        (0.0, "0.000 %"), (1e-9, "0.000 %"), (NAN, "n/a"),
    ],
)  # fmt: skip
def test_yield_is_rounded_down_so_that_only_all_boards_are_100(share, shown):
    assert yield_percent(share) == shown


def test_difference_of_temperatures_is_in_kelvin():
    assert difference(98.69, Kind.TEMPERATURE) == "98.7 K"


def test_share_that_is_not_known_is_no_number():
    assert (whole_percent(NAN), whole_percent(math.inf), whole_percent(-0.994)) == ("n/a", "n/a", "-99 %")
    assert percent(0.0843) == "8.4 %"


def test_value_beyond_the_letter_code_has_none():
    assert (code(4700.0), code(1e13)) == ("4K7", "none")
