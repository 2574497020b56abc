"""What the rows of a series index and of a series table must be; each fault with its line.

What is wrong is added to a list of faults and left out of what is returned, so that all the faults of
several files can be told at once.
"""

from __future__ import annotations

import re
from collections.abc import Collection
from dataclasses import dataclass
from decimal import Decimal

from biasband.errors import Fault
from biasband.files.csv_file import CsvFile, Row
from biasband.files.ledger import shown

INDEX_COLUMNS = ("series", "values_per_decade", "usual_tolerance_percent")
TABLE_COLUMNS = ("mantissa",)

# A name is a file's name too, on any system, and one word of a table.
_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,39}")
_NOT_A_NAME = "series"
"""The index has this name."""
_COUNT = re.compile(r"[1-9][0-9]{0,3}")
_PERCENT = re.compile(r"([0-9]{1,2}(\.[0-9]+)?)?")
# Six figures at most, so that a mantissa survives the way through a double unchanged.
_MANTISSA = re.compile(r"[0-9]+(\.[0-9]{1,5})?")


@dataclass(frozen=True, kw_only=True)
class SeriesEntry:
    """A row of the index: what a series is called, how many values it has, what it is made for.

    `usual_tolerance` is a fraction, None where the index leaves it empty.
    """

    name: str
    values_per_decade: int
    usual_tolerance: float | None


def read_entries(
    index: CsvFile, faults: list[Fault], *, taken: Collection[str] = ()
) -> tuple[SeriesEntry, ...]:
    """Read the sound rows of an index; `taken` holds names of other series. Capitals make no difference."""
    if not index.rows:
        faults.append(Fault(index.path, 1, "", "no series below the header"))
    holders = {name.lower(): f"the name of biasband's own {name}" for name in taken}
    entries: list[SeriesEntry] = []
    for row in _rows_of_width(index, INDEX_COLUMNS, faults):
        name = row.cells[0].lower()
        found = _entry_faults(index, row, holders.get(name, ""))
        faults += found
        entries += [] if found else [_entry(row)]
        holders.setdefault(name, f"given in line {row.line} already")
    return tuple(entries)


def read_mantissas(table: CsvFile, entry: SeriesEntry, faults: list[Fault]) -> tuple[Decimal, ...]:
    """Read the sound rows of the table of a series."""
    mantissas = [Decimal(0)]
    for row in _rows_of_width(table, TABLE_COLUMNS, faults):
        problem = _mantissa_problem(row.cells[0], mantissas[-1])
        if problem:
            faults.append(_fault(table, row, "mantissa", problem, row.cells[0]))
        else:
            mantissas.append(Decimal(row.cells[0]))
    if len(table.rows) != entry.values_per_decade:
        last = table.rows[-1] if table.rows else Row(1, ())
        problem = f"{len(table.rows)} values, not {entry.values_per_decade}"
        faults.append(_fault(table, last, entry.name, problem))
    return tuple(mantissas[1:])


def _rows_of_width(table: CsvFile, columns: tuple[str, ...], faults: list[Fault]) -> list[Row]:
    width = len(columns)
    for row in table.rows:
        if len(row.cells) != width:
            faults.append(_fault(table, row, ",".join(columns), f"{len(row.cells)} cells, not {width}"))
    return [row for row in table.rows if len(row.cells) == width]


def _entry(row: Row) -> SeriesEntry:
    name, count, percent = row.cells
    tolerance = float(Decimal(percent).scaleb(-2)) if percent else None
    return SeriesEntry(name=name, values_per_decade=int(count), usual_tolerance=tolerance)


def _entry_faults(index: CsvFile, row: Row, held: str) -> list[Fault]:
    """What is wrong with a row of the index; `held` says who has its name already, empty where none has."""
    name, count, percent = row.cells
    named = _NAME.fullmatch(name) and name.lower() != _NOT_A_NAME
    good_name = "up to 40 letters, figures and . _ - behind the first"
    checks = (
        ("series", name, named, "no name for a series", good_name),
        ("series", name, not held, held, "a name of its own"),
        ("values_per_decade", count, _COUNT.fullmatch(count), "not a count", "1 to 9999"),
        (
            "usual_tolerance_percent",
            percent,
            _PERCENT.fullmatch(percent),
            "not a percentage, nor empty",
            "a plain number below 100, or nothing",
        ),
    )
    return [
        _fault(index, row, key, problem, read, allowed)
        for key, read, good, problem, allowed in checks
        if not good
    ]


def _mantissa_problem(text: str, before: Decimal) -> str:
    """What is wrong with a mantissa that follows `before`; empty where nothing is."""
    if not _MANTISSA.fullmatch(text):
        return "not a plain number of at most five decimals"
    if not 1 <= Decimal(text) < 10:
        return "not at least 1 and below 10"
    return "" if Decimal(text) > before else f"not above the value before it, {before}"


def _fault(table: CsvFile, row: Row, key: str, problem: str, read: str = "", allowed: str = "") -> Fault:
    return Fault(table.path, row.line, key, problem, read=shown(read) if read else "", allowed=allowed)
