"""A drawer that parts are taken from: a whole series, or what is in stock; single values and pairs."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import chain, islice, repeat
from math import nan

from biasband.parts.pairs import Pair, pairs, pairs_among
from biasband.parts.series import Series, Snap, nearest, nearest_among
from biasband.parts.stock import Demand, by_price
from biasband.stage import Stock, StockItem


@dataclass(frozen=True, kw_only=True)
class Stated:
    """What a part states: tolerance (a fraction), tempco [1/K]; None where it does not.

    `alone` says that there is one piece of it.
    """

    tolerance: float | None = None
    tempco: float | None = None
    alone: bool = False


@dataclass(frozen=True, kw_only=True)
class Drawer:
    """Parts of a `series`, all of them `usual`; or those of a `stock` list that meet a `demand`.

    What an item of the list does not state is taken to be `usual`: a list may leave out what is the same for
    the whole drawer.
    """

    series: Series
    usual: Stated
    stock: Stock | None = None
    demand: Demand

    @property
    def name(self) -> str:
        """What messages call it."""
        return self.series.name if self.stock is None else "stock"

    @cached_property
    def items(self) -> Mapping[float, Sequence[StockItem]]:
        """The items in stock that serve, by value [Ω], ascending, the best first."""
        found: dict[float, list[StockItem]] = {}
        for item in sorted(self.stock.items if self.stock else (), key=by_price):
            if self.demand.met_by(item):
                found.setdefault(item.value, []).append(item)
        return dict(sorted(found.items()))

    def nearest(self, ohms: float) -> Snap:
        """Find the single value nearest to a resistance [Ω]."""
        if self.stock is None:
            return nearest(self.series, ohms)
        return nearest_among(tuple(self.items), ohms, name=self.name)

    def kind(self, ohms: float) -> Stated:
        """Say what the part to take for a value [Ω] states."""
        return self.usual if self.stock is None else self._stated(self.items.get(ohms, ())[:1])

    def pairs(self, ohms: float, *, count: int) -> tuple[Pair, ...]:
        """Find the pairs that come nearest to a resistance [Ω], the best first.

        Tolerances and tempcos are NaN where one of the parts does not state its own. A value of which there
        is one piece does not stand in a pair with itself; where the two best pieces of a value differ, the
        wider figures count. Empty where the list holds one piece alone.

        Raises UsageError where no pair comes near.
        """
        if self.stock is None:
            tolerance, tempco = self.usual.tolerance or 0.0, self.usual.tempco or 0.0
            found = pairs(self.series, ohms, tolerance=tolerance, tempco=tempco, count=count)
            return tuple(_told(pair, [self.usual]) for pair in found)
        kinds = {value: self._stated(_first_two(items)) for value, items in self.items.items()}
        found = pairs_among(
            tuple(kinds),
            ohms,
            tolerance=[kind.tolerance or 0.0 for kind in kinds.values()],
            tempco=[kind.tempco or 0.0 for kind in kinds.values()],
            count=count,
            alone=[value for value, kind in kinds.items() if kind.alone],
        )
        return tuple(_told(pair, [kinds[pair.first], kinds[pair.second]]) for pair in found)

    def _stated(self, pieces: Sequence[StockItem]) -> Stated:
        """What one piece states, or two together: the wider figures, None where either says nothing."""
        return Stated(
            tolerance=_widest(_or_usual(piece.tolerance, self.usual.tolerance) for piece in pieces),
            tempco=_widest(_or_usual(piece.tempco, self.usual.tempco) for piece in pieces),
            alone=len(pieces) == 1,
        )


def _first_two(items: Sequence[StockItem]) -> list[StockItem]:
    """The item of each of the first two pieces of a value; one where there is but one piece."""
    pieces = (repeat(each, 2 if each.quantity is None else min(each.quantity, 2)) for each in items)
    return list(islice(chain.from_iterable(pieces), 2))


def _or_usual(stated: float | None, usual: float | None) -> float | None:
    return usual if stated is None else stated


def _widest(figures: Iterable[float | None]) -> float | None:
    every = list(figures)
    known = [figure for figure in every if figure is not None]
    return max(known) if known and len(known) == len(every) else None


def _told(pair: Pair, kinds: Sequence[Stated]) -> Pair:
    """A pair with NaN for what its parts do not state."""
    if any(kind.tolerance is None for kind in kinds):
        pair = replace(pair, tolerance_low=nan, tolerance_high=nan, rss_low=nan, rss_high=nan)
    if any(kind.tempco is None for kind in kinds):
        pair = replace(pair, tempco=nan, tempco_rss=nan)
    return pair

