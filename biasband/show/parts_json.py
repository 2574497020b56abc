"""The resistors of a design, and how parts are marked, as plain data."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

from biasband.parts.marking import Markings
from biasband.show.table import code
from biasband.signoff.parts_list import PartLine, parts_list
from biasband.stage import Resistor, StockItem
from biasband.values.choosing import Design, PartChoice

Json = dict[str, Any]


def parts_json(design: Design, worst: Mapping[str, float]) -> Json:
    """Every resistor; `worst` holds the highest value of each quantity, where that is known."""
    powers = {part.name: worst[power] for part in design.parts if (power := _power(part.name)) in worst}
    lines = {name: line for line in parts_list(design, powers) for name in line.references}
    pairs = {offer.name: [asdict(pair) for pair in offer.pairs] for offer in design.offers}
    return {
        part.name: {
            **_origin(part, design),
            **_stated(design.stage.resistor(part.name)),
            "code": code(part.value),
            "markings": markings_json(lines[part.name].markings),
            "stock": _stock(part.name, lines[part.name]),
            "pairs": pairs.get(part.name, []),
            "power_worst": powers.get(part.name),
        }
        for part in design.parts
    }


def _power(name: str) -> str:
    return f"resistor_power.{name}"


def _origin(part: PartChoice, design: Design) -> Json:
    return {
        "hand": None if part.hand is None else part.hand.ohms,
        "ideal": None if part.ideal is None else part.ideal.ohms,
        "value": part.value,
        "chosen": part.chosen,
        "kept": design.origin_of(part.name) == "kept",
        "series": design.series_of(part.name),
    }


def _stated(resistor: Resistor) -> Json:
    return {
        "tolerance": resistor.tolerance,
        "tempco": resistor.tempco,
        "power_rating": resistor.power_rating,
    }


def _stock(name: str, line: PartLine) -> Json | None:
    """The item that a resistor is taken from; None where there is no piece for it, or no list."""
    items: dict[str, StockItem | None] = dict(zip(line.references, line.items, strict=False))
    item = items.get(name)
    return None if item is None else asdict(item)


def markings_json(found: Markings) -> Json:
    """How a part is marked: the bands in words, tolerance and tempco in figures, why there are none."""
    return {
        "letter_code": found.letter_code,
        "bands": found.bands.colours and list(found.bands.colours),
        "bands_figures": found.bands.figures or None,
        "bands_reason": found.bands.reason or None,
        "six_bands": found.six_bands.colours and list(found.six_bands.colours),
        "six_bands_figures": found.six_bands.figures or None,
        "six_bands_reason": found.six_bands.reason or None,
        "chip_three": found.chip_three,
        "chip_four": found.chip_four,
        "chip_e96": found.chip_e96,
    }
