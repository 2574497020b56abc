"""The parts list as CSV, to order from: SI units, a line per kind of part."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence

from biasband.show.snap_tables import chip_marks
from biasband.signoff.parts_list import PartLine

COLUMNS = (
    "references", "quantity", "value_ohm", "series", "tolerance_percent", "tempco_ppm_per_kelvin",
    "power_rating_watt", "power_worst_watt", "letter_code", "colour_bands", "chip_marks", "price_each",
    "price", "location",
)  # fmt: skip


def parts_csv(lines: Sequence[PartLine]) -> str:
    """Write a parts list; what is not known is left empty."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(COLUMNS)
    writer.writerows(_cells(line) for line in lines)
    return text.getvalue()


def _cells(line: PartLine) -> tuple[object, ...]:
    item, marks = line.item, line.markings
    price = None if item is None else item.price
    bands = marks.six_bands if marks.six_bands.colours is not None else marks.bands
    return (
        " ".join(line.references),
        line.quantity,
        _number(line.value),
        line.series or "",
        "" if line.tolerance is None else _number(100.0 * line.tolerance),
        _number(1e6 * line.tempco),
        _number(line.power_rating),
        _number(line.power_worst),
        marks.letter_code or "",
        bands.text if bands.colours is not None else "",
        chip_marks(marks).removeprefix("chip "),
        _number(price),
        _number(None if price is None else price * line.quantity),
        "" if item is None else item.location,
    )


def _number(value: float | None) -> str:
    return "" if value is None else f"{value:.12g}"
