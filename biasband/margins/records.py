"""What the methods found, and the rows that come of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from biasband.boards.outside import Outside
from biasband.boards.sampling import Boards
from biasband.quantity import Kind
from biasband.stage import Method
from biasband.variation.causes import Causes
from biasband.variation.corners import Corners, Extreme
from biasband.variation.rss import Interval

Side = Literal["at_least", "at_most"]
NAN = float("nan")


@dataclass(frozen=True)
class Evidence:
    """What the three methods found for the measures of one stage, and the causes of the extremes.

    `outside` holds the boards that lay beyond the corner limits, to which these were then widened.
    """

    nominal: Mapping[str, float]
    corners: Corners
    rss: Mapping[str, Interval]
    boards: Boards
    causes: Mapping[str, Causes]
    outside: tuple[Outside, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Margin:
    """One row of the margin table; figures in the quantity's SI unit, NaN where not known.

    `corners` and `rss` are the worst values of each method on this side; `yield_held` is the share
    of boards that hold the limit at every point of use, `yield_low` its one-sided lower 95 % bound.
    `margin` is the distance from the worst value to the limit by the method that judges: not
    negative means pass. `margin_share` is margin / |nominal − limit|, None where the nominal value
    is on or beyond the limit. `causes` are the shares at the worst corner, largest first.
    """

    id: str
    quantity: str
    kind: Kind
    limit: float
    side: Side
    judged_by: Method
    nominal: float
    corners: float
    rss: float = NAN
    yield_held: float = NAN
    yield_low: float = NAN
    yield_at_least: float = NAN
    margin: float
    margin_share: float | None
    passes_at_corners: bool
    worst: Extreme
    causes: Mapping[str, float]
    standing: bool = False
    reason: str = ""
    notes: tuple[str, ...] = ()

    @property
    def verdict(self) -> Literal["pass", "fail"]:
        """Pass where the margin is not negative; NaN fails."""
        return "pass" if self.margin >= 0.0 else "fail"

    @property
    def judged(self) -> float:
        """The value that is judged [SI]: the limit and the margin together."""
        return self.limit + (self.margin if self.side == "at_least" else -self.margin)

    @property
    def corner_share(self) -> float | None:
        """The margin at the corners as a share of the distance nominal → limit, whatever judges."""
        sign = 1.0 if self.side == "at_least" else -1.0
        return share(sign * (self.corners - self.limit), sign * (self.nominal - self.limit))

    @property
    def main_cause(self) -> str | None:
        """The contributor with the largest share of the way to the worst corner."""
        return next(iter(self.causes), None)

    @property
    def only_by_method(self) -> bool:
        """Whether the row passes by its own method but fails at the corners."""
        return self.verdict == "pass" and not self.passes_at_corners


def share(margin: float, distance: float) -> float | None:
    """A margin as a share of the distance nominal → limit; None where nominal fails."""
    return margin / distance if distance > 0.0 else None
