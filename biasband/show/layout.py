"""Lays tables and passages out in lines of a given width; nothing is cut off.

Where a table is too wide, its spare columns move below their row; whatever is still too wide
wraps between words, and only a word longer than the line is broken.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace

from rich.cells import cell_len, chop_cells
from rich.text import Text

from biasband.show.histogram import drawn
from biasband.show.pictures import pictured
from biasband.show.spelling import Spelling
from biasband.show.table import Column, Histogram, Passage, Report, Row, Table, Tone

NARROWEST = 20
"""[cells] Narrower outputs get lines of this width all the same."""

STYLES: dict[Tone, str] = {"": "", "pass": "green", "fail": "bold red", "doubt": "yellow"}
_GAP = "  "
_INDENT = "    "
_BOUND = "\u00a0"
_UNIT = re.compile(r"(?<=[0-9]) (?=(?:%|°C|degC|[fpnuµmkMG]?(?:V|A|W|Ω|ohm|K)\b))|(?<=[≥≤=]) (?=[0-9-])")


def lines_of(report: Report, *, width: int, spelling: Spelling) -> list[Text]:
    """Lay a report out, an empty line between its parts."""
    lines: list[Text] = []
    for block in report:
        laid = _lines(block, max(width, NARROWEST), spelling)
        lines += [Text(""), *laid] if lines and laid else laid
    return lines


def _lines(block: Table | Passage | Histogram, width: int, spelling: Spelling) -> list[Text]:
    if isinstance(block, Histogram):
        block = drawn(block, width, spelling)
    if isinstance(block, Passage):
        return list(_passage(block, width, spelling))
    table = _spelled(block, spelling)
    if table.picture is not None:
        room = width - _total(_widths(table, list(range(len(table.columns))))) - len(_GAP)
        table = pictured(table, room, spelling)
    rule = spelling("─")
    return list(_flowing(table, width, rule) if table.flows else _table(table, width, rule))


def _passage(passage: Passage, width: int, spelling: Spelling) -> Iterator[Text]:
    style = STYLES[passage.tone]
    for line in wrapped(spelling(passage.title), width):
        yield Text(line, style=f"bold {style}".strip())
    indent = "  " if passage.title else ""
    for sentence in passage.sentences:
        for line in wrapped(spelling(sentence), width, first=indent, rest=indent + "  "):
            yield Text(line)


def _spelled(table: Table, spelling: Spelling) -> Table:
    return replace(
        table,
        title=spelling(table.title),
        columns=tuple(replace(column, heading=spelling(column.heading)) for column in table.columns),
        rows=tuple(
            replace(row, cells=tuple(map(spelling, row.cells)), below=tuple(map(spelling, row.below)))
            for row in table.rows
        ),
        notes=tuple(map(spelling, table.notes)),
    )


def _table(table: Table, width: int, rule: str) -> Iterator[Text]:
    kept = _kept(table, width)
    widths = _widths(table, kept)
    yield from _title(table, width)
    columns = [table.columns[k] for k in kept]
    yield _joined([column.heading for column in columns], columns, widths, "bold")
    yield Text(rule * min(_total(widths), width), style="dim")
    for row in table.rows:
        yield from _row(table, row, kept, widths, width)
    for note in table.notes:
        yield from (Text(line, style="dim") for line in wrapped(note, width))


def _title(table: Table, width: int) -> Iterator[Text]:
    yield from (Text(line, style="bold") for line in wrapped(table.title, width))


def _kept(table: Table, width: int) -> list[int]:
    """The columns that stay beside each other: spare ones go first, then from the right; the first stays."""
    kept = list(range(len(table.columns)))
    spare = sorted((k for k in kept if table.columns[k].spare), key=lambda k: table.columns[k].spare)
    going = [*spare, *(k for k in reversed(kept) if k and k not in spare)]
    while going and _total(_widths(table, kept)) > width:
        kept.remove(going.pop(0))
    return kept


def _widths(table: Table, kept: list[int]) -> list[int]:
    return [
        max(cell_len(text) for text in (table.columns[k].heading, *(row.cells[k] for row in table.rows)))
        for k in kept
    ]


def _total(widths: list[int]) -> int:
    return sum(widths) + len(_GAP) * (len(widths) - 1)


def _row(table: Table, row: Row, kept: list[int], widths: list[int], width: int) -> Iterator[Text]:
    columns, cells = [table.columns[k] for k in kept], [row.cells[k] for k in kept]
    if _total(widths) <= width:
        yield _joined(cells, columns, widths, STYLES[row.tone])
    else:
        yield from (Text(line) for line in wrapped(cells[0], width))
    moved = [
        f"{column.heading} {row.cells[k]}".replace(" ", _BOUND)
        for k, column in enumerate(table.columns)
        if k not in kept and row.cells[k]
    ]
    for below in (*([", ".join(moved)] if moved else []), *row.below):
        for line in wrapped(below, width, first=_INDENT, rest=_INDENT + "  "):
            yield Text(line, style="dim")


def _joined(cells: list[str], columns: list[Column], widths: list[int], style: str) -> Text:
    """Cells side by side; the style goes to the toned ones, or to all of a heading."""
    line = Text()
    heading = style == "bold"
    for k, (cell, column, width) in enumerate(zip(cells, columns, widths, strict=True)):
        pad = " " * (width - cell_len(cell))
        last = k == len(cells) - 1
        line.append(_GAP if k else "")
        line.append(pad if column.align == "right" else "")
        line.append(cell, style if heading or column.toned else "")
        line.append("" if column.align == "right" or last else pad)
    line.rstrip()
    return line


def _flowing(table: Table, width: int, rule: str) -> Iterator[Text]:
    """Rows in as many blocks side by side as the width allows, read downwards."""
    yield from _title(table, width)
    widths = _widths(table, list(range(len(table.columns))))
    block = _total(widths)
    if block > width:
        for row in table.rows:
            yield from _row(table, row, [0], widths[:1], width)
        return
    count = (width + 2 * len(_GAP)) // (block + 2 * len(_GAP))
    height = -(-len(table.rows) // count)
    columns = list(table.columns)
    yield Text(rule * min(width, count * block + 2 * len(_GAP) * (count - 1)), style="dim")
    for k in range(height):
        blocks = [_joined(list(row.cells), columns, widths, "") for row in table.rows[k::height]]
        yield Text(2 * _GAP).join(blocks)


def wrapped(text: str, width: int, *, first: str = "", rest: str = "") -> Iterator[str]:
    """Lines of a text within a width, between words and never between a number and its unit.

    `first` and `rest` are the indents of the first and of all other lines. No text, no line.
    """
    line, empty = first, True
    for word in _words(text, width - max(len(first), len(rest))):
        longer = f"{line}{word}" if empty else f"{line} {word}"
        if empty or cell_len(longer) <= width:
            line, empty = longer, False
        else:
            yield line.replace(_BOUND, " ")
            line = rest + word
    if not empty:
        yield line.replace(_BOUND, " ")


def _words(text: str, width: int) -> Iterator[str]:
    for word in filter(None, _UNIT.sub(_BOUND, text).split(" ")):
        if cell_len(word) <= width:
            yield word
        elif _BOUND in word:
            yield from _words_apart(word, width)
        else:
            yield from chop_cells(word, width)


def _words_apart(bound: str, width: int) -> Iterator[str]:
    """The parts of a bound group that is too long for a line of its own."""
    for word in bound.split(_BOUND):
        yield from [word] if cell_len(word) <= width else chop_cells(word, width)
