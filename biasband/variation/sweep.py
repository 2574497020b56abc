"""A sweep of the ambient temperature: at each, the nominal point and the corners of all that is left."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.operating_point import Region
from biasband.circuit.reading import read
from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import axes, columns, realise
from biasband.variation.corners import BOTH, Corners, Sides, corners, vertices
from biasband.variation.evaluation import Measures, evaluate
from biasband.variation.points_of_use import held_at

_HALF_STEP = 0.5
"""[K] to either side for a slope: a point is solved to 1e-6 K, and laws bend little within a kelvin."""


@dataclass(frozen=True)
class NominalLine:
    """Measures [SI] with everything but the ambient nominal, (M,) each, and the regions there."""

    values: Mapping[str, Array]
    region: NDArray[np.int8]


def nominal_line(stage: Stage, temperatures: Array, measures: Measures, *, cut_off: float) -> NominalLine:
    """Solve the nominal stage at M ambient temperatures [K]; resistors keep their stated value."""
    reading = read(stage, replace(realise(stage, {}), temperature=temperatures))
    with np.errstate(all="ignore"):
        values = {name: np.asarray(measure.read(reading), dtype=float) for name, measure in measures.items()}
    spread_out = {name: np.array(np.broadcast_to(each, temperatures.shape)) for name, each in values.items()}
    return NominalLine(spread_out, reading.regions(cut_off))


def slopes(stage: Stage, temperature: float, measures: Measures) -> dict[str, float]:
    """d nominal/dT_a [unit/K] at an ambient temperature [K]: a central difference of full solves."""
    around = np.array([temperature - _HALF_STEP, temperature + _HALF_STEP])
    line = nominal_line(stage, around, measures, cut_off=0.0)
    return {name: float(values[1] - values[0]) / (2.0 * _HALF_STEP) for name, values in line.values.items()}


def corners_at(
    stage: Stage, temperature: float, measures: Measures, *, cut_off: float, sides: Sides = BOTH
) -> Corners:
    """The corners of every contributor but the ambient, which is held at a temperature [K]."""
    return corners(held_at(stage, temperature), measures, cut_off=cut_off, sides=sides)


def corners_along(
    stage: Stage,
    temperatures: Array,
    measures: Measures,
    *,
    cut_off: float,
    sides: Sides,
    progress: Callable[[float], None],
) -> tuple[Corners, ...]:
    """The corners at each of M ambient temperatures [K]; `progress` is told the share that is done."""
    found = []
    for count, temperature in enumerate(temperatures, start=1):
        found.append(corners_at(stage, float(temperature), measures, cut_off=cut_off, sides=sides))
        progress(count / temperatures.size)
    return tuple(found)


def without_point(found: Corners) -> Region | None:
    """The region of corners that are no operating points, so that no worst case is known: runaway first."""
    return next((r for r in (Region.RUNAWAY, Region.UNSOLVED) if found.regions.get(r)), None)


def last_point(stage: Stage, inner: float, outer: float, *, cut_off: float, exact: float) -> float:
    """The last ambient temperature [K], from `inner` to `outer`, with operating points in every corner.

    There are some at `inner` and not at `outer`; what is returned has them still. By halving the interval
    down to `exact` [K].
    """
    while abs(outer - inner) > exact:
        middle = 0.5 * (inner + outer)
        held = held_at(stage, middle)
        box = axes(held)
        regions = evaluate(held, columns(box, vertices(box)), {}, cut_off=cut_off).region
        lost = np.isin(regions, (Region.RUNAWAY, Region.UNSOLVED)).any()
        inner, outer = (inner, middle) if lost else (middle, outer)
    return inner
