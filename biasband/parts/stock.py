"""What a stock list has for a part that is wanted: which values, which item, how many pieces.

What an item does not state cannot be held against it: an item without a tolerance serves where 1 % is
wanted, since a list may leave out what is the same for the whole drawer.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import chain, combinations
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


def best_item(stock: Stock, value: float, demand: Demand) -> StockItem | None:
    """Find the item to take for a value [Ω]: the cheapest that serves; None where none does.

    Among equal prices the tightest tolerance, then the smallest tempco, then the largest rating, then
    the one that stands first in the list. Where only some items have a price those come first, and
    where only some state a tolerance, a tempco or a rating those come first too.
    """
    return min(_serving(stock, value, demand), key=by_price, default=None)


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


def enough_in_stock(stock: Stock, values: Sequence[float], demands: Sequence[Demand]) -> bool:
    """Whether the list has a part for each of several resistors at once, by value [Ω] and demand.

    Resistors of one value draw on the same pieces: any of them together must find as many as they are
    (Hall's condition), so that a loosely toleranced one does not take the only tight part.
    Worked case: one piece of 10 kΩ at 1 % and one at 5 % are enough for a 1 % and a 5 % resistor, not for two
    of 1 %.
    Source: P. Hall, "On representatives of subsets", J. London Math. Soc. 10 (1935); memory.
    """
    wanted: dict[float, list[Demand]] = {}
    for value, demand in zip(values, demands, strict=True):
        wanted.setdefault(value, []).append(demand)
    groups = ((value, some) for value, alike in wanted.items() for some in _subsets(alike))
    return all(_pieces_for_any(stock, value, some) >= len(some) for value, some in groups)


def _subsets(demands: Sequence[Demand]) -> Iterator[tuple[Demand, ...]]:
    return chain.from_iterable(combinations(demands, size) for size in range(1, len(demands) + 1))


def _pieces_for_any(stock: Stock, value: float, demands: Sequence[Demand]) -> float:
    """How many pieces of a value serve at least one of the demands; infinite where not counted."""
    items = [i for i in stock.items if i.value == value and any(demand.met_by(i) for demand in demands)]
    return sum((inf if item.quantity is None else item.quantity for item in items), start=0.0)


def _serving(stock: Stock, value: float, demand: Demand) -> list[StockItem]:
    return [item for item in stock.items if item.value == value and demand.met_by(item)]


def _at_most(figure: float | None, limit: float | None) -> bool:
    """Whether a figure is within a limit, as far as both are known."""
    return figure is None or limit is None or figure <= limit


def by_price(item: StockItem) -> tuple[float, float, float, float]:
    """Sort key of the best item; what is not stated comes last."""
    costs = (item.price, item.tolerance, item.tempco)
    price, tolerance, tempco = (inf if cost is None else cost for cost in costs)
    return price, tolerance, tempco, -(item.power_rating or 0.0)
