"""Reads the tables of preferred series (`series_tables/`), checked row by row.

The tables lie inside the package in a wheel, and at the top level beside it in a checkout, which
is also what an editable install reads.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from functools import cache
from importlib import resources
from importlib.resources.abc import Traversable
from pathlib import Path
from types import MappingProxyType

from biasband.errors import BadlyWritten, Fault, UsageError
from biasband.parts.series import Series

INDEX = "series.csv"
INDEX_COLUMNS = ("series", "values_per_decade", "usual_tolerance_percent")
TABLE_COLUMNS = ("mantissa",)

# Six figures at most, so that a mantissa survives the way through a double unchanged.
_MANTISSA = re.compile(r"[0-9]+(\.[0-9]{1,5})?")
_COUNT = re.compile(r"[1-9][0-9]{0,3}")
_PERCENT = re.compile(r"([0-9]{1,2}(\.[0-9]+)?)?")


@dataclass(frozen=True, kw_only=True)
class SeriesEntry:
    """A row of the index: what a series is called, how many values it has, what it is made for.

    `usual_tolerance` is a fraction, None where the index leaves it empty.
    """

    name: str
    values_per_decade: int
    usual_tolerance: float | None


@dataclass(frozen=True)
class _Row:
    """A row as read, and its line in the file (1-based)."""

    line: int
    cells: tuple[str, ...]


def load_series(name: str) -> Series:
    """Load a preferred series by name ("E24"); read once, then kept.

    Raises UsageError where there is no series of that name, BadlyWritten where its table is faulty.
    """
    known = _index()
    if name not in known:
        raise UsageError(f"no series named {name!r}; allowed: {', '.join(known)}")
    return _series(name)


@cache
def load_all() -> Mapping[str, Series]:
    """Load every preferred series, by name, in the order of the index.

    Raises BadlyWritten where the index or a table is faulty.
    """
    return MappingProxyType({name: _series(name) for name in _index()})


def read_index(folder: Traversable) -> tuple[SeriesEntry, ...]:
    """Read which series a folder of tables holds.

    Raises BadlyWritten with every faulty row of the index.
    """
    path = folder / INDEX
    rows = _read_rows(path, columns=INDEX_COLUMNS)
    names = [row.cells[0] for row in rows]
    faults = [fault for number, row in enumerate(rows) for fault in _index_faults(path, row, names[:number])]
    if faults:
        raise BadlyWritten(tuple(faults))
    return tuple(_entry(row) for row in rows)


def read_table(folder: Traversable, entry: SeriesEntry) -> Series:
    """Read one series from its table in a folder.

    Raises BadlyWritten with every faulty row: each mantissa a plain decimal number, at least 1 and
    below 10, above the one before it, and as many of them as the index says.
    """
    path = folder / f"{entry.name}.csv"
    rows = _read_rows(path, columns=TABLE_COLUMNS)
    faults, mantissas = [], [Decimal(0)]
    for row in rows:
        problem = _mantissa_problem(row.cells[0], mantissas[-1])
        if problem:
            faults.append(_fault(path, row, "mantissa", problem, row.cells[0]))
        else:
            mantissas.append(Decimal(row.cells[0]))
    if len(rows) != entry.values_per_decade:
        last = rows[-1] if rows else _Row(1, ())
        faults.append(_fault(path, last, entry.name, f"{len(rows)} values, not {entry.values_per_decade}"))
    if faults:
        raise BadlyWritten(tuple(faults))
    return Series(name=entry.name, mantissas=tuple(mantissas[1:]), usual_tolerance=entry.usual_tolerance)


def tables_folder() -> Traversable:
    """Find the folder of series tables: inside an installed package, else beside it in a checkout."""
    inside = resources.files("biasband") / "series_tables"
    return inside if inside.is_dir() else Path(__file__).parents[2] / "series_tables"


@cache
def _index() -> Mapping[str, SeriesEntry]:
    return MappingProxyType({entry.name: entry for entry in read_index(tables_folder())})


@cache
def _series(name: str) -> Series:
    return read_table(tables_folder(), _index()[name])


def _entry(row: _Row) -> SeriesEntry:
    name, count, percent = row.cells
    tolerance = float(Decimal(percent).scaleb(-2)) if percent else None
    return SeriesEntry(name=name, values_per_decade=int(count), usual_tolerance=tolerance)


def _index_faults(path: Traversable, row: _Row, names_above: list[str]) -> list[Fault]:
    name, count, percent = row.cells
    checks = (
        ("series", name, bool(name) and name not in names_above, "missing or given twice"),
        ("values_per_decade", count, _COUNT.fullmatch(count), "not a count"),
        ("usual_tolerance_percent", percent, _PERCENT.fullmatch(percent), "not a percentage, nor empty"),
    )
    return [_fault(path, row, key, problem, read) for key, read, good, problem in checks if not good]


def _mantissa_problem(text: str, before: Decimal) -> str:
    """What is wrong with a mantissa that follows `before`; empty where nothing is."""
    if not _MANTISSA.fullmatch(text):
        return "not a plain number of at most five decimals"
    if not 1 <= Decimal(text) < 10:
        return "not at least 1 and below 10"
    return "" if Decimal(text) > before else f"not above the value before it, {before}"


def _fault(path: Traversable, row: _Row, key: str, problem: str, read: str = "") -> Fault:
    return Fault(str(path), row.line, key, problem, read=repr(read) if read else "")


def _read_rows(path: Traversable, *, columns: tuple[str, ...]) -> list[_Row]:
    """Read a CSV whose header is exactly `columns`; raise BadlyWritten for every row of other width."""
    try:
        reader = csv.reader(path.read_text(encoding="utf-8-sig").splitlines())
        rows = [_Row(reader.line_num, tuple(cells)) for cells in reader]
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        raise BadlyWritten((Fault(str(path), None, "", f"cannot be read as a table: {error}"),)) from error
    wanted = ",".join(columns)
    if not rows or rows[0].cells != columns:
        raise BadlyWritten((Fault(str(path), 1, "", "wrong header", allowed=wanted),))
    odd = [row for row in rows[1:] if len(row.cells) != len(columns)]
    if odd:
        raise BadlyWritten(
            tuple(_fault(path, row, wanted, f"{len(row.cells)} cells, not {len(columns)}") for row in odd)
        )
    return rows[1:]
