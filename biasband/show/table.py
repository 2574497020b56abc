"""Tables as data, and how figures are written in all of them.

The columns of every table are decided in this room, once, for every output: `review_tables` and
`analysis_tables` fill these records, and the screen, a page or a spreadsheet lay them out.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import ROUND_DOWN, ROUND_UP, Decimal
from typing import Literal

from biasband.boards.summary import Summary
from biasband.circuit.operating_point import Region
from biasband.errors import UsageError
from biasband.parts.letter_code import letter_code
from biasband.quantity import Kind, format_quantity

Align = Literal["left", "right"]
Tone = Literal["", "pass", "fail", "doubt"]

NOT_KNOWN = "n/a"
MARGIN_DIGITS = 3
_YIELD_STEP = Decimal("0.001")

REGION_WORDS = {region: region.name.lower().replace("_", " ") for region in Region}
"""The regions as tables and JSON name them."""


OUTCOME_TONES: Mapping[str, Tone] = {"pass": "pass", "fail": "fail", "inconclusive": "doubt"}


@dataclass(frozen=True)
class Column:
    """A column's heading and side.

    `spare` tells an output that is too narrow which columns to move below their row: 1 first, then
    2 and so on; 0 is the last resort. `toned` marks the cells that carry the row's tone.
    """

    heading: str
    align: Align = "right"
    spare: int = 0
    toned: bool = False


@dataclass(frozen=True)
class Row:
    """A row's cells, the sentences that stand below it, and its tone."""

    cells: tuple[str, ...]
    below: tuple[str, ...] = ()
    tone: Tone = ""


@dataclass(frozen=True)
class Strip:
    """What a picture shows beside one row: a band and the nominal value on it [SI]; NaN is not drawn."""

    low: float
    nominal: float
    high: float


@dataclass(frozen=True)
class Bound:
    """A limit [SI] that a picture shows; `lower` says that the band may not go below it."""

    value: float
    lower: bool


@dataclass(frozen=True)
class Picture:
    """A picture of a table's rows on one axis: a strip for each, and the limits."""

    kind: Kind
    strips: tuple[Strip, ...]
    bounds: tuple[Bound, ...] = ()


@dataclass(frozen=True)
class Table:
    """A table with its title and notes; `flows` says that rows may be set in several blocks.

    A `picture` stands beside the rows where an output has the room.
    """

    title: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    notes: tuple[str, ...] = ()
    flows: bool = False
    picture: Picture | None = None


@dataclass(frozen=True)
class Panel:
    """A histogram of boards at one place of use, and the strip that stands under it.

    `beyond` of the boards have passed `bound`.
    """

    label: str
    found: Summary
    strip: Strip
    bound: Bound | None = None
    beyond: int = 0


@dataclass(frozen=True)
class Histogram:
    """Histograms of a quantity on one axis, with named strips below them and the limits through all."""

    title: str
    kind: Kind
    panels: tuple[Panel, ...]
    strips: Mapping[str, Strip]
    bounds: tuple[Bound, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class Passage:
    """Sentences under a title (or none), with a tone."""

    title: str
    sentences: tuple[str, ...]
    tone: Tone = ""


Report = tuple[Table | Passage | Histogram, ...]
"""What a reader reads, top to bottom, whatever it is laid out on."""


def figure(value: float, kind: Kind, *, digits: int = 4) -> str:
    """Write a figure as it is given, with its unit; NaN is "n/a"."""
    return format_quantity(value, kind, digits=digits)


def computed(value: float, kind: Kind, *, digits: int = 4) -> str:
    """Write a computed figure with its unit, all its digits kept, so that a column reads evenly."""
    return format_quantity(value, kind, digits=digits, keep_zeros=True)


def difference(value: float, kind: Kind, *, digits: int = MARGIN_DIGITS) -> str:
    """Write a difference between two figures of a kind: between temperatures it is in K."""
    return computed(value, Kind.TEMPERATURE_DIFFERENCE if kind is Kind.TEMPERATURE else kind, digits=digits)


def percent(share: float, *, digits: int = 2) -> str:
    """Write a share in %."""
    return format_quantity(share, Kind.RATIO, digits=digits)


def whole_percent(share: float) -> str:
    """Write a share in whole %."""
    return f"{100.0 * share:.0f} %" if math.isfinite(share) else NOT_KNOWN


def yield_percent(share: float, *, up: bool = False) -> str:
    """Write a yield in %, rounded down, so that only all boards read as "100 %"; an upper end rounded up."""
    if math.isnan(share):
        return NOT_KNOWN
    if share == 1.0:
        return "100 %"
    rounding = ROUND_UP if up else ROUND_DOWN
    return f"{(100 * Decimal(repr(share))).quantize(_YIELD_STEP, rounding=rounding)} %"


def code(ohms: float) -> str:
    """Write the letter code of a resistance [Ω]; "none" where the code does not reach."""
    try:
        return letter_code(ohms)
    except UsageError:
        return "none"
