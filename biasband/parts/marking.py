"""All marks of a part together: written from its value, and read back, whichever kind they are."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass

from biasband.errors import QuantityError, UsageError
from biasband.parts.chip_mark import chip_e96, chip_four, chip_three, read_chip_mark
from biasband.parts.colour_bands import Bands, colour_bands, read_colour_bands
from biasband.parts.letter_code import TOLERANCE_LETTERS, letter_code, read_letter_code
from biasband.parts.mark_reading import MarkReading

_LONGEST = 100
"""[characters] No mark is longer than this: a limit, so that an odd text cannot cost time."""

_COLOUR_WORD = re.compile(r"(?<![^\s,-])[^\W\d_]{3,}(?![^\s,-])")
"""A word of three letters or more between the separators of bands: no other mark has one."""

_ALLOWED = (
    "a letter code in capitals (4K7, 4K7J), colour words (yellow violet red gold), or a chip mark (472, "
    "4701, 4R7, 01C)"
)


@dataclass(frozen=True, kw_only=True)
class Markings:
    """Every mark of a part: its value [Ω], tolerance (a fraction), and what can be written of them.

    None where a mark does not exist: a mark says its part exactly or is not there. Which of them a
    maker prints depends on the part. `bands` are three, four or five, and say nothing of the tempco;
    `six_bands` do. Both carry tolerance and tempco in figures, and the reason where there are none.
    """

    letter_code: str | None
    bands: Bands
    six_bands: Bands
    chip_three: str | None
    chip_four: str | None
    chip_e96: str | None


def markings(ohms: float, *, tolerance: float | None = None, tempco: float | None = None) -> Markings:
    """Write all marks of a part of a resistance [Ω], tolerance (a fraction) and tempco [1/K].

    None as tolerance or tempco means that none is stated. The letter code ends with the tolerance
    letter where one stands for the tolerance, and says nothing of the tolerance where none does.

    Raises UsageError where the resistance is not above 0 and finite.

    Worked case: 4700.0 at 0.05 is 4K7J, yellow violet red gold, 472 and 4701; it is not in E96.
    Source: IEC 60062 (letter code, colours); common practice (chip marks).
    """
    return Markings(
        chip_three=chip_three(ohms),
        chip_four=chip_four(ohms),
        chip_e96=chip_e96(ohms),
        letter_code=_letter_code(ohms, tolerance),
        bands=colour_bands(ohms, tolerance=tolerance),
        six_bands=_six_bands(ohms, tolerance, tempco),
    )


def _letter_code(ohms: float, tolerance: float | None) -> str | None:
    try:
        return letter_code(ohms, tolerance=tolerance if tolerance in TOLERANCE_LETTERS else None)
    except UsageError:  # beyond 0.1 mΩ … 1 TΩ
        return None


def _six_bands(ohms: float, tolerance: float | None, tempco: float | None) -> Bands:
    if tempco is None:
        return Bands(reason="no tempco is stated for a sixth band")
    return colour_bands(ohms, tolerance=tolerance, tempco=tempco)


def read_mark(text: str) -> tuple[MarkReading, ...]:
    """Read a mark of any kind: every reading of it, at least one, a letter code before a chip mark.

    Some texts have two readings, alike (4R7: letter code and chip mark) or not (10R: 10 Ω as a
    letter code, 1.24 Ω as an E96 mark); the choice is the caller's. Digits alone are read as the
    chip mark only, whose note says what the plain number would be. Words of three letters or more
    are taken for colours.

    Raises QuantityError where no reading exists, with the reason of each kind.

    Source: IEC 60062 (letter code, colours); common practice (chip marks).
    Worked case: "472" is the chip mark of 4700.0; "yellow violet red gold" is 4700.0 ± 5 %.
    """
    if len(text) > _LONGEST:
        raise QuantityError(f"{text[:_LONGEST]}…", "too long for a mark", _ALLOWED)
    if _COLOUR_WORD.search(text):
        return (read_colour_bands(text),)
    problems: list[str] = []
    readings = tuple(_readings(text, problems))
    if not readings:
        raise QuantityError(text, ", ".join(problems), _ALLOWED)
    return readings


def _readings(text: str, problems: list[str]) -> Iterator[MarkReading]:
    """Read as letter code and as chip mark; what cannot be read adds its reason to `problems`."""
    for read in (read_letter_code, read_chip_mark):
        try:
            yield read(text)
        except QuantityError as error:
            problems.append(error.problem)
