"""Limits over ambient temperature: where each first fails on the way from one end of a walk to the other."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import isfinite
from typing import Literal

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import Quantity
from biasband.margins.checks import Standing
from biasband.margins.records import NAN, Side
from biasband.margins.requirements import limits_of
from biasband.quantity import Kind
from biasband.stage import Requirement
from biasband.variation.corners import Corners
from biasband.variation.sweep import without_point

Ending = Literal["holds", "fails", "fails at start", "runaway", "unsolved", "not known", "not swept"]

EXACT = 1e-4
"""[K] A temperature of failure is found this exactly."""

_ENDINGS: Mapping[Region, Ending] = {Region.RUNAWAY: "runaway", Region.UNSOLVED: "unsolved"}


@dataclass(frozen=True)
class HeldLimit:
    """A limit as the worst case meets it: the end of a measure's range that may not pass `bound` [SI].

    `limit` is as it was required, NaN for a standing check, whose measure is its slack. `lower` says that the
    lowest value counts.
    """

    id: str
    quantity: str
    kind: Kind
    limit: float
    side: Side
    measure: Quantity
    lower: bool
    bound: float

    @property
    def standing(self) -> bool:
        """Whether this is a standing check."""
        return not self.id

    def margin(self, found: Corners) -> float:
        """How far the worst value is from the bound, negative beyond it; NaN where none is known."""
        if without_point(found) is not None:
            return NAN
        ends = found.ranges[self.measure.name]
        return ends.low.value - self.bound if self.lower else self.bound - ends.high.value


def required_limits(
    requirements: Sequence[Requirement], vocabulary: Mapping[str, Quantity], nominal: Mapping[str, float]
) -> tuple[HeldLimit, ...]:
    """Every limit of the requirements, whatever they are judged by."""
    return tuple(
        _required(requirement, side, limit, vocabulary[requirement.quantity], nominal)
        for requirement in requirements
        for side, limit in limits_of(requirement)
    )


def held_limits(
    requirements: Sequence[Requirement],
    standing: Standing,
    vocabulary: Mapping[str, Quantity],
    nominal: Mapping[str, float],
) -> tuple[HeldLimit, ...]:
    """Every limit of the requirements, whatever they are judged by, and every standing check made."""
    return (*required_limits(requirements, vocabulary, nominal), *_checked(standing))


def _required(
    requirement: Requirement, side: Side, limit: float, quantity: Quantity, nominal: Mapping[str, float]
) -> HeldLimit:
    """One limit; one on the magnitude of what inverts is a limit of the other sign on the other side."""
    inverted = quantity.by_magnitude and nominal[quantity.name] < 0.0
    return HeldLimit(
        id=requirement.id, quantity=quantity.name, kind=quantity.kind, limit=limit, side=side,
        measure=quantity, lower=(side == "at_least") is not inverted, bound=-limit if inverted else limit,
    )  # fmt: skip


def _checked(standing: Standing) -> Iterator[HeldLimit]:
    for check in standing.made:
        yield HeldLimit("", check.name, check.value.kind, NAN, check.side, check.slack, True, 0.0)


@dataclass(frozen=True)
class Failure:
    """How a walk along the ambient temperature ends for a limit, and at what temperature [K].

    NaN where the limit holds over the whole walk, is not known where it starts, or where there is no walk.
    """

    ending: Ending
    temperature: float = NAN


@dataclass(frozen=True)
class Seen:
    """A temperature [K], the margin there, and the region of corners that are no operating points."""

    temperature: float
    margin: float
    region: Region | None = None


def first_failure(
    walk: Sequence[Seen], look: Callable[[float], Seen], last_point: Callable[[float, float], float]
) -> Failure:
    """Find where the margin first turns negative on a walk, or no worst case is known any more.

    `walk` holds the margin at temperatures in the order of walking; between the first that fails and the
    one before it, `look` is asked until the temperature is known to 1e-4 K. `last_point` is the last
    temperature with operating points in every corner, from one that has them to one that has not. What
    fails and holds again between two temperatures of the walk is not seen.
    Source: Brent's method, as scipy.optimize.brentq has it.
    """
    start = walk[0]
    if not start.margin >= 0.0:
        return _failing_at_start(start)
    for inner, outer in pairwise(walk):
        if outer.region is not None:
            last = look(last_point(inner.temperature, outer.temperature))
            if last.margin >= 0.0:
                return Failure(_ENDINGS[outer.region], last.temperature)
            return _between(inner, last, look)
        if not outer.margin >= 0.0:
            return _between(inner, outer, look)
    return Failure("holds" if len(walk) > 1 else "not swept")


def _failing_at_start(start: Seen) -> Failure:
    if start.region is not None:
        return Failure(_ENDINGS[start.region], start.temperature)
    return Failure("fails at start", start.temperature) if start.margin < 0.0 else Failure("not known")


def _between(inner: Seen, outer: Seen, look: Callable[[float], Seen]) -> Failure:
    """The first temperature beyond which the margin is negative or not known, between two."""
    from scipy.optimize import brentq

    ends = {inner.temperature: inner, outer.temperature: outer}
    beyond = -(abs(inner.margin) or 1.0)

    def signed(temperature: float) -> float:
        margin = (ends.get(temperature) or look(temperature)).margin
        return margin if isfinite(margin) else beyond

    found = float(brentq(signed, inner.temperature, outer.temperature, xtol=EXACT))
    return Failure("fails" if isfinite(outer.margin) else "not known", found)
