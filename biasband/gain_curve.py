"""The gain curve of a data sheet: what it says, and when it is one."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

from biasband.errors import UsageError

MOST_POINTS = 100


@dataclass(frozen=True)
class GainCurve:
    """Typical h_FE against I_C: points ([A], h_FE), straight in logarithms, held beyond the ends.

    Raises UsageError, with every fault, for points that are no such curve. One along which h_FE rises as
    fast as the current is none: the base current would stand still, and choose no operating point.
    """

    points: tuple[tuple[float, float], ...]

    def __post_init__(self) -> None:
        if faults := tuple(self._faults()):
            raise UsageError("; ".join(faults))

    def _faults(self) -> Iterator[str]:
        if not 2 <= len(self.points) <= MOST_POINTS:
            yield f"from 2 to {MOST_POINTS} points make a curve, not {len(self.points)}"
        if not all(0.0 < figure < math.inf for point in self.points for figure in point):
            yield "a current or h_FE that is no positive figure"
            return
        for place, ((amps, gain), (next_amps, next_gain)) in enumerate(pairwise(self.points), start=2):
            if not next_amps > amps:
                yield f"the current of point {place} is not above that of point {place - 1}"
            elif not next_gain / gain < next_amps / amps:
                yield f"h_FE rises as fast as the current, from point {place - 1} to point {place}"

    @property
    def ends(self) -> tuple[float, float]:
        """The lowest and the highest current [A] that it speaks of."""
        return self.points[0][0], self.points[-1][0]
