"""The letter code of IEC 60062, both ways."""

from __future__ import annotations

from decimal import Decimal
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import QuantityError, UsageError
from biasband.files.series_files import load_series
from biasband.parts.marking import letter_code, read_letter_code

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
    assert read_letter_code(code) == ohms


@pytest.mark.parametrize(
    ("text", "ohms"), [("2M", 2e6), ("0R22", 0.22), (" 4K7\n", 4700.0), ("4700R", 4700.0)]
)
def test_loosely_written_codes_are_read(text: str, ohms: float) -> None:
    assert read_letter_code(text) == ohms


def test_ten_k_is_ten_kilohm_not_a_tolerance() -> None:
    assert read_letter_code("10K") == 1e4  # check values, "Marking"


@pytest.mark.parametrize(
    "text",
    ["", "K", "4700", "4k7", "4m7", "4K7J", "4K7K", "4.7K", "4,7K", "-4K7", "4K 7", "1e3R", "٤K7", "4K7Ω"],
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


@given(st.sampled_from(load_series("E96").mantissas), st.integers(-4, 11))
def test_every_e96_value_survives_the_round_trip(mantissa: Decimal, decade: int) -> None:
    ohms = float(mantissa.scaleb(decade))
    code = letter_code(ohms)
    assert read_letter_code(code) == ohms
    assert 3 <= len(code) <= 4  # three figures at most, two at least, and the letter


@given(st.floats(1e-4, 1e12, exclude_max=True))
def test_any_resistance_survives_the_round_trip(ohms: float) -> None:
    assert read_letter_code(letter_code(ohms)) == ohms


@given(st.text())
def test_no_text_gives_anything_but_a_value_or_a_quantity_error(text: str) -> None:
    try:
        ohms = read_letter_code(text)
    except QuantityError as error:
        assert repr(text) in str(error)
    else:
        assert 1e-4 <= ohms < 1e12
