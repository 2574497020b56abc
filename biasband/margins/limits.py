"""Limits as a worst case and as boards meet them: which end of which measure may not pass what."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from biasband.boards.tally import Bound
from biasband.circuit.quantities import Quantity
from biasband.margins.checks import Standing
from biasband.margins.records import NAN, Side
from biasband.margins.requirements import limits_of
from biasband.quantity import Kind
from biasband.stage import Requirement
from biasband.variation.corners import Corners
from biasband.variation.sweep import without_point


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

    @property
    def as_bound(self) -> Bound:
        """The limit as boards are held to it."""
        if self.lower:
            return Bound(self.measure.name, low=self.bound)
        return Bound(self.measure.name, high=self.bound)

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
