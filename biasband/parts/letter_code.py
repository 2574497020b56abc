"""The letter code of IEC 60062 (4K7, with a tolerance 4K7J), and the way back."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from types import MappingProxyType

from biasband.errors import QuantityError, UsageError
from biasband.parts.mark_reading import MarkKind, MarkReading


@dataclass(frozen=True)
class _Letter:
    """A letter that stands in the place of the decimal point.

    It multiplies by 10^exponent, and is used from `start` [Ω] up to the start of the next.
    """

    letter: str
    exponent: int
    start: Decimal


_LETTERS = (
    _Letter("L", -3, Decimal("0.0001")),
    _Letter("R", 0, Decimal("0.1")),
    _Letter("K", 3, Decimal("1e3")),
    _Letter("M", 6, Decimal("1e6")),
    _Letter("G", 9, Decimal("1e9")),
)
_BY_LETTER = {letter.letter: letter for letter in _LETTERS}
_END = Decimal("1e12")
_FEWEST_FIGURES = 2

TOLERANCE_LETTERS: Mapping[float, str] = MappingProxyType(
    {0.001: "B", 0.0025: "C", 0.005: "D", 0.01: "F", 0.02: "G", 0.05: "J", 0.1: "K", 0.2: "M"}
)
"""The letter that stands for each tolerance (a fraction), behind the code (IEC 60062)."""

_TOLERANCES = {letter: tolerance for tolerance, letter in TOLERANCE_LETTERS.items()}
_CODE = re.compile(f"([0-9]*)([{''.join(_BY_LETTER)}])([0-9]*)([{''.join(_TOLERANCES)}]?)")
_ALLOWED = (
    "figures with L, R, K, M or G in the point's place, such as 4K7 or R47 (0.1 mΩ to below 1 TΩ), and "
    "behind them nothing or a tolerance letter B, C, D, F, G, J, K or M (4K7J is ±5 %)"
)


def letter_code(ohms: float, *, tolerance: float | None = None) -> str:
    """Write a resistance [Ω] in the letter code: 4700.0 is "4K7", at ±5 % (0.05) "4K7J".

    The code says the value exactly, with at least two figures, however many that takes; parts are
    marked with up to four. Below 1 Ω the letter comes first, down to 0.1 Ω (R47), then the code
    goes on in milliohms (47L).

    Raises UsageError where the resistance is not at least 0.1 mΩ and below 1 TΩ, and where no
    letter stands for the tolerance.

    Source: IEC 60062, examples R47, 4R7, 470R, 4K7, 47K3, 1M0; that a single figure is filled up to
    two (1K0, 2M0, R10): memory; that milliohms begin below 0.1 Ω: our choice.
    """
    exact = Decimal(repr(float(ohms)))
    if not (exact.is_finite() and _LETTERS[0].start <= exact < _END):
        raise UsageError(f"a letter code needs a resistance from 0.1 mΩ to below 1 TΩ, not {ohms:g} Ω")
    letter = max((each for each in _LETTERS if each.start <= exact), key=lambda each: each.start)
    whole, _, fraction = f"{exact.scaleb(-letter.exponent).normalize():f}".partition(".")
    whole = whole.lstrip("0")
    code = whole + letter.letter + fraction.ljust(_FEWEST_FIGURES - len(whole), "0")
    return code if tolerance is None else code + _tolerance_letter(tolerance)


def _tolerance_letter(tolerance: float) -> str:
    if tolerance not in TOLERANCE_LETTERS:
        allowed = ", ".join(f"{each:g}" for each in TOLERANCE_LETTERS)
        raise UsageError(f"no letter stands for a tolerance of {tolerance:g}; allowed: {allowed}")
    return TOLERANCE_LETTERS[tolerance]


def read_letter_code(text: str) -> MarkReading:
    """Read a resistance [Ω], and its tolerance if there is one, from its letter code.

    "4K7" is 4700.0 without a tolerance, "4K7J" is 4700.0 ± 5 %. The first letter is always the
    point: "10K" is ten kilohm, "10KK" is ten kilohm ± 10 %. The value is the double nearest to the
    decimal value. A leading zero (0R47) and a missing second figure (2M) are read too; letters are
    capitals, as they are on the part: a small m would be ambiguous.

    Raises QuantityError where the text is no letter code of a value from 0.1 mΩ to below 1 TΩ.

    Source: IEC 60062.
    """
    match = _CODE.fullmatch(text.strip())
    if match is None or not (match[1] or match[3]):
        raise QuantityError(text, "not a letter code", _ALLOWED)
    exact = Decimal(f"{match[1] or '0'}.{match[3] or '0'}E{_BY_LETTER[match[2]].exponent}")
    if not _LETTERS[0].start <= exact < _END:
        raise QuantityError(text, "a resistance outside the letter code", _ALLOWED)
    return MarkReading(kind=MarkKind.LETTER_CODE, ohms=float(exact), tolerance=_TOLERANCES.get(match[4]))
