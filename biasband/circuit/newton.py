"""The full equations: Newton's method on both junction voltages, wherever the transistor stands."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from biasband.circuit.active import RESIDUAL, Bias
from biasband.circuit.flow import Flow, flow
from biasband.circuit.gain_curve import GainScaling
from biasband.circuit.junction import Laws
from biasband.circuit.network import Impedances, Ports
from biasband.circuit.scenarios import Array, Values
from biasband.circuit.structure import minus, times

_KNEE = 4.0
"""A junction conducts from this many V_T below its voltage at the test current."""

_LEAST_EARLY = 1e-3
"""The Early factor is taken as no less where a step is cut: beyond V_A there is no active region."""

_SATURATED_START = 0.1
"""[V] V_CE at which the currents of a saturated start are taken."""


@dataclass(frozen=True)
class Tangent:
    """The junctions and a network linearised at a flow: the Jacobian J = 1 + Z·Y of `v + Z·i(v)`."""

    flow: Flow
    j11: Values
    j12: Values
    j21: Values
    j22: Values

    @classmethod
    def of(cls, z: Impedances, at: Flow) -> Tangent:
        """The tangent of the junctions in a network at their flow."""
        j11, j21 = z.lost(at.base_be, at.collector_be)
        j12, j22 = z.lost(at.base_bc, at.collector_bc)
        return cls(at, 1.0 + j11, j12, j21, 1.0 + j22)

    @cached_property
    def _over_determinant(self) -> tuple[Values, Values, Values, Values]:
        determinant = minus(self.j11 * self.j22, times(self.j12, self.j21))
        j12 = times(self.j12, 1.0 / determinant)
        return self.j11 / determinant, j12, self.j21 / determinant, self.j22 / determinant

    def solve(self, g1: Values, g2: Values) -> tuple[Values, Values]:
        """The voltages (x1, x2) with J·x = g."""
        j11, j12, j21, j22 = self._over_determinant
        return minus(times(j22, g1), times(j12, g2)), minus(times(j11, g2), times(j21, g1))


@dataclass(frozen=True)
class _Residual:
    """By how much [V] the port equations `v − open + Z·i(v) = 0` do not hold."""

    be: Array
    bc: Array

    @classmethod
    def of(cls, ports: Ports, at: Flow) -> _Residual:
        """The residual at a flow."""
        lost_be, lost_bc = ports.lost(at.base, at.collector)
        be, bc = at.V_BE - ports.open_be + lost_be, at.V_BC - ports.open_bc + lost_bc
        return cls(np.asarray(be), np.asarray(bc))

    @property
    def larger(self) -> Array:
        """The larger of the two [V]."""
        return np.asarray(np.maximum(np.abs(self.be), np.abs(self.bc)))


def start(ports: Ports, law: Laws) -> tuple[Array, Array]:
    """Junction voltages [V] near the solution: saturated if that makes sense, else active."""
    V_BE, V_BC = _active_start(ports, law)
    forward, reverse = _saturated_flow(ports, law)
    saturated = (forward > 0.0) & (reverse > 0.0)
    return (
        np.where(saturated, _voltage(law, forward), V_BE),
        np.where(saturated, _voltage(law, reverse), V_BC),
    )


def _active_start(ports: Ports, law: Laws) -> tuple[Array, Array]:
    """With the reverse junction off, no Early effect and V_BE as at the test current."""
    drive = np.maximum(ports.open_be - law.reference_voltage, law.thermal_voltage)
    I_B = drive / (ports.z11 + law.forward_gain * ports.z12)
    I_C = law.forward_gain * I_B
    V_BC = ports.open_bc - ports.z21 * I_B - ports.z22 * I_C
    return np.asarray(np.minimum(_voltage(law, I_C), ports.open_be)), np.asarray(np.minimum(V_BC, 0.0))


def _saturated_flow(ports: Ports, law: Laws) -> tuple[Array, Array]:
    """Forward and reverse currents [A] that carry what the network drives through a closed switch.

    With both junction voltages held the network gives I_B and I_C; I_C = F − R − R/β_R and I_B = F/β + R/β_R
    then give F and R. Not positive where the transistor is not saturated.
    """
    held = law.reference_voltage
    I_B, I_C = ports.currents(held, held - _SATURATED_START)
    back = law.inverse_reverse_gain
    reverse = (I_B - I_C / law.forward_gain) / ((1.0 + back) / law.forward_gain + back)
    return np.asarray(I_C + reverse * (1.0 + back)), np.asarray(reverse)


def _voltage(law: Laws, current: Values) -> Array:
    """The junction voltage [V] at which I_S·e^{V/V_T} is a current [A]."""
    least = np.maximum(current, law.saturation_current)
    return np.asarray(law.reference_voltage + law.thermal_voltage * np.log(least / law.reference_current))


def newton(ports: Ports, law: Laws, V_BE: Array, V_BC: Array, *, steps: int) -> Bias:
    """Newton's method from (V_BE, V_BC) [V] until all are solved or the steps are used up.

    Who is solved moves no more, so that the neighbours in a chunk change nothing.
    """
    at = flow(law, V_BE, V_BC)
    miss = _Residual.of(ports, at)
    for _ in range(steps):
        moves = miss.larger >= RESIDUAL  # what is no number any more stays so
        if not moves.any():
            break
        d_be, d_bc = Tangent.of(ports, at).solve(miss.be, miss.bc)
        if law.curve is not None:
            share = _up_to_kink(law, law.curve, V_BE, V_BC, V_BE - d_be, V_BC - d_bc)
            d_be, d_bc = share * d_be, share * d_bc
        V_BE = np.where(moves, _moved(V_BE, -d_be, law), V_BE)
        V_BC = np.where(moves, _moved(V_BC, -d_bc, law), V_BC)
        at = flow(law, V_BE, V_BC)
        miss = _Residual.of(ports, at)
    return Bias(V_BE, V_BC, np.asarray(at.base), np.asarray(at.collector), miss.larger < RESIDUAL)


def _up_to_kink(
    law: Laws, curve: GainScaling, V_BE: Array, V_BC: Array, next_be: Array, next_bc: Array
) -> Array:
    """The share of a step [V] that crosses one kink of the gain curve, at most."""
    before, after = (
        (be - law.reference_voltage) / law.thermal_voltage
        + np.log(law.reference_current * np.maximum(1.0 - bc * law.inverse_early, _LEAST_EARLY))
        for be, bc in ((V_BE, V_BC), (next_be, next_bc))
    )
    return curve.up_to_kink(before, after)


def _moved(voltage: Array, step: Values, law: Laws) -> Array:
    """A junction voltage after a Newton step, kept from shooting up its exponential.

    Above the knee a rise of dV becomes V_T·ln(1 + dV/V_T): the step that Newton's method would take
    in the junction's current instead of its voltage (junction-voltage limiting, common practice).
    """
    V_T = law.thermal_voltage
    knee = np.maximum(voltage, law.reference_voltage - _KNEE * V_T)
    target = voltage + step
    return np.where(target > knee, knee + V_T * np.log1p(np.maximum(target - knee, 0.0) / V_T), target)
