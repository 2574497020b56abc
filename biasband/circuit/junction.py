"""The transistor's laws: what its data sheet and a junction temperature make of I_S, β_F and I_CBO.

Source: the temperature laws as the project's physics states them. The currents are in flow.py.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from biasband.circuit.gain_curve import GainScaling, Scaled
from biasband.circuit.scenarios import Rows, Values, rows_of
from biasband.constants import (
    BAND_GAP,
    BOLTZMANN,
    ELEMENTARY_CHARGE,
    REFERENCE_TEMPERATURE,
    SATURATION_EXPONENT,
)
from biasband.stage import Transistor

_VOLT_PER_KELVIN = BOLTZMANN / ELEMENTARY_CHARGE

LN_2 = float(np.log(2.0))
"""Leakage doubles every so many kelvins: this much in its logarithm."""


@dataclass(frozen=True)
class Sheet:
    """A data sheet's figures at 25 °C for each scenario, shape (N,) or numbers, with what follows.

    `base_emitter_voltage` vbe_25 [V] and `leakage` I_CBO25 [A] are the scenario's own. The forward
    current is `reference_current` [A] at the test point, and `forward_gain` β_F25 the gain there,
    both without the Early factor, so that the test point is met with it. `curve` scales the gain with
    the current.
    """

    transistor: Transistor
    base_emitter_voltage: Values
    leakage: Values
    reference_current: Values
    forward_gain: Values
    curve: GainScaling | None = field(default=None, kw_only=True)

    def part(self, rows: Rows) -> Sheet:
        """The figures of the scenarios at `rows`."""
        columns = (self.base_emitter_voltage, self.leakage, self.reference_current, self.forward_gain)
        return Sheet(self.transistor, *(rows_of(values, rows) for values in columns), curve=self.curve)


@dataclass(frozen=True)
class Laws:
    """The parameters of the junctions at one temperature per scenario, shape (N,) or numbers.

    `reference_voltage` is V_BE [V] at `reference_current` [A], where the forward current
    I_S·e^{VBE/VT} is that current. `thermal_voltage` V_T [V], `saturation_current` I_S [A],
    `forward_gain` β_F (times what `curve` says of the current), `leakage` I_CBO [A]; `inverse_early`
    1/V_A [1/V] (0: no Early effect), `inverse_reverse_gain` 1/β_R.
    """

    temperature: Values
    reference_voltage: Values
    reference_current: Values
    thermal_voltage: Values
    saturation_current: Values
    forward_gain: Values
    leakage: Values
    inverse_early: float
    inverse_reverse_gain: float
    curve: GainScaling | None = field(default=None, kw_only=True)

    @cached_property
    def per_volt(self) -> Values:
        """1/V_T [1/V]."""
        return 1.0 / self.thermal_voltage

    def scaled(self, forward: Values, V_BC: Values) -> Scaled:
        """What the gain curve says, from I_S·e^{VBE/VT} [A] and V_BC [V]: at their current to the collector.

        The reverse current is not taken off: deep in saturation the base current would then fall where
        V_BE rises, and nothing would promise a single operating point.
        """
        if self.curve is None:
            return Scaled(1.0, 0.0, forward)
        return self.curve.at(forward * (1.0 - V_BC * self.inverse_early))


def base_emitter_voltage(transistor: Transistor, at_25: Values, temperature: Values) -> Values:
    """V_BE [V] at the test current and a junction temperature [K].

    Linear, `vbe_25 + d·(T − T0)`; or the band-gap law,
    `E_g·(1 − T/T0) + vbe_25·T/T0 − γ·V_T·ln(T/T0)`, whose slope at 0.60 V and 300 K is −1.96 mV/K.
    """
    if transistor.base_emitter_drift is not None:
        return at_25 + transistor.base_emitter_drift * (temperature - REFERENCE_TEMPERATURE)
    ratio = temperature / REFERENCE_TEMPERATURE
    curvature = SATURATION_EXPONENT * _VOLT_PER_KELVIN * temperature * np.log(ratio)
    return BAND_GAP * (1.0 - ratio) + at_25 * ratio - curvature


def base_emitter_slope(transistor: Transistor, at_25: Values, temperature: Values) -> Values:
    """d vbe/dT [V/K] of the law above."""
    if transistor.base_emitter_drift is not None:
        return transistor.base_emitter_drift
    ratio = temperature / REFERENCE_TEMPERATURE
    curvature = SATURATION_EXPONENT * _VOLT_PER_KELVIN * (np.log(ratio) + 1.0)
    return (at_25 - BAND_GAP) / REFERENCE_TEMPERATURE - curvature


def sheet(
    transistor: Transistor, *, gain: Values, base_emitter_voltage: Values, leakage: Values
) -> Sheet:
    """The figures at 25 °C: h_FE and V_BE [V] at the test point, I_CBO [A].

    `β_F25 = h_FE / early`, forward current at the test point `I_test / early`, with
    early = 1 + (V_CE,test − vbe_25)/V_A; with no V_A it is one.
    """
    early: Values = 1.0
    if transistor.early_voltage is not None:
        early = 1.0 + ((transistor.test_voltage or 0.0) - base_emitter_voltage) / transistor.early_voltage
    curve = transistor.gain_curve
    return Sheet(
        transistor, base_emitter_voltage, leakage, transistor.test_current / early, gain / early,
        curve=None if curve is None else GainScaling.of(curve, test_current=transistor.test_current),
    )  # fmt: skip


def laws(sheet: Sheet, temperature: Values) -> Laws:
    """The junction parameters at a junction temperature [K].

    `I_S = (I_test / early) / exp(vbe/V_T)`, `β_F = β_F25 · (T/T0)^(g·T0)`,
    `I_CBO = I_CBO25 · 2^((T − T0)/D)`. Without a gain curve valid near the test current: the gain does
    not fall at low or high current.
    """
    transistor = sheet.transistor
    V_T = _VOLT_PER_KELVIN * temperature
    vbe = base_emitter_voltage(transistor, sheet.base_emitter_voltage, temperature)
    exponent = transistor.gain_drift * REFERENCE_TEMPERATURE
    folds = (temperature - REFERENCE_TEMPERATURE) * (LN_2 / transistor.leakage_doubling)
    return Laws(
        temperature=temperature,
        reference_voltage=vbe,
        reference_current=sheet.reference_current,
        thermal_voltage=V_T,
        saturation_current=sheet.reference_current / np.exp(vbe / V_T),
        forward_gain=sheet.forward_gain * np.exp(exponent * np.log(temperature / REFERENCE_TEMPERATURE)),
        leakage=sheet.leakage * np.exp(folds),
        inverse_early=0.0 if transistor.early_voltage is None else 1.0 / transistor.early_voltage,
        inverse_reverse_gain=1.0 / transistor.reverse_gain,
        curve=sheet.curve,
    )
