"""Evaluate quantities at coordinates: the one door between the methods and the circuit."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.quantities import Quantity
from biasband.circuit.reading import CUT_OFF_SHARE, Reading, read
from biasband.circuit.scenarios import Array, Values
from biasband.stage import Stage
from biasband.variation.contributors import Coordinates, realise

Measures = Mapping[str, Quantity]


@dataclass(frozen=True)
class Outcome:
    """N scenarios: for every measure the lowest and highest value [SI], each (N,), and the regions.

    Low and high differ only where coupled ripple moves the output; NaN where not solved.
    """

    low: Mapping[str, Array]
    high: Mapping[str, Array]
    region: NDArray[np.int8]


def cut_off_current(stage: Stage) -> float:
    """I_C [A] below which the stage is cut off: 1 % of the target, else of the nominal current."""
    if stage.target is not None:
        return CUT_OFF_SHARE * stage.target.collector_current
    current = float(read(stage, realise(stage, {})).point.collector_current[0])
    return CUT_OFF_SHARE * current if np.isfinite(current) else 0.0


def evaluate(stage: Stage, x: Coordinates, measures: Measures, *, cut_off: float) -> Outcome:
    """Solve the stage at these coordinates and read all measures."""
    reading = read(stage, realise(stage, x))
    count = reading.point.status.shape
    low, high = {}, {}
    with np.errstate(all="ignore"):
        for name, measure in measures.items():
            value = _spread_out(measure.read(reading), count)
            ripple = _ripple(measure, reading)
            low[name] = value if ripple is None else value - ripple
            high[name] = value if ripple is None or not measure.ripple_lifts else value + ripple
    return Outcome(low, high, reading.regions(cut_off))


def _ripple(measure: Quantity, reading: Reading) -> Values | None:
    """By how much coupled ripple moves a measure; None where it does not."""
    ripple = 0.0 if measure.ripple is None else measure.ripple(reading)
    return None if np.ndim(ripple) == 0 and ripple == 0.0 else ripple


def _spread_out(value: Values, count: tuple[int, ...]) -> Array:
    array = np.asarray(value, dtype=float)
    return array if array.shape == count else np.broadcast_to(array, count)
