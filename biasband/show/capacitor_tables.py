"""The capacitors of a stage: to buy, and how each value came about."""

from __future__ import annotations

from biasband.coupling import BYPASS, INPUT, OUTPUT
from biasband.quantity import Kind
from biasband.show.table import Column, Row, Table, computed, figure, percent
from biasband.signoff.parts_list import CapacitorLine, capacitors_list
from biasband.values.capacitors import CapacitorStep
from biasband.values.choosing import Design

PARTS_COLUMNS = (
    Column("part", "left"),
    Column("value"),
    Column("series", "left", spare=1),
    Column("tol."),
    Column("over ambient", spare=2),
    Column("ideal"),
)

DESIGN_COLUMNS = (
    Column("part", "left"),
    Column("hand"),
    Column("refined"),
    Column("value"),
    Column("series", "left", spare=1),
)

RULE = (
    "Each capacitor alone has its corner at a share of the lowest frequency, or of what given ones leave of "
    "it, that goes as 1 over the root of R, the resistance that it sees with the others short. Together they "
    "are at most at the sum. Values are the next up in their series."
)

WORST = "hand: the nominal stage; refined: the least R at any corner, and what is left of C at worst."

_PLACES = {INPUT: "in series with the source", OUTPUT: "in series with the load", BYPASS: "across RE, or RE2"}


def capacitor_parts(design: Design) -> tuple[Table, ...]:
    """Which capacitors to buy; no table where the stage has none."""
    rows = tuple(_part_row(line) for line in capacitors_list(design))
    return (Table("Capacitors to buy", PARTS_COLUMNS, rows),) if rows else ()


def _part_row(line: CapacitorLine) -> Row:
    changes = line.temperature_change
    return Row(
        (
            line.reference,
            figure(line.value, Kind.CAPACITANCE, digits=6),
            line.series or "",
            "not stated" if line.tolerance is None else percent(line.tolerance, digits=4),
            f"±{percent(changes, digits=4)}" if changes else "0 %",
            "given" if line.ideal is None else computed(line.ideal.farads, Kind.CAPACITANCE),
        ),
        (_PLACES[line.reference], *([] if line.ideal is None else [formula(line.ideal)])),
    )


def capacitor_values(design: Design) -> tuple[Table, ...]:
    """Each capacitor by hand and refined, with its formulas; no table where the stage has none."""
    rows = tuple(_value_row(line) for line in capacitors_list(design))
    notes = (RULE, WORST) if any(choice.chosen for choice in design.capacitors) else ()
    return (Table("Capacitors", DESIGN_COLUMNS, rows, notes),) if rows else ()


def _value_row(line: CapacitorLine) -> Row:
    steps = (("hand", line.hand), ("refined", line.ideal))
    return Row(
        (
            line.reference,
            *("" if step is None else computed(step.farads, Kind.CAPACITANCE) for _, step in steps),
            figure(line.value, Kind.CAPACITANCE, digits=6),
            line.series or "given",
        ),
        tuple(f"{name}: {formula(step)}" for name, step in steps if step is not None),
    )


def formula(step: CapacitorStep) -> str:
    """A capacitor's formula with its numbers: "1 / (2π f R) = 1 / (2π × 45 Hz × 34.7 Ω) = 102 µF"."""
    numbers = [figure(step.frequency, Kind.FREQUENCY), figure(step.resistance, Kind.RESISTANCE)]
    symbols = "f R"
    if step.left != 1.0:
        symbols, numbers = f"{symbols} left", [*numbers, percent(step.left, digits=4)]
    over, filled, why = "1", "1", ""
    if step.raised != 1.0:
        over, filled, why = "raised", f"{step.raised:.4g}", ": together they would miss the frequency"
    filled = f"{filled} / (2π × {' × '.join(numbers)})"
    return f"{over} / (2π {symbols}) = {filled} = {figure(step.farads, Kind.CAPACITANCE)}{why}"
