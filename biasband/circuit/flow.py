"""The junctions' flow: terminal currents by Ebers–Moll in transport form, their slopes and their drift.

Sources: Ebers & Moll, "Large-signal behavior of junction transistors", Proc. IRE 42 (1954);
Gummel & Poon, "An integral charge control model of bipolar transistors", BSTJ 49 (1970), for the
transport form and the Early factor.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from biasband.circuit.gain_curve import Scaled
from biasband.circuit.junction import LN_2, Laws, Sheet, base_emitter_slope
from biasband.circuit.scenarios import Values
from biasband.constants import REFERENCE_TEMPERATURE


@dataclass(frozen=True)
class Flow:
    """Terminal currents [A] at junction voltages [V], and their slopes [S]; each is found when asked for.

    `forward` F = I_S·e^{VBE/VT} and `reverse` R = I_S·e^{VBC/VT} [A]:

        I_C = (F − R)·(1 − VBC/V_A) − (R − I_S)/β_R + I_CBO
        I_B = (F − I_S)/β_F + (R − I_S)/β_R − I_CBO

    Source: Ebers & Moll 1954; Gummel & Poon 1970 (see the module).
    """

    law: Laws
    V_BE: Values
    V_BC: Values
    forward: Values
    reverse: Values

    @cached_property
    def base(self) -> Values:
        """I_B."""
        return self.forward_base + self._back

    @cached_property
    def collector(self) -> Values:
        """I_C."""
        return self._transport * self.early - self._back

    @cached_property
    def base_be(self) -> Values:
        """dI_B/dV_BE."""
        return self._forward_slope / self.law.forward_gain

    @cached_property
    def base_bc(self) -> Values:
        """dI_B/dV_BC."""
        return self._reverse_base_slope

    @cached_property
    def collector_be(self) -> Values:
        """dI_C/dV_BE."""
        return self._forward_slope * self.early

    @cached_property
    def collector_bc(self) -> Values:
        """dI_C/dV_BC."""
        into_emitter = self._reverse_slope * self.early + self._transport * self.law.inverse_early
        return -(into_emitter + self._reverse_base_slope)

    @cached_property
    def emitter_be(self) -> Values:
        """dI_E/dV_BE."""
        return self.base_be + self.collector_be

    @cached_property
    def emitter_bc(self) -> Values:
        """dI_E/dV_BC."""
        return self.base_bc + self.collector_bc

    @cached_property
    def early(self) -> Values:
        """1 − V_BC/V_A."""
        return 1.0 - self.V_BC * self.law.inverse_early

    @cached_property
    def gain(self) -> Values:
        """β_F."""
        return self.law.forward_gain

    @cached_property
    def forward_base(self) -> Values:
        """(F − I_S)/β_F: what the forward current takes from the base."""
        return (self.forward - self.law.saturation_current) / self.gain

    @cached_property
    def _transport(self) -> Values:
        return self.forward - self.reverse

    @cached_property
    def _back(self) -> Values:
        reverse_base = (self.reverse - self.law.saturation_current) * self.law.inverse_reverse_gain
        return reverse_base - self.law.leakage

    @cached_property
    def _forward_slope(self) -> Values:
        return self.forward * self.law.per_volt

    @cached_property
    def _reverse_slope(self) -> Values:
        return self.reverse * self.law.per_volt

    @cached_property
    def _reverse_base_slope(self) -> Values:
        return self._reverse_slope * self.law.inverse_reverse_gain


@dataclass(frozen=True)
class _BentFlow(Flow):
    """With a gain curve: β_F·c(I) takes the place of β_F, I = F·(1 − VBC/V_A).

    d ln I is dV_BE/V_T, and −F/V_A·dV_BC/I; d ln c is the curve's slope times that.
    """

    @cached_property
    def scaled(self) -> Scaled:
        """The curve at the current."""
        return self.law.scaled(self.forward, self.V_BC)

    @cached_property
    def gain(self) -> Values:
        """β_F·c."""
        return self.law.forward_gain * self.scaled.factor

    @cached_property
    def base_be(self) -> Values:
        """dI_B/dV_BE."""
        return self._forward_slope / self.gain - self.forward_base * self.scaled.slope * self.law.per_volt

    @cached_property
    def base_bc(self) -> Values:
        """dI_B/dV_BC."""
        bend = self.forward_base * self.scaled.slope * self.law.inverse_early
        return self._reverse_base_slope + bend * self.forward / self.scaled.current


def flow(law: Laws, V_BE: Values, V_BC: Values) -> Flow:
    """Terminal currents and their slopes at the junction voltages [V]."""
    I_S, per_volt = law.saturation_current, law.per_volt
    kind = Flow if law.curve is None else _BentFlow
    return kind(law, V_BE, V_BC, I_S * np.exp(V_BE * per_volt), I_S * np.exp(V_BC * per_volt))


@dataclass(frozen=True)
class FlowDrift:
    """How the terminal currents move with the junction temperature at fixed voltages [A/K]."""

    base: Values
    collector: Values


def flow_drift(sheet: Sheet, at: Flow) -> FlowDrift:
    """∂I_B/∂T and ∂I_C/∂T [A/K] at fixed junction voltages.

    From d ln I_S/dT = (vbe/T − dvbe/dT)/V_T, d ln β_F/dT = g·T0/T and d ln I_CBO/dT = ln 2/D. The gain
    curve's current rises as the forward one does.
    """
    transistor, law, T = sheet.transistor, at.law, at.law.temperature
    vbe_slope = base_emitter_slope(transistor, sheet.base_emitter_voltage, T)
    I_S_share = (law.reference_voltage / T - vbe_slope) * law.per_volt
    thermal = law.per_volt / T
    forward_share = I_S_share - at.V_BE * thermal
    gain_share = transistor.gain_drift * REFERENCE_TEMPERATURE / T
    if isinstance(at, _BentFlow):
        gain_share = gain_share + at.scaled.slope * forward_share
    forward_T, I_S_T = at.forward * forward_share, law.saturation_current * I_S_share
    reverse_T = at.reverse * (I_S_share - at.V_BC * thermal)
    forward_base_T = (forward_T - I_S_T - (at.forward - law.saturation_current) * gain_share) / at.gain
    leakage_T = law.leakage * (LN_2 / transistor.leakage_doubling)
    back_T = (reverse_T - I_S_T) * law.inverse_reverse_gain - leakage_T
    return FlowDrift(
        base=forward_base_T + back_T,
        collector=(forward_T - reverse_T) * at.early - back_T,
    )
