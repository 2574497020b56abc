"""What stands behind an option."""

from __future__ import annotations

import pytest

from biasband.errors import UsageError
from biasband.signoff.options import boards_option


@pytest.mark.parametrize(
    ("text", "boards"),
    [
        ("1", 1), ("600", 600), (" 600 ", 600), ("6e2", 600), ("6E+2", 600), ("1.5e3", 1500), ("600.0", 600),
        ("2^20", 1048576), ("10^12", 10**12), ("1e18", 10**18), ("999999999999999999", 10**18 - 1),
    ],
)  # fmt: skip
def test_number_of_boards_may_be_written_as_people_do(text, boards):
    assert boards_option(text) == boards


def test_option_that_was_not_given_is_none():
    assert boards_option(None) is None


@pytest.mark.parametrize(
    "text",
    [
        "", "0", "-5", "+5", "many", "1.5", "1e-3", "0^0^1", "nan", "inf", "10^19", "1e19", "9^99", "1e99",
        "9" * 30, "2^^3", "1 000", "1,000", "٣", "0^5", "1e", "1000000000000000001",
    ],
)  # fmt: skip
def test_anything_else_is_told_what_is_allowed(text):
    with pytest.raises(UsageError, match=r"--boards: a whole number from 1 to 10\^18.*; read ") as caught:
        boards_option(text)
    assert str(caught.value).endswith(repr(text))
