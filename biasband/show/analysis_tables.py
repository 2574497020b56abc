"""The tables of one analysis in depth: design and corners."""

from __future__ import annotations

from collections.abc import Mapping

from biasband.circuit.quantities import Quantity
from biasband.quantity import Kind
from biasband.show.prose import formula, places
from biasband.show.table import REGION_WORDS, Column, Row, Table, code, computed, figure, percent
from biasband.values.choosing import Design, PartChoice
from biasband.values.ideal import Step
from biasband.variation.corners import Corners, Range

DESIGN_COLUMNS = (
    Column("part", "left"),
    Column("hand"),
    Column("refined"),
    Column("value"),
    Column("off ideal"),
    Column("code", "left"),
    Column("series", "left", spare=1),
)

CORNER_COLUMNS = (Column("quantity", "left"), Column("lowest"), Column("highest"), Column("found at", "left"))


def design_table(design: Design) -> Table:
    """Each ideal value by hand and refined, with its formulas, then the preferred value."""
    rows = tuple(_design_row(part, design) for part in design.parts)
    notes = (
        "hand: V_BE = 0.7 V, I_E = I_C, an unloaded divider; refined: the real model meets the target.",
        "Values are chosen together, so one may be further off its ideal than its series would have it.",
    )
    return Table("Values", DESIGN_COLUMNS, rows, notes if design.chosen else ())


def _design_row(part: PartChoice, design: Design) -> Row:
    steps = (("hand", part.hand), ("refined", part.ideal))
    origin = design.origin_of(part.name)
    stock = "" if origin == "given" or design.stage.stock is None else "stock"
    return Row(
        (
            part.name,
            _ohms(part.hand),
            _ohms(part.ideal),
            figure(part.value, Kind.RESISTANCE, digits=6),
            percent(part.value / part.ideal.ohms - 1.0) if part.ideal else origin,
            code(part.value),
            design.series_of(part.name) or stock,
        ),
        tuple(f"{name}: {formula(step, design.stage)}" for name, step in steps if step is not None),
    )


def _ohms(step: Step | None) -> str:
    return "" if step is None else computed(step.ohms, Kind.RESISTANCE)


def corners_table(corners: Corners, words: Mapping[str, Quantity]) -> Table:
    """The extremes of every quantity, and where every contributor stands at each."""
    rows = tuple(_corner_row(corners.ranges[name], quantity) for name, quantity in words.items())
    regions = ", ".join(f"{count} {REGION_WORDS[region]}" for region, count in corners.regions.items())
    return Table(f"{corners.count} corners: {regions}", CORNER_COLUMNS, rows)


def _corner_row(found: Range, quantity: Quantity) -> Row:
    return Row(
        (
            quantity.name,
            computed(found.low.value, quantity.kind),
            computed(found.high.value, quantity.kind),
            "inside the limits" if found.interior else "corners",
        ),
        (f"lowest: {places(found.low)}", f"highest: {places(found.high)}"),
    )
