"""Choosing buyable values: the nearest of the series, the rest designed anew after each snap.

The choice stands above the margins because a later way of choosing judges by them.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

from biasband.errors import PhysicallyImpossible
from biasband.parts.series import Series, nearest
from biasband.quantity import Kind, format_quantity
from biasband.stage import Stage, Target
from biasband.values.aim import Miss
from biasband.values.device import hand, refined
from biasband.values.ideal import Ideal, Step, ideal


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
    """A stage with a value for every resistor, how each came about, and what was missed."""

    stage: Stage
    parts: tuple[PartChoice, ...]
    warnings: tuple[str, ...]

    @property
    def frozen(self) -> int:
        """How many values the stage file gave."""
        return sum(not part.chosen for part in self.parts)

    @property
    def chosen(self) -> int:
        """How many values were chosen in this run."""
        return sum(part.chosen for part in self.parts)


def choose(stage: Stage, series: Mapping[str, Series]) -> Design:
    """Give every free resistor a preferred value.

    Raises PhysicallyImpossible where no positive resistors meet the target.
    """
    fixed = {r.name: r.value for r in stage.resistors if r.value is not None}
    target = stage.target
    if target is None or len(fixed) == len(stage.resistors):
        parts = tuple(PartChoice(name=name, value=value, chosen=False) for name, value in fixed.items())
        return Design(stage, parts, tuple(_frozen_away(stage, fixed)))
    by_hand = _hand_steps(stage, target, fixed)
    exact = ideal(stage, target, fixed, refined(stage))
    values, warnings = _snapped(stage, target, fixed, exact, series)
    parts = tuple(
        PartChoice(
            name=r.name,
            value=values[r.name],
            chosen=r.name not in fixed,
            hand=by_hand.get(r.name),
            ideal=exact.steps.get(r.name),
        )
        for r in stage.resistors
    )
    return Design(with_values(stage, values), parts, (*_missed(exact.aim.missed, fixed), *warnings))


def with_values(stage: Stage, values: Mapping[str, float]) -> Stage:
    """The stage with these resistor values [Ω]."""
    return replace(stage, resistors=tuple(replace(r, value=values[r.name]) for r in stage.resistors))


def _hand_steps(stage: Stage, target: Target, fixed: Mapping[str, float]) -> Mapping[str, Step]:
    """The hand column; empty where the hand formulas, unlike the real model, find no positive value."""
    try:
        return ideal(stage, target, fixed, hand(stage)).steps
    except PhysicallyImpossible:
        return {}


def _snapped(
    stage: Stage, target: Target, fixed: Mapping[str, float], exact: Ideal, series: Mapping[str, Series]
) -> tuple[dict[str, float], list[str]]:
    """Snap the free resistors from the emitter to the base, the rest designed anew after each."""
    values, steps, warnings = dict(fixed), exact.steps, []
    free = [resistor for resistor in reversed(stage.resistors) if resistor.name not in fixed]
    for resistor in free:
        values[resistor.name] = nearest(series[resistor.series], steps[resistor.name].ohms).chosen
        if resistor is free[-1]:
            break
        try:
            steps = {**steps, **ideal(stage, target, values, refined(stage)).steps}
        except PhysicallyImpossible:
            warnings.append(
                f"{resistor.name}: with its preferred value the others cannot meet the target; "
                "they are snapped from their ideal values"
            )
    return values, warnings


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
