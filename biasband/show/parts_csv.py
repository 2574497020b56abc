"""The parts list as CSV, to order from: SI units, a line per kind of part."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence

from biasband.show.snap_tables import chips
from biasband.signoff.parts_list import CapacitorLine, PartLine

COLUMNS = (
    "references", "quantity", "value_ohm", "series", "tolerance_percent", "tempco_ppm_per_kelvin",
    "power_rating_watt", "power_worst_watt", "letter_code", "colour_bands", "chip_marks", "price_each",
    "price_total", "stock", "location", "value_farad",
)  # fmt: skip


def parts_csv(lines: Sequence[PartLine], capacitors: Sequence[CapacitorLine] = ()) -> str:
    """Write a parts list, resistors first; what is not known is left empty.

    The colours' figures have "+/-": a spreadsheet that takes the file for another encoding shows it too.
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(COLUMNS)
    writer.writerows(_cells(line) for line in lines)
    writer.writerows([_capacitor(line).get(column, "") for column in COLUMNS] for line in capacitors)
    return text.getvalue()


def _cells(line: PartLine) -> tuple[object, ...]:
    marks, each = line.markings, {item.price for item in line.taken}
    bands = marks.six_bands if marks.six_bands.colours is not None else marks.bands
    return (
        " ".join(line.references),
        line.quantity,
        _number(line.value),
        line.series or "",
        _number(None if line.tolerance is None else 100.0 * line.tolerance),
        _number(None if line.tempco is None else 1e6 * line.tempco),
        _number(line.power_rating),
        _number(line.power_worst),
        marks.letter_code or "",
        bands.text.replace("±", "+/-") if bands.colours is not None else "",
        " ".join(chips(marks)),
        _number(each.pop() if len(each) == 1 else None),
        _number(line.price),
        line.lacking,
        ", ".join(dict.fromkeys(item.location for item in line.taken if item.location)),
        "",
    )


def _capacitor(line: CapacitorLine) -> dict[str, object]:
    """The cells of a capacitor by column."""
    return {
        "references": line.reference,
        "quantity": 1,
        "series": line.series or "",
        "tolerance_percent": "" if line.tolerance is None else _number(100.0 * line.tolerance),
        "value_farad": _number(line.value),
    }


def _number(value: float | None) -> str:
    return "" if value is None else f"{value:.12g}"
