"""Keeps values that the user gives for this run: the stage file stays as it is."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

from biasband.errors import UsageError
from biasband.parts.series import LARGEST, SMALLEST, Series
from biasband.quantity import Kind, format_exact
from biasband.stage import Stage
from biasband.values.pieces import unserved
from biasband.values.shelf import shelves


def keep(stage: Stage, values: Mapping[str, float], series: Mapping[str, Series]) -> Stage:
    """The stage with these values [Ω] kept for resistors that it leaves free.

    Raises UsageError with everything that is wrong: a resistor that the stage does not have or gives a
    value, a value that is not in the resistor's series, or, where there is a stock list, not in stock, or
    with too few pieces there for all that have it.
    """
    problems = [
        problem for name, value in values.items() for problem in _problems(stage, name, value, series)
    ]
    problems = problems or [*_too_few(stage, values)]
    if problems:
        raise UsageError("\n".join(problems))
    resistors = tuple(
        replace(r, value=values[r.name], kept=True) if r.name in values else r for r in stage.resistors
    )
    return replace(stage, resistors=resistors)


def _problems(stage: Stage, name: str, value: float, series: Mapping[str, Series]) -> Iterator[str]:
    free = {resistor.name for resistor in stage.resistors if resistor.value is None}
    known = {resistor.name for resistor in stage.resistors}
    if name not in known:
        yield f"{name}: no such resistor in this stage; allowed: {', '.join(sorted(free)) or 'none'}"
        return
    if name not in free:
        yield f"{name}: the stage file gives it a value: change it there"
        return
    if not SMALLEST <= value <= LARGEST:  # NaN fails this too
        yield f"{name}: a resistance must be above 0 and finite; read {value:g} Ω"
        return
    shelf = shelves(stage, series)[name]
    nearest = shelf.nearest(value)
    if nearest != value:
        where = shelf.series.name if shelf.in_stock is None else "stock"
        given, nearer = (format_exact(ohms, Kind.RESISTANCE) for ohms in (value, nearest))
        hint = "a value that need not be is written in the stage file"
        yield f"{name}: {given} is not in {where}, the nearest there is {nearer} ({hint})"


def _too_few(stage: Stage, values: Mapping[str, float]) -> Iterator[str]:
    """Say which values have too few pieces in stock for all the resistors that are to have them."""
    given = {resistor.name: resistor.value for resistor in stage.resistors if resistor.value is not None}
    for name in unserved(stage, values):
        others = [other for other, value in {**given, **values}.items() if value == values[name]]
        shown = format_exact(values[name], Kind.RESISTANCE)
        yield f"{name}: too few pieces of {shown} in stock for {', '.join(others)}"
