"""Snaps resistances alone, without a stage: values as they are typed, codes and marks of parts too."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from biasband.errors import BiasbandError, UsageError
from biasband.files.ledger import nearest as hint_of
from biasband.files.series_folder import load_tables
from biasband.files.stock_file import read_stock
from biasband.parts.drawer import Drawer, Stated
from biasband.parts.marking import Markings, markings
from biasband.parts.pair_reasons import against
from biasband.parts.pairs import Pair
from biasband.parts.series import Series, Snap, worst_error
from biasband.parts.stock import Demand
from biasband.quantity import Kind, format_exact
from biasband.signoff.part_texts import read_text

PRACTICAL = (1.0, 10e6)
"""[Ω] Where preferred series are commonly sold (common practice)."""

PAIRS_SHOWN = 3

USUAL_SERIES = "E24"


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


def snap_texts(
    texts: Sequence[str],
    *,
    series: str | None = None,
    tables: str | os.PathLike[str] | None = None,
    stock: str | os.PathLike[str] | None = None,
    tolerance: float | None = None,
    as_marks: bool = False,
    pair: bool = False,
) -> SnapStudy:
    """Snap every text: a resistance ("6k65"), or a code or mark of a part ("4K7J", "01C", "red red gold").

    What can be read as a resistance is one; `as_marks` reads what can be a mark as a mark. `series` is E24
    unless named, or a `stock` list takes its place. `tolerance` (a fraction) is that of the parts, by
    default the usual one of the series; parts in stock are no wider than that, and have it where the list
    states none. Raises UsageError with everything that cannot be read, or has more than one reading; for
    both a series and a stock list.
    """
    drawer = _drawer(series, tables, stock, tolerance)
    if pair and stock is None and drawer.usual.tolerance is None:
        raise UsageError(f"{drawer.name} has no usual tolerance: say that of the parts with --tolerance")
    rows: list[Snapped] = []
    problems: list[str] = []
    for text in texts:
        try:
            rows.append(_snapped(text, drawer, as_marks=as_marks, pair=pair))
        except BiasbandError as error:
            problems.append(str(error))
    if problems:
        raise UsageError("\n".join(dict.fromkeys(problems)))
    widest = worst_error(drawer.series) if stock is None else None
    return SnapStudy(drawer.name, widest, tuple(rows))


def _drawer(
    name: str | None,
    tables: str | os.PathLike[str] | None,
    stock: str | os.PathLike[str] | None,
    tolerance: float | None,
) -> Drawer:
    if name is not None and stock is not None:
        raise UsageError("--series: with --stock the values are those of the list; name one of the two")
    series = _known(name or USUAL_SERIES, load_tables(tables).series)
    if stock is None:
        usual = series.usual_tolerance if tolerance is None else tolerance
        return Drawer(series=series, usual=Stated(tolerance=usual), demand=Demand())
    listed, demand = read_stock(stock), Demand(tolerance=tolerance)
    drawer = Drawer(series=series, usual=Stated(tolerance=tolerance), stock=listed, demand=demand)
    if not drawer.items:
        raise UsageError(f"{stock}: no part in stock will do")
    return drawer


def _known(name: str, known: Mapping[str, Series]) -> Series:
    if name not in known:
        alike = hint_of(name, known)
        hint = f" ({alike})" if alike else ""
        raise UsageError(f"no series {name!r}; allowed: {', '.join(known)}{hint}")
    return known[name]


def _snapped(text: str, drawer: Drawer, *, as_marks: bool, pair: bool) -> Snapped:
    read = read_text(text, as_marks=as_marks)
    found, paired = drawer.nearest(read.ohms), _Paired()
    if pair:
        paired = _pairs(drawer, found)
    stated = drawer.kind(found.chosen)
    return Snapped(
        asked=text,
        snap=found,
        markings=markings(found.chosen, tolerance=stated.tolerance, tempco=stated.tempco),
        notes=(*read.notes, *_range_notes(found), *paired.notes),
        pairs=paired.pairs,
        against=paired.against,
    )


@dataclass(frozen=True)
class _Paired:
    """The best pairs and what speaks against the first, or a note why there are none."""

    pairs: tuple[Pair, ...] = ()
    against: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


def _pairs(drawer: Drawer, single: Snap) -> _Paired:
    try:
        best = drawer.pairs(single.value, count=PAIRS_SHOWN)
    except UsageError as error:  # out of reach of every pair
        return _Paired(notes=(f"no pairs in {drawer.name}: {error}",))
    if not best:
        return _Paired(notes=(f"no pairs in {drawer.name}: it has one piece alone",))
    return _Paired(best, against(best[0], single))


def _range_notes(found: Snap) -> Iterator[str]:
    lowest, highest = PRACTICAL
    outside = [ohms for ohms in dict.fromkeys((found.value, found.chosen)) if not lowest <= ohms <= highest]
    if outside:
        those = f"{' and '.join(map(_ohms, outside))} {'is' if len(outside) == 1 else 'are'}"
        yield (
            f"WARNING: {those} outside {_ohms(lowest)} to {_ohms(highest)}, "
            "where preferred values are commonly sold: see whether there is such a part"
        )


def _ohms(ohms: float) -> str:
    return format_exact(ohms, Kind.RESISTANCE)
