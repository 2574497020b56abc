"""Which pieces of the stock list values that are given use up, and what is left for those to choose."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from biasband.parts.allotment import allot, enough_in_stock
from biasband.parts.stock import Demand, demand_of
from biasband.stage import Resistor, Stage, Stock


@dataclass(frozen=True)
class Pieces:
    """A stock list (None: there is none, nothing runs out) and who draws on it.

    `claimed` are the values [Ω] of resistors that have one, for which there is a piece, and `claims` what
    these resistors demand; `demands` are those of the resistors to be chosen.
    """

    stock: Stock | None
    claimed: tuple[float, ...]
    claims: tuple[Demand, ...]
    demands: tuple[Demand, ...]

    def enough(self, values: Sequence[float]) -> bool:
        """Whether there is a piece for every value [Ω] to be chosen, beside those that are claimed."""
        if self.stock is None:
            return True
        every = (*self.claimed, *values)
        shared = {ohms for ohms in values if every.count(ohms) > 1}
        if not shared:
            return True  # of a value that one resistor has there is a piece anyway
        drawn = [(v, d) for v, d in zip(every, (*self.claims, *self.demands), strict=True) if v in shared]
        return enough_in_stock(self.stock, [ohms for ohms, _ in drawn], [demand for _, demand in drawn])


def pieces_for(stage: Stage, names: Sequence[str]) -> Pieces:
    """Say what the resistors `names`, whose values are to be chosen, may draw on.

    A value of the stage file that the list does not have, or has too few pieces of, is taken to come from
    elsewhere as far as that goes, and claims nothing.
    """
    demands = tuple(demand_of(stage.resistor(name)) for name in names)
    if stage.stock is None:
        return Pieces(None, (), (), demands)
    fixed = [each for each in stage.resistors if each.value is not None and each.name not in names]
    claiming = _served(stage.stock, {each: each.value or 0.0 for each in fixed})
    return Pieces(stage.stock, tuple(claiming.values()), tuple(map(demand_of, claiming)), demands)


def unserved(stage: Stage, kept: Mapping[str, float]) -> tuple[str, ...]:
    """Name the resistors for which no piece is left, of those to be `kept` at these values [Ω]."""
    if stage.stock is None:
        return ()
    pieces = pieces_for(stage, tuple(kept))
    values = (*pieces.claimed, *kept.values())
    found = allot(stage.stock, values, (*pieces.claims, *pieces.demands))[len(pieces.claimed) :]
    return tuple(name for name, item in zip(kept, found, strict=True) if item is None)


def _served(stock: Stock, values: Mapping[Resistor, float]) -> dict[Resistor, float]:
    """The resistors, of those with these values [Ω], that get a piece, with their values."""
    found = allot(stock, tuple(values.values()), tuple(map(demand_of, values)))
    return {each: ohms for (each, ohms), item in zip(values.items(), found, strict=True) if item is not None}
