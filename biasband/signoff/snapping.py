"""Snaps resistances alone, without a stage: values as they are typed, codes and marks of parts too."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from biasband.errors import BiasbandError, QuantityError, UsageError
from biasband.files.series_folder import load_tables
from biasband.files.stock_file import read_stock
from biasband.parts.mark_reading import MarkReading
from biasband.parts.marking import Markings, markings, read_mark
from biasband.parts.pairs import Pair, against, pairs, pairs_among
from biasband.parts.series import Series, Snap, nearest, nearest_among, worst_error
from biasband.parts.stock import Demand, values_in_stock
from biasband.quantity import Kind, format_exact, format_quantity, parse

PRACTICAL = (1.0, 10e6)
"""[Ω] Where preferred series are commonly sold (common practice)."""

PAIRS_SHOWN = 3


@dataclass(frozen=True)
class Snapped:
    """A text that was asked for, its snap, the marks of the chosen part, and what else there is to say.

    `pairs` holds the best pairs where they were asked for, `against` what speaks against the first.
    """

    asked: str
    snap: Snap
    markings: Markings
    notes: tuple[str, ...]
    pairs: tuple[Pair, ...] = ()
    against: tuple[str, ...] = ()


@dataclass(frozen=True)
class SnapStudy:
    """Snaps in one series, or among the values of a stock list (`worst_error` None), in the order asked."""

    series: str
    worst_error: float | None
    rows: tuple[Snapped, ...]


@dataclass(frozen=True)
class _Drawer:
    """Where values are looked for: a series, or the values in stock; `tolerance` is that of a part."""

    series: Series
    in_stock: tuple[float, ...] | None
    tolerance: float | None

    @property
    def name(self) -> str:
        return self.series.name if self.in_stock is None else "stock"

    def snap(self, ohms: float) -> Snap:
        if self.in_stock is None:
            return nearest(self.series, ohms)
        return nearest_among(self.in_stock, ohms, name=self.name)

    def pairs(self, ohms: float) -> tuple[Pair, ...]:
        if self.tolerance is None:
            raise UsageError(f"{self.name} has no usual tolerance: say that of the parts with --tolerance")
        if self.in_stock is None:
            return pairs(self.series, ohms, tolerance=self.tolerance, count=PAIRS_SHOWN)
        return pairs_among(self.in_stock, ohms, tolerance=self.tolerance, count=PAIRS_SHOWN)


def snap_texts(
    texts: Sequence[str],
    *,
    series: str = "E24",
    tables: str | os.PathLike[str] | None = None,
    stock: str | os.PathLike[str] | None = None,
    tolerance: float | None = None,
    as_marks: bool = False,
    pair: bool = False,
) -> SnapStudy:
    """Snap every text: a resistance ("6k65"), or a code or mark of a part ("4K7J", "01C", "red red gold").

    What can be read as a resistance is one, unless `as_marks`. `tolerance` (a fraction) is that of the
    parts, by default the usual one of the series. Raises UsageError with everything that cannot be read, or
    has more than one reading.
    """
    drawer = _drawer(series, tables, stock, tolerance)
    rows: list[Snapped] = []
    problems: list[str] = []
    for text in texts:
        try:
            rows.append(_snapped(text, drawer, as_marks=as_marks, pair=pair))
        except BiasbandError as error:
            problems.append(str(error))
    if problems:
        raise UsageError("\n".join(dict.fromkeys(problems)))
    widest = worst_error(drawer.series) if drawer.in_stock is None else None
    return SnapStudy(drawer.name, widest, tuple(rows))


def _drawer(
    name: str,
    tables: str | os.PathLike[str] | None,
    stock: str | os.PathLike[str] | None,
    tolerance: float | None,
) -> _Drawer:
    known = load_tables(tables).series
    if name not in known:
        raise UsageError(f"no series {name!r}; allowed: {', '.join(known)}")
    demand = Demand(tolerance=tolerance)
    in_stock = None if stock is None else values_in_stock(read_stock(stock), demand)
    if in_stock == ():
        raise UsageError(f"{stock}: no part in stock will do")
    return _Drawer(known[name], in_stock, known[name].usual_tolerance if tolerance is None else tolerance)


def _snapped(text: str, drawer: _Drawer, *, as_marks: bool, pair: bool) -> Snapped:
    read = _read(text, as_marks)
    found = drawer.snap(read.ohms)
    best = drawer.pairs(read.ohms) if pair else ()
    return Snapped(
        asked=text,
        snap=found,
        markings=markings(found.chosen, tolerance=drawer.tolerance),
        notes=(*read.notes, *_range_notes(found)),
        pairs=best,
        against=against(best[0], found) if best else (),
    )


@dataclass(frozen=True)
class _Read:
    """A text as a resistance [Ω], and what was made of it."""

    ohms: float
    notes: tuple[str, ...] = ()


def _read(text: str, as_marks: bool) -> _Read:
    readings = _readings(text)
    try:
        ohms = parse(text, Kind.RESISTANCE)
    except QuantityError as error:
        return _of_mark(text, readings, error)
    if as_marks:
        return _of_mark(text, readings, None)
    kinds = {reading.ohms: reading.kind.value for reading in readings if reading.ohms != ohms}
    notes = (f"as a {kind} {text} is {_ohms(other)}: --mark reads it so" for other, kind in kinds.items())
    return _Read(ohms, tuple(notes))


def _readings(text: str) -> tuple[MarkReading, ...]:
    try:
        return read_mark(text)
    except QuantityError:
        return ()


def _of_mark(text: str, readings: tuple[MarkReading, ...], no_resistance: QuantityError | None) -> _Read:
    """A mark as a resistance; of several readings that differ none is chosen."""
    if not readings and no_resistance is not None and any(letter.isdigit() for letter in text):
        raise UsageError(f"{no_resistance}; nor is it a code or mark of a part")
    if not readings:
        read_mark(text)  # raises, with the reason of each kind
    if len({reading.ohms for reading in readings}) > 1:
        ways = ", ".join(f"{_ohms(each.ohms)} as a {each.kind.value}" for each in readings)
        raise UsageError(f"{text!r} has more than one reading: {ways}; write the resistance itself")
    first = readings[0]
    return _Read(first.ohms, (f"{text} read as {first.kind.value}: {_said(first)}", *_notes(readings)))


def _said(reading: MarkReading) -> str:
    parts = [_ohms(reading.ohms)]
    if reading.tolerance is not None:
        parts.append(f"±{format_quantity(reading.tolerance, Kind.RATIO)}")
    if reading.tempco is not None:
        parts.append(f"±{format_quantity(reading.tempco, Kind.RELATIVE_SLOPE)}")
    return ", ".join(parts)


def _notes(readings: tuple[MarkReading, ...]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(reading.note for reading in readings if reading.note))


def _range_notes(found: Snap) -> Iterator[str]:
    lowest, highest = PRACTICAL
    if not lowest <= found.value <= highest:
        yield (
            f"WARNING: {_ohms(found.value)} is outside {_ohms(lowest)} to {_ohms(highest)}, where preferred "
            "values are commonly sold: see whether there is such a part"
        )


def _ohms(ohms: float) -> str:
    return format_exact(ohms, Kind.RESISTANCE)
