"""What a free resistor may be given: the preferred values of its series, or what is in stock."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from biasband.errors import Fault, PhysicallyImpossible
from biasband.parts.series import Series, nearest, nearest_among, neighbours
from biasband.parts.stock import Demand, demand_of, values_in_stock
from biasband.quantity import Kind, format_quantity
from biasband.stage import Resistor, Stage, Stock

USUAL_STEPS = ((24, 2), (48, 3))
"""Up to so many values a decade, so many steps either way: some ±20 %, ±15 %."""

FAR = 0.2
"""A stock list whose nearest value is farther from the ideal one than this has nothing near it."""

FINE_STEPS = 5
"""In finer series: ±12 % in E96."""


@dataclass(frozen=True)
class Shelf:
    """The values [Ω] that one resistor may be given: a whole series, or those `in_stock`, ascending.

    `steps` is how far around an ideal value the choice looks, either way.
    """

    series: Series
    steps: int
    in_stock: tuple[float, ...] | None = None

    def nearest(self, ideal: float) -> float:
        """The value nearest to an ideal one by ratio, the lower of two equally near."""
        if self.in_stock is None:
            return nearest(self.series, ideal).chosen
        return nearest_among(self.in_stock, ideal, name="stock").chosen

    def around(self, ideal: float) -> tuple[float, ...]:
        """The nearest value and those `steps` to either side, as far as there are any, ascending."""
        if self.in_stock is None:
            return neighbours(self.series, ideal, steps=self.steps)
        place = self.in_stock.index(self.nearest(ideal))
        return self.in_stock[max(place - self.steps, 0) : place + self.steps + 1]


def shelves(stage: Stage, series: Mapping[str, Series]) -> Mapping[str, Shelf]:
    """The shelf of every resistor without a value.

    Raises PhysicallyImpossible where the stock list has no part for one of them.
    """
    free = [resistor for resistor in stage.resistors if resistor.value is None]
    stock = stage.stock
    found = {r.name: _shelf(r, series[r.series], stock) for r in free}
    bare = [r for r in free if found[r.name].in_stock == ()]
    if stock is not None and bare:
        raise PhysicallyImpossible(tuple(_nothing_for(r, stock) for r in bare))
    return found


def _shelf(resistor: Resistor, series: Series, stock: Stock | None) -> Shelf:
    steps = usual_steps(series) if resistor.search_steps is None else resistor.search_steps
    return Shelf(series, steps, None if stock is None else values_in_stock(stock, demand_of(resistor)))


def usual_steps(series: Series) -> int:
    """How many steps around an ideal value the choice looks, unless the stage says otherwise."""
    count = len(series.mantissas)
    return next((steps for most, steps in USUAL_STEPS if count <= most), FINE_STEPS)


def _nothing_for(resistor: Resistor, stock: Stock) -> Fault:
    return Fault(
        stock.file.path,
        None,
        f"resistors.{resistor.name}",
        "the one part in stock will not do"
        if len(stock.items) == 1
        else f"none of the {len(stock.items)} parts in stock will do",
        allowed=_wanted(demand_of(resistor)),
        hint="loosen what the stage asks of it, or leave the stock list out",
    )


def _wanted(demand: Demand) -> str:
    """What a part must be, in words."""
    wishes = []
    if demand.tolerance is not None:
        wishes.append(f"a tolerance of {format_quantity(demand.tolerance, Kind.RATIO)} at most")
    if demand.tempco is not None:
        wishes.append(f"a tempco of {format_quantity(demand.tempco, Kind.RELATIVE_SLOPE)} at most")
    if demand.power_rating is not None:
        wishes.append(f"{format_quantity(demand.power_rating, Kind.POWER)} at least")
    return ", ".join(wishes) or "any part of which there is one"
