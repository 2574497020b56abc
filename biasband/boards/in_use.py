"""Boards in use: each solved at every point of use, what it meets there kept as lowest and highest."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.operating_point import Region
from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import Coordinates
from biasband.variation.evaluation import Measures, Outcome, evaluate
from biasband.variation.points_of_use import PointOfUse

PLACES = ("nominal_use", "lowest_in_use", "highest_in_use")
"""What is kept of a quantity and a board: at nominal use, the lowest and the highest over all points."""


@dataclass(frozen=True)
class InUse:
    """B boards in use: `values` [SI] by measure, (3, B), a row for each of `PLACES`; NaN where not solved.

    `regions` counts the scenarios, boards times points, by Region.
    """

    values: Mapping[str, Array]
    regions: NDArray[np.int64]


def in_use(
    stage: Stage, drawn: Coordinates, measures: Measures, points: Sequence[PointOfUse], *, cut_off: float
) -> InUse:
    """Solve boards at these coordinates at every point of use, nominal use first."""
    values: dict[str, Array] = {}
    regions = np.zeros(len(Region), dtype=np.int64)
    for point in points:
        outcome = evaluate(stage, {**drawn, **point.coordinates}, measures, cut_off=cut_off)
        regions += np.bincount(outcome.region, minlength=len(Region))
        _gather(values, outcome)
    return InUse(values, regions)


def _gather(values: dict[str, Array], outcome: Outcome) -> None:
    """Keep nominal use, and the lowest and highest so far; NaN stays, so a failed board shows."""
    for name, low in outcome.low.items():
        high = outcome.high[name]
        if name not in values:
            values[name] = np.array([low, low, high])
        else:
            _, lowest, highest = values[name]
            np.minimum(lowest, low, out=lowest)
            np.maximum(highest, high, out=highest)
