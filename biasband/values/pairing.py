"""Offers pairs in series and parallel for resistors whose value is awkward; they are never chosen."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from biasband.errors import UsageError
from biasband.parts.pairs import Pair, against, pairs, pairs_among
from biasband.parts.series import Series, nearest, nearest_among
from biasband.parts.stock import demand_of, values_in_stock
from biasband.stage import Resistor, Stage
from biasband.values.ideal import Step

OFFERED = 3
"""Pairs shown for a resistor."""


@dataclass(frozen=True)
class Offer:
    """Pairs that come near the wanted value [Ω] of a resistor, the best first, and what speaks against it."""

    name: str
    wanted: float
    pairs: tuple[Pair, ...]
    against: tuple[str, ...]


def offers(stage: Stage, steps: Mapping[str, Step], series: Mapping[str, Series]) -> Iterator[Offer]:
    """An offer for every resistor that asks for pairs: near its value, or its ideal one where it is free.

    A value that no pair of what there is comes near has no offer.
    """
    for resistor in stage.resistors:
        wanted = resistor.value or (steps[resistor.name].ohms if resistor.name in steps else None)
        if resistor.pairs and wanted is not None:
            yield from _offer(stage, resistor, wanted, series[resistor.series])


def _offer(stage: Stage, resistor: Resistor, wanted: float, series: Series) -> Iterator[Offer]:
    stock = None if stage.stock is None else values_in_stock(stage.stock, demand_of(resistor))
    try:
        if stock is None:
            single = nearest(series, wanted)
            found = pairs(
                series, wanted, tolerance=resistor.tolerance, tempco=resistor.tempco, count=OFFERED
            )
        else:
            single = nearest_among(stock, wanted, name="stock")
            found = pairs_among(
                stock, wanted, tolerance=resistor.tolerance, tempco=resistor.tempco, count=OFFERED
            )
    except UsageError:  # nothing in reach of a pair
        return
    yield Offer(resistor.name, wanted, found, against(found[0], single))
