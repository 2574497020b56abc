"""The capacitors of a design as plain data."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from biasband.show.capacitor_tables import formula
from biasband.signoff.parts_list import CapacitorLine, capacitors_list
from biasband.values.choosing import Design


def capacitors_json(design: Design) -> dict[str, Any]:
    """Every capacitor of the stage [F], with the formula that it came of where it was free."""
    return {line.reference: _capacitor(line) for line in capacitors_list(design)}


def _capacitor(line: CapacitorLine) -> dict[str, Any]:
    step = line.ideal
    return {
        "hand": None if line.hand is None else line.hand.farads,
        "ideal": None if step is None else step.farads,
        "value": line.value,
        "chosen": line.series is not None,
        "series": line.series,
        "tolerance": line.tolerance,
        "temperature_change": line.temperature_change,
        "formula": None if step is None else {**asdict(step), "text": formula(step)},
    }
