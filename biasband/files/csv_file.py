"""Takes a text as a table: its header, its rows with their lines, or one clear fault."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass

from biasband.files.text_file import TextFile, refuse
from biasband.stage import FileRecord


@dataclass(frozen=True)
class Row:
    """A row as read, and the line of the file in which it begins (1-based)."""

    line: int
    cells: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class CsvFile:
    """A table as read: the cells of its first line, and the rows below it."""

    path: str
    header: tuple[str, ...]
    rows: tuple[Row, ...]
    record: FileRecord


def table_of(file: TextFile, *, delimiter: str = ",") -> CsvFile:
    """Split a text into cells; an empty text has an empty header.

    Raises: BadlyWritten with a single fault, at its line, where a quote is never closed or a cell goes
    on behind its closing quote: what the cells are would be a guess.
    """
    reader = csv.reader(io.StringIO(file.text, newline=""), delimiter=delimiter, strict=True)
    rows: list[Row] = []
    line = 1
    try:
        for cells in reader:
            rows.append(Row(line, tuple(cells)))
            line = reader.line_num + 1
    except csv.Error as error:
        refuse(file.path, f"not a table: {error}", line=line)
    header = rows[0].cells if rows else ()
    return CsvFile(path=file.path, header=header, rows=tuple(rows[1:]), record=file.record)
