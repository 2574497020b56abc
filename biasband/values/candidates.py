"""Candidate sets: for every free resistor the values around its ideal one, all combined."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import product
from math import prod

from biasband.errors import Fault, PhysicallyImpossible, UsageError
from biasband.quantity import Kind, format_quantity
from biasband.stage import Stage
from biasband.values.ideal import Ideal
from biasband.values.pieces import pieces_for
from biasband.values.shelf import FAR, Shelf

MOST_SETS = 200_000
"""Sets of values that are compared at most: some ten seconds."""

Set = tuple[float, ...]
"""A value [Ω] for each of the free resistors, in the order of their shelves."""


def candidate_sets(stage: Stage, exact: Ideal, room: Mapping[str, Shelf], home: Set) -> list[Set]:
    """The sets around the ideal values, ascending, and `home`, which may lie outside them.

    A set that the stock list has too few pieces for, beside those of the values given, is none. Raises
    PhysicallyImpossible where no set is left, UsageError where there are more than 200 000.
    """
    around = [shelf.around(exact.steps[name].ohms) for name, shelf in room.items()]
    count = prod(map(len, around))
    if count > MOST_SETS:
        hint = "lower search_steps, or give some resistors their value"
        raise UsageError(f"{count} sets of values to compare; at most {MOST_SETS}: {hint}")
    pieces = pieces_for(stage, tuple(room))
    sets = [each for each in sorted({*product(*around), home}) if pieces.enough(each)]
    if not sets:
        raise PhysicallyImpossible((_too_few_pieces(stage, room),))
    return sets


def stock_warnings(
    stage: Stage, exact: Ideal, room: Mapping[str, Shelf], values: Mapping[str, float]
) -> Iterator[str]:
    """What a stock list cannot give: enough pieces for the values [Ω], or any near the ideal ones."""
    if not pieces_for(stage, tuple(room)).enough([values[name] for name in room]):
        yield "the stock list has too few pieces of a value that more than one resistor has"
    for name, shelf in room.items():
        wanted = exact.steps[name].ohms
        off = shelf.nearest(wanted) / wanted - 1.0
        if shelf.in_stock is not None and abs(off) > FAR:
            ideal_ohms = format_quantity(wanted, Kind.RESISTANCE)
            yield f"{name}: the nearest in stock to its ideal {ideal_ohms} is {100 * off:+.0f} % off"


def _too_few_pieces(stage: Stage, room: Mapping[str, Shelf]) -> Fault:
    path = stage.stock.file.path if stage.stock else ""
    problem = f"no set of values near the ideal ones has enough pieces for {', '.join(room)}"
    if len(room) < len(stage.resistors):
        problem += " beside the values given"
    return Fault(path, None, "quantity", problem, hint="raise search_steps, or leave the stock list out")
