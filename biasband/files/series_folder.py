"""Reads a user's own folder of series tables, which stand beside biasband's own."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from types import MappingProxyType

from biasband.errors import BadlyWritten, Fault, UsageError
from biasband.files.csv_file import CsvFile
from biasband.files.series_files import INDEX, load_all, open_table
from biasband.files.series_rows import (
    INDEX_COLUMNS,
    TABLE_COLUMNS,
    SeriesEntry,
    read_entries,
    read_mantissas,
)
from biasband.parts.series import Series
from biasband.stage import FileRecord

_SUFFIX = ".csv"


@dataclass(frozen=True, kw_only=True)
class SeriesTables:
    """Every preferred series by name, biasband's own first; `own` and `files` are the user's."""

    series: Mapping[str, Series]
    own: tuple[Series, ...] = ()
    files: tuple[FileRecord, ...] = ()


def load_tables(folder: str | os.PathLike[str] | None = None) -> SeriesTables:
    """Load biasband's own series and, where a folder is given, the user's from its index and tables.

    Every CSV file of the folder must be in its index, and no name may be that of another series.
    Raises: UsageError where the folder cannot be read or holds no CSV files; BadlyWritten with every
    fault in any of its files.
    """
    if folder is None:
        return SeriesTables(series=load_all())
    path = Path(folder)
    names = _csv_names(path)
    faults: list[Fault] = []
    index = _opened(path / INDEX, INDEX_COLUMNS, faults)
    entries = () if index is None else read_entries(index, faults, taken=load_all())
    tables = {entry: _opened(path / f"{entry.name}{_SUFFIX}", TABLE_COLUMNS, faults) for entry in entries}
    own = {entry.name: _series(table, entry, faults) for entry, table in tables.items() if table is not None}
    if index is not None:
        faults += _left_over(index, path, names)
    if faults:
        raise BadlyWritten(tuple(faults))
    files = tuple(table.record for table in (index, *tables.values()) if table is not None)
    everything = MappingProxyType({**load_all(), **own})
    return SeriesTables(series=everything, own=tuple(own.values()), files=files)


def _csv_names(folder: Path) -> list[str]:
    """The names of the CSV files in a folder, of which there must be some."""
    needed = f"needed: a folder with {INDEX} and the tables that it names"
    try:
        names = sorted(name for name in os.listdir(folder) if name.lower().endswith(_SUFFIX))
    except FileNotFoundError:
        raise UsageError(f"{folder}: no such folder; {needed}") from None
    except NotADirectoryError:
        raise UsageError(f"{folder}: not a folder; {needed}") from None
    except (OSError, ValueError) as error:  # ValueError: a NUL in the path
        raise UsageError(f"{folder}: cannot be read: {getattr(error, 'strerror', None) or error}") from None
    if not names:
        raise UsageError(f"{folder}: a folder without series tables; {needed}")
    return names


def _opened(path: Path, columns: tuple[str, ...], faults: list[Fault]) -> CsvFile | None:
    """A table of the folder; None where it cannot be opened, which is then among the faults."""
    try:
        return open_table(path, columns=columns)
    except BadlyWritten as error:
        (fault,) = error.faults
        hint = "it says which series there are" if path.name == INDEX else f"{INDEX} names it"
        faults.append(replace(fault, hint=hint) if fault.line is None else fault)
        return None


def _series(table: CsvFile, entry: SeriesEntry, faults: list[Fault]) -> Series:
    mantissas = read_mantissas(table, entry, faults)
    return Series(name=entry.name, mantissas=mantissas, usual_tolerance=entry.usual_tolerance)


def _left_over(index: CsvFile, folder: Path, names: list[str]) -> list[Fault]:
    """A fault for each CSV file that no row of the index names."""
    named = {INDEX, *(f"{row.cells[0]}{_SUFFIX}" for row in index.rows if row.cells)}
    problem, allowed = f"not in {INDEX}", "a row there for each CSV file of the folder"
    return [
        Fault(str(folder / name), None, "", problem, allowed=allowed) for name in names if name not in named
    ]
