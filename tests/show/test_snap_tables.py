"""The tables of `snap` hold what was found: figures are read back and compared."""

from __future__ import annotations

from dataclasses import replace

import pytest

from biasband.files.series_files import load_series
from biasband.parts.marking import markings
from biasband.parts.pair_reasons import against
from biasband.parts.pairs import pairs
from biasband.parts.series import nearest
from biasband.quantity import Kind, parse
from biasband.show.layout import STYLES, lines_of
from biasband.show.snap_tables import chip_marks, marks, offer_table, pairs_table, snap_tables
from biasband.show.spelling import Spelling
from biasband.show.table import NOT_KNOWN
from biasband.signoff.snapping import snap_texts
from biasband.values.pairing import Offer
from tests.show.test_tables import cells

ASKED = ["6k65", "31k4", "4k7", "1.4", "0.3", "9.99M", "470 kohm"]

TWO_DIGITS = 0.05 * 1.001
"""Half a unit in the second digit, at worst of 1.0; and a little for the reading back."""


def ohms(text):
    return parse(text, Kind.RESISTANCE)


def columns(table, heading):
    """The cells of every column of a heading, since `off` stands three times."""
    places = [place for place, column in enumerate(table.columns) if column.heading == heading]
    return [[row.cells[place] for row in table.rows] for place in places]


def shares(texts):
    return [parse(text, Kind.RATIO) for text in texts]


@pytest.mark.parametrize("series", ["E12", "E24", "E96", "E192"])
def test_snap_table_holds_the_snaps(series):
    study = snap_texts(ASKED, series=series)
    (table,) = snap_tables(study)
    snaps = [row.snap for row in study.rows]
    # Preferred values have three figures and what was asked no more: all are written out.
    for heading, name in {"wanted": "value", "below": "below", "above": "above", "nearest": "chosen"}.items():
        assert list(map(ohms, cells(table, heading))) == pytest.approx(
            [getattr(snap, name) for snap in snaps], rel=1e-12
        )
    below, above, chosen = columns(table, "off")
    for texts, places in ((below, "below"), (above, "above"), (chosen, "chosen")):
        off = [getattr(snap, places) / snap.value - 1.0 for snap in snaps]
        assert shares(texts) == pytest.approx(off, rel=TWO_DIGITS, abs=1e-12)


def test_title_says_series_and_worst_error():
    (table,) = snap_tables(snap_texts(["5k"], series="E12"))
    # IEC 60063; by ratio E12 is at worst 11.80 % off (check_values.md).
    assert "E12" in table.title and "11.8 %" in table.title


def test_code_is_that_of_the_chosen_value():
    (table,) = snap_tables(snap_texts(["5k", "68.4k"], series="E12"))
    assert cells(table, "code") == ["4K7", "68K"]  # IEC 60062


def test_notes_then_marks_stand_below_a_row():
    (table,) = snap_tables(snap_texts(["yellow violet red gold"]))
    read, marked = table.rows[0].below
    assert read.startswith("yellow violet red gold read as colour bands")
    # IEC 60062: J and gold are 5 %; chip marks of 4.7 kΩ (check_values.md).
    assert marked == "marked 4K7J, yellow violet red gold (±5 %), chip 472, 4701"


def test_doubtful_row_has_its_tone_and_its_warning():
    (table,) = snap_tables(snap_texts(["5k", "20M"]))
    good, doubtful = table.rows
    assert (good.tone, doubtful.tone) == ("", "doubt")
    assert "WARNING" in doubtful.below[0] and not any("WARNING" in text for text in good.below)


def test_beyond_the_end_of_a_stock_list_nothing_is_known(tmp_path):
    stock = tmp_path / "house.csv"
    stock.write_text("value\n4k7\n10k\n", encoding="utf-8")
    (table,) = snap_tables(snap_texts(["1k", "22k", "5k"], stock=stock))
    assert cells(table, "below") == [NOT_KNOWN, "10 kΩ", "4.7 kΩ"]
    assert cells(table, "above") == ["4.7 kΩ", NOT_KNOWN, "10 kΩ"]
    below, above, _ = columns(table, "off")
    assert below[0] == NOT_KNOWN and above[1] == NOT_KNOWN
    assert "stock" in table.title and "%" not in table.title  # a list has no worst error


def test_marks_take_the_six_bands_where_a_tempco_is_stated():
    # IEC 60062: brown 1 %, then brown 100 ppm/K.
    (line,) = marks(markings(4700.0, tolerance=0.01, tempco=100e-6))
    assert line == "marked 4K7F, yellow violet black brown brown brown (±1 %, 100 ppm/K), chip 472, 4701"
    (line,) = marks(markings(4700.0, tolerance=0.01))
    assert "yellow violet black brown brown (±1 %)" in line


def test_mark_that_does_not_exist_is_left_out():
    line, why = marks(markings(6650.0, tolerance=0.03))  # no letter and no colour for 3 %
    assert line == "marked 6K65, chip 6651, 80B"  # E96 place 80 is 665, B is 10¹
    assert why == "no colour bands at ±3 %: no colour stands for ±3 %"


def test_why_there_are_no_bands_is_said_only_where_a_tolerance_is_known():
    assert list(marks(markings(6650.0))) == ["marked 6K65, chip 6651, 80B"]
    assert any("more than 2 figures" in text for text in marks(markings(6650.0, tolerance=0.05)))


def test_part_without_any_mark_has_no_line_of_marks():
    assert list(marks(markings(1e13))) == []  # beyond letters, chips and colours
    assert not any(text.startswith("marked") for text in marks(markings(1e13, tolerance=0.05)))


def test_doubtful_value_is_coloured():
    (table,) = snap_tables(snap_texts(["20M"]))
    lines = lines_of((table,), width=80, spelling=Spelling())
    assert STYLES["doubt"] in {str(span.style) for line in lines for span in line.spans}


def test_what_the_parts_of_a_pair_do_not_state_is_not_zero(tmp_path):
    stock = tmp_path / "house.csv"
    stock.write_text("value,tolerance\n10k,1 %\n3k3,\n", encoding="utf-8")
    _, table = snap_tables(snap_texts(["20k"], stock=stock, pair=True))
    shown = dict(zip(cells(table, "pair"), cells(table, "tol."), strict=True))
    assert shown["10 kΩ + 10 kΩ"] == "1 %"
    assert {text for pair, text in shown.items() if "3.3" in pair} == {"not stated"}
    assert set(cells(table, "tempco")) == {"not stated"}
    assert not any("n/a" in text for row in table.rows for text in row.cells)
    assert not any("n/a" in note for note in table.notes)


def test_chip_marks_are_named_once():
    found = markings(4.7)
    assert chip_marks(found) == "chip 4R7, 4R70"
    assert chip_marks(replace(found, chip_four="4R7")) == "chip 4R7"
    assert chip_marks(replace(found, chip_three=None, chip_four=None, chip_e96=None)) == ""


# Pairs.


def test_each_value_has_its_own_table_of_pairs():
    study = snap_texts(["6k65", "5k"], pair=True)
    _, *paired = snap_tables(study)
    assert [table.title for table in paired] == ["Pairs for 6.65 kΩ", "Pairs for 5 kΩ"]
    assert snap_tables(snap_texts(["6k65"]))[1:] == ()


@pytest.mark.parametrize(("series", "value"), [("E24", 6650.0), ("E12", 31.4), ("E96", 123456.0)])
def test_pairs_table_holds_the_pairs(series, value):
    found = pairs(load_series(series), value, tolerance=0.01, tempco=50e-6, count=5)
    table = pairs_table("Pairs", found, ("against",))
    for text, pair in zip(cells(table, "pair"), found, strict=True):
        sign = {"series": " + ", "parallel": " ∥ "}[pair.connection]
        assert list(map(ohms, text.split(sign))) == [pair.first, pair.second]
    # Five digits; then two.
    totals = [pair.total for pair in found]
    assert list(map(ohms, cells(table, "total"))) == pytest.approx(totals, rel=5e-5 * 1.001)
    for heading, figures in {
        "off": [pair.error for pair in found],
        "tol.": [max(pair.tolerance_high, -pair.tolerance_low) for pair in found],
        "tol. RSS": [max(pair.rss_high, -pair.rss_low) for pair in found],
        "larger share": [max(pair.first_share, pair.second_share) for pair in found],
    }.items():
        assert shares(cells(table, heading)) == pytest.approx(figures, rel=TWO_DIGITS, abs=1e-12)
    assert {parse(text, Kind.RELATIVE_SLOPE) for text in cells(table, "tempco")} == {50e-6}
    assert table.notes[0] == "against"


def test_tolerance_of_a_pair_is_that_of_its_wider_side():
    (pair,) = pairs(load_series("E24"), 5000.0, tolerance=0.01, count=1)
    for low, high in ((-0.02, 0.03), (-0.03, 0.02)):
        table = pairs_table("Pairs", [replace(pair, tolerance_low=low, tolerance_high=high)], ())
        assert cells(table, "tol.") == ["3 %"]


def test_offer_says_for_which_resistor_and_value():
    found = pairs(load_series("E24"), 2092.0, tolerance=0.01)
    reasons = against(found[0], nearest(load_series("E24"), 2092.0))
    table = offer_table(Offer("RE", 2092.0, found, reasons))
    assert "RE" in table.title and "2.092 kΩ" in table.title
    assert len(table.rows) == len(found) and set(reasons) <= set(table.notes)
