"""The list to order from: which parts, how they are marked, how warm they get, what they cost."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from biasband.parts.allotment import allot
from biasband.parts.marking import Markings, markings
from biasband.parts.stock import demand_of, pieces_in_stock
from biasband.quantity import Kind, format_exact
from biasband.stage import Capacitor, Resistor, Stage, StockItem
from biasband.values.capacitors import CapacitorChoice, CapacitorStep
from biasband.values.choosing import Design


@dataclass(frozen=True, kw_only=True)
class PartLine:
    """One kind of part: the resistors that are it, [Ω], fractions, [1/K], [W].

    `series` is None where the stage gives the value or the stock list has it, `tolerance` and `tempco` where
    they are not stated (a tempco of zero, the default, is none); `power_worst` is the most that any of the
    resistors dissipates at any corner, None where that was not looked into. `items` are what to take from the
    stock list, for each reference; None where no piece is left for it. `pieces` is how many there serve, None
    where they are not counted. Without a list both are empty.
    """

    references: tuple[str, ...]
    value: float
    series: str | None
    tolerance: float | None
    tempco: float | None
    power_rating: float | None
    power_worst: float | None
    markings: Markings
    items: tuple[StockItem | None, ...] = ()
    pieces: int | None = None

    @property
    def quantity(self) -> int:
        """How many of these one stage needs."""
        return len(self.references)

    @property
    def taken(self) -> tuple[StockItem, ...]:
        """The pieces that the stock list has for them, the first reference's first."""
        return tuple(item for item in self.items if item is not None)

    @property
    def lacking(self) -> str:
        """What the stock list cannot give, in words; empty where it has all, or there is no list."""
        if len(self.taken) == len(self.items):
            return ""
        if self.taken:
            return f"only {len(self.taken)} in stock"
        return "not in stock" if self.pieces == 0 else "none left in stock"

    @property
    def price(self) -> float | None:
        """What all of them cost together; None where the price of one is not known."""
        prices = [item.price for item in self.taken if item.price is not None]
        return sum(prices) if len(prices) == self.quantity else None


def parts_list(design: Design, worst: Mapping[str, float]) -> tuple[PartLine, ...]:
    """The parts of a designed stage, equal ones on one line; `worst` holds the power [W] of each at worst."""
    lines: dict[tuple[object, ...], PartLine] = {}
    for resistor, item in zip(design.stage.resistors, _pieces(design.stage), strict=True):
        line = _line(design, resistor, item, worst.get(resistor.name))
        kind = (line.value, line.series, line.tolerance, line.tempco, line.power_rating, resistor.group)
        lines[kind] = _together(lines[kind], line) if kind in lines else line
    return tuple(lines.values())


@dataclass(frozen=True, kw_only=True)
class CapacitorLine:
    """One capacitor: [F], fractions; `series` is None where the stage gives the value.

    `tolerance` is None where it is not stated. `hand` and `ideal` are its formulas, None where given.
    """

    reference: str
    value: float
    series: str | None
    tolerance: float | None
    temperature_change: float
    hand: CapacitorStep | None
    ideal: CapacitorStep | None


def capacitors_list(design: Design) -> tuple[CapacitorLine, ...]:
    """The capacitors of a designed stage, in the order in which the signal meets them."""
    stated = {capacitor.name: capacitor for capacitor in design.stage.capacitors}
    return tuple(_capacitor_line(choice, stated[choice.name]) for choice in design.capacitors)


def _capacitor_line(choice: CapacitorChoice, stated: Capacitor) -> CapacitorLine:
    return CapacitorLine(
        reference=choice.name,
        value=choice.value,
        series=stated.series if choice.chosen else None,
        tolerance=stated.tolerance if stated.tolerance_stated else None,
        temperature_change=stated.temperature_change,
        hand=choice.hand,
        ideal=choice.ideal,
    )


def exact_values(design: Design) -> dict[str, str]:
    """Every value of a design by its part's name, as a stage file gives it."""
    values = {part.name: format_exact(part.value, Kind.RESISTANCE) for part in design.parts}
    return values | {each.name: format_exact(each.value, Kind.CAPACITANCE) for each in design.capacitors}


def _pieces(stage: Stage) -> tuple[StockItem | None, ...]:
    """What each resistor gets of the stock list; None where there is no piece for it, or no list."""
    if stage.stock is None:
        return (None,) * len(stage.resistors)
    values = [resistor.value or 0.0 for resistor in stage.resistors]
    return allot(stage.stock, values, [demand_of(resistor) for resistor in stage.resistors])


def _line(design: Design, resistor: Resistor, item: StockItem | None, power: float | None) -> PartLine:
    assert resistor.value is not None, "a designed stage has all its values"
    tolerance, tempco = resistor.tolerance if resistor.tolerance_stated else None, resistor.tempco or None
    stock = design.stage.stock
    return PartLine(
        references=(resistor.name,),
        value=resistor.value,
        series=design.series_of(resistor.name),
        tolerance=tolerance,
        tempco=tempco,
        power_rating=resistor.power_rating,
        power_worst=power,
        markings=markings(resistor.value, tolerance=tolerance, tempco=tempco),
        items=() if stock is None else (item,),
        pieces=None if stock is None else pieces_in_stock(stock, resistor.value, demand_of(resistor)),
    )


def _together(line: PartLine, other: PartLine) -> PartLine:
    powers = [power for power in (line.power_worst, other.power_worst) if power is not None]
    return replace(
        line,
        references=(*line.references, *other.references),
        power_worst=max(powers, default=None),
        items=(*line.items, *other.items),
    )
