"""Text ↔ SI float, over a closed vocabulary of units per kind of quantity.

Nothing is guessed: a unit that is not in the vocabulary is an error, as is a text that could mean
two things. What is read is exact, the double nearest to the decimal value: "4k7" is 4700.0.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from enum import Enum
from fractions import Fraction

from biasband.constants import KELVIN_OFFSET
from biasband.errors import QuantityError


class Kind(Enum):
    """What a figure is a figure of; the value is its name in messages."""

    RESISTANCE = "resistance"
    VOLTAGE = "voltage"
    CURRENT = "current"
    POWER = "power"
    CAPACITANCE = "capacitance"
    FREQUENCY = "frequency"
    TEMPERATURE = "temperature"
    TEMPERATURE_DIFFERENCE = "temperature difference"
    VOLTAGE_SLOPE = "voltage slope"
    RELATIVE_SLOPE = "relative slope"
    RATIO = "ratio"
    THERMAL_RESISTANCE = "thermal resistance"
    NUMBER = "number"


@dataclass(frozen=True)
class Toleranced:
    """A value in SI, and its relative tolerance as a fraction (None: none was given)."""

    value: float
    tolerance: float | None


@dataclass(frozen=True)
class _Vocabulary:
    """The units of one kind.

    `units` maps each unit that is read to its power of ten in SI, "" standing for none; `shown`
    maps those that are written, smallest first, to the power of ten from which each is used.
    """

    units: Mapping[str, int]
    shown: Mapping[str, int]
    example: str


_PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9}


def _prefixed(unit: str, letters: str) -> dict[str, int]:
    """The unit alone and with each prefix of `letters`, smallest first."""
    return {prefix + unit: power for prefix, power in _PREFIXES.items() if prefix in letters}


def _prefixed_vocabulary(unit: str, letters: str, example: str) -> _Vocabulary:
    units = _prefixed(unit, letters)
    return _Vocabulary(units, units, example)


def _slopes(units: Mapping[str, int]) -> dict[str, int]:
    """Each unit per kelvin; a data sheet may write the kelvin as °C."""
    return {unit + per: power for per in ("/K", "/°C", "/degC") for unit, power in units.items()}


_OHMS = _prefixed("Ω", "mkMG")
_RESISTANCES = {"": 0, "R": 0, "k": 3, "K": 3, "M": 6, "G": 9, "KΩ": 3, "Kohm": 3}
_RESISTANCES |= _OHMS | _prefixed("ohm", "mkMG")
_VOCABULARY: Mapping[Kind, _Vocabulary] = {
    Kind.RESISTANCE: _Vocabulary(_RESISTANCES, _OHMS, '"4k7", "4.7 kΩ", "600 ohm"'),
    Kind.VOLTAGE: _prefixed_vocabulary("V", "numk", '"9 V", "50 mV"'),
    Kind.CURRENT: _prefixed_vocabulary("A", "fpnum", '"2 mA", "40 nA"'),
    Kind.POWER: _prefixed_vocabulary("W", "pnumk", '"0.25 W", "440 mW"'),
    Kind.CAPACITANCE: _prefixed_vocabulary("F", "pnum", '"1 µF", "10uF"'),
    Kind.FREQUENCY: _prefixed_vocabulary("Hz", "kMG", '"50 Hz", "20 kHz"'),
    Kind.TEMPERATURE: _Vocabulary({"K": 0, "°C": 0, "degC": 0}, {"K": 0}, '"-10 degC", "25 °C", "298.15 K"'),
    Kind.TEMPERATURE_DIFFERENCE: _Vocabulary({"mK": -3, "K": 0}, {"K": 0}, '"10 K"'),
    Kind.VOLTAGE_SLOPE: _Vocabulary(
        _slopes({"uV": -6, "mV": -3, "V": 0}), {"uV/K": -6, "mV/K": -3, "V/K": 0}, '"-2 mV/K"'
    ),
    Kind.RELATIVE_SLOPE: _Vocabulary(
        _slopes({"ppm": -6, "%": -2, "1": 0}), {"ppm/K": -6, "%/K": -3}, '"100 ppm/K", "0.5 %/K"'
    ),
    Kind.RATIO: _Vocabulary({"": 0, "%": -2, "ppm": -6}, {"%": -2}, '"5 %", "500 ppm", 0.05'),
    Kind.THERMAL_RESISTANCE: _Vocabulary({"K/W": 0, "°C/W": 0, "degC/W": 0}, {"K/W": 0}, '"280 K/W"'),
    Kind.NUMBER: _Vocabulary({"": 0}, {"": 0}, "a plain number such as 260"),
}

_CELSIUS = ("°C", "degC")
_SPELLINGS = str.maketrans({"\u2126": "Ω", "µ": "u", "\u03bc": "u", "\u2212": "-", "\u2013": "-"})
"""The other code points of Ω and µ, and the minus signs that come with a pasted figure."""

_LONGEST = 100
"""[characters] No figure is longer than this: a limit, so that an odd file cannot cost time."""

_NUMBER = r"[+-]?(?:[0-9]+(?:\.[0-9]+)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?"
_FIGURE = re.compile(rf"(?P<number>{_NUMBER})\s*(?P<unit>\S.*)?")
_LETTER_CODE = re.compile(r"(?P<whole>[+-]?[0-9]*)(?P<unit>[RkKmMG])(?P<part>[0-9]+)\s*(?:Ω|ohm)?")
"""A letter in the point's place, as on a drawing: 4k7, 0R22 (IEC 60062)."""


def parse(text: str | int | float, kind: Kind) -> float:
    """Read a figure of the kind and return it in SI.

    A number is taken as SI; a text needs its unit, except for a resistance, a ratio or a number.
    Letters mean what they mean in SI ("mA", not "ma"); "K" is kilo in a resistance and kelvin in a
    temperature.

    Returns: the double nearest to the decimal value.
    Raises: QuantityError where the text is no finite figure of that kind, where it could mean two
    things, and for a temperature below 0 K.
    Source: letter code from IEC 60062; the vocabulary is common practice.
    Worked case: parse("4k7", Kind.RESISTANCE) is 4700.0, parse("25 degC", Kind.TEMPERATURE) 298.15.
    """
    try:
        value = _from_text(text, kind) if isinstance(text, str) else _from_number(text, kind)
    except OverflowError:
        value = math.inf
    if not math.isfinite(value):
        raise _error(text, kind, "not a finite number")
    if kind is Kind.TEMPERATURE and value < 0:
        raise _error(text, kind, "below 0 K, the absolute zero (-273.15 degC)")
    return value


def _error(text: object, kind: Kind, problem: str) -> QuantityError:
    shown = str(text)
    shown = shown if len(shown) <= _LONGEST else shown[:_LONGEST] + "…"
    return QuantityError(shown, problem, f"{kind.value}, as in {_VOCABULARY[kind].example}")


def _from_number(number: object, kind: Kind) -> float:
    if isinstance(number, bool) or not isinstance(number, (int, float)):
        raise _error(number, kind, "neither a number nor a text")
    try:
        return float(number)
    except OverflowError:
        raise _error("a huge integer", kind, "not a finite number") from None


def _from_text(text: str, kind: Kind) -> float:
    if len(text) > _LONGEST:
        raise _error(text, kind, "too long for a figure")
    clean = text.translate(_SPELLINGS).strip()
    if "," in clean:
        raise _error(text, kind, "a comma: write a decimal point, and no thousands separators")
    coded = _LETTER_CODE.fullmatch(clean) if kind is Kind.RESISTANCE else None
    if coded is not None:
        whole = coded["whole"] if coded["whole"].strip("+-") else f"{coded['whole']}0"
        return _scaled(f"{whole}.{coded['part']}", coded["unit"], text, kind)
    figure = _FIGURE.fullmatch(clean)
    if figure is None:
        raise _error(text, kind, "not a figure")
    return _scaled(figure["number"], figure["unit"] or "", text, kind)


def _scaled(number: str, unit: str, text: str, kind: Kind) -> float:
    vocabulary = _VOCABULARY[kind]
    if unit not in vocabulary.units:
        raise _error(text, kind, _why_not(unit, kind))
    value = Fraction(number) * Fraction(10) ** vocabulary.units[unit]
    if kind is Kind.TEMPERATURE and unit in _CELSIUS:
        value += Fraction(str(KELVIN_OFFSET))
    return float(value)


def _why_not(unit: str, kind: Kind) -> str:
    """Say why a unit is not read: missing, of two meanings, in the wrong case, or of another kind."""
    units = _VOCABULARY[kind].units
    if not unit:
        return "no unit"
    if kind is Kind.RESISTANCE and unit == "m":
        return '"m" could be meant as milli or as mega: write "mΩ" or "M"'
    alike = [f'"{known}"' for known in units if known and known.lower() == unit.lower()]
    if alike:
        return f'"{unit}" is no unit of a {kind.value}: capitals matter, did you mean {" or ".join(alike)}?'
    return f'"{unit}" is no unit of a {kind.value}'


def parse_toleranced(text: str | int | float, kind: Kind) -> Toleranced:
    """Read a figure that may carry a tolerance: "9 V ± 10 %", "3k3 +/- 1 %", "9 V ± 0.5 V".

    The tolerance needs its own unit, so that "3k3 ± 1" is not taken for one ohm. An absolute one
    is returned as a fraction of the value.
    Raises: QuantityError as `parse` does; for a tolerance below zero, on a value of zero or on a
    temperature, whose zero is arbitrary.
    """
    if not isinstance(text, str):
        return Toleranced(parse(text, kind), None)
    figure, *tolerances = re.split(r"±|\+/[-\u2212]", text)
    if not tolerances:
        return Toleranced(parse(figure, kind), None)
    if len(tolerances) > 1 or kind is Kind.TEMPERATURE:
        raise _error(text, kind, "more than one tolerance, or one on a temperature")
    value = parse(figure, kind)
    return Toleranced(value, _relative(tolerances[0].strip(), value, text, kind))


def _relative(tolerance: str, value: float, text: str, kind: Kind) -> float:
    if re.fullmatch(_NUMBER, tolerance):
        raise _error(text, kind, 'the tolerance has no unit: write it as in "± 1 %"')
    if tolerance.endswith(("%", "ppm")):
        relative = parse(tolerance, Kind.RATIO)
    elif value == 0:
        raise _error(text, kind, "a tolerance on zero")
    else:
        relative = parse(tolerance, kind) / abs(value)
    if relative < 0:
        raise _error(text, kind, "a tolerance below zero")
    return relative


def format_quantity(
    value: float, kind: Kind, *, digits: int = 4, plain: bool = False, keep_zeros: bool = False
) -> str:
    """Write a figure for people: engineering prefixes and `digits` significant figures.

    Trailing zeros are left out unless `keep_zeros` asks for them (a column of computed figures).
    Temperatures are shown in °C, ratios in %. `plain` uses ASCII only ("ohm", "u", "degC"). NaN is
    "n/a", an infinity "inf" with its sign.
    Worked case: format_quantity(4700.0, Kind.RESISTANCE) is "4.7 kΩ".
    """
    if not math.isfinite(value):
        return "n/a" if math.isnan(value) else f"{value:.0f}"
    if kind is Kind.TEMPERATURE:
        # Nine decimals: the subtraction leaves noise, which would else be shown near 0 °C.
        celsius = round(value - KELVIN_OFFSET, 9)
        shown = _digits(_rounded(celsius, digits), keep_zeros=keep_zeros)
        return f"{shown} {'degC' if plain else '°C'}"
    return _written(_rounded(value, digits), kind, plain=plain, keep_zeros=keep_zeros)


def format_exact(value: float, kind: Kind) -> str:
    """Write a figure so that `parse` returns exactly it; temperatures in K.

    Raises: QuantityError where the value is not finite.
    """
    if not math.isfinite(value):
        raise _error(value, kind, "not a finite number")
    return _written(Decimal(repr(float(value))), kind, plain=False)


def _rounded(value: float, digits: int) -> Decimal:
    return Decimal(f"{value:.{digits - 1}e}")


def _written(number: Decimal, kind: Kind, *, plain: bool, keep_zeros: bool = False) -> str:
    vocabulary = _VOCABULARY[kind]
    power = number.adjusted() if number else 0
    fitting = [unit for unit, start in vocabulary.shown.items() if start <= power]
    unit = fitting[-1] if fitting else next(iter(vocabulary.shown))
    text = _digits(number.scaleb(-vocabulary.units[unit]), keep_zeros=keep_zeros)
    spelled = unit.replace("Ω", "ohm") if plain else unit.replace("u", "µ")
    return f"{text} {spelled}".rstrip()


def _digits(number: Decimal, *, keep_zeros: bool = False) -> str:
    """All digits of a number, trailing zeros if asked for; with an exponent where it is far from one."""
    if not number:
        return "0"
    trimmed = number if keep_zeros else number.normalize()
    return f"{trimmed:f}" if -5 <= trimmed.adjusted() < 7 else f"{trimmed:e}"
