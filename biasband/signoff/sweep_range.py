"""The range of a sweep of the ambient temperature: what was asked for, checked and filled in."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from biasband.circuit.scenarios import Array
from biasband.constants import HOTTEST_JUNCTION, REFERENCE_TEMPERATURE
from biasband.errors import QuantityError, UsageError
from biasband.quantity import Kind, format_quantity, parse
from biasband.stage import Stage

POINTS, FEWEST_POINTS, MOST_POINTS = 11, 2, 501
WIDEST_STEP = 10.0
"""[K] A sweep whose number of points is left open has no wider step."""

COLDEST, HOTTEST = 150.0, HOTTEST_JUNCTION
"""[K] The laws of the junction are not trusted beyond (memory)."""

SAME = 1e-6
"""[K] Temperatures nearer than this are one."""

Temperature = float | str | None
"""[K], or a text such as "85 degC"; None: the stage's own."""


@dataclass(frozen=True)
class SweepRange:
    """From the `coldest` to the `hottest` ambient temperature [K] in `points` evenly spaced ones."""

    coldest: float
    hottest: float
    points: int

    @property
    def step(self) -> float:
        """The distance [K] between two temperatures."""
        return (self.hottest - self.coldest) / (self.points - 1)

    def nearest(self, temperature: float) -> float:
        """The temperature [K] itself where the range holds it, else the end next to it."""
        return min(max(temperature, self.coldest), self.hottest)

    def temperatures(self, *, joined_by: float) -> Array:
        """The temperatures [K], ascending; another one joins them where it lies between the ends."""
        even = np.linspace(self.coldest, self.hottest, self.points)
        apart = np.min(np.abs(even - joined_by)) > SAME
        joins = apart and self.coldest < joined_by < self.hottest
        return np.sort(np.append(even, joined_by)) if joins else even


def sweep_range(
    stage: Stage, *, coldest: Temperature, hottest: Temperature, points: int | None
) -> SweepRange:
    """Check a sweep and fill in what is left open: the stage's ambient range, 11 points or a step of 10 K.

    Raises UsageError with every fault: an end that is no temperature from 150 K to 250 °C, ends that are
    not in order, a stage without a range of its own whose ends are not both given, anything but a whole
    number of points from 2 to 501, a resistor that its tempco takes to nothing on the way.
    """
    faults: list[str] = []
    cold = _end("from (coldest)", coldest, stage.ambient.low, faults)
    hot = _end("to (hottest)", hottest, stage.ambient.high, faults)
    faults += _of_range(stage, cold, hot, given=(coldest is not None, hottest is not None))
    faults += _of_points(points)
    faults += _vanishing(stage, cold, hot)
    if faults:
        raise UsageError("\n".join(faults))
    fewest = math.ceil((hot - cold) / WIDEST_STEP - SAME) + 1
    return SweepRange(cold, hot, max(POINTS, fewest) if points is None else points)


def _end(name: str, asked: Temperature, own: float, faults: list[str]) -> float:
    """One end of the sweep [K]; NaN, with a fault, where it is none."""
    try:
        end = own if asked is None else parse(asked, Kind.TEMPERATURE)
    except QuantityError as error:
        faults.append(f"{name}: {error}")
        return math.nan
    if not COLDEST <= end <= HOTTEST:
        whose = "" if asked is not None else "the stage's ambient, "
        allowed = f"allowed: {_degrees(COLDEST)} to {_degrees(HOTTEST)}"
        faults.append(f"{name}: outside what can be computed; read {whose}{_degrees(end)}; {allowed}")
        return math.nan
    return end


def _of_range(stage: Stage, cold: float, hot: float, *, given: tuple[bool, bool]) -> Iterator[str]:
    if stage.ambient.low == stage.ambient.high and not all(given):
        yield "the stage has no ambient range to sweep: give both ends, from (coldest) and to (hottest)"
    elif cold >= hot:
        yield f"from (coldest) is {_degrees(cold)}: not below {_degrees(hot)}, to (hottest)"


def _of_points(points: int | None) -> Iterator[str]:
    whole = isinstance(points, int) and not isinstance(points, bool)
    if points is not None and not (whole and FEWEST_POINTS <= points <= MOST_POINTS):
        yield f"points: a whole number from {FEWEST_POINTS} to {MOST_POINTS}; read {points!r}"


def _vanishing(stage: Stage, cold: float, hot: float) -> Iterator[str]:
    """Resistors that their tempco takes to nothing within the sweep."""
    for resistor in stage.resistors:
        for end in (cold, hot):
            if resistor.tempco * abs(end - REFERENCE_TEMPERATURE) >= 1.0:
                yield f"resistors.{resistor.name}.tempco takes {resistor.name} to nothing at {_degrees(end)}"


def _degrees(temperature: float) -> str:
    return format_quantity(temperature, Kind.TEMPERATURE, digits=6)
