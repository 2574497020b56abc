"""Evidence made by hand: what the methods are said to have found, without solving anything."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from biasband.boards.sampling import Boards, Sample, Spread
from biasband.circuit.operating_point import Region
from biasband.margins.records import Evidence
from biasband.stage import Requirement
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners, Extreme, Range
from biasband.variation.rss import Interval

QUANTITY = "collector_voltage"


def extreme(value: float, **at: float) -> Extreme:
    """An extreme at a vertex."""
    return Extreme(value, dict.fromkeys(at, 1.0), at, interior=False)


def evidence(
    *,
    nominal: float,
    corners: tuple[float, float],
    rss: tuple[float, float] | None = None,
    boards: Sequence[float] | tuple[Sequence[float], Sequence[float]] = (0.0,),
    quantity: str = QUANTITY,
    regions: Mapping[Region, int] | None = None,
    board_regions: Mapping[Region, int] | None = None,
    boards_per_batch: int = 1,
) -> Evidence:
    """Evidence on one quantity; `boards` holds each board's value, or its (lowest, highest) in use."""
    pair = (
        boards if isinstance(boards, tuple) and len(boards) == 2 and np.ndim(boards[0]) else (boards, boards)
    )
    lowest, highest = (np.array(values, dtype=float) for values in pair)
    spread = Spread(Sample(lowest), Sample(lowest), Sample(highest))
    found = Range(extreme(corners[0], gain=50.0), extreme(corners[1], gain=200.0))
    return Evidence(
        nominal={quantity: nominal},
        corners=Corners({quantity: found}, count=4, regions=regions or {Region.ACTIVE: 4}, region_at={}),
        rss={quantity: Interval(*(rss or corners))},
        boards=Boards(
            {quantity: spread},
            boards=lowest.size,
            seed=1,
            points=1,
            regions=board_regions or {Region.ACTIVE: lowest.size},
            boards_per_batch=boards_per_batch,
        ),
        causes={quantity: Causes({"gain": 0.7, "RB": 0.2}, {"RB": 0.6, "gain": 0.3})},
    )


def requirement(**more: Any) -> Requirement:
    """A requirement on the quantity."""
    return replace(Requirement(id="R-1", quantity=QUANTITY), **more)
