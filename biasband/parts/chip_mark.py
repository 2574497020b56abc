"""Marks of chip resistors: three digits (472), four digits (4701), and those of E96 (01C).

A digit mark is two or three figures and, as its last digit, how many zeros follow; R stands in the
point's place where there is a fraction. An E96 mark is the place of the value in its decade, from
01, and a letter for the power of ten.
"""

from __future__ import annotations

import re
from collections.abc import Callable

from biasband.errors import QuantityError
from biasband.parts.mark_reading import MarkKind, MarkReading, exact_ohms, figures_of, ohms_of

E96_MANTISSAS = tuple(round(100 * 10 ** (place / 96)) for place in range(96))
"""One decade of E96 in three figures, 100 … 976, by its formula, to which E96 has no exception."""

_E96_LETTERS = {-3: "Z", -2: "YR", -1: "XS", 0: "A", 1: "BH", 2: "C", 3: "D", 4: "E", 5: "F"}
"""Power of ten on three figures → its letters: the first is written, all are read."""

_E96_EXPONENTS = {letter: power for power, letters in _E96_LETTERS.items() for letter in letters}
_MOST_ZEROS = 9

ALLOWED = (
    "three digits (472 is 4.7 kΩ) or four (4701), R in the point's place (4R7, 49R9, R47), or a place in "
    f"E96, 01 … 96, and a letter of {', '.join(_E96_EXPONENTS)} (01C is 10 kΩ)"
)


def chip_three(ohms: float) -> str | None:
    """Write a resistance [Ω] as a three-digit chip mark: 4700.0 is "472", 4.7 "4R7", 0.47 "R47".

    None where two figures and nine zeros cannot say it, or, below 1 Ω, R and two figures.

    Raises UsageError where the resistance is not above 0 and finite.

    Source: common practice.
    """
    return _digit_mark(ohms, figures=2)


def chip_four(ohms: float) -> str | None:
    """Write a resistance [Ω] as a four-digit chip mark: 4700.0 is "4701", 49.9 "49R9".

    None where three figures and nine zeros cannot say it, or, below 1 Ω, R and three figures.

    Raises UsageError where the resistance is not above 0 and finite.

    Source: common practice.
    """
    return _digit_mark(ohms, figures=3)


def _digit_mark(ohms: float, *, figures: int) -> str | None:
    if exact_ohms(ohms) < 1:
        return _mark_below_one(ohms, figures)
    split = figures_of(ohms, count=figures)
    if split is None or split.exponent > _MOST_ZEROS:
        return None
    if split.exponent >= 0:
        return f"{split.digits}{split.exponent}"
    return f"{split.digits[: split.exponent]}R{split.digits[split.exponent :]}"


def _mark_below_one(ohms: float, figures: int) -> str | None:
    places = exact_ohms(ohms).scaleb(figures)
    return f"R{int(places):0{figures}d}" if places == int(places) else None


def chip_e96(ohms: float) -> str | None:
    """Write a resistance [Ω] as an E96 chip mark: 1e4 is "01C", 249e3 "39D", 49.9 "68X".

    None where the value is not in E96, or not from 0.1 Ω to 97.6 MΩ. Used on ±1 % parts.

    Raises UsageError where the resistance is not above 0 and finite.

    Source: common practice; makers differ in three letters (R for Y, S for X, H for B).
    """
    split = figures_of(ohms, count=3)
    if split is None or int(split.digits) not in E96_MANTISSAS or split.exponent not in _E96_LETTERS:
        return None
    place = E96_MANTISSAS.index(int(split.digits)) + 1
    return f"{place:02d}{_E96_LETTERS[split.exponent][0]}"


def read_chip_mark(text: str) -> MarkReading:
    """Read a chip mark of any kind: "472" and "4701" are 4700.0, "01C" is 1e4, "4R7" is 4.7.

    Of three characters that end in R only the E96 mark is read: 10R is 1.24 Ω. (It is a letter code
    as well, of 10 Ω; `read_mark` returns both.) A reading of digits alone notes that as a number
    they say something else.

    Raises QuantityError where the text is no chip mark, and for zero ohms.

    Source: common practice.
    """
    mark = text.strip()
    if re.fullmatch("0+R?0*|R0+", mark):
        raise QuantityError(text, "a zero-ohm mark, which names no resistor's value", ALLOWED)
    for shape, read in _SHAPES.items():
        if re.fullmatch(shape, mark):
            return read(mark)
    if re.fullmatch(f"[0-9]{{2}}[{''.join(_E96_EXPONENTS)}]", mark):
        raise QuantityError(text, f"E96 has no place {mark[:2]}, only 01 … 96", ALLOWED)
    raise QuantityError(text, "not a chip mark", ALLOWED)


def _read_digits(mark: str) -> MarkReading:
    note = f"a chip mark; as a plain number it would be {mark} Ω"
    return MarkReading(kind=_digit_kind(mark), ohms=ohms_of(mark[:-1], int(mark[-1])), note=note)


def _read_point(mark: str) -> MarkReading:
    whole, fraction = mark.split("R")
    return MarkReading(kind=_digit_kind(mark), ohms=ohms_of(whole + fraction, -len(fraction)))


def _digit_kind(mark: str) -> MarkKind:
    return MarkKind.CHIP_THREE if len(mark) == 3 else MarkKind.CHIP_FOUR


def _read_e96(mark: str) -> MarkReading:
    mantissa = E96_MANTISSAS[int(mark[:2]) - 1]
    return MarkReading(
        kind=MarkKind.CHIP_E96,
        ohms=ohms_of(str(mantissa), _E96_EXPONENTS[mark[2]]),
        note="a chip mark of E96, as used on ±1 % parts",
    )


_SHAPES: dict[str, Callable[[str], MarkReading]] = {
    "[1-9][0-9]{2,3}": _read_digits,
    "[1-9]R[0-9]{1,2}|[1-9][0-9]R[0-9]|R[0-9]{2,3}": _read_point,
    f"(0[1-9]|[1-8][0-9]|9[0-6])[{''.join(_E96_EXPONENTS)}]": _read_e96,
}
