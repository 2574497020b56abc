"""The letter code of IEC 60062, both ways."""

from __future__ import annotations

from decimal import Decimal
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import QuantityError, UsageError
from biasband.files.series_files import load_series
from biasband.parts.letter_code import letter_code, read_letter_code
from biasband.parts.mark_reading import MarkKind

# IEC 60062 as quoted in the project's check values, "Marking".
STANDARD = [("R47", 0.47), ("4R7", 4.7), ("470R", 470.0), ("4K7", 4700.0), ("47K3", 47300.0), ("1M0", 1e6)]
# The standard's other examples, from memory.
FROM_MEMORY = [
    ("R10", 0.1),
    ("R332", 0.332),
    ("1R0", 1.0),
    ("10R", 10.0),
    ("33R2", 33.2),
    ("1K0", 1e3),
    ("10K", 1e4),
    ("332K", 332e3),
    ("3M32", 3.32e6),
    ("10M", 1e7),
    ("1G0", 1e9),
]
# L stands for 10⁻³ (check values); that it begins below 0.1 Ω is our choice.
MILLIOHMS = [("47L", 0.047), ("4L7", 0.0047), ("L47", 0.00047)]


@pytest.mark.parametrize(("code", "ohms"), STANDARD + FROM_MEMORY + MILLIOHMS)
def test_code_and_value_are_each_others(code: str, ohms: float) -> None:
    assert letter_code(ohms) == code
    assert read_letter_code(code).ohms == ohms
    assert read_letter_code(code).tolerance is None


# IEC 60062 as quoted in the project's check values, "Marking".
TOLERANCES = {"B": 0.001, "C": 0.0025, "D": 0.005, "F": 0.01, "G": 0.02, "J": 0.05, "K": 0.1, "M": 0.2}


@pytest.mark.parametrize(("letter", "tolerance"), list(TOLERANCES.items()))
def test_tolerance_letter_follows_the_code(letter: str, tolerance: float) -> None:
    assert letter_code(4700.0, tolerance=tolerance) == f"4K7{letter}"
    reading = read_letter_code(f"4K7{letter}")
    assert (reading.kind, reading.ohms, reading.tolerance) == (MarkKind.LETTER_CODE, 4700.0, tolerance)


@pytest.mark.parametrize("tolerance", [0.0, 0.03, 0.0005, -0.05, nan])
def test_tolerance_without_a_letter_is_not_written(tolerance: float) -> None:
    with pytest.raises(UsageError, match=r"no letter stands for a tolerance .*allowed: 0\.001, .*0\.2"):
        letter_code(4700.0, tolerance=tolerance)


# The point's letter comes first, so K and M behind it are tolerances: by the rule of the code.
@pytest.mark.parametrize(
    ("text", "ohms", "tolerance"),
    [("10KK", 1e4, 0.1), ("1M0M", 1e6, 0.2), ("10MM", 1e7, 0.2), ("R47K", 0.47, 0.1), ("4G7G", 4.7e9, 0.02)],
)
def test_letter_of_two_meanings_is_told_by_its_place(text: str, ohms: float, tolerance: float) -> None:
    assert (read_letter_code(text).ohms, read_letter_code(text).tolerance) == (ohms, tolerance)


@pytest.mark.parametrize(
    ("text", "ohms"), [("2M", 2e6), ("0R22", 0.22), (" 4K7\n", 4700.0), ("4700R", 4700.0)]
)
def test_loosely_written_codes_are_read(text: str, ohms: float) -> None:
    assert read_letter_code(text).ohms == ohms


def test_ten_k_is_ten_kilohm_not_a_tolerance() -> None:
    reading = read_letter_code("10K")  # check values, "Marking"
    assert (reading.ohms, reading.tolerance) == (1e4, None)


@pytest.mark.parametrize(
    "text",
    [
        "",
        "K",
        "4700",
        "4k7",
        "4m7",
        "4K7H",
        "4K7j",
        "4K7JJ",
        "4K7 J",
        "J",
        "KK",
        "4.7K",
        "4,7K",
        "-4K7",
        "4K 7",
        "1e3R",
        "٤K7",
        "4K7Ω",
    ],
)
def test_other_text_is_no_letter_code(text: str) -> None:
    with pytest.raises(QuantityError, match="not a letter code"):
        read_letter_code(text)


@pytest.mark.parametrize("text", ["0R", "R0", "L09", "1000G", "9" * 400 + "G", "R" + "0" * 400 + "1"])
def test_value_outside_the_code_is_not_read(text: str) -> None:
    with pytest.raises(QuantityError, match="outside the letter code"):
        read_letter_code(text)


@pytest.mark.parametrize("ohms", [0.0, -1.0, 9.9e-5, 1e12, inf, nan])
def test_value_outside_the_code_is_not_written(ohms: float) -> None:
    with pytest.raises(UsageError, match=r"from 0\.1 mΩ to below 1 TΩ"):
        letter_code(ohms)


@given(
    st.sampled_from(load_series("E96").mantissas),
    st.integers(-4, 11),
    st.sampled_from([None, *TOLERANCES.values()]),
)
def test_every_e96_value_survives_the_round_trip(
    mantissa: Decimal, decade: int, tolerance: float | None
) -> None:
    ohms = float(mantissa.scaleb(decade))
    code = letter_code(ohms, tolerance=tolerance)
    reading = read_letter_code(code)
    assert (reading.ohms, reading.tolerance) == (ohms, tolerance)
    assert 3 <= len(code) - (tolerance is not None) <= 4  # three figures at most, two at least, the letter


@given(st.floats(1e-4, 1e12, exclude_max=True))
def test_any_resistance_survives_the_round_trip(ohms: float) -> None:
    assert read_letter_code(letter_code(ohms)).ohms == ohms


@given(st.text())
def test_no_text_gives_anything_but_a_value_or_a_quantity_error(text: str) -> None:
    try:
        reading = read_letter_code(text)
    except QuantityError as error:
        assert repr(text) in str(error)
    else:
        assert 1e-4 <= reading.ohms < 1e12
