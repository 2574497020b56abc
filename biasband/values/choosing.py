"""Choosing buyable values: for the best worst case, or simply nearest to the ideal values.

The choice stands above the margins because it judges by them.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from biasband.errors import PhysicallyImpossible
from biasband.parts.series import Series
from biasband.quantity import Kind, format_quantity
from biasband.stage import Stage, Target
from biasband.values.aim import Miss
from biasband.values.candidates import candidate_sets, stock_warnings
from biasband.values.device import hand, refined
from biasband.values.ideal import Ideal, Step, ideal
from biasband.values.joint import Contest, Progress, contest, silent
from biasband.values.pairing import Offer, offers
from biasband.values.shelf import Shelf, shelves
from biasband.values.snapping import snapped


@dataclass(frozen=True, kw_only=True)
class PartChoice:
    """One resistor: its hand and ideal formulas where it was free, and the value that was taken [Ω]."""

    name: str
    value: float
    chosen: bool
    hand: Step | None = None
    ideal: Step | None = None


@dataclass(frozen=True)
class Design:
    """A stage with a value for every resistor, how each came about, and what was missed.

    `contest` is the comparison that the values won; None where they were snapped to the nearest, or
    given. `offers` are pairs for the resistors that ask for them.
    """

    stage: Stage
    parts: tuple[PartChoice, ...]
    warnings: tuple[str, ...]
    contest: Contest | None = None
    offers: tuple[Offer, ...] = ()

    @property
    def frozen(self) -> int:
        """How many values the stage file gave."""
        return len(self.parts) - self.chosen - self.kept

    @property
    def kept(self) -> int:
        """How many values were given for this run only."""
        return sum(resistor.kept for resistor in self.stage.resistors)

    @property
    def chosen(self) -> int:
        """How many values were chosen in this run."""
        return sum(part.chosen for part in self.parts)


def choose(stage: Stage, series: Mapping[str, Series], *, progress: Progress = silent) -> Design:
    """Give every free resistor a value that can be bought.

    Raises PhysicallyImpossible where no positive resistors meet the target, or the stock list has no parts
    for them; UsageError where more than 200 000 sets of values would have to be compared.
    """
    fixed = {r.name: r.value for r in stage.resistors if r.value is not None}
    target = stage.target
    if target is None or len(fixed) == len(stage.resistors):
        parts = tuple(PartChoice(name=name, value=value, chosen=False) for name, value in fixed.items())
        paired = tuple(offers(stage, {}, series))
        return Design(stage, parts, tuple(_frozen_away(stage, fixed)), offers=paired)
    exact = ideal(stage, target, fixed, refined(stage))
    missed = _missed(exact.aim.missed, fixed)
    room = shelves(stage, series)
    found, (values, warnings) = None, snapped(stage, target, fixed, exact, room)
    if stage.snapping == "margin":
        found = _compared(stage, exact, room, values, progress)
        values = {**fixed, **dict(zip(found.names, found.contenders[0].values, strict=True))}
        warnings = []
    warnings += stock_warnings(stage, exact, room, values)
    parts = tuple(_parts(stage, target, fixed, exact, values))
    paired = tuple(offers(stage, exact.steps, series))
    return Design(with_values(stage, values), parts, (*missed, *warnings), found, paired)


def with_values(stage: Stage, values: Mapping[str, float]) -> Stage:
    """The stage with these resistor values [Ω]."""
    return replace(stage, resistors=tuple(replace(r, value=values[r.name]) for r in stage.resistors))


def _parts(
    stage: Stage, target: Target, fixed: Mapping[str, float], exact: Ideal, values: Mapping[str, float]
) -> Iterator[PartChoice]:
    by_hand = _hand_steps(stage, target, fixed)
    for r in stage.resistors:
        yield PartChoice(
            name=r.name,
            value=values[r.name],
            chosen=r.name not in fixed,
            hand=by_hand.get(r.name),
            ideal=exact.steps.get(r.name),
        )


def _hand_steps(stage: Stage, target: Target, fixed: Mapping[str, float]) -> Mapping[str, Step]:
    """The hand column; empty where the hand formulas, unlike the real model, find no positive value."""
    try:
        return ideal(stage, target, fixed, hand(stage)).steps
    except PhysicallyImpossible:
        return {}


def _compared(
    stage: Stage, exact: Ideal, room: Mapping[str, Shelf], nearest: Mapping[str, float], progress: Progress
) -> Contest:
    """Hold the sets around the ideal values against each other."""
    names, home = tuple(room), tuple(nearest[name] for name in room)
    sets = candidate_sets(stage, exact, room, home)
    place = sets.index(home) if home in sets else None
    return contest(stage, names, np.array(sets), nearest=place, progress=progress)


def _frozen_away(stage: Stage, fixed: Mapping[str, float]) -> Iterator[str]:
    """By how much a stage whose values are all given misses its target."""
    if stage.target is None:
        return
    try:
        exact = ideal(stage, stage.target, fixed, refined(stage))
    except PhysicallyImpossible:
        yield "the target cannot be met near the values given: they leave the transistor no such point"
        return
    yield from _missed(exact.aim.missed, fixed)


def _missed(misses: tuple[Miss, ...], fixed: Mapping[str, float]) -> Iterator[str]:
    """What the fixed resistors make the ideal stage miss, and by how much."""
    held = ", ".join(fixed)
    for miss in misses:
        kind = Kind.CURRENT if miss.quantity == "collector_current" else Kind.VOLTAGE
        reached, wished = (format_quantity(value, kind) for value in (miss.reached, miss.wished))
        no_freedom = f"the fixed {held} leave no freedom for {wished}"
        yield f"{miss.quantity}: {no_freedom}: the ideal stage has {reached}"
