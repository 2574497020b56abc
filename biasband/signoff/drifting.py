"""Drift: a stage over a sweep of its ambient temperature, in nominal and worst case."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache, cached_property, partial
from typing import TYPE_CHECKING

import numpy as np

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import Quantity, words
from biasband.circuit.reading import wiring_of
from biasband.circuit.scenarios import Array
from biasband.margins.checks import Standing, standing_checks
from biasband.margins.limits import HeldLimit, held_limits
from biasband.margins.over_temperature import EXACT, Failure, Seen, first_failure
from biasband.quantity import Kind
from biasband.signoff.study import CHOOSING, design
from biasband.signoff.sweep_range import SAME, SweepRange, Temperature, sweep_range
from biasband.stage import Stage
from biasband.values.choosing import Design
from biasband.values.joint import Progress, silent
from biasband.variation.corners import Corners
from biasband.variation.evaluation import Measures, cut_off_current
from biasband.variation.finite_change import Stability, stability
from biasband.variation.sweep import (
    corners_along,
    corners_at,
    last_point,
    nominal_line,
    slopes,
    without_point,
)

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True)
class Drift:
    """One quantity over M temperatures [SI]: nominal, lowest and highest, (M,) each; NaN where not known.

    `at_nominal_ambient` is the nominal value there, `slope` [unit/K] its slope there, `mean_slope` that from
    one end of the sweep to the other.
    """

    quantity: Quantity
    nominal: Array
    low: Array
    high: Array
    at_nominal_ambient: float
    slope: float
    mean_slope: float

    @property
    def relative_slope(self) -> float:
        """The slope as a share of the nominal value [1/K]; NaN for temperatures, whose zero is arbitrary."""
        return self._relative(self.slope)

    @property
    def relative_mean_slope(self) -> float:
        """The mean slope likewise [1/K]."""
        return self._relative(self.mean_slope)

    def _relative(self, slope: float) -> float:
        meaningless = self.quantity.kind is Kind.TEMPERATURE or not self.at_nominal_ambient
        return math.nan if meaningless else slope / self.at_nominal_ambient


@dataclass(frozen=True)
class LimitDrift:
    """A limit over the sweep: how it fares from `start` on, going colder and going hotter."""

    limit: HeldLimit
    colder: Failure
    hotter: Failure


@dataclass(frozen=True)
class DriftStudy:
    """A stage over M ambient temperatures [K], ascending, nominal ambient among them where they span it.

    The worst case holds the ambient and takes every combination of all other limits. `regions` say where
    the nominal point stands at each temperature, `corners` what was found there. The limits' failures
    are looked for from `start` [K] on, nominal ambient or the sweep's end next to it.
    """

    design: Design
    temperatures: Array
    nominal_ambient: float
    start: float
    step: float
    drifts: Mapping[str, Drift]
    regions: tuple[Region, ...]
    corners: tuple[Corners, ...]
    limits: tuple[LimitDrift, ...]
    standing: Standing
    stability: Stability

    @property
    def table(self) -> pd.DataFrame:
        """A row per quantity and temperature [K]: nominal, low and high [SI]."""
        from biasband.signoff.frames import drift_frame

        return drift_frame(self.temperatures, self.drifts)


def drift(
    stage: Stage,
    *,
    coldest: Temperature = None,
    hottest: Temperature = None,
    points: int | None = None,
    progress: Progress = silent,
) -> DriftStudy:
    """Sweep the ambient temperature of a stage, its missing values designed first.

    From `coldest` to `hottest`, the stage's ambient range unless given, in `points` temperatures, 11 or as
    many as make the step 10 K; nominal ambient joins them. Values are designed for the stage's
    own ambient.

    Raises UsageError, with every fault, for a sweep that cannot be made; PhysicallyImpossible where
    the target cannot be met.
    """
    way = sweep_range(stage, coldest=coldest, hottest=hottest, points=points)
    chosen = design(stage, progress=lambda done: progress(CHOOSING * done))
    return _swept(chosen, way, lambda done: progress(CHOOSING + (1.0 - CHOOSING) * done))


def shown_quantities(stage: Stage) -> tuple[str, ...]:
    """What a drift shows: the required quantities, else output voltage and I_C; and the symmetric swing."""
    required = [requirement.quantity for requirement in stage.requirements]
    usual = [f"{wiring_of(stage).output}_voltage", "collector_current"]
    return tuple(dict.fromkeys([*(required or usual), "symmetric_peak_swing"]))


def _swept(chosen: Design, way: SweepRange, progress: Progress) -> DriftStudy:
    stage, vocabulary = chosen.stage, words(chosen.stage)
    cut_off, ambient = cut_off_current(stage), stage.ambient.nominal
    temperatures = way.temperatures(joined_by=ambient)
    shown = {name: vocabulary[name] for name in shown_quantities(stage)}
    standing = standing_checks(stage, cut_off=cut_off)
    found = corners_along(
        stage, temperatures, {**shown, **standing.measures}, cut_off=cut_off,
        sides=dict.fromkeys(standing.measures, -1.0), progress=progress,
    )  # fmt: skip
    drifts = _drifts(stage, temperatures, shown, found)
    at_nominal = {name: each.at_nominal_ambient for name, each in drifts.items()}
    line = nominal_line(stage, temperatures, {}, cut_off=cut_off)
    walks = _Walks(stage, temperatures, way.nearest(ambient), found, cut_off)
    return DriftStudy(
        design=chosen,
        temperatures=temperatures,
        nominal_ambient=ambient,
        start=walks.start,
        step=way.step,
        drifts=drifts,
        regions=tuple(Region(int(code)) for code in line.region),
        corners=found,
        limits=tuple(
            map(walks.limit_drift, held_limits(stage.requirements, standing, vocabulary, at_nominal))
        ),
        standing=standing,
        stability=stability(stage, coldest=way.coldest, hottest=way.hottest, cut_off=cut_off),
    )


def _drifts(
    stage: Stage, temperatures: Array, measures: Measures, found: tuple[Corners, ...]
) -> dict[str, Drift]:
    """The drift of every measure; a worst case that some corner has no point for is not known."""
    ambient = stage.ambient.nominal
    line = nominal_line(stage, np.append(temperatures, ambient), measures, cut_off=0.0).values
    slope = slopes(stage, ambient, measures)
    known = np.array([without_point(each) is None for each in found])
    span = float(temperatures[-1] - temperatures[0])
    return {
        name: Drift(
            quantity=measure,
            nominal=line[name][:-1],
            low=np.where(known, [each.ranges[name].low.value for each in found], np.nan),
            high=np.where(known, [each.ranges[name].high.value for each in found], np.nan),
            at_nominal_ambient=float(line[name][-1]),
            slope=slope[name],
            mean_slope=float(line[name][-2] - line[name][0]) / span,
        )
        for name, measure in measures.items()
    }


@dataclass(frozen=True)
class _Walks:
    """The walks from the start of a sweep to either end, for one limit after the other."""

    stage: Stage
    temperatures: Array
    start: float
    corners: tuple[Corners, ...]
    cut_off: float

    def limit_drift(self, limit: HeldLimit) -> LimitDrift:
        """Find where a limit first fails, going colder and going hotter."""
        seen = [_seen(limit, float(T), each) for T, each in zip(self.temperatures, self.corners, strict=True)]
        colder = [each for each in reversed(seen) if each.temperature <= self.start + SAME]
        hotter = [each for each in seen if each.temperature >= self.start - SAME]
        look = partial(self._look, limit)
        return LimitDrift(limit, *(first_failure(walk, look, self._last_point) for walk in (colder, hotter)))

    def _look(self, limit: HeldLimit, temperature: float) -> Seen:
        name = limit.measure.name
        measures, sides = {name: limit.measure}, {name: -1.0 if limit.lower else 1.0}
        found = corners_at(self.stage, temperature, measures, cut_off=self.cut_off, sides=sides)
        return _seen(limit, temperature, found)

    @cached_property
    def _last_point(self) -> Callable[[float, float], float]:
        """The same for every limit, so it is found once."""
        return cache(partial(last_point, self.stage, cut_off=self.cut_off, exact=EXACT))


def _seen(limit: HeldLimit, temperature: float, found: Corners) -> Seen:
    return Seen(temperature, limit.margin(found), without_point(found))
