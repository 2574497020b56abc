"""The resistors to buy: value, where it comes from, how it is marked, how warm it gets, what it costs."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from biasband.quantity import Kind
from biasband.show.snap_tables import marks
from biasband.show.table import NOT_KNOWN, Column, Row, Table, code, computed, figure, percent
from biasband.signoff.parts_list import PartLine
from biasband.stage import StockItem
from biasband.values.choosing import Design

WORST_POWER = Column("worst power")
PARTS_COLUMNS = (
    Column("part", "left"),
    Column("value"),
    Column("code", "left"),
    Column("series", "left", spare=1),
    Column("tol."),
    Column("tempco", spare=2),
    Column("ideal"),
    WORST_POWER,
    Column("rating"),
)

NOT_STATED = "not stated"


def parts_table(lines: Sequence[PartLine], design: Design) -> Table:
    """Which resistors to buy, a row per kind; no worst power where no corners were looked into."""
    looked = any(line.power_worst is not None for line in lines)
    columns = tuple(column for column in PARTS_COLUMNS if looked or column is not WORST_POWER)
    rows = tuple(_row(line, design, looked) for line in lines)
    return Table("Parts to buy", columns, rows, tuple(_total(lines)))


def _row(line: PartLine, design: Design, looked: bool) -> Row:
    power, rating = line.power_worst, line.power_rating
    shown = NOT_KNOWN if power is None else computed(power, Kind.POWER)
    return Row(
        (
            ", ".join(line.references),
            figure(line.value, Kind.RESISTANCE, digits=6),
            code(line.value),
            source(line, design),
            NOT_STATED if line.tolerance is None else percent(line.tolerance, digits=4),
            NOT_STATED if line.tempco is None else figure(line.tempco, Kind.RELATIVE_SLOPE),
            ", ".join(_ideal(name, design) for name in line.references),
            *([shown] if looked else []),
            NOT_STATED if rating is None else figure(rating, Kind.POWER),
        ),
        (*marks(line.markings), *_in_stock(line)),
    )


def source(line: PartLine, design: Design) -> str:
    """The series of a line, or "stock"; empty where the stage file gives its value."""
    given = all(design.origin_of(name) == "given" for name in line.references)
    return line.series or ("" if given or design.stage.stock is None else "stock")


def _ideal(name: str, design: Design) -> str:
    step = next(part.ideal for part in design.parts if part.name == name)
    return design.origin_of(name) if step is None else computed(step.ohms, Kind.RESISTANCE)


def _in_stock(line: PartLine) -> Iterator[str]:
    """What the stock list says of the pieces to take, and what it lacks."""
    rows = list(dict.fromkeys(line.taken))
    for item in rows:
        share = f", {line.taken.count(item)} of these" if len(rows) > 1 else ""
        yield f"in stock{share}: {_said(item)}"
    if line.lacking:
        yield line.lacking


def _said(item: StockItem) -> str:
    pieces = "1 piece" if item.quantity == 1 else f"{item.quantity} pieces"
    known = (
        "" if item.tolerance is None else f"±{percent(item.tolerance, digits=4)}",
        "" if item.quantity is None else pieces,
        "" if item.price is None else f"{item.price:g} each",
        item.location,
    )
    return ", ".join(filter(None, known)) or "yes"


def _total(lines: Sequence[PartLine]) -> Iterator[str]:
    """What the resistors cost together, as far as that is known."""
    priced = [(line.quantity, line.price) for line in lines if line.price is not None]
    if not priced:
        return
    count, every = sum(quantity for quantity, _ in priced), sum(line.quantity for line in lines)
    which = "all resistors" if count == every else f"{count} of {every} resistors, the others' is not known"
    yield f"Price of {which}: {sum(price for _, price in priced):.6g}."
