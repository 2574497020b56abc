"""Limits over ambient temperature: where each first fails on the way from one end of a walk to the other."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import isfinite
from typing import Literal

from biasband.circuit.operating_point import Region
from biasband.margins.records import NAN

Ending = Literal["holds", "fails", "fails at start", "runaway", "unsolved", "not known", "not swept"]

EXACT = 1e-4
"""[K] A temperature of failure is found this exactly."""

_ENDINGS: Mapping[Region, Ending] = {Region.RUNAWAY: "runaway", Region.UNSOLVED: "unsolved"}


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
