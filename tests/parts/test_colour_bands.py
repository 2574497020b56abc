"""Colour bands in words, both ways.

"check values" is the project's shared document, "Marking": its colours are those of IEC 60062.
"""

from __future__ import annotations

from decimal import Decimal
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import QuantityError, UsageError
from biasband.files.series_files import load_series
from biasband.parts.colour_bands import colour_bands, read_colour_bands
from biasband.parts.mark_reading import MarkKind

# Check values: digits black 0 … white 9, in the rainbow's order.
DIGITS = ["black", "brown", "red", "orange", "yellow", "green", "blue", "violet", "grey", "white"]
# Check values: multiplier silver 10⁻², gold 10⁻¹; from 10⁰ on the colours of the digits.
MULTIPLIERS = [("silver", 0.47), ("gold", 4.7)] + [(c, float(f"47e{n}")) for n, c in enumerate(DIGITS)]
# Check values, "Marking": tolerances and tempcos.
TOLERANCES = {
    "brown": 0.01, "red": 0.02, "green": 0.005, "blue": 0.0025, "violet": 0.001, "gold": 0.05, "silver": 0.1,
}  # fmt: skip
TEMPCOS = {
    "black": 250e-6, "brown": 100e-6, "red": 50e-6, "orange": 15e-6, "yellow": 25e-6, "green": 20e-6,
    "blue": 10e-6, "violet": 5e-6, "grey": 1e-6,
}  # fmt: skip
TIGHT = sorted(set(TOLERANCES.values()) - {0.05, 0.1})

# Whole markings, worked by hand from the colours of the check values.
WHOLE = [
    ("yellow violet red", 4700.0, 0.2, None),
    ("yellow violet red gold", 4700.0, 0.05, None),
    ("brown black black silver", 10.0, 0.1, None),
    ("white brown silver gold", 0.91, 0.05, None),
    ("yellow violet black brown brown", 4700.0, 0.01, None),
    ("yellow white white gold brown", 49.9, 0.01, None),
    ("red yellow white orange violet", 249e3, 0.001, None),
    ("yellow violet black brown brown red", 4700.0, 0.01, 50e-6),
    ("brown black black silver red grey", 1.0, 0.02, 1e-6),
]


@pytest.mark.parametrize(("words", "ohms", "tolerance", "tempco"), WHOLE)
def test_bands_and_part_are_each_others(
    words: str, ohms: float, tolerance: float, tempco: float | None
) -> None:
    bands = colour_bands(ohms, tolerance=tolerance, tempco=tempco)
    assert bands.colours == tuple(words.split())
    assert bands.reason == ""
    reading = read_colour_bands(words)
    assert (reading.ohms, reading.tolerance, reading.tempco) == (ohms, tolerance, tempco)
    assert (reading.kind, reading.note) == (MarkKind.COLOUR_BANDS, "")


@pytest.mark.parametrize(("digit", "colour"), list(enumerate(DIGITS)))
def test_each_digit_has_its_colour(digit: int, colour: str) -> None:
    bands = colour_bands(100.0 + digit, tolerance=0.01)
    assert bands.colours == ("brown", "black", colour, "black", "brown")
    assert read_colour_bands(f"brown {colour} black gold").ohms == 10.0 + digit


@pytest.mark.parametrize(("colour", "ohms"), MULTIPLIERS)
def test_each_multiplier_has_its_colour(colour: str, ohms: float) -> None:
    assert colour_bands(ohms, tolerance=0.05).colours == ("yellow", "violet", colour, "gold")
    assert read_colour_bands(f"yellow violet {colour} gold").ohms == ohms


@pytest.mark.parametrize(("colour", "tolerance"), list(TOLERANCES.items()))
def test_each_tolerance_has_its_colour(colour: str, tolerance: float) -> None:
    colours = colour_bands(4700.0, tolerance=tolerance).colours
    assert colours is not None
    assert colours[-1] == colour
    assert len(colours) == (4 if tolerance >= 0.05 else 5)  # check values: which have two digits
    assert read_colour_bands(f"yellow violet red {colour}").tolerance == tolerance


@pytest.mark.parametrize(("colour", "tempco"), list(TEMPCOS.items()))
def test_each_tempco_has_its_colour(colour: str, tempco: float) -> None:
    words = f"yellow violet black brown brown {colour}"
    assert colour_bands(4700.0, tolerance=0.01, tempco=tempco).colours == tuple(words.split())
    assert read_colour_bands(words).tempco == tempco


def test_tolerance_and_tempco_stand_in_figures_beside_the_words() -> None:
    assert colour_bands(4700.0, tolerance=0.05).text == "yellow violet red gold (±5 %)"
    assert colour_bands(4700.0, tolerance=0.2).text == "yellow violet red (±20 %)"
    six = colour_bands(4700.0, tolerance=0.0025, tempco=15e-6)
    assert six.text == "yellow violet black brown blue orange (±0.25 %, 15 ppm/K)"


@pytest.mark.parametrize(
    ("ohms", "tolerance", "tempco", "reason"),
    [
        (4750.0, 0.05, None, "the value needs more than 2 figures"),
        (4755.0, 0.01, None, "the value needs more than 3 figures"),
        (0.047, 0.05, None, "no colour stands for the power of ten"),
        (0.91, 0.01, None, "no colour stands for the power of ten"),
        (1e11, 0.05, None, "no colour stands for the power of ten"),
        (1e300, 0.05, None, "no colour stands for the power of ten"),
        (4700.0, None, None, "no tolerance is stated"),
        (4700.0, 0.03, None, "no colour stands for ±3 %"),
        (4700.0, 0.0, None, "no colour stands for ±0 %"),
        (4700.0, 0.01, 200e-6, "no colour stands for 200 ppm/K"),
        (4700.0, 0.01, 0.0, "no colour stands for 0 "),
        (4700.0, 0.05, 100e-6, "±2 % and tighter only"),
    ],
)
def test_part_beyond_the_bands_has_none_and_the_reason(
    ohms: float, tolerance: float | None, tempco: float | None, reason: str
) -> None:
    bands = colour_bands(ohms, tolerance=tolerance, tempco=tempco)
    assert bands.colours is None
    assert reason in bands.reason
    assert bands.text == f"none: {bands.reason}"


@pytest.mark.parametrize("tolerance", [0.0005, 0.0001])
def test_grey_is_never_written_for_a_tolerance(tolerance: float) -> None:
    bands = colour_bands(4700.0, tolerance=tolerance)
    assert bands.colours is None
    assert "±0.05 % in the 2005 edition" in bands.reason


@pytest.mark.parametrize(
    "words",
    ["yellow violet red grey", "yellow violet black brown gray", "yellow violet black brown grey red"],
)
def test_grey_tolerance_is_read_as_ambiguous(words: str) -> None:
    reading = read_colour_bands(words)
    assert (reading.ohms, reading.tolerance) == (4700.0, None)
    assert "±0.05 % in the 2005" in reading.note
    assert "±0.01 % in that of 2016" in reading.note


@pytest.mark.parametrize(
    "text",
    [
        "Yellow VIOLET red gold",
        "yellow,violet,red,gold",
        "yellow-violet-red-gold",
        " yellow, violet -\tred\ngold ",
    ],
)
def test_separators_and_capitals_do_not_matter(text: str) -> None:
    assert read_colour_bands(text) == read_colour_bands("yellow violet red gold")


def test_gray_is_grey() -> None:
    assert read_colour_bands("gray red black gold") == read_colour_bands("grey red black gold")


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        ("", "3, 4, 5 or 6 bands are read, not 0"),
        ("yellow violet", "3, 4, 5 or 6 bands are read, not 2"),
        ("red " * 7, "3, 4, 5 or 6 bands are read, not 7"),
        ("yelow violet red gold", r"'yelow' is no colour of a band \(did you mean yellow\?\)"),
        ("yellow voilet red glod", "did you mean violet.*did you mean gold"),
        ("yelow violet", "not 2; 'yelow' is no colour"),
        ("yellow qqqq red gold", "'qqqq' is no colour of a band;"),
        ("black violet red gold", "black is no first digit, only brown"),
        ("yellow gold red gold", "gold is no digit, only black"),
        ("yellow violet red white", "white is no tolerance, only violet.*silver"),
        ("yellow violet black brown brown white", "white is no tempco, only black"),
        ("gold red violet yellow", "gold is no first digit.*yellow is no tolerance.*from the other end"),
        ("black", "a zero-ohm mark"),
    ],
)
def test_everything_wrong_with_bands_is_said(text: str, problem: str) -> None:
    with pytest.raises(QuantityError, match=f"(?s){problem}.*; allowed: 3 to 6 of silver, gold, black"):
        read_colour_bands(text)


def test_bands_wrong_from_both_ends_are_not_said_to_be_right_from_one() -> None:
    with pytest.raises(QuantityError, match="white is no tolerance") as caught:
        read_colour_bands("black violet red white")
    assert "other end" not in str(caught.value)


@pytest.mark.parametrize("ohms", [0.0, -1.0, inf, nan])
def test_no_resistance_has_no_bands(ohms: float) -> None:
    with pytest.raises(UsageError, match="above 0 and finite"):
        colour_bands(ohms, tolerance=0.05)


# The lowest decades are those of three digits · 10⁻² and two · 10⁻²; the highest those of 10⁹.
@given(
    st.sampled_from(load_series("E96").mantissas),
    st.integers(0, 11),
    st.sampled_from(TIGHT),
    st.sampled_from([None, *TEMPCOS.values()]),
)
def test_every_tight_e96_part_survives_the_round_trip(
    mantissa: Decimal, decade: int, tolerance: float, tempco: float | None
) -> None:
    ohms = float(mantissa.scaleb(decade))
    colours = colour_bands(ohms, tolerance=tolerance, tempco=tempco).colours
    assert colours is not None
    assert len(colours) == (5 if tempco is None else 6)
    reading = read_colour_bands(" ".join(colours))
    assert (reading.ohms, reading.tolerance, reading.tempco) == (ohms, tolerance, tempco)


@given(st.sampled_from(load_series("E24").mantissas), st.integers(-1, 10), st.sampled_from([0.05, 0.1, 0.2]))
def test_every_wide_e24_part_survives_the_round_trip(
    mantissa: Decimal, decade: int, tolerance: float
) -> None:
    ohms = float(mantissa.scaleb(decade))
    colours = colour_bands(ohms, tolerance=tolerance).colours
    assert colours is not None
    assert len(colours) == (3 if tolerance == 0.2 else 4)
    reading = read_colour_bands("-".join(colours))
    assert (reading.ohms, reading.tolerance) == (ohms, tolerance)


@given(
    st.floats(min_value=0.0, exclude_min=True, allow_infinity=False),
    st.sampled_from([*TOLERANCES.values(), 0.2]),
)
def test_bands_are_exact_or_missing(ohms: float, tolerance: float) -> None:
    bands = colour_bands(ohms, tolerance=tolerance)
    if bands.colours is None:
        assert bands.reason
    else:
        assert read_colour_bands(" ".join(bands.colours)).ohms == ohms


WORDS = st.lists(st.sampled_from([*DIGITS, "silver", "gold", "gray", "pink", "", "4K7"]), max_size=8)


@given(st.one_of(st.text(), WORDS.map(" ".join)))
def test_no_text_gives_anything_but_a_value_or_a_quantity_error(text: str) -> None:
    try:
        reading = read_colour_bands(text)
    except QuantityError as error:
        assert repr(text) in str(error)
    else:
        assert 0.1 <= reading.ohms <= 999e9  # 10 · 10⁻² … 999 · 10⁹
