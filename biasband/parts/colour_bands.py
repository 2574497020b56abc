"""Colour bands of IEC 60062 in words, and the way back.

Two digits, multiplier and tolerance for parts of ±5 % and wider (±20 % is no band at all), three
digits for ±2 % and tighter, and a sixth band for the tempco. Editions of the standard disagree on
grey as a tolerance (0.05 % in 2005, 0.01 % in 2016, the latter from memory), so it is never written,
and the tolerance always stands in figures beside the words.
"""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass

from biasband.errors import QuantityError
from biasband.parts.mark_reading import MarkKind, MarkReading, figures_of, ohms_of
from biasband.quantity import Kind, format_quantity

_DIGITS = ("black", "brown", "red", "orange", "yellow", "green", "blue", "violet", "grey", "white")
_MULTIPLIERS = {-2: "silver", -1: "gold", **dict(enumerate(_DIGITS))}
_TOLERANCES = {
    0.001: "violet", 0.0025: "blue", 0.005: "green", 0.01: "brown", 0.02: "red", 0.05: "gold", 0.1: "silver",
}  # fmt: skip
_TEMPCOS = {
    250e-6: "black", 100e-6: "brown", 50e-6: "red", 15e-6: "orange", 25e-6: "yellow",
    20e-6: "green", 10e-6: "blue", 5e-6: "violet", 1e-6: "grey",
}  # fmt: skip
_NO_BAND = 0.2
"""The tolerance that is told by the absence of its band."""

_WIDEST_OF_THREE_DIGITS = 0.02
_DISPUTED = "grey"
_DISPUTED_TOLERANCES = (0.0005, 0.0001)
_DISPUTED_NOTE = (
    "grey as a tolerance is ambiguous: ±0.05 % in the 2005 edition of IEC 60062, ±0.01 % in that of 2016"
)


@dataclass(frozen=True, kw_only=True)
class Bands:
    """The bands of a part in words, first digit first; None where it has no such marking.

    `figures` says the tolerance, and the tempco of a sixth band, in figures; `reason` says why
    there are no bands, and is empty where there are.
    """

    colours: tuple[str, ...] | None = None
    figures: str = ""
    reason: str = ""

    @property
    def text(self) -> str:
        """The words with tolerance and tempco in figures behind them; "none" and the reason."""
        if self.colours is None:
            return f"none: {self.reason}"
        return f"{' '.join(self.colours)} ({self.figures})"


def colour_bands(ohms: float, *, tolerance: float | None, tempco: float | None = None) -> Bands:
    """Write a resistance [Ω] and its tolerance (a fraction) in colours: three, four or five bands.

    With a `tempco` [1/K] there are six bands, which exist for ±2 % and tighter. A marking says its
    part exactly or does not exist: there is none where the value needs more figures than there are
    digit bands, or a power of ten outside 10⁻² … 10⁹, and where the tolerance is not stated or has
    no colour, or the tempco none.

    Raises UsageError where the resistance is not above 0 and finite.

    Source: IEC 60062, colours as in the project's check values.
    Worked case: 4700.0 at 0.05 is yellow violet red gold; at 0.01 yellow violet black brown brown.
    """
    if tolerance is None:
        return Bands(reason="no tolerance is stated, and it decides how many bands there are")
    figures = _in_figures(tolerance, tempco)
    reason = _why_no_tolerance(tolerance) or _why_no_tempco(tempco, tolerance)
    if reason:
        return Bands(figures=figures, reason=reason)
    count = _digit_bands(tolerance)
    split = figures_of(ohms, count=count)
    if split is None:
        return Bands(figures=figures, reason=f"the value needs more than {count} figures")
    if split.exponent not in _MULTIPLIERS:
        return Bands(figures=figures, reason="no colour stands for the power of ten")
    digits = tuple(_DIGITS[int(digit)] for digit in split.digits)
    last = () if tolerance == _NO_BAND else (_TOLERANCES[tolerance],)
    sixth = () if tempco is None else (_TEMPCOS[tempco],)
    return Bands(colours=(*digits, _MULTIPLIERS[split.exponent], *last, *sixth), figures=figures)


def _digit_bands(tolerance: float) -> int:
    return 3 if tolerance <= _WIDEST_OF_THREE_DIGITS else 2


def _in_figures(tolerance: float, tempco: float | None) -> str:
    figures = f"±{format_quantity(tolerance, Kind.RATIO)}"
    return figures if tempco is None else f"{figures}, {format_quantity(tempco, Kind.RELATIVE_SLOPE)}"


def _why_no_tolerance(tolerance: float) -> str:
    if tolerance in _DISPUTED_TOLERANCES:
        return _DISPUTED_NOTE
    if tolerance in _TOLERANCES or tolerance == _NO_BAND:
        return ""
    return f"no colour stands for ±{format_quantity(tolerance, Kind.RATIO)}"


def _why_no_tempco(tempco: float | None, tolerance: float) -> str:
    if tempco is None:
        return ""
    if tempco not in _TEMPCOS:
        return f"no colour stands for {format_quantity(tempco, Kind.RELATIVE_SLOPE)}"
    return "" if _digit_bands(tolerance) == 3 else "a tempco band stands on parts of ±2 % and tighter only"


# --- the way back ---------------------------------------------------------------------------------

_LAYOUTS = {
    3: ("first digit", "digit", "multiplier"),
    4: ("first digit", "digit", "multiplier", "tolerance"),
    5: ("first digit", "digit", "digit", "multiplier", "tolerance"),
    6: ("first digit", "digit", "digit", "multiplier", "tolerance", "tempco"),
}
_ROLES = {
    "first digit": _DIGITS[1:],
    "digit": _DIGITS,
    "multiplier": tuple(_MULTIPLIERS.values()),
    "tolerance": (*_TOLERANCES.values(), _DISPUTED),
    "tempco": tuple(_TEMPCOS.values()),
}
_COLOURS = tuple(_MULTIPLIERS.values())
_EXPONENT_OF = {colour: exponent for exponent, colour in _MULTIPLIERS.items()}
_TOLERANCE_OF = {colour: tolerance for tolerance, colour in _TOLERANCES.items()}
_TEMPCO_OF = {colour: tempco for tempco, colour in _TEMPCOS.items()}
_ALLOWED = f"3 to 6 of {', '.join(_COLOURS)}, the first digit first, as in yellow violet red gold"


def read_colour_bands(text: str) -> MarkReading:
    """Read colour words, first digit first, parted by blanks, commas or hyphens.

    Three bands are ±20 %, four have two digits, five and six have three; the sixth is the tempco.
    Any colour of a tolerance is read behind two digits too. The words are taken in the order given:
    that they might be read from the other end too is not noticed. "gray" is grey; grey as a
    tolerance is ambiguous: None, and a note.

    Raises QuantityError with everything that is wrong: the number of bands, words that are no
    colours, colours that mean nothing in their place; and for the single black band of zero ohms.

    Source: IEC 60062, colours as in the project's check values.
    """
    words = re.findall(r"[^\s,-]+", text.casefold())
    colours = tuple("grey" if word == "gray" else word for word in words)
    if colours == ("black",):
        raise QuantityError(text, "a zero-ohm mark, which names no resistor's value", _ALLOWED)
    problems = _strangers(colours) or _misplaced(colours)
    if len(colours) not in _LAYOUTS:
        problems.insert(0, f"3, 4, 5 or 6 bands are read, not {len(colours)}")
    if problems:
        raise QuantityError(text, "; ".join(problems), _ALLOWED)
    return _read(colours)


def _strangers(colours: tuple[str, ...]) -> list[str]:
    return [f"{word!r} is no colour of a band{_hint(word)}" for word in colours if word not in _COLOURS]


def _hint(word: str) -> str:
    near = difflib.get_close_matches(word, _COLOURS, n=1)
    return f" (did you mean {near[0]}?)" if near else ""


def _misplaced(colours: tuple[str, ...]) -> list[str]:
    wrong = _wrong_places(colours)
    if wrong and not _wrong_places(colours[::-1]):
        wrong.append("from the other end they can be read")
    return wrong


def _wrong_places(colours: tuple[str, ...]) -> list[str]:
    """Colours that mean nothing in their place; none where no such number of bands exists."""
    layout = _LAYOUTS.get(len(colours))
    if layout is None:
        return []
    return [
        f"{colour} is no {role}, only {', '.join(_ROLES[role])}"
        for colour, role in zip(colours, layout, strict=True)
        if colour not in _ROLES[role]
    ]


def _read(colours: tuple[str, ...]) -> MarkReading:
    count = _LAYOUTS[len(colours)].index("multiplier")
    digits = "".join(str(_DIGITS.index(colour)) for colour in colours[:count])
    tolerance_band, tempco_band = colours[count + 1 : count + 2], colours[count + 2 :]
    return MarkReading(
        kind=MarkKind.COLOUR_BANDS,
        ohms=ohms_of(digits, _EXPONENT_OF[colours[count]]),
        tolerance=_TOLERANCE_OF.get(tolerance_band[0]) if tolerance_band else _NO_BAND,
        tempco=_TEMPCO_OF[tempco_band[0]] if tempco_band else None,
        note=_DISPUTED_NOTE if tolerance_band == (_DISPUTED,) else "",
    )
