"""Hands out the pieces of a stock list: to each resistor one that serves, the cheapest together."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import repeat

from biasband.parts.stock import Demand, by_price
from biasband.stage import Stock, StockItem


def allot(stock: Stock, values: Sequence[float], demands: Sequence[Demand]) -> tuple[StockItem | None, ...]:
    """Hand out one piece to each of several resistors, by value [Ω] and demand; None where none is left.

    As many resistors as can be get a piece, and what they get is together the cheapest. The pieces are
    offered from the best down (see `by_price`), each to whoever can use it, where need be by another
    piece's changing hands: one that has found a place keeps a place, and is never given up for a worse one.

    Worked case: of one piece at 0.01 and one at 0.50, two resistors of any tolerance get both: 0.51.
    Source: J. Edmonds, "Matroids and the greedy algorithm", Math. Programming 1 (1971), of the sets of
    pieces that have a place; H. Kuhn's augmenting paths, Naval Res. Logist. Quart. 2 (1955); memory.
    """
    seekers = list(zip(values, demands, strict=True))
    wanted = set(values)
    some = sorted((item for item in stock.items if item.value in wanted), key=by_price)
    holders: dict[int, StockItem] = {}
    for item in some:
        count = len(seekers) if item.quantity is None else min(item.quantity, len(seekers))
        for piece in repeat(item, count):
            _place(piece, seekers, holders, set())
    return tuple(holders.get(place) for place in range(len(seekers)))


def enough_in_stock(stock: Stock, values: Sequence[float], demands: Sequence[Demand]) -> bool:
    """Whether the list has a part for each of several resistors at once, by value [Ω] and demand.

    Worked case: one piece of 10 kΩ at 1 % and one at 5 % are enough for a 1 % and a 5 % resistor, not for
    two of 1 %.
    """
    return None not in allot(stock, values, demands)


def _place(
    piece: StockItem,
    seekers: Sequence[tuple[float, Demand]],
    holders: dict[int, StockItem],
    asked: set[int],
) -> bool:
    """Find a place for a piece, a free one or one whose piece can move on; whether there is one."""
    alike = (place for place, (value, _) in enumerate(seekers) if value == piece.value)
    fitting = [place for place in alike if seekers[place][1].met_by(piece)]
    for place in sorted(fitting, key=lambda place: place in holders):
        if place in asked:
            continue
        asked.add(place)
        if place not in holders or _place(holders[place], seekers, holders, asked):
            holders[place] = piece
            return True
    return False
