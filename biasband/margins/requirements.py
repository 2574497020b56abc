"""Requirements as margins: each limit is a row, judged by the method it names."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from biasband.boards.intervals import allowed_failures, yield_bound
from biasband.boards.sampling import Boards
from biasband.circuit.quantities import Quantity
from biasband.margins.records import NAN, Evidence, Margin, Side, share
from biasband.stage import Requirement
from biasband.variation.corners import Extreme


def requirement_margins(
    requirements: tuple[Requirement, ...], vocabulary: Mapping[str, Quantity], evidence: Evidence
) -> tuple[Margin, ...]:
    """A row for every limit of every requirement."""
    return tuple(
        _margin(requirement, side, limit, vocabulary[requirement.quantity], evidence)
        for requirement in requirements
        for side, limit in limits_of(requirement)
    )


def limits_of(requirement: Requirement) -> Iterator[tuple[Side, float]]:
    """The limits of a requirement, each with its side."""
    if requirement.at_least is not None:
        yield "at_least", requirement.at_least
    if requirement.at_most is not None:
        yield "at_most", requirement.at_most


@dataclass(frozen=True)
class _Side:
    """What was found on the side of one limit, inverting quantities turned positive."""

    nominal: float
    worst: Extreme
    rss: float
    boards: NDArray[np.float64]
    causes: Mapping[str, float]
    inverted: bool


def _found(quantity: Quantity, side: Side, evidence: Evidence) -> _Side:
    name = quantity.name
    nominal = evidence.nominal[name]
    inverted = quantity.by_magnitude and nominal < 0.0
    lower = (side == "at_least") is not inverted
    m = -1.0 if inverted else 1.0
    range_, interval = evidence.corners.ranges[name], evidence.rss[name]
    spread, causes = evidence.boards.spread[name], evidence.causes[name]
    worst = range_.low if lower else range_.high
    return _Side(
        nominal=m * nominal,
        worst=replace(worst, value=m * worst.value),
        rss=m * (interval.low if lower else interval.high),
        boards=m * (spread.lowest_in_use if lower else spread.highest_in_use).values,
        causes=causes.low if lower else causes.high,
        inverted=inverted,
    )


def _margin(
    requirement: Requirement, side: Side, limit: float, quantity: Quantity, evidence: Evidence
) -> Margin:
    found = _found(quantity, side, evidence)
    sign = 1.0 if side == "at_least" else -1.0
    at_corners = sign * (found.worst.value - limit)
    at_rss = sign * (found.rss - limit)
    boards = sign * (found.boards - limit)
    held, by_yield = int(np.sum(boards >= 0.0)), requirement.judged_by == "yield"
    batch = evidence.boards.boards_per_batch
    margins = {
        "corners": lambda: at_corners,
        "rss": lambda: max(at_rss, at_corners),
        "yield": lambda: _yield_margin(boards, requirement.yield_at_least, batch),
    }
    margin = margins[requirement.judged_by]()
    return Margin(
        id=requirement.id, quantity=quantity.name, kind=quantity.kind, limit=limit, side=side,
        judged_by=requirement.judged_by, nominal=found.nominal, corners=found.worst.value, rss=found.rss,
        yield_held=held / boards.size, yield_low=yield_bound(held, boards.size, boards_per_batch=batch),
        yield_at_least=requirement.yield_at_least if by_yield else NAN,
        margin=margin, margin_share=share(margin, sign * (found.nominal - limit)),
        passes_at_corners=at_corners >= 0.0, worst=found.worst, causes=found.causes,
        reason=requirement.reason,
        notes=tuple(_notes(requirement, found, at_rss < at_corners, evidence.boards)),
    )  # fmt: skip


def joint_yield(
    requirements: tuple[Requirement, ...], vocabulary: Mapping[str, Quantity], evidence: Evidence
) -> float:
    """The share of boards that hold every limit of every requirement at every point of use."""
    held = np.ones(evidence.boards.boards, dtype=bool)
    for requirement in requirements:
        for side, limit in limits_of(requirement):
            boards = _found(vocabulary[requirement.quantity], side, evidence).boards
            held &= (boards >= limit) if side == "at_least" else (boards <= limit)
    return float(np.mean(held))


def _yield_margin(boards: NDArray[np.float64], required: float, batch: int) -> float:
    """The margin of the first board that may not fail: its sign is the verdict of the yield bound.

    How many may fail counts in batches where `batch` boards share one (`yield_bound` says how).
    NaN where so few boards cannot show the required yield even if none of them fails, or where that
    board was not solved.
    """
    allowed = allowed_failures(boards.size, required, boards_per_batch=batch)
    if allowed < 0:
        return NAN
    decides = float(np.sort(np.where(np.isnan(boards), -np.inf, boards))[allowed])
    return decides if np.isfinite(decides) else NAN


def _notes(requirement: Requirement, found: _Side, rss_outside: bool, boards: Boards) -> Iterator[str]:
    if found.inverted:
        yield "inverting: judged by magnitude"
    if rss_outside:
        yield "RSS lies outside the corners" + (
            ": judged at the corner" if requirement.judged_by == "rss" else ""
        )
    required, batch = requirement.yield_at_least, boards.boards_per_batch
    too_few = allowed_failures(boards.boards, required, boards_per_batch=batch) < 0
    if requirement.judged_by == "yield" and too_few:
        batches = f" in {boards.batches} batches" if batch > 1 else ""
        yield f"{boards.boards} boards{batches} are too few to show a yield of {100 * required:.6g} %"
