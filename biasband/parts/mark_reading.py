"""What a mark on a resistor was read as, and the exact step between a value and its figures."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from enum import Enum

from biasband.errors import UsageError


class MarkKind(Enum):
    """The ways to write a value on a part; the value is the kind's name in messages."""

    LETTER_CODE = "letter code"
    COLOUR_BANDS = "colour bands"
    CHIP_THREE = "three-digit chip mark"
    CHIP_FOUR = "four-digit chip mark"
    CHIP_E96 = "E96 chip mark"


@dataclass(frozen=True, kw_only=True)
class MarkReading:
    """One reading of a mark: [Ω], tolerance as a fraction, tempco as a magnitude [1/K].

    `tolerance` and `tempco` are None where the mark does not say them, or says them ambiguously;
    `note` is what a reader of the mark should know besides, empty where there is nothing.
    """

    kind: MarkKind
    ohms: float
    tolerance: float | None = None
    tempco: float | None = None
    note: str = ""


@dataclass(frozen=True)
class Figures:
    """A value as a whole number of so many figures, the first not 0, times 10^exponent."""

    digits: str
    exponent: int


def figures_of(ohms: float, *, count: int) -> Figures | None:
    """Split a resistance [Ω] into `count` figures and a power of ten; None where it needs more.

    Exact: `ohms` is taken as the shortest decimal that reads back as the same double.

    Raises UsageError where the resistance is not above 0 and finite.

    Worked case: 4700.0 is 47 · 10² in two figures and 470 · 10¹ in three; 4750.0 has no two.
    """
    exact = exact_ohms(ohms).normalize()
    digits = "".join(map(str, exact.as_tuple().digits))
    if len(digits) > count:
        return None
    return Figures(digits.ljust(count, "0"), exact.adjusted() - count + 1)


def exact_ohms(ohms: float) -> Decimal:
    """Take a resistance [Ω] as the shortest decimal that reads back as the same double.

    Raises UsageError where the resistance is not above 0 and finite.
    """
    exact = Decimal(repr(float(ohms)))
    if not (exact.is_finite() and exact > 0):
        raise UsageError(f"a marking needs a resistance above 0 and finite, not {ohms:g} Ω")
    return exact


def ohms_of(digits: str, exponent: int) -> float:
    """Put figures and a power of ten together [Ω]: the double nearest to the decimal value."""
    return float(Decimal(f"{digits}E{exponent}"))
