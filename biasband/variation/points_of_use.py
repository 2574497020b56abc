"""Points of use: nominal use, and every combination of the limits that a board meets in its life."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import product

from biasband.stage import Limits, Stage
from biasband.variation.contributors import NEGATIVE, RIPPLE, SUPPLY, TEMPERATURE, use_axes


@dataclass(frozen=True)
class PointOfUse:
    """In-use coordinates that hold for every board; empty for nominal use."""

    coordinates: Mapping[str, float]


NOMINAL_USE = PointOfUse({})


def points_of_use(stage: Stage) -> tuple[PointOfUse, ...]:
    """Nominal use first, then all combinations of limits, supply and ripple taken together."""
    present = {axis.name for axis in use_axes(stage)}
    together = [name for name in (SUPPLY, RIPPLE) if name in present]
    moves = [[name] for name in (TEMPERATURE, NEGATIVE) if name in present] + ([together] if together else [])
    corners = product((-1.0, 1.0), repeat=len(moves))
    combined = [
        {name: side for names, side in zip(moves, sides, strict=True) for name in names} for sides in corners
    ]
    return (NOMINAL_USE, *(PointOfUse(coordinates) for coordinates in combined if coordinates))


def held_at(stage: Stage, temperature: float) -> Stage:
    """The stage in an ambient that stands still at a temperature [K], so that all else is what varies."""
    return replace(stage, ambient=Limits.exactly(temperature))
