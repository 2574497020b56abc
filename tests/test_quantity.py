"""Text ↔ SI float: what is read, what is refused, and that what is written is read back."""

import math
from decimal import Decimal
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.errors import BiasbandError, QuantityError
from biasband.quantity import Kind, Toleranced, format_exact, format_quantity, parse, parse_toleranced

# Expected values: SI prefixes and IEC 60062 letter codes, written out by hand.
READ = [
    ("4k7", Kind.RESISTANCE, 4700.0),
    ("4K7", Kind.RESISTANCE, 4700.0),
    ("0R22", Kind.RESISTANCE, 0.22),
    ("1M0", Kind.RESISTANCE, 1e6),
    ("470R", Kind.RESISTANCE, 470.0),
    ("4k7Ω", Kind.RESISTANCE, 4700.0),
    ("4.7 k\u03a9", Kind.RESISTANCE, 4700.0),
    ("4.7 k\u2126", Kind.RESISTANCE, 4700.0),
    ("600 ohm", Kind.RESISTANCE, 600.0),
    ("600ohm", Kind.RESISTANCE, 600.0),
    ("10 K", Kind.RESISTANCE, 10e3),
    ("5 M", Kind.RESISTANCE, 5e6),
    ("5 mΩ", Kind.RESISTANCE, 5e-3),
    ("4700", Kind.RESISTANCE, 4700.0),
    (4700, Kind.RESISTANCE, 4700.0),
    ("9 V", Kind.VOLTAGE, 9.0),
    ("\u22129 V", Kind.VOLTAGE, -9.0),
    ("+.5 V", Kind.VOLTAGE, 0.5),
    ("50\u00a0mV", Kind.VOLTAGE, 0.05),
    ("5e-3 V", Kind.VOLTAGE, 0.005),
    ("2 mA", Kind.CURRENT, 0.002),
    ("40 nA", Kind.CURRENT, 40e-9),
    ("0.25 W", Kind.POWER, 0.25),
    ("1 \u00b5F", Kind.CAPACITANCE, 1e-6),
    ("1 \u03bcF", Kind.CAPACITANCE, 1e-6),
    ("10uF", Kind.CAPACITANCE, 10e-6),
    ("20 kHz", Kind.FREQUENCY, 20e3),
    ("-10 degC", Kind.TEMPERATURE, 263.15),
    ("25 °C", Kind.TEMPERATURE, 298.15),
    ("298.15 K", Kind.TEMPERATURE, 298.15),
    ("10 K", Kind.TEMPERATURE_DIFFERENCE, 10.0),
    ("-2 mV/K", Kind.VOLTAGE_SLOPE, -0.002),
    ("-2 mV/°C", Kind.VOLTAGE_SLOPE, -0.002),
    ("100 ppm/K", Kind.RELATIVE_SLOPE, 1e-4),
    ("0.5 %/K", Kind.RELATIVE_SLOPE, 0.005),
    ("5 %", Kind.RATIO, 0.05),
    ("500 ppm", Kind.RATIO, 0.0005),
    ("0.05", Kind.RATIO, 0.05),
    (0.05, Kind.RATIO, 0.05),
    ("280 K/W", Kind.THERMAL_RESISTANCE, 280.0),
    ("260", Kind.NUMBER, 260.0),
]

REFUSED = [
    ("2 ma", Kind.CURRENT, 'did you mean "mA"'),
    ("9 v", Kind.VOLTAGE, 'did you mean "V"'),
    ("5 mhz", Kind.FREQUENCY, 'did you mean "MHz"'),
    ("5 m", Kind.RESISTANCE, "milli or as mega"),
    ("4m7", Kind.RESISTANCE, "milli or as mega"),
    ("10 K", Kind.VOLTAGE, '"K" is no unit of a voltage'),
    ("1,5 k", Kind.RESISTANCE, "write a decimal point"),
    ("1,000 V", Kind.VOLTAGE, "write a decimal point"),
    ("3 foo", Kind.VOLTAGE, '"foo" is no unit'),
    ("100 ppm/K", Kind.RATIO, '"ppm/K" is no unit of a ratio'),
    ("100 ppm", Kind.RELATIVE_SLOPE, '"ppm" is no unit of a relative slope'),
    ("9", Kind.VOLTAGE, "no unit"),
    ("25", Kind.TEMPERATURE, "no unit"),
    ("10 k", Kind.NUMBER, '"k" is no unit of a number'),
    ("4.7k7", Kind.RESISTANCE, "no unit of a resistance"),
    ("4k7k", Kind.RESISTANCE, "no unit of a resistance"),
    ("", Kind.VOLTAGE, "not a figure"),
    ("V", Kind.VOLTAGE, "not a figure"),
    ("٣ V", Kind.VOLTAGE, "not a figure"),  # a digit, but not one of ours
    ("1_000 V", Kind.VOLTAGE, "no unit of a voltage"),
    ("0x10", Kind.NUMBER, "no unit of a number"),
    ("nan", Kind.NUMBER, "not a figure"),
    ("inf V", Kind.VOLTAGE, "not a figure"),
    ("1e999 V", Kind.VOLTAGE, "not a finite number"),
    ("9 V ± 10 %", Kind.VOLTAGE, "no unit of a voltage"),
    ("9" * 101, Kind.NUMBER, "too long"),
    ("-273.16 degC", Kind.TEMPERATURE, "below 0 K"),
    ("-1 K", Kind.TEMPERATURE, "below 0 K"),
    (True, Kind.NUMBER, "neither a number nor a text"),
    (None, Kind.NUMBER, "neither a number nor a text"),
    ([1], Kind.NUMBER, "neither a number nor a text"),
    (math.nan, Kind.NUMBER, "not a finite number"),
    (-math.inf, Kind.VOLTAGE, "not a finite number"),
    (10**400, Kind.NUMBER, "not a finite number"),
    pytest.param(10**5000, Kind.NUMBER, "not a finite number", id="longer than Python writes"),
]


@pytest.mark.parametrize(("text", "kind", "value"), READ)
def test_written_figure_is_read_exactly(text, kind, value):
    assert parse(text, kind) == value


@pytest.mark.parametrize(("text", "kind", "problem"), REFUSED)
def test_doubtful_figure_is_refused_with_the_reason(text, kind, problem):
    with pytest.raises(QuantityError, match=problem):
        parse(text, kind)


def test_error_carries_the_pieces_of_its_message():
    with pytest.raises(QuantityError, match="no unit of a voltage") as caught:
        parse("3 foo", Kind.VOLTAGE)
    assert caught.value.text == "3 foo"
    assert caught.value.allowed == 'voltage, as in "9 V", "50 mV"'


@given(
    st.decimals(min_value=-1000, max_value=1000, places=6),
    st.sampled_from([("uV", -6), ("mV", -3), ("kV", 3)]),
)
def test_prefixed_figure_is_the_nearest_double_of_its_decimal_value(number, unit):
    exact = Fraction(number) * Fraction(10) ** unit[1]
    assert parse(f"{number:f} {unit[0]}", Kind.VOLTAGE) == float(exact)


@given(st.decimals(min_value=-273, max_value=1000, places=3))
def test_celsius_is_offset_without_rounding_twice(celsius):
    assert parse(f"{celsius:f} degC", Kind.TEMPERATURE) == float(Fraction(celsius) + Fraction(27315, 100))


@given(st.one_of(st.text(), st.from_regex(r"[+-]?[0-9.]{1,5} ?[kmMRKVAu%Ω°C/]{0,4}")), st.sampled_from(Kind))
def test_any_text_is_a_finite_figure_or_a_quantity_error(text, kind):
    for read in (parse, parse_toleranced):
        try:
            value = read(text, kind)
        except BiasbandError:
            continue
        assert math.isfinite(value.value if isinstance(value, Toleranced) else value)


@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from(Kind))
def test_exactly_formatted_figure_is_read_back_to_the_bit(value, kind):
    value = abs(value) if kind is Kind.TEMPERATURE else value
    assert parse(format_exact(value, kind), kind) == value


@given(
    st.floats(min_value=1e-12, max_value=1e9),
    st.sampled_from([kind for kind in Kind if kind is not Kind.TEMPERATURE]),
)
@pytest.mark.parametrize("plain", [False, True])
def test_figure_for_people_is_read_back_within_its_digits(plain, value, kind):
    shown = format_quantity(value, kind, digits=4, plain=plain)
    # Four significant figures: half a unit of the fourth is at most 5e-4 of the value.
    assert parse(shown, kind) == pytest.approx(value, rel=5.001e-4)
    assert shown.isascii() or not plain


@pytest.mark.parametrize(
    ("value", "kind", "shown", "plain"),
    [
        (4700.0, Kind.RESISTANCE, "4.7 kΩ", "4.7 kohm"),
        (999.96, Kind.RESISTANCE, "1 kΩ", "1 kohm"),  # rounded before the prefix is chosen
        (1e-6, Kind.CURRENT, "1 µA", "1 uA"),
        (-0.002, Kind.VOLTAGE_SLOPE, "-2 mV/K", "-2 mV/K"),
        (0.0, Kind.VOLTAGE, "0 V", "0 V"),
        (-0.0, Kind.VOLTAGE, "0 V", "0 V"),
        (0.9973, Kind.RATIO, "99.73 %", "99.73 %"),
        (0.005, Kind.RELATIVE_SLOPE, "0.5 %/K", "0.5 %/K"),
        (1e-4, Kind.RELATIVE_SLOPE, "100 ppm/K", "100 ppm/K"),
        (298.15, Kind.TEMPERATURE, "25 °C", "25 degC"),
        (273.15, Kind.TEMPERATURE, "0 °C", "0 degC"),
        (10.0, Kind.TEMPERATURE_DIFFERENCE, "10 K", "10 K"),
        (-160.24, Kind.NUMBER, "-160.2", "-160.2"),
        (math.nan, Kind.VOLTAGE, "n/a", "n/a"),
        (-math.inf, Kind.VOLTAGE, "-inf", "-inf"),
    ],
)
def test_figure_for_people_has_prefix_and_no_trailing_zeros(value, kind, shown, plain):
    assert format_quantity(value, kind) == shown
    assert format_quantity(value, kind, plain=True) == plain


@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_exact_format_of_no_number_is_refused(value):
    with pytest.raises(QuantityError, match="not a finite number"):
        format_exact(value, Kind.VOLTAGE)


@pytest.mark.parametrize(
    ("text", "kind", "value", "tolerance"),
    [
        ("9 V ± 10 %", Kind.VOLTAGE, 9.0, 0.1),
        ("9V±10%", Kind.VOLTAGE, 9.0, 0.1),
        ("9 V +/- 10 %", Kind.VOLTAGE, 9.0, 0.1),
        ("10 V ± 0.5 V", Kind.VOLTAGE, 10.0, 0.05),
        ("-10 V ± 0.5 V", Kind.VOLTAGE, -10.0, 0.05),
        ("3k3 ± 1 %", Kind.RESISTANCE, 3300.0, 0.01),
        ("3k3 ± 500 ppm", Kind.RESISTANCE, 3300.0, 0.0005),
        ("9 V ± 0 %", Kind.VOLTAGE, 9.0, 0.0),
        ("9 V", Kind.VOLTAGE, 9.0, None),
        (9, Kind.VOLTAGE, 9.0, None),
    ],
)
def test_tolerance_is_read_as_a_fraction_of_the_value(text, kind, value, tolerance):
    assert parse_toleranced(text, kind) == Toleranced(value, tolerance)


@pytest.mark.parametrize(
    ("text", "kind", "problem"),
    [
        ("3k3 ± 1", Kind.RESISTANCE, "the tolerance has no unit"),
        ("9 V ± 1 % ± 2 %", Kind.VOLTAGE, "more than one tolerance"),
        ("25 degC ± 5 %", Kind.TEMPERATURE, "one on a temperature"),
        ("0 V ± 1 V", Kind.VOLTAGE, "a tolerance on zero"),
        ("9 V ± -1 %", Kind.VOLTAGE, "a tolerance below zero"),
        ("9 V ±", Kind.VOLTAGE, "not a figure"),
        ("± 5 %", Kind.VOLTAGE, "not a figure"),
    ],
)
def test_doubtful_tolerance_is_refused_with_the_reason(text, kind, problem):
    with pytest.raises(QuantityError, match=problem):
        parse_toleranced(text, kind)


def test_format_keeps_every_digit_of_a_decimal_value():
    assert format_exact(float(Decimal("4.7e3")), Kind.RESISTANCE) == "4.7 kΩ"
