"""The table of parts to buy: where each value is from, what the stock list has, what all costs."""

from __future__ import annotations

from dataclasses import replace
from math import nan

from biasband.parts.marking import markings
from biasband.show.parts_table import parts_table
from biasband.signoff.parts_list import PartLine
from biasband.stage import FileRecord, Stock, StockItem
from tests.show.reviews import HIVE, reviewed
from tests.show.test_tables import cells

DESIGN = reviewed(HIVE).design


def line(*references, **more):
    """An invented line."""
    facts = {
        "value": 4700.0, "series": "E24", "tolerance": 0.01, "tempco": 1e-4, "power_rating": 0.25,
        "power_worst": 0.01, "markings": markings(4700.0, tolerance=0.01),
    }  # fmt: skip
    return PartLine(references=references, **{**facts, **more})


def kept_and_given(*, stock=None):
    """The design with R1 kept for this run, R2 given by the file, the rest chosen."""
    kept = replace(DESIGN.stage.resistors[0], kept=True)
    first, second, *others = DESIGN.parts
    parts = (*(replace(part, chosen=False, ideal=None) for part in (first, second)), *others)
    stage = replace(DESIGN.stage, resistors=(kept, *DESIGN.stage.resistors[1:]), stock=stock)
    return replace(DESIGN, stage=stage, parts=parts)


LIST = Stock(items=(StockItem(value=4700.0),), file=FileRecord(path="invented.csv", sha256=""))


def test_kept_value_is_told_from_a_given_one():
    lines = [line("R1"), line("R2", series=None), line("RC")]
    table = parts_table(lines, kept_and_given())
    kept, given, chosen = cells(table, "ideal")
    assert (kept, given) == ("kept", "given") and chosen.endswith("Ω")
    assert cells(table, "series") == ["E24", "", "E24"]


def test_value_from_stock_claims_no_series():
    lines = [line("R1", series=None), line("R2", series=None), line("RC", series=None)]
    table = parts_table(lines, kept_and_given(stock=LIST))
    assert cells(table, "series") == ["stock", "", "stock"]


def test_worst_power_has_no_column_where_it_was_not_looked_into():
    without = parts_table([line("RC", power_worst=None)], DESIGN)
    assert "worst power" not in [column.heading for column in without.columns]
    assert all(len(row.cells) == len(without.columns) for row in without.rows)
    assert cells(parts_table([line("RC", power_worst=nan)], DESIGN), "worst power") == ["n/a"]


def test_what_is_in_stock_and_what_lacks_is_said():
    one = StockItem(value=4700.0, quantity=1, price=0.01, location="A")
    many = StockItem(value=4700.0, tolerance=0.01, quantity=40, price=0.5, location="B")

    def below(*references, items, **more):
        (row,) = parts_table([line(*references, items=items, **more)], DESIGN).rows
        return row.below[1:]  # behind the marks

    assert below("RC", items=(one,)) == ("in stock: 1 piece, 0.01 each, A",)
    assert below("RC", "RE", items=(one, many)) == (
        "in stock, 1 of these: 1 piece, 0.01 each, A",
        "in stock, 1 of these: ±1 %, 40 pieces, 0.5 each, B",
    )
    assert below("RC", "RE", items=(one, None), pieces=1) == (
        "in stock: 1 piece, 0.01 each, A", "only 1 in stock"
    )  # fmt: skip
    assert below("RC", items=(None,), pieces=0) == ("not in stock",)
    assert below("RC", items=(StockItem(value=4700.0),)) == ("in stock: yes",)


def test_total_is_told_as_far_as_prices_are_known():
    priced = line("RC", "RE", items=(StockItem(value=4700.0, price=0.07),) * 2)
    free = line("R1", items=(StockItem(value=4700.0),))
    assert parts_table([priced], DESIGN).notes == ("Price of all resistors: 0.14.",)  # 2 · 0.07
    assert parts_table([priced, free], DESIGN).notes == (
        "Price of 2 of 3 resistors, the others' is not known: 0.14.",
    )
    assert parts_table([free], DESIGN).notes == ()
