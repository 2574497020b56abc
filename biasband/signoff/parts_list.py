"""The list to order from: which parts, how they are marked, how warm they get, what they cost."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from biasband.parts.marking import Markings, markings
from biasband.parts.stock import best_item, demand_of
from biasband.stage import Resistor, Stage, StockItem
from biasband.values.choosing import Design


@dataclass(frozen=True, kw_only=True)
class PartLine:
    """One kind of part: the resistors that are it, [Ω], fractions, [1/K], [W].

    `series` is None where the stage gives the value, `tolerance` where it is not stated; `power_worst` is
    the most that any of the resistors dissipates at any corner, None where that was not looked into.
    `item` is what to take from the stock list, None without one.
    """

    references: tuple[str, ...]
    value: float
    series: str | None
    tolerance: float | None
    tempco: float
    power_rating: float | None
    power_worst: float | None
    markings: Markings
    item: StockItem | None = None

    @property
    def quantity(self) -> int:
        """How many of these one stage needs."""
        return len(self.references)


def parts_list(design: Design, worst: Mapping[str, float]) -> tuple[PartLine, ...]:
    """The parts of a designed stage, equal ones on one line; `worst` holds the power [W] of each at worst."""
    lines: dict[tuple[object, ...], PartLine] = {}
    chosen = {part.name for part in design.parts if part.chosen}
    for resistor in design.stage.resistors:
        line = _line(design.stage, resistor, resistor.name in chosen, worst.get(resistor.name))
        kind = (line.value, line.series, line.tolerance, line.tempco, line.power_rating, resistor.group)
        lines[kind] = _together(lines[kind], line) if kind in lines else line
    return tuple(lines.values())


def _line(stage: Stage, resistor: Resistor, chosen: bool, power: float | None) -> PartLine:
    assert resistor.value is not None, "a designed stage has all its values"
    tolerance = resistor.tolerance if resistor.tolerance_stated else None
    stock = stage.stock
    return PartLine(
        references=(resistor.name,),
        value=resistor.value,
        series=resistor.series if chosen and stock is None else None,
        tolerance=tolerance,
        tempco=resistor.tempco,
        power_rating=resistor.power_rating,
        power_worst=power,
        markings=markings(resistor.value, tolerance=tolerance, tempco=resistor.tempco or None),
        item=None if stock is None else best_item(stock, resistor.value, demand_of(resistor)),
    )


def _together(line: PartLine, other: PartLine) -> PartLine:
    powers = [power for power in (line.power_worst, other.power_worst) if power is not None]
    return replace(
        line,
        references=(*line.references, *other.references),
        power_worst=max(powers, default=None),
    )
