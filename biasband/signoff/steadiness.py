"""How h_FE and the ambient alone move a stage: what a bias network is there to hold still."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import log, nan

import numpy as np

from biasband.circuit.junction import laws
from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import Quantity, words
from biasband.circuit.reading import Reading, wiring_of
from biasband.circuit.scenarios import Values
from biasband.circuit.topology import Node
from biasband.quantity import Kind
from biasband.stage import Distribution, IdealTransistor, Limits, Resistor, Stage
from biasband.variation.corners import Range, corners
from biasband.variation.evaluation import Measures, cut_off_current
from biasband.variation.sweep import without_point

CURRENT, GAIN = "collector_current", "gain"


@dataclass(frozen=True)
class Steadiness:
    """How h_FE and the ambient alone move a stage, all else nominal.

    `ranges` holds the collector's current and voltage, the `output`'s voltage, and `gain`: the h_FE that a
    data sheet states, over temperature. `missing` is the region of limits that are no operating points: then
    no range is known.
    """

    output: Node
    ranges: Mapping[str, Range]
    missing: Region | None

    @property
    def current_ratio(self) -> float:
        """The highest collector current over the lowest; NaN where not known."""
        return self._ratio(CURRENT)

    @property
    def gain_ratio(self) -> float:
        """The highest h_FE over the lowest; NaN where not known."""
        return self._ratio(GAIN)

    @property
    def followed(self) -> float:
        """How much of the way that h_FE goes the collector current goes, in logarithms; NaN if none."""
        return log(self.current_ratio) / log(self.gain_ratio) if self.gain_ratio > 1.0 else nan

    def _ratio(self, name: str) -> float:
        low, high = self.ranges[name].low.value, self.ranges[name].high.value
        return high / low if self.missing is None and low > 0.0 else nan


def steadiness(stage: Stage) -> Steadiness:
    """Find how h_FE and the ambient alone move a stage: corners of these two, searched inside too."""
    still, vocabulary = _with_gain_and_heat_alone(stage), words(stage)
    output = wiring_of(stage).output
    names = (CURRENT, "collector_voltage", f"{output}_voltage")
    measures: Measures = {**{name: vocabulary[name] for name in names}, GAIN: _STATED_GAIN}
    found = corners(still, measures, cut_off=cut_off_current(still))
    return Steadiness(output, found.ranges, without_point(found))


def _stated_gain(reading: Reading) -> Values:
    """h_FE at the test point and the junction's temperature, but for the Early effect's constant factor."""
    if isinstance(reading.stage.transistor, IdealTransistor):
        return reading.scenarios.gain
    return laws(reading.sheet, reading.point.junction_temperature).forward_gain


_STATED_GAIN = Quantity(GAIN, Kind.NUMBER, lambda reading: np.asarray(_stated_gain(reading)))


def _with_gain_and_heat_alone(stage: Stage) -> Stage:
    """The stage with every contributor but h_FE and the ambient held at its nominal value."""
    sheet, supply, negative = stage.transistor, stage.supply, stage.negative_supply
    return replace(
        stage,
        resistors=tuple(map(_exact, stage.resistors)),
        transistor=replace(sheet, base_emitter_voltage=_still(sheet.base_emitter_voltage), leakage=0.0),
        supply=replace(supply, voltage=_still(supply.voltage), ripple_peak=0.0),
        negative_supply=None if negative is None else replace(negative, voltage=_still(negative.voltage)),
    )


def _exact(resistor: Resistor) -> Resistor:
    return replace(
        resistor,
        tolerance=0.0,
        distribution=Distribution(),
        tempco=0.0,
        life_drift=0.0,
        group=None,
        tracking=None,
    )


def _still(limits: Limits) -> Limits:
    return Limits.exactly(limits.nominal)
