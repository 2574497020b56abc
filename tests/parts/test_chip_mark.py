"""Marks of chip resistors, both ways.

"check values" is the project's shared document, "Marking".
"""

from __future__ import annotations

from collections.abc import Callable
from decimal import Decimal
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import QuantityError, UsageError
from biasband.files.series_files import load_series
from biasband.parts.chip_mark import E96_MANTISSAS, chip_e96, chip_four, chip_three, read_chip_mark
from biasband.parts.mark_reading import MarkKind

# 472 and 4R7: check values. The others: common practice, worked by hand.
THREE = [
    ("472", 4700.0),
    ("4R7", 4.7),
    ("100", 10.0),
    ("103", 1e4),
    ("1R0", 1.0),
    ("R47", 0.47),
    ("999", 99e9),
]
# 4701: check values. 49R9, R047: common practice, the others worked by hand.
FOUR = [
    ("4701", 4700.0),
    ("49R9", 49.9),
    ("4R70", 4.7),
    ("1000", 100.0),
    ("2493", 249e3),
    ("R470", 0.47),
    ("R047", 0.047),
]
# Check values: 01C, 39D, 68X, and 96 → 976.
E96_MARKS = [("01C", 1e4), ("39D", 249e3), ("68X", 49.9), ("96A", 976.0)]
# Check values: Z 10⁻³, Y or R 10⁻², X or S 10⁻¹, A 1, B or H 10, C 10², D 10³, E 10⁴, F 10⁵. Place 01 is 100.
LETTERS = {
    "Z": 0.1, "Y": 1.0, "R": 1.0, "X": 10.0, "S": 10.0, "A": 100.0, "B": 1e3, "H": 1e3, "C": 1e4, "D": 1e5,
    "E": 1e6, "F": 1e7,
}  # fmt: skip


@pytest.mark.parametrize(("mark", "ohms"), THREE)
def test_three_digits_and_value_are_each_others(mark: str, ohms: float) -> None:
    assert chip_three(ohms) == mark
    reading = read_chip_mark(mark)
    assert (reading.kind, reading.ohms, reading.tolerance) == (MarkKind.CHIP_THREE, ohms, None)


@pytest.mark.parametrize(("mark", "ohms"), FOUR)
def test_four_digits_and_value_are_each_others(mark: str, ohms: float) -> None:
    assert chip_four(ohms) == mark
    reading = read_chip_mark(mark)
    assert (reading.kind, reading.ohms, reading.tolerance) == (MarkKind.CHIP_FOUR, ohms, None)


@pytest.mark.parametrize(("mark", "ohms"), E96_MARKS)
def test_e96_mark_and_value_are_each_others(mark: str, ohms: float) -> None:
    assert chip_e96(ohms) == mark
    reading = read_chip_mark(mark)
    assert (reading.kind, reading.ohms, reading.tolerance) == (MarkKind.CHIP_E96, ohms, None)


def test_e96_mantissas_are_those_of_the_series_table() -> None:
    assert [Decimal(each).scaleb(-2) for each in E96_MANTISSAS] == list(load_series("E96").mantissas)


@pytest.mark.parametrize(("letter", "ohms"), list(LETTERS.items()))
def test_every_alternative_letter_is_read_and_one_written(letter: str, ohms: float) -> None:
    assert read_chip_mark(f"01{letter}").ohms == ohms
    written = chip_e96(ohms)
    assert written is not None
    assert written in {f"01{each}" for each in "ZYXABCDEF"}
    assert LETTERS[written[2]] == ohms


def test_digits_alone_note_what_the_plain_number_would_be() -> None:
    assert "plain number it would be 472 Ω" in read_chip_mark("472").note
    assert "plain number it would be 4701 Ω" in read_chip_mark("4701").note
    assert read_chip_mark("4R7").note == ""


@pytest.mark.parametrize("ohms", [4750.0, 49.9, 1e11, 0.047, 0.005, 1e300])
def test_value_beyond_three_digits_has_no_such_mark(ohms: float) -> None:
    assert chip_three(ohms) is None


@pytest.mark.parametrize("ohms", [4755.0, 49.95, 1e12, 0.0047, 0.4755, 1e300])
def test_value_beyond_four_digits_has_no_such_mark(ohms: float) -> None:
    assert chip_four(ohms) is None


# 470 and 920 are not in E96 (470 is E24's, 9.20 is E192's exception); then one value beyond each end.
@pytest.mark.parametrize("ohms", [4700.0, 920.0, 0.0976, 100e6, 1e300])
def test_value_outside_e96_has_no_such_mark(ohms: float) -> None:
    assert chip_e96(ohms) is None


@pytest.mark.parametrize("write", [chip_three, chip_four, chip_e96])
@pytest.mark.parametrize("ohms", [0.0, -1.0, inf, nan])
def test_no_resistance_has_no_mark(write: Callable[[float], str | None], ohms: float) -> None:
    with pytest.raises(UsageError, match="above 0 and finite"):
        write(ohms)


@pytest.mark.parametrize(
    "text",
    ["", "4", "47", "47011", "047", "0R47", "4R", "R4", "4R7R", "R4701", "01c", "01M", "4K7", "٤72", "-72"],
)
def test_other_text_is_no_chip_mark(text: str) -> None:
    with pytest.raises(QuantityError, match="not a chip mark"):
        read_chip_mark(text)


@pytest.mark.parametrize("text", ["00C", "97A", "99Z"])
def test_place_outside_e96_is_said(text: str) -> None:
    with pytest.raises(QuantityError, match=f"E96 has no place {text[:2]}, only 01 … 96"):
        read_chip_mark(text)


@pytest.mark.parametrize("text", ["0", "00", "000", "0000", "0R", "R0", "0R0", "0R00", "R000"])
def test_zero_ohm_mark_is_said_to_be_one(text: str) -> None:
    with pytest.raises(QuantityError, match="a zero-ohm mark"):
        read_chip_mark(text)


@given(st.sampled_from(load_series("E24").mantissas), st.integers(-1, 10))
def test_every_e24_value_survives_three_digits(mantissa: Decimal, decade: int) -> None:
    ohms = float(mantissa.scaleb(decade))
    mark = chip_three(ohms)
    assert mark is not None
    assert len(mark) == 3
    assert read_chip_mark(mark).ohms == ohms


@given(st.sampled_from(load_series("E96").mantissas), st.integers(-1, 11))
def test_every_e96_value_survives_four_digits(mantissa: Decimal, decade: int) -> None:
    ohms = float(mantissa.scaleb(decade))
    mark = chip_four(ohms)
    assert mark is not None
    assert len(mark) == 4
    assert read_chip_mark(mark).ohms == ohms


def test_every_e96_value_has_its_own_e96_mark_that_reads_back() -> None:
    values = [float(each.scaleb(decade)) for each in load_series("E96").mantissas for decade in range(-1, 8)]
    marks = [chip_e96(ohms) for ohms in values]
    assert [read_chip_mark(str(mark)).ohms for mark in marks] == values
    assert len(set(marks)) == 96 * 9


@given(
    st.floats(min_value=0.0, exclude_min=True, allow_infinity=False)
    | st.integers(1, 99_999).map(lambda n: n / 1000)
)
def test_mark_is_exact_or_missing(ohms: float) -> None:
    for mark in (chip_three(ohms), chip_four(ohms), chip_e96(ohms)):
        assert mark is None or read_chip_mark(mark).ohms == ohms


@given(st.text() | st.text("0123456789RABCXYZ", max_size=5))
def test_no_text_gives_anything_but_a_value_or_a_quantity_error(text: str) -> None:
    try:
        reading = read_chip_mark(text)
    except QuantityError as error:
        assert repr(text) in str(error)
    else:
        assert 0.001 <= reading.ohms <= 999e9  # R001 … 9999
