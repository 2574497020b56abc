"""Offers pairs in series and parallel for resistors whose value is awkward; they are never chosen."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from biasband.errors import UsageError
from biasband.parts.drawer import Drawer, Stated
from biasband.parts.pair_reasons import against
from biasband.parts.pairs import Pair
from biasband.parts.series import Series
from biasband.parts.stock import demand_of
from biasband.quantity import Kind, format_quantity
from biasband.stage import Resistor, Stage
from biasband.values.ideal import Step

OFFERED = 3
"""Pairs shown for a resistor."""


@dataclass(frozen=True)
class Offer:
    """Pairs that come near the wanted value [Ω] of a resistor, the best first, and what speaks against it.

    Where there are none, `against` says why.
    """

    name: str
    wanted: float
    pairs: tuple[Pair, ...]
    against: tuple[str, ...]

    @property
    def warning(self) -> str:
        """That there are no pairs, and why; empty where there are."""
        if self.pairs:
            return ""
        wanted = format_quantity(self.wanted, Kind.RESISTANCE)
        return f"{self.name}: no pairs to offer for {wanted}: {'; '.join(self.against)}"


def offers(stage: Stage, steps: Mapping[str, Step], series: Mapping[str, Series]) -> Iterator[Offer]:
    """An offer for every resistor that asks for pairs: near its value, or its ideal one where it is free.

    A value that no pair of what there is comes near has one without pairs.
    """
    for resistor in stage.resistors:
        wanted = resistor.value or (steps[resistor.name].ohms if resistor.name in steps else None)
        if resistor.pairs and wanted is not None:
            yield _offer(resistor, wanted, _drawer(stage, resistor, series[resistor.series]))


def _drawer(stage: Stage, resistor: Resistor, series: Series) -> Drawer:
    tolerance = resistor.tolerance if resistor.tolerance_stated else None
    usual = Stated(tolerance=tolerance, tempco=resistor.tempco or None)
    return Drawer(series=series, usual=usual, stock=stage.stock, demand=demand_of(resistor))


def _offer(resistor: Resistor, wanted: float, drawer: Drawer) -> Offer:
    try:
        found = drawer.pairs(wanted, count=OFFERED)
    except UsageError as error:  # nothing in reach of a pair
        return Offer(resistor.name, wanted, (), (f"{drawer.name}: {error}",))
    if not found:
        return Offer(resistor.name, wanted, (), (f"{drawer.name} has one piece alone",))
    return Offer(resistor.name, wanted, found, against(found[0], drawer.nearest(wanted)))
