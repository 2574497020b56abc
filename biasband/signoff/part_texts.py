"""Reads a text as a resistance: a figure, or a code or mark of a part, and says what was made of it."""

from __future__ import annotations

from dataclasses import dataclass

from biasband.errors import QuantityError, UsageError
from biasband.parts.mark_reading import MarkKind, MarkReading
from biasband.parts.marking import read_mark
from biasband.quantity import Kind, format_exact, format_quantity, parse


@dataclass(frozen=True)
class TextRead:
    """A text as a resistance [Ω], and what was made of it."""

    ohms: float
    notes: tuple[str, ...] = ()


def read_text(text: str, *, as_marks: bool = False) -> TextRead:
    """Read a text as a resistance; what is none, and what can be a mark if `as_marks` says so, as a mark.

    Digits alone are then marks or nothing; any other text that is no mark stays a resistance.

    Raises UsageError where the text is neither, or a mark with more than one reading.
    """
    readings = _readings(text)
    try:
        ohms = parse(text, Kind.RESISTANCE)
    except QuantityError as error:
        return _of_mark(text, readings, error)
    if as_marks and (readings or text.strip().isdigit()):
        return _of_mark(text, readings, None)
    others = {reading.ohms: _kind(reading) for reading in readings if reading.ohms != ohms}
    how = "" if _ambiguous(readings) else ": --mark reads it so"
    return TextRead(ohms, tuple(f"as {kind} {text} is {_ohms(other)}{how}" for other, kind in others.items()))


def _readings(text: str) -> tuple[MarkReading, ...]:
    try:
        return read_mark(text)
    except QuantityError:
        return ()


def _of_mark(text: str, readings: tuple[MarkReading, ...], no_resistance: QuantityError | None) -> TextRead:
    """A mark as a resistance; of several readings that differ none is chosen."""
    if not readings and no_resistance is not None and (_numeric(text) or any(map(str.isdigit, text))):
        raise UsageError(f"{no_resistance}; nor is it a code or mark of a part")
    if not readings:
        read_mark(text)  # raises, with the reason of each kind
    if _ambiguous(readings):
        ways = ", ".join(f"{_ohms(each.ohms)} as {_kind(each)}" for each in readings)
        raise UsageError(f"{text!r} has more than one reading: {ways}; write the resistance itself")
    first = readings[0]
    return TextRead(first.ohms, (f"{text} read as {first.kind.value}: {_said(first)}", *_notes(readings)))


def _ambiguous(readings: tuple[MarkReading, ...]) -> bool:
    return len({reading.ohms for reading in readings}) > 1


def _numeric(text: str) -> bool:
    """Whether a text is a number to others, such as "nan" or "inf": then it is not meant as colours."""
    try:
        float(text)
    except ValueError:
        return False
    return True


def _kind(reading: MarkReading) -> str:
    """The kind of a mark with its article."""
    if reading.kind is MarkKind.COLOUR_BANDS:
        return f"{reading.kind.value}"
    return f"{'an' if reading.kind is MarkKind.CHIP_E96 else 'a'} {reading.kind.value}"


def _said(reading: MarkReading) -> str:
    parts = [_ohms(reading.ohms)]
    if reading.tolerance is not None:
        parts.append(f"±{format_quantity(reading.tolerance, Kind.RATIO)}")
    if reading.tempco is not None:
        parts.append(f"±{format_quantity(reading.tempco, Kind.RELATIVE_SLOPE)}")
    return ", ".join(parts)


def _notes(readings: tuple[MarkReading, ...]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(reading.note for reading in readings if reading.note))


def _ohms(ohms: float) -> str:
    return format_exact(ohms, Kind.RESISTANCE)
