"""Snaps of texts: resistances, codes and marks, held against published snaps, codes and worst errors."""

from __future__ import annotations

import math
from itertools import combinations_with_replacement

import pytest

from biasband.errors import BadlyWritten, UsageError
from biasband.signoff.snapping import PAIRS_SHOWN, snap_texts


def one(text, **how):
    """The only row of a snap."""
    (row,) = snap_texts([text], **how).rows
    return row


@pytest.fixture
def house(tmp_path):
    """Writes a stock list."""

    def write(text):
        path = tmp_path / "house.csv"
        path.write_text(text, encoding="utf-8")
        return path

    return write


# Series.


# check_values.md, "Preferred values": worst errors by ratio, from an independent program, in per cent.
WORST = {"E3": 48.32, "E6": 22.47, "E12": 11.80, "E24": 7.42, "E48": 2.63, "E96": 1.49, "E192": 0.98}


@pytest.mark.parametrize("series", WORST)
def test_worst_error_is_that_of_the_series(series):
    study = snap_texts(["4k7"], series=series)
    assert study.series == series
    # Published to 0.01 %.
    assert 100.0 * study.worst_error == pytest.approx(WORST[series], abs=0.0051)


# Bell, Electronic Devices and Circuits, ex. 5-14 and 5-16 (check_values.md): the book's own choice of parts.
BELL = {"5k": 4700.0, "68.4k": 68e3, "8.3k": 8200.0, "4k": 3900.0}


@pytest.mark.parametrize(("ideal", "part"), BELL.items())
def test_textbook_snaps_in_e12(ideal, part):
    assert one(ideal, series="E12").snap.chosen == part


def test_neighbours_and_their_errors():
    # IEC 60063, E24: 6.2 6.8 and 3.0 3.3; the example of issue 3.
    first, second = snap_texts(["6k65", "31k4"]).rows
    assert (first.snap.below, first.snap.above, first.snap.chosen) == (6200.0, 6800.0, 6800.0)
    assert (second.snap.below, second.snap.above, second.snap.chosen) == (30e3, 33e3, 30e3)
    assert first.snap.error == pytest.approx(6.8 / 6.65 - 1.0, rel=1e-12)  # one division
    assert second.snap.error == pytest.approx(30.0 / 31.4 - 1.0, rel=1e-12)


def test_rows_are_in_the_order_asked_and_keep_the_texts():
    asked = ["10k", "4k7", "4K7J", "10k"]
    assert [row.asked for row in snap_texts(asked).rows] == asked


def test_unknown_series_is_refused_with_those_there_are():
    with pytest.raises(UsageError, match=r"no series 'E7'; allowed: E3, E6, E12, E24, E48, E96, E192"):
        snap_texts(["4k7"], series="E7")


def test_series_of_ones_own(tmp_path):
    (tmp_path / "series.csv").write_text(
        "series,values_per_decade,usual_tolerance_percent\nhouse,3,2\n", encoding="utf-8"
    )
    (tmp_path / "house.csv").write_text("mantissa\n1.0\n2.0\n5.0\n", encoding="utf-8")
    study = snap_texts(["3k", "3.2k"], series="house", tables=tmp_path)
    # √(2·5) = 3.162 is the border; the widest gap is 2 … 5, and √2.5 − 1 = 58.1139 %.
    assert [row.snap.chosen for row in study.rows] == [2000.0, 5000.0]
    assert study.worst_error == pytest.approx(0.581139, abs=1e-6)
    assert study.rows[0].markings.letter_code == "2K0G"  # G is 2 %: IEC 60062


# Marks of the part that was chosen.


def test_marks_are_those_of_the_chosen_part_at_the_usual_tolerance():
    # IEC 60062: K is 10 %, which is E12's; blue 6, grey 8, orange 10³, silver 10 %.
    found = one("68.4k", series="E12").markings
    assert found.letter_code == "68KK"
    assert found.bands.colours == ("blue", "grey", "orange", "silver")
    assert (found.chip_three, found.chip_four, found.chip_e96) == ("683", "6802", None)


def test_tolerance_that_is_said_takes_the_place_of_the_usual_one():
    # IEC 60062: F is 1 %, brown; ±2 % and tighter have three digits.
    found = one("68k", series="E12", tolerance=0.01).markings
    assert found.letter_code == "68KF"
    assert found.bands.colours == ("blue", "grey", "black", "red", "brown")


def test_series_without_a_usual_tolerance_marks_none():
    found = one("4k7", series="E3").markings  # IEC 60063: "over 20 %", which no letter stands for
    assert found.letter_code == "4K7" and found.bands.colours is None


# Codes and marks read. The values are the worked ones of check_values.md, "Marking".
MARKED = {
    "4K7J": (4700.0, "letter code", "±5 %"),
    "01C": (10e3, "E96 chip mark", "10 kΩ"),
    "39D": (249e3, "E96 chip mark", "249 kΩ"),
    "68X": (49.9, "E96 chip mark", "49.9 Ω"),
    "yellow violet red gold": (4700.0, "colour bands", "±5 %"),
    "yellow violet red": (4700.0, "colour bands", "±20 %"),  # no fourth band is 20 %
    "brown black black red brown red": (10e3, "colour bands", "±50 ppm/K"),  # red as the sixth is 50
}


@pytest.mark.parametrize("as_marks", [False, True])
@pytest.mark.parametrize("text", MARKED)
def test_code_or_mark_is_read_and_said(text, as_marks):
    ohms, kind, said = MARKED[text]
    row = one(text, series="E192", as_marks=as_marks)
    assert row.snap.value == ohms
    assert row.notes[0].startswith(f"{text} read as {kind}: ") and said in row.notes[0]


def test_resistance_is_one_and_says_nothing_of_marks():
    # "10K" is ten kilohm, not ±10 % (check_values.md); 4R7 is 4.7 Ω both ways.
    for text, ohms in {"10K": 10e3, "4R7": 4.7, "6k65": 6650.0, "130 ohm": 130.0}.items():
        row = one(text)
        assert row.snap.value == ohms and row.notes == ()


@pytest.mark.parametrize(("text", "plain", "marked"), [("472", 472.0, 4700.0), ("4701", 4701.0, 4700.0)])
def test_digits_alone_are_ohms_unless_read_as_a_mark(text, plain, marked):
    # Common practice (check_values.md): 472 and 4701 on a chip are 4.7 kΩ.
    row = one(text)
    assert row.snap.value == plain
    assert any("4.7 kΩ" in note and "--mark" in note for note in row.notes)
    assert one(text, as_marks=True).snap.value == marked


def test_mark_with_two_readings_is_never_guessed():
    # E96 place 10 is 124, and R is 10⁻²: 1.24 Ω; as a letter code 10R is 10 Ω.
    with pytest.raises(UsageError, match=r"'10R' has more than one reading: 10 Ω .*, 1.24 Ω "):
        snap_texts(["10R"], as_marks=True)
    row = one("10R")
    assert row.snap.value == 10.0 and any("1.24 Ω" in note for note in row.notes)


def test_note_promises_no_reading_that_mark_refuses():
    (note,) = one("10R").notes
    assert note == "as an E96 chip mark 10R is 1.24 Ω"
    (note,) = one("472").notes
    assert note.endswith(": --mark reads it so")


@pytest.mark.parametrize(("text", "ohms"), [("4k7", 4700.0), ("6.65k", 6650.0), ("130 ohm", 130.0)])
def test_text_that_is_no_mark_stays_a_resistance(text, ohms):
    row = one(text, as_marks=True)
    assert (row.snap.value, row.notes) == (ohms, ())


@pytest.mark.parametrize("text", ["47", "4", "47000"])
def test_digits_that_are_no_mark_are_not_taken_for_ohms_behind_mark(text):
    with pytest.raises(UsageError, match="not a chip mark"):
        snap_texts([text], as_marks=True)


def test_grey_as_a_tolerance_is_told_to_be_ambiguous():
    # Editions of IEC 60062 disagree: 0.05 % in 2005, 0.01 % in 2016 (check_values.md).
    notes = " ".join(one("yellow violet red grey").notes)
    assert "0.05 %" in notes and "0.01 %" in notes
    assert "±" not in one("yellow violet red grey").notes[0]


# What cannot be snapped.


@pytest.mark.parametrize("text", ["0", "-1", "-4k7", "1e300", "1e-300", "0R"])
def test_value_that_no_part_has_is_refused(text):
    with pytest.raises(UsageError, match="above 0 and finite"):
        snap_texts([text])


@pytest.mark.parametrize("text", ["nan", "inf", "-inf", "Infinity", "NaN"])
def test_number_that_is_none_is_told_to_be_no_figure(text):
    with pytest.raises(UsageError, match=r"^not a figure") as caught:
        snap_texts([text])
    assert "colour" not in str(caught.value)


def test_series_in_the_wrong_case_is_suggested():
    with pytest.raises(UsageError, match='did you mean "E24"'):
        snap_texts(["4k7"], series="e24")


@pytest.mark.parametrize("text", ["nan", "inf", "-inf", "", " ", "purple red red", "5 V", "4k7x", "5,1k"])
def test_text_that_is_neither_value_nor_mark_is_refused(text):
    with pytest.raises(UsageError, match="allowed"):
        snap_texts([text])


def test_every_fault_is_told_once():
    with pytest.raises(UsageError) as caught:
        snap_texts(["4k7", "5 V", "0", "5 V", "red red"])
    lines = str(caught.value).splitlines()
    assert len(lines) == 3
    for word, line in zip(("5 V", "above 0", "red red"), lines, strict=True):
        assert word in line


def test_zero_ohm_mark_names_no_resistor():
    with pytest.raises(UsageError, match="zero-ohm mark"):
        snap_texts(["000"], as_marks=True)  # a jumper: common practice


# Issue 3: outside 1 Ω to 10 MΩ there is a warning, not a silent answer.


@pytest.mark.parametrize(
    ("text", "warned"),
    [("1R0", False), ("10M", False), ("0.99", True), ("10.1M", True), ("1 mohm", True), ("1e9", True)],
)
def test_value_outside_the_practical_range_has_a_warning(text, warned):
    assert any(note.startswith("WARNING: ") for note in one(text).notes) is warned


def test_warning_stands_beside_what_was_read_as_a_mark():
    first, second = one("R51J").notes
    assert "read as letter code" in first and "510 mΩ" in second and second.startswith("WARNING")


# Stock.


def test_stock_takes_the_place_of_the_series(house):
    study = snap_texts(["3k3", "3k", "20k"], stock=house("value\n10k\n1k\n2k2\n4k7\n"))
    assert (study.series, study.worst_error) == ("stock", None)
    # √(2.2·4.7) = 3.216.
    assert [row.snap.chosen for row in study.rows] == [4700.0, 2200.0, 10e3]
    assert study.rows[0].snap.below == 2200.0
    assert study.rows[2].snap.below == 10e3 and math.isnan(study.rows[2].snap.above)


def test_part_that_has_run_out_is_no_part(house):
    stock = house("value,quantity\n4k7,0\n10k,1\n2k2,\n")
    assert one("4k7", stock=stock).snap.chosen == 10e3  # √(2.2·10) = 4.690


def test_tolerance_asks_for_no_wider_part(house):
    stock = house("value,tolerance\n4k7,5 %\n10k,1 %\n")
    assert one("4k7", stock=stock).snap.chosen == 4700.0
    assert one("4k7", stock=stock, tolerance=0.01).snap.chosen == 10e3


def test_stock_without_a_part_that_will_do_is_refused(house):
    stock = house("value,tolerance,quantity\n4k7,5 %,9\n10k,1 %,0\n")
    with pytest.raises(UsageError, match=r"house\.csv: no part in stock will do"):
        snap_texts(["4k7"], stock=stock, tolerance=0.01)


def test_part_in_stock_is_marked_with_what_the_list_states(house):
    stock = house("value,tolerance,tempco\n4k7,1 %,100 ppm/K\n10k,,\n")
    found = one("4k7", stock=stock).markings
    # IEC 60062: F is 1 %, brown; as the sixth band brown is 100 ppm/K.
    assert found.letter_code == "4K7F"
    assert found.six_bands.colours == ("yellow", "violet", "black", "brown", "brown", "brown")
    assert one("10k", stock=stock).markings.letter_code == "10K"  # not the ±5 % of a series never asked for
    assert one("10k", stock=stock, tolerance=0.02).markings.letter_code == "10KG"  # said for what states none


def test_series_beside_a_stock_list_is_refused(house):
    with pytest.raises(UsageError, match="--series: with --stock the values are those of the list"):
        snap_texts(["4k7"], stock=house("value\n4k7\n"), series="E12")


def test_chosen_value_outside_the_practical_range_is_warned_of(house):
    row = one("9M", stock=house("value\n11M\n"))
    assert any(note.startswith("WARNING: 11 MΩ is outside") for note in row.notes)
    both = one("0.9", stock=house("value\n0.5\n"))
    assert any("900 mΩ and 500 mΩ are outside" in note for note in both.notes)


def test_faulty_stock_list_is_refused_with_its_line(house):
    with pytest.raises(BadlyWritten, match=r"house\.csv:3: value"):
        snap_texts(["4k7"], stock=house("value\n4k7\n10 mA\n"))


# Pairs.


def test_pairs_come_only_where_they_are_asked_for():
    assert one("6k65").pairs == () and one("6k65").against == ()
    row = one("6k65", pair=True)
    assert len(row.pairs) == PAIRS_SHOWN and row.against


def test_pairs_of_stock_are_the_best_of_all_and_of_nothing_else(house):
    drawer = (1000.0, 1800.0, 2200.0, 4700.0, 10e3, 27e3)
    stock = house("value\n" + "\n".join(f"{ohms:g}" for ohms in drawer) + "\n")
    totals = [
        total
        for first, second in combinations_with_replacement(drawer, 2)
        for total in (first + second, first * second / (first + second))
    ]
    wanted = 3150.0
    best = sorted(totals, key=lambda total: abs(math.log(total / wanted)))[:PAIRS_SHOWN]
    row = one("3k15", stock=stock, pair=True)
    assert [pair.total for pair in row.pairs] == pytest.approx(best, rel=1e-12)  # a few roundings
    assert all({pair.first, pair.second} <= set(drawer) for pair in row.pairs)


def test_pair_has_the_tolerance_of_its_parts():
    # Two equal parts in parallel, both at the same limit, are off by just that (Ohm's law).
    pair = one("5k", series="E12", tolerance=0.02, pair=True).pairs[0]
    assert (pair.first, pair.second, pair.connection) == (10e3, 10e3, "parallel")
    assert pair.tolerance_high == pytest.approx(0.02, rel=1e-12)
    usual = one("5k", series="E12", pair=True).pairs[0]
    assert usual.tolerance_high == pytest.approx(0.10, rel=1e-12)  # IEC 60063: E12 is 10 %


def test_what_speaks_against_a_pair_is_about_the_snap():
    row = one("4k7", pair=True)
    assert "4.7 kΩ alone is the wanted value exactly" in row.against[0]


@pytest.mark.parametrize("text", ["0.01", "1e9", "0.49", "21M"])
def test_value_that_no_pair_reaches_has_a_note_and_stops_no_other(text):
    far, near = snap_texts([text, "5k"], pair=True).rows
    # From half of 1 Ω to twice 10 MΩ.
    assert any("no pairs in E24: " in note and "from 500 mΩ to 20 MΩ" in note for note in far.notes)
    assert far.pairs == () and near.pairs


def test_value_that_no_pair_in_stock_reaches_says_so_of_the_stock(house):
    row = one("1M", stock=house("value\n1k\n2k2\n"), pair=True)
    assert any(note.startswith("no pairs in stock: ") for note in row.notes)


def test_value_of_which_there_is_one_piece_makes_no_pair_with_itself(house):
    row = one("20k", stock=house("value,quantity\n10k,1\n4k7,2\n"), pair=True)
    pairs = {(pair.first, pair.second) for pair in row.pairs}
    assert (10e3, 10e3) not in pairs and (10e3, 4700.0) in pairs
    alone = one("20k", stock=house("value,quantity\n10k,1\n"), pair=True)
    assert alone.pairs == () and any("one piece alone" in note for note in alone.notes)
    assert one("20k", stock=house("value,quantity\n10k,2\n"), pair=True).pairs[0].error == 0.0


def test_pair_in_stock_has_the_tolerance_of_its_parts(house):
    row = one("20k", stock=house("value,tolerance,tempco\n10k,1 %,50 ppm/K\n"), pair=True)
    # Two equal parts in series move together: 1 %, 50 ppm/K.
    assert row.pairs[0].tolerance_high == pytest.approx(0.01, rel=1e-12)
    assert row.pairs[0].tempco == pytest.approx(50e-6, rel=1e-12)


def test_two_pieces_of_unequal_tolerance_count_as_the_wider(house):
    stock = house("value,tolerance,quantity,price\n10k,1 %,1,0.01\n10k,5 %,9,0.02\n")
    pair = next(each for each in one("20k", stock=stock, pair=True).pairs if each.second == 10e3)
    assert pair.tolerance_high == pytest.approx(0.05, rel=1e-12)


def test_pairs_of_a_series_without_tolerance_need_one():
    with pytest.raises(UsageError, match=r"E3 has no usual tolerance: .*--tolerance"):
        snap_texts(["5k"], series="E3", pair=True)
    assert one("5k", series="E3", pair=True, tolerance=0.2).pairs
