"""All marks of a part together, and a mark of any kind read back.

"check values" is the project's shared document, "Marking".
"""

from __future__ import annotations

from decimal import Decimal
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import QuantityError, UsageError
from biasband.files.series_files import load_series
from biasband.parts.mark_reading import MarkKind
from biasband.parts.marking import markings, read_mark

LETTER, BANDS = MarkKind.LETTER_CODE, MarkKind.COLOUR_BANDS
THREE, FOUR, E96 = MarkKind.CHIP_THREE, MarkKind.CHIP_FOUR, MarkKind.CHIP_E96


# 4K7J, 472, 4701: check values; the bands by hand from the colours there.
def test_part_of_five_per_cent_has_its_marks() -> None:
    marks = markings(4700.0, tolerance=0.05, tempco=250e-6)
    assert marks.letter_code == "4K7J"
    assert marks.bands.text == "yellow violet red gold (±5 %)"
    assert "±2 % and tighter only" in marks.six_bands.reason
    assert (marks.chip_three, marks.chip_four, marks.chip_e96) == ("472", "4701", None)


# 01C is 10 kΩ: check values; the bands by hand from the colours there.
def test_part_of_one_per_cent_has_its_marks() -> None:
    marks = markings(1e4, tolerance=0.01, tempco=50e-6)
    assert marks.letter_code == "10KF"
    assert marks.bands.text == "brown black black red brown (±1 %)"
    assert marks.six_bands.text == "brown black black red brown red (±1 %, 50 ppm/K)"
    assert (marks.chip_three, marks.chip_four, marks.chip_e96) == ("103", "1002", "01C")


def test_tempco_without_a_colour_leaves_five_bands() -> None:
    marks = markings(1e4, tolerance=0.01, tempco=200e-6)
    assert marks.bands.text == "brown black black red brown (±1 %)"
    assert marks.six_bands.colours is None
    assert "200 ppm/K" in marks.six_bands.reason


def test_tolerance_that_is_not_stated_is_not_marked() -> None:
    marks = markings(4700.0)
    assert marks.letter_code == "4K7"
    assert marks.bands.text.startswith("none: no tolerance is stated")
    assert marks.six_bands.text.startswith("none: no tempco is stated")


def test_tolerance_without_letter_or_colour_is_not_marked() -> None:
    marks = markings(4700.0, tolerance=0.03)
    assert (marks.letter_code, marks.bands.text) == ("4K7", "none: no colour stands for ±3 %")


def test_value_that_no_mark_can_say_has_none() -> None:
    marks = markings(1e300, tolerance=0.01)
    assert (marks.letter_code, marks.bands.colours) == (None, None)
    assert (marks.chip_three, marks.chip_four, marks.chip_e96) == (None, None, None)


@pytest.mark.parametrize("ohms", [0.0, -4700.0, inf, -inf, nan])
def test_no_resistance_has_no_markings(ohms: float) -> None:
    with pytest.raises(UsageError, match="a marking needs a resistance above 0 and finite"):
        markings(ohms, tolerance=0.05)


@pytest.mark.parametrize(
    ("text", "readings"),
    [
        # One kind alone: check values.
        ("4K7J", [(LETTER, 4700.0, 0.05)]),
        ("10K", [(LETTER, 1e4, None)]),
        ("472", [(THREE, 4700.0, None)]),
        ("4701", [(FOUR, 4700.0, None)]),
        ("01C", [(E96, 1e4, None)]),
        ("yellow violet red gold", [(BANDS, 4700.0, 0.05)]),
        ("Yellow-violet-red", [(BANDS, 4700.0, 0.2)]),
        (" 39D ", [(E96, 249e3, None)]),
        # Two kinds that agree.
        ("4R7", [(LETTER, 4.7, None), (THREE, 4.7, None)]),
        ("49R9", [(LETTER, 49.9, None), (FOUR, 49.9, None)]),
        # Two that do not: check values, R for 10⁻²; E96 places 10, 68 and 1 are 124, 499 and 100.
        ("10R", [(LETTER, 10.0, None), (E96, 1.24, None)]),
        ("68R", [(LETTER, 68.0, None), (E96, 4.99, None)]),
        ("01R", [(LETTER, 1.0, None), (E96, 1.0, None)]),
        ("97R", [(LETTER, 97.0, None)]),
    ],
)
def test_every_reading_of_a_mark_is_returned(
    text: str, readings: list[tuple[MarkKind, float, float | None]]
) -> None:
    assert [(each.kind, each.ohms, each.tolerance) for each in read_mark(text)] == readings


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        ("", "not a letter code, not a chip mark"),
        ("4k7", "not a letter code, not a chip mark; read .4k7"),
        ("4.7 kΩ", "not a letter code, not a chip mark"),
        ("97C", "not a letter code, E96 has no place 97"),
        ("1000G", "a resistance outside the letter code, not a chip mark"),
        ("000", "a zero-ohm mark"),
        ("0R0", "a zero-ohm mark"),
        ("black", "a zero-ohm mark"),
        ("yelow violet red gold", "did you mean yellow"),
        ("4K7 gold", "'4k7' is no colour of a band"),
        ("red", "3, 4, 5 or 6 bands are read, not 1"),
        ("4K7" * 40, "too long for a mark"),
    ],
)
def test_text_without_a_reading_is_an_error_that_says_why(text: str, problem: str) -> None:
    with pytest.raises(QuantityError, match=f"{problem}.*allowed: (a letter code in capitals|3 to 6 of)"):
        read_mark(text)


@given(
    st.sampled_from([*load_series("E96").mantissas, *load_series("E24").mantissas]),
    st.integers(-1, 8),
    st.sampled_from([None, 0.001, 0.01, 0.02, 0.03, 0.05, 0.2]),
    st.sampled_from([None, 25e-6, 100e-6, 200e-6]),
)
def test_every_mark_of_a_part_can_be_read_as_that_part(
    mantissa: Decimal, decade: int, tolerance: float | None, tempco: float | None
) -> None:
    ohms = float(mantissa.scaleb(decade))
    marks = markings(ohms, tolerance=tolerance, tempco=tempco)
    written = [marks.letter_code, marks.chip_three, marks.chip_four, marks.chip_e96]
    written += [" ".join(bands.colours) for bands in (marks.bands, marks.six_bands) if bands.colours]
    for mark in filter(None, written):
        own = [each for each in read_mark(mark) if each.ohms == ohms]
        assert own
        assert all(each.tolerance in (None, tolerance) for each in own)
        assert all(each.tempco in (None, tempco) for each in own)


@given(st.text() | st.text("0123456789RKMLGJABCred -,", max_size=6))
def test_no_text_gives_anything_but_readings_or_a_quantity_error(text: str) -> None:
    try:
        readings = read_mark(text)
    except QuantityError as error:
        assert error.allowed
    else:
        assert readings
