"""Choosing buyable values: for the best worst case, or simply nearest to the ideal values.

The choice stands above the margins because it judges by them.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from biasband.circuit.quantities import LOW_CORNER
from biasband.errors import PhysicallyImpossible
from biasband.parts.series import Series
from biasband.quantity import Kind, format_quantity
from biasband.stage import Stage, Target
from biasband.values.aim import Miss
from biasband.values.candidates import candidate_sets, stock_warnings
from biasband.values.capacitors import CapacitorChoice, choose_capacitors, with_capacitances
from biasband.values.device import hand, refined
from biasband.values.ideal import Ideal, Step, ideal
from biasband.values.joint import FINALISTS, Contest, Progress, contest, silent
from biasband.values.pairing import Offer, offers
from biasband.values.shelf import Shelf, shelves
from biasband.values.snapping import snapped

Origin = Literal["given", "kept", "chosen"]
"""Where a resistor's value is from: the stage file, the caller for this run, or the choice."""


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
    given. `offers` are pairs for the resistors that ask for them. `capacitors` are those of the stage, chosen
    after its resistors.
    """

    stage: Stage
    parts: tuple[PartChoice, ...]
    warnings: tuple[str, ...]
    contest: Contest | None = None
    offers: tuple[Offer, ...] = ()
    capacitors: tuple[CapacitorChoice, ...] = ()

    @property
    def frozen(self) -> int:
        """How many values the stage file gave."""
        return len(self.parts) + len(self.capacitors) - self.chosen - self.kept

    @property
    def kept(self) -> int:
        """How many values were given for this run only."""
        return sum(resistor.kept for resistor in self.stage.resistors)

    def origin_of(self, name: str) -> Origin:
        """Whether the stage file gives a resistor's value, it is kept for this run, or was chosen in it."""
        if self.stage.resistor(name).kept:
            return "kept"
        return "chosen" if any(part.chosen for part in self.parts if part.name == name) else "given"

    def series_of(self, name: str) -> str | None:
        """The series that a resistor's value is from; None where the file gives it or it is from stock."""
        given = self.origin_of(name) == "given"
        return None if given or self.stage.stock is not None else self.stage.resistor(name).series

    @property
    def chosen(self) -> int:
        """How many values were chosen in this run."""
        return sum(part.chosen for part in self.parts) + sum(each.chosen for each in self.capacitors)


def choose(
    stage: Stage, series: Mapping[str, Series], *, finalists: int = FINALISTS, progress: Progress = silent
) -> Design:
    """Give every free resistor a value that can be bought, then every free capacitor.

    `finalists` sets of values are held against everything; of a single one, the best at the corners.

    Raises PhysicallyImpossible where no positive resistors meet the target, the stock list has no parts
    for them, or no capacitors meet the lowest frequency; UsageError where more than 200 000 sets of values
    would have to be compared.
    """
    design = _choose_resistors(_with_capacitors_short(stage), series, finalists, progress)
    if not stage.capacitors:
        return design
    valued = replace(design.stage, capacitors=stage.capacitors, requirements=stage.requirements)
    coupling = choose_capacitors(valued, series)
    return replace(
        design,
        stage=with_capacitances(valued, {choice.name: choice.value for choice in coupling.capacitors}),
        warnings=(*design.warnings, *coupling.warnings),
        capacitors=coupling.capacitors,
    )


def _with_capacitors_short(stage: Stage) -> Stage:
    """The stage that resistors are chosen for: capacitors follow them, so nothing depends on those yet."""
    asked = tuple(requirement for requirement in stage.requirements if requirement.quantity != LOW_CORNER)
    return replace(stage, capacitors=(), requirements=asked) if stage.capacitors else stage


def _choose_resistors(
    stage: Stage, series: Mapping[str, Series], finalists: int, progress: Progress
) -> Design:
    fixed = {r.name: r.value for r in stage.resistors if r.value is not None}
    target = stage.target
    if target is None or len(fixed) == len(stage.resistors):
        parts = tuple(PartChoice(name=name, value=value, chosen=False) for name, value in fixed.items())
        given = Design(stage, parts, tuple(_frozen_away(stage, fixed)))
        return _with_offers(given, offers(stage, {}, series))
    exact = ideal(stage, target, fixed, refined(stage))
    missed = _missed(stage, exact.aim.missed)
    room = shelves(stage, series)
    found, (values, warnings) = None, snapped(stage, target, fixed, exact, room)
    if stage.snapping == "margin":
        found = _compared(stage, exact, room, values, finalists, progress)
        values = {**fixed, **dict(zip(found.names, found.contenders[0].values, strict=True))}
        warnings = []
    warnings += stock_warnings(stage, exact, room, values)
    parts = tuple(_parts(stage, target, fixed, exact, values))
    design = Design(with_values(stage, values), parts, (*missed, *warnings), found)
    return _with_offers(design, offers(stage, exact.steps, series))


def _with_offers(design: Design, found: Iterable[Offer]) -> Design:
    """The design with the pairs that resistors ask for; a warning for each that gets none."""
    every = tuple(found)
    warnings = tuple(offer.warning for offer in every if offer.warning)
    offered = tuple(offer for offer in every if offer.pairs)
    return replace(design, offers=offered, warnings=(*design.warnings, *warnings))


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
    stage: Stage,
    exact: Ideal,
    room: Mapping[str, Shelf],
    nearest: Mapping[str, float],
    finalists: int,
    progress: Progress,
) -> Contest:
    """Hold the sets around the ideal values against each other."""
    names, home = tuple(room), tuple(nearest[name] for name in room)
    sets = candidate_sets(stage, exact, room, home)
    place = sets.index(home) if home in sets else None
    return contest(stage, names, np.array(sets), nearest=place, finalists=finalists, progress=progress)


def _frozen_away(stage: Stage, fixed: Mapping[str, float]) -> Iterator[str]:
    """By how much a stage whose values are all given misses its target."""
    if stage.target is None:
        return
    try:
        exact = ideal(stage, stage.target, fixed, refined(stage))
    except PhysicallyImpossible:
        yield "the target cannot be met near the values given: they leave the transistor no such point"
        return
    yield from _missed(stage, exact.aim.missed)


def _missed(stage: Stage, misses: tuple[Miss, ...]) -> Iterator[str]:
    """What the values given, or kept for this run, make the ideal stage miss, and by how much."""
    valued = [resistor for resistor in stage.resistors if resistor.value is not None]
    given = ", ".join(resistor.name for resistor in valued if not resistor.kept)
    kept = ", ".join(resistor.name for resistor in valued if resistor.kept)
    held = " and ".join([f"{given} given"] * bool(given) + [f"{kept} kept"] * bool(kept))
    for miss in misses:
        kind = Kind.CURRENT if miss.quantity == "collector_current" else Kind.VOLTAGE
        reached, wished = (format_quantity(value, kind) for value in (miss.reached, miss.wished))
        yield f"{miss.quantity}: with {held} there is no freedom for {wished}: the ideal stage has {reached}"
