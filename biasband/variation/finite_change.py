"""What a contributor's whole range does to I_C: by its stability factor, and measured by full solves."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from biasband.circuit.junction import Laws, laws, sheet
from biasband.circuit.operating_point import Region
from biasband.circuit.reading import read
from biasband.circuit.stability import StabilityFactors, stability_factors
from biasband.stage import Stage, Transistor
from biasband.variation.contributors import (
    BASE_EMITTER,
    GAIN,
    LEAKAGE,
    TEMPERATURE,
    Coordinates,
    realise,
)
from biasband.variation.points_of_use import held_at

NAN = float("nan")


@dataclass(frozen=True)
class FiniteChange:
    """A contributor's way from `low` to `high` [SI], and how far I_C [A] goes on it.

    `factor` is the stability factor at the nominal point (NaN for `temperature`, which has none, and where
    that point is not active), `by_factor` what it makes of the way, `measured` the difference of two
    electrothermal solves, all else nominal, at the ambient `temperature` [K] (NaN where that is what
    moves, and where one is not solved). `region` is that of the end that is not active, if one is not.
    """

    name: str
    low: float
    high: float
    temperature: float
    factor: float
    by_factor: float
    measured: float
    region: Region


@dataclass(frozen=True)
class Stability:
    """The finite changes by contributor, the gain β of the nominal point, and the region it stands in."""

    beta: float
    region: Region
    changes: tuple[FiniteChange, ...]


def stability(stage: Stage, *, coldest: float, hottest: float, cut_off: float) -> Stability:
    """Compare factors and finite changes for leakage, V_BE, gain and temperature [K].

    Leakage goes from none to its maximum at the hottest ambient, as the data sheet's law has it there;
    V_BE and h_FE between their limits at nominal ambient; h_FE takes β along in its ratio. Temperature goes
    from the coldest to the hottest ambient without leakage, and V_BE and β as their laws say; its
    `by_factor` is the textbook's sum S(V_BE)·ΔV_BE + S(β)·Δβ. A factor is a tangent: a threefold gain
    is a long way to go along one. An ideal transistor knows neither leakage nor temperature.
    """
    reading = read(stage, realise(stage, {}))
    region = Region(int(reading.regions(cut_off)[0]))
    factors = _none_known()
    if region is Region.ACTIVE:
        factors = stability_factors(reading)
    judge = _Judge(stage, factors, cut_off)
    changes = (judge.leakage(hottest), *judge.limits(), judge.temperature(coldest, hottest))
    return Stability(_number(factors.beta), region, changes)


def _none_known() -> StabilityFactors:
    return StabilityFactors(NAN, NAN, NAN, NAN)


@dataclass(frozen=True)
class _End:
    """One end of a way: I_C [A] and the region."""

    current: float
    region: Region


@dataclass(frozen=True)
class _Judge:
    """A stage with its factors, asked for one contributor after the other."""

    stage: Stage
    factors: StabilityFactors
    cut_off: float

    def leakage(self, hottest: float) -> FiniteChange:
        """From none to its maximum at the hottest ambient."""
        law = _laws(self.stage, hottest, leakage=self.stage.transistor.leakage)
        factor, most = _number(self.factors.leakage), 0.0 if law is None else _number(law.leakage)
        hot = held_at(self.stage, hottest)
        ends = self._end(hot, {}), self._end(hot, {LEAKAGE: 1.0})
        return _change(LEAKAGE, (0.0, most), hottest, factor, factor * most, ends)

    def limits(self) -> Iterator[FiniteChange]:
        """V_BE and h_FE between their limits, at nominal ambient."""
        transistor, beta = self.stage.transistor, _number(self.factors.beta)
        rows = (
            (BASE_EMITTER, transistor.base_emitter_voltage, _number(self.factors.base_emitter), 1.0),
            (GAIN, transistor.gain, _number(self.factors.gain), beta / transistor.gain.nominal),
        )
        for name, limits, factor, per_unit in rows:
            ends = self._end(self.stage, {name: -1.0}), self._end(self.stage, {name: 1.0})
            by_factor, way = factor * per_unit * (limits.high - limits.low), (limits.low, limits.high)
            yield _change(name, way, self.stage.ambient.nominal, factor, by_factor, ends)

    def temperature(self, coldest: float, hottest: float) -> FiniteChange:
        """From the coldest ambient to the hottest, without leakage."""
        cold, middle, hot = (_laws(self.stage, T) for T in (coldest, self.stage.ambient.nominal, hottest))
        V_BE_way = beta_way = 0.0
        if cold is not None and middle is not None and hot is not None:
            V_BE_way = _number(hot.reference_voltage - cold.reference_voltage)
            gained = (hot.forward_gain - cold.forward_gain) / middle.forward_gain
            beta_way = _number(self.factors.beta * gained)
        by_factor = _number(self.factors.base_emitter * V_BE_way + self.factors.gain * beta_way)
        ends = tuple(self._end(held_at(self.stage, T), {}) for T in (coldest, hottest))
        return _change(TEMPERATURE, (coldest, hottest), NAN, NAN, by_factor, ends)

    def _end(self, stage: Stage, x: Coordinates) -> _End:
        reading = read(stage, realise(stage, x))
        return _End(_number(reading.point.collector_current), Region(int(reading.regions(self.cut_off)[0])))


def _change(
    name: str,
    way: tuple[float, float],
    temperature: float,
    factor: float,
    by_factor: float,
    ends: Sequence[_End],
) -> FiniteChange:
    first, last = ends
    region = last.region if first.region is Region.ACTIVE else first.region
    return FiniteChange(name, *way, temperature, factor, by_factor, last.current - first.current, region)


def _laws(stage: Stage, temperature: float, *, leakage: float = 0.0) -> Laws | None:
    """The junction's laws at a temperature [K], nominal figures; None for an ideal transistor."""
    transistor = stage.transistor
    if not isinstance(transistor, Transistor):
        return None
    V_BE = transistor.base_emitter_voltage.nominal
    figures = sheet(transistor, gain=transistor.gain.nominal, base_emitter_voltage=V_BE, leakage=leakage)
    return laws(figures, temperature)


def _number(values: object) -> float:
    return float(np.ravel(np.asarray(values, dtype=float))[0])
