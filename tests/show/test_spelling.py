"""A text is spelled so that the output can show it."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.quantity import Kind, format_quantity
from biasband.show.spelling import OWN_SIGNS, Spelling

ENCODINGS = ("ascii", "latin-1", "cp1252", "cp437", "utf-8", "utf-16")


@pytest.mark.parametrize(
    ("text", "spelled"),
    [
        ("4.7 kΩ ± 1 %, 25 °C", "4.7 kohm +/- 1 %, 25 degC"),
        ("10 µA − 3 → ≥ 2 ≤ 4 …", "10 uA - 3 -> >= 2 <= 4 ..."),
        ("limits as 3σ ──", "limits as 3 sigma --"),
    ],
)
@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "cp1252"])
def test_output_that_lacks_a_sign_gets_them_all_spelled_out(text, spelled, encoding):
    assert Spelling(encoding)(text) == spelled


def test_spelled_figure_is_the_plain_format_of_quantity():
    for value, kind in ((4700.0, Kind.RESISTANCE), (1e-5, Kind.CURRENT), (298.15, Kind.TEMPERATURE)):
        assert Spelling("ascii")(format_quantity(value, kind)) == format_quantity(value, kind, plain=True)


def test_unicode_output_keeps_our_signs():
    assert Spelling("utf-8")(OWN_SIGNS) == OWN_SIGNS


def test_letters_of_the_user_stay_where_the_output_has_them():
    assert Spelling("latin-1")("Bienenstöcke") == "Bienenstöcke"
    assert Spelling("ascii")("Bienenstöcke") == "Bienenst?cke"


def test_escape_sequence_cannot_reach_the_terminal():
    assert Spelling()("\x1b[31mred\x07\u202e") == "\ufffd[31mred\ufffd\ufffd"


@given(text=st.text(), encoding=st.sampled_from(ENCODINGS))
def test_any_text_becomes_one_line_that_can_be_written(text, encoding):
    spelled = Spelling(encoding)(text)
    spelled.encode(encoding)
    assert spelled.isprintable() or "\ufffd" in spelled
    assert "\x1b" not in spelled
    assert len(spelled.splitlines()) <= 1


def test_parallel_sign_is_spelled_as_two_bars():
    assert Spelling("ascii")("10 kΩ ∥ 10 kΩ") == "10 kohm || 10 kohm"
    # An output without it, which has all else of ours, must not put a question mark.
    assert "?" not in Spelling("latin-1")("10 kΩ ∥ 10 kΩ")
