"""Beyond the draws: what can be said of failures that no drawn board showed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

from biasband.boards.monotone import Monotone, monotone
from biasband.boards.rare import Rare, rare_failures
from biasband.margins.limits import HeldLimit
from biasband.stage import Stage
from biasband.variation.corners import Corners
from biasband.variation.points_of_use import PointOfUse

Standing = Literal["none", "none found", "seen", "rare", "not known"]
"""None: no board can fail. None found: neither corners nor located interior extremes fail, which proves
nothing between them. Seen: drawn boards fail. Rare: a corner fails, no drawn board does. Not known: a corner
has no value."""


@dataclass(frozen=True)
class Beyond:
    """A limit, what is known of failures beyond the boards drawn, and what that rests on.

    `failures` counts the drawn boards that fail.
    """

    limit: HeldLimit
    standing: Standing
    failures: int = 0
    monotone: Monotone | None = None
    rare: Rare | None = None


def beyond(
    stage: Stage,
    limits: Sequence[HeldLimit],
    corners: Corners,
    points: Sequence[PointOfUse],
    failures: Sequence[int],
    *,
    seed: int,
    cut_off: float,
) -> tuple[Beyond, ...]:
    """Say of every limit what its corners and the `failures` among the drawn boards leave open.

    Where all corners and located interior extremes hold it, nothing is sampled for: zero is claimed for
    a measure that was monotone wherever it was looked at. Where a corner fails but no draw did, rare
    failures are looked for.
    """
    margins = [limit.margin(corners) for limit in limits]
    holding = {each.measure.name: each.measure for each, m in zip(limits, margins, strict=True) if m >= 0.0}
    bends = monotone(stage, holding, points, seed=seed, cut_off=cut_off) if holding else {}
    return tuple(
        _beyond(stage, limit, margin, failed, bends, points, seed=seed, cut_off=cut_off)
        for limit, margin, failed in zip(limits, margins, failures, strict=True)
    )


def _beyond(
    stage: Stage,
    limit: HeldLimit,
    margin: float,
    failed: int,
    bends: Mapping[str, Monotone],
    points: Sequence[PointOfUse],
    *,
    seed: int,
    cut_off: float,
) -> Beyond:
    if failed:
        return Beyond(limit, "seen", failed)
    if margin >= 0.0:
        found = bends[limit.measure.name]
        return Beyond(limit, "none" if found.holds else "none found", monotone=found)
    if not margin < 0.0:
        return Beyond(limit, "not known")
    rare = rare_failures(
        stage, limit.measure, limit.bound, points, lower=limit.lower, seed=seed, cut_off=cut_off
    )
    return Beyond(limit, "rare", rare=rare)
