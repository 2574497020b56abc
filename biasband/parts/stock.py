"""What a stock list has for a part that is wanted: which values, which item, how many pieces.

What an item does not state cannot be held against it: an item without a tolerance serves where 1 % is
wanted, since a list may leave out what is the same for the whole drawer.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

from biasband.stage import Resistor, Stock, StockItem


@dataclass(frozen=True, kw_only=True)
class Demand:
    """What a part must be: a tolerance (fraction) and a tempco [1/K] at most, a power rating [W] at least.

    None means that any will do.
    """

    tolerance: float | None = None
    tempco: float | None = None
    power_rating: float | None = None

    def met_by(self, item: StockItem) -> bool:
        """Whether an item serves: there is one, and nothing that it states is worse than wanted."""
        return (
            item.quantity != 0
            and _at_most(item.tolerance, self.tolerance)
            and _at_most(item.tempco, self.tempco)
            and _at_most(self.power_rating, item.power_rating)
        )


def demand_of(resistor: Resistor) -> Demand:
    """Say what a stage's resistor demands of its part.

    A tolerance that the stage does not state and a tempco of zero, its default, demand nothing.
    """
    return Demand(
        tolerance=resistor.tolerance if resistor.tolerance_stated else None,
        tempco=resistor.tempco or None,
        power_rating=resistor.power_rating,
    )


def values_in_stock(stock: Stock, demand: Demand) -> tuple[float, ...]:
    """List the values [Ω] that can be had, ascending, each once; empty where there are none.

    Worked case: of 1 kΩ 5 %, 4.7 kΩ 1 % and 10 kΩ without a tolerance, 1 % leaves 4.7 and 10 kΩ.
    """
    return tuple(sorted({item.value for item in stock.items if demand.met_by(item)}))


def pieces_in_stock(stock: Stock, value: float, demand: Demand) -> int | None:
    """Count the pieces of a value [Ω] that serve, over all their items; 0 where there are none.

    None means that they are not counted: an item that serves states no quantity, and is taken not to
    run out.

    Worked case: 3 pieces at 1 % and 40 at 5 % are 43, or 3 where 1 % is wanted.
    """
    total = 0
    for item in _serving(stock, value, demand):
        if item.quantity is None:
            return None
        total += item.quantity
    return total


def _serving(stock: Stock, value: float, demand: Demand) -> list[StockItem]:
    return [item for item in stock.items if item.value == value and demand.met_by(item)]


def _at_most(figure: float | None, limit: float | None) -> bool:
    """Whether a figure is within a limit, as far as both are known."""
    return figure is None or limit is None or figure <= limit


def by_price(item: StockItem) -> tuple[float, float, float, float]:
    """Sort key of the item to take first: the cheapest.

    Among equal prices the tightest tolerance, then the smallest tempco, then the largest rating. Where
    only some items have a price those come first, and where only some state a tolerance, a tempco or a
    rating those come first too.
    """
    costs = (item.price, item.tolerance, item.tempco)
    price, tolerance, tempco = (inf if cost is None else cost for cost in costs)
    return price, tolerance, tempco, -(item.power_rating or 0.0)
