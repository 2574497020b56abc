"""Reads a stock list: a CSV of the resistors in the house, or every fault in it at once."""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Mapping
from functools import lru_cache
from typing import Any

from biasband.errors import BadlyWritten, Fault, QuantityError
from biasband.files.csv_file import CsvFile, Row, table_of
from biasband.files.figures import Refusal, one_line, within
from biasband.files.ledger import nearest, shown
from biasband.files.text_file import read_text, refuse
from biasband.quantity import Kind, parse
from biasband.stage import Stock, StockItem

LARGEST_LIST = 10_000_000
"""[bytes] Some hundred thousand rows."""

MOST_FAULTS = 1000
"""Where a list has more, it is some other file, and no one reads on."""

_LONGEST_NAME = 40

_WHOLE = re.compile(r"[0-9]{1,9}")


def read_stock(path: str | os.PathLike[str]) -> Stock:
    """Read a stock list.

    A CSV text (UTF-8, a byte order mark and Windows line ends are fine, 10 MB at most). The first line
    names the columns, in any order; cells are separated by semicolons where it holds one, else by
    commas. `value` is compulsory; the others are tolerance, tempco, power_rating, quantity, price and
    location, and an empty cell states nothing. Figures are written as in a stage file; quantity is a
    whole number from 0, price a plain number from 0. Blank lines are passed over.

    Raises: BadlyWritten with every fault: file, line, column, what was read, what is allowed. After a
    thousand faults the last one says that the rest was not read.
    """
    text = read_text(path, wanted="a CSV text", largest=LARGEST_LIST)
    if not text.text.strip():
        refuse(text.path, "an empty file", line=1, allowed=f"a first line of columns: {', '.join(COLUMNS)}")
    first_line = re.split(r"[\r\n]", text.text, maxsplit=1)[0]
    table = table_of(text, delimiter=";" if ";" in first_line else ",")
    faults = _header_faults(table)
    rows = [row for row in table.rows if len(row.cells) > 1 or any(cell.strip() for cell in row.cells)]
    if not rows:
        faults.append(Fault(table.path, 1, "", "no rows below the header", allowed="one row for each part"))
    items = _items(table, rows, faults)
    if faults:
        raise BadlyWritten(tuple(sorted(faults, key=lambda fault: fault.line or 0)))
    return Stock(items=tuple(items), file=table.record)


def _figure(kind: Kind, **limits: float) -> Callable[[str], float]:
    # A list says "1 %" again and again.
    return lru_cache(maxsize=1000)(lambda text: within(parse(text, kind), text, kind, **limits))


def _quantity(text: str) -> int:
    if _WHOLE.fullmatch(text):
        return int(text)
    raise Refusal("not a whole number from 0", allowed="pieces in figures, at most nine of them")


def _price(text: str) -> float:
    try:
        return within(parse(text, Kind.NUMBER), text, Kind.NUMBER, least=0.0)
    except QuantityError as error:
        allowed = "a plain number from 0, of one piece, without a currency"
        raise Refusal(error.problem, allowed=allowed) from None


COLUMNS: Mapping[str, Callable[[str], Any]] = {
    "value": _figure(Kind.RESISTANCE, above=0.0),
    "tolerance": _figure(Kind.RATIO, least=0.0, below=1.0),
    "tempco": _figure(Kind.RELATIVE_SLOPE, least=0.0, below=0.01),
    "power_rating": _figure(Kind.POWER, above=0.0),
    "quantity": _quantity,
    "price": _price,
    "location": one_line,
}
"""How each column is read; the ranges are those of a stage file's resistors."""


def _header_faults(table: CsvFile) -> list[Fault]:
    names = _names(table)
    allowed = ", ".join(COLUMNS)
    faults = [
        Fault(table.path, 1, _key(name), "unknown column", shown(name), allowed, _column_hint(name))
        for name in dict.fromkeys(names)
        if name not in COLUMNS
    ]
    faults += [
        Fault(table.path, 1, name, "a column given twice", allowed="each column once")
        for name in COLUMNS
        if names.count(name) > 1
    ]
    if "value" not in names:
        hint = "the first line names the columns"
        faults.append(Fault(table.path, 1, "value", "missing column", allowed=allowed, hint=hint))
    return faults


def _key(name: str) -> str:
    """A column's name as a fault shows it: left out where it could do harm on a terminal."""
    return name if name.isprintable() and len(name) <= _LONGEST_NAME else ""


def _column_hint(name: str) -> str:
    if "\t" in name:
        return "cells are separated by commas or by semicolons, not by tabs"
    return nearest(name, COLUMNS)


def _names(table: CsvFile) -> tuple[str, ...]:
    return tuple(cell.strip() for cell in table.header)


def _items(table: CsvFile, rows: list[Row], faults: list[Fault]) -> list[StockItem]:
    """The items of the sound rows; what is wrong with the others is added to the faults."""
    lines: dict[tuple[object, ...], int] = {}
    items: list[StockItem] = []
    for row in rows:
        if len(faults) >= MOST_FAULTS:
            problem = f"{len(faults)} faults so far: the rest of the list was not read"
            faults.append(Fault(table.path, row.line, "", problem))
            break
        item = _item(table, row, faults)
        if item is not None:
            items.append(item)
            faults += _repeated(table, row, lines.setdefault(_place_and_part(item), row.line))
    return items


def _item(table: CsvFile, row: Row, faults: list[Fault]) -> StockItem | None:
    """The item of a row; None where the row has faults, which are then among them."""
    names, before = _names(table), len(faults)
    if len(row.cells) != len(names):
        problem, allowed = f"{len(row.cells)} cells, not {len(names)}", "a cell for each column"
        hint = "write a decimal point; put a text with a separator in quotes"
        hint = hint if len(row.cells) > len(names) else ""
        faults.append(Fault(table.path, row.line, "", problem, allowed=allowed, hint=hint))
        return None
    cells = {name: cell.strip() for name, cell in zip(names, row.cells, strict=True) if name in COLUMNS}
    if cells.get("value") == "":
        faults.append(Fault(table.path, row.line, "value", "missing", allowed='a resistance, as in "4k7"'))
    read: dict[str, Any] = {}
    for name, cell in cells.items():
        try:
            if cell:
                read[name] = COLUMNS[name](cell)
        except (QuantityError, Refusal) as error:
            hint = error.hint if isinstance(error, Refusal) else ""
            faults.append(Fault(table.path, row.line, name, error.problem, shown(cell), error.allowed, hint))
    return StockItem(**read) if len(faults) == before and "value" in read else None


def _place_and_part(item: StockItem) -> tuple[object, ...]:
    return item.value, item.tolerance, item.tempco, item.power_rating, item.location


def _repeated(table: CsvFile, row: Row, first: int) -> list[Fault]:
    """The fault of a row that stands for the same part in the same place as the one in line `first`."""
    if first == row.line:
        return []
    problem = f"the same part in the same place as in line {first}"
    allowed = "one row for both, their quantities added, or different locations"
    return [Fault(table.path, row.line, "value", problem, allowed=allowed)]
