"""How draws are written, columns by name: as CSV, block by block, or as .npz, an array per column."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from typing import Any, BinaryIO, ClassVar, Protocol
from zipfile import ZipFile

import numpy as np
from numpy.typing import NDArray

Columns = Mapping[str, NDArray[Any]]
"""Columns by name, of one length."""


class Rows(Protocol):
    """Rows on their way into a file, in blocks of the same columns."""

    def __init__(self, stream: BinaryIO) -> None: ...

    def add(self, columns: Columns) -> None:
        """Take some more rows; OSError where they cannot be written."""

    def finish(self, count: int) -> None:
        """Write what is not written yet, and see to it that there are `count` rows, where a block ends."""


class CsvRows:
    """Rows as text: numbers in full, the shortest that read back as the same, NaN as "nan".

    The first line has the names. An interruption may tear a line, so it is remembered where blocks end.
    """

    def __init__(self, stream: BinaryIO) -> None:
        self._stream = stream
        self._ends = {0: 0}

    def add(self, columns: Columns) -> None:
        """Write some rows."""
        rows = list(zip(*(column.tolist() for column in columns.values()), strict=True))
        if len(self._ends) == 1:
            self._stream.write(_csv_line(columns))
        self._stream.write("".join(f"{','.join(map(repr, row))}\n" for row in rows).encode("ascii"))
        self._stream.flush()
        self._ends[max(self._ends) + len(rows)] = self._stream.tell()

    def finish(self, count: int) -> None:
        """Cut what stands behind the last row that counts."""
        self._stream.truncate(self._ends[count])


def _csv_line(names: Columns) -> bytes:
    """The names of the columns, in quotes where a group of resistors is called so that they are needed."""
    line = io.StringIO()
    csv.writer(line, lineterminator="\n").writerow(names)
    return line.getvalue().encode("utf-8")


class ArrayRows:
    """Rows as arrays, held in memory until the end and written as `numpy.savez` does."""

    most: ClassVar[int] = 2**20

    def __init__(self, stream: BinaryIO) -> None:
        self._stream = stream
        self._blocks: list[Columns] = []

    def add(self, columns: Columns) -> None:
        """Hold some rows."""
        self._blocks.append(columns)

    def finish(self, count: int) -> None:
        """Write the first `count` rows, column by column."""
        self._stream.seek(0)
        self._stream.truncate()
        with ZipFile(self._stream, "w") as archive:
            for name in self._blocks[0]:
                column = np.concatenate([block[name] for block in self._blocks])[:count]
                with archive.open(f"{name}.npy", "w", force_zip64=True) as entry:
                    np.lib.format.write_array(entry, column, allow_pickle=False)


FORMATS: Mapping[str, type[Rows]] = {".csv": CsvRows, ".npz": ArrayRows}
"""What a file is written as, by the ending of its name."""
