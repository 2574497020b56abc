"""Reads the tables of preferred series (`series_tables/`), checked row by row.

The tables lie inside the package in a wheel, and at the top level beside it in a checkout, which
is also what an editable install reads.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from importlib import resources
from importlib.resources.abc import Traversable
from pathlib import Path
from types import MappingProxyType

from biasband.errors import BadlyWritten, Fault, UsageError
from biasband.files.csv_file import CsvFile, table_of
from biasband.files.series_rows import (
    INDEX_COLUMNS,
    TABLE_COLUMNS,
    SeriesEntry,
    read_entries,
    read_mantissas,
)
from biasband.files.text_file import decoded, read_text, refuse
from biasband.parts.series import Series

INDEX = "series.csv"
MOST_ROWS = 9999
"""A table with more is some other file; no series has as many values a decade."""


def load_series(name: str) -> Series:
    """Load a preferred series of biasband's own by name ("E24"); read once, then kept.

    Raises UsageError where there is no series of that name, BadlyWritten where its table is faulty.
    """
    known = _index()
    if name not in known:
        raise UsageError(f"no series named {name!r}; allowed: {', '.join(known)}")
    return _series(name)


@cache
def load_all() -> Mapping[str, Series]:
    """Load every preferred series of biasband's own, by name, in the order of the index.

    Raises BadlyWritten where the index or a table is faulty.
    """
    return MappingProxyType({name: _series(name) for name in _index()})


def read_index(folder: Traversable) -> tuple[SeriesEntry, ...]:
    """Read which series a folder of tables holds.

    Raises BadlyWritten with every faulty row of the index.
    """
    faults: list[Fault] = []
    entries = read_entries(open_table(folder / INDEX, columns=INDEX_COLUMNS), faults)
    _raise_any(faults)
    return entries


def read_table(folder: Traversable, entry: SeriesEntry) -> Series:
    """Read one series from its table in a folder.

    Raises BadlyWritten with every faulty row: each mantissa a plain decimal number, at least 1 and
    below 10, above the one before it, and as many of them as the index says.
    """
    faults: list[Fault] = []
    mantissas = read_mantissas(open_table(folder / f"{entry.name}.csv", columns=TABLE_COLUMNS), entry, faults)
    _raise_any(faults)
    return Series(name=entry.name, mantissas=mantissas, usual_tolerance=entry.usual_tolerance)


def open_table(path: Traversable, *, columns: tuple[str, ...]) -> CsvFile:
    """Open a comma-separated table; its rows are not looked at.

    Raises BadlyWritten with a single fault for a file that is no table, one whose header is not exactly
    `columns`, or one with more than 9999 rows.
    """
    wanted = "a CSV text"
    if isinstance(path, Path):
        text = read_text(path, wanted=wanted)
    else:  # inside a zipped package
        text = decoded(str(path), path.read_bytes(), wanted=wanted)
    table = table_of(text)
    if table.header != columns:
        refuse(text.path, "wrong header", line=1, allowed=",".join(columns))
    if len(table.rows) > MOST_ROWS:
        refuse(
            text.path,
            f"{len(table.rows)} rows",
            line=table.rows[MOST_ROWS].line,
            allowed=f"{MOST_ROWS} at most",
        )
    return table


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


def _raise_any(faults: list[Fault]) -> None:
    if faults:
        raise BadlyWritten(tuple(faults))
