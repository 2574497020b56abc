"""Newton's method on the two junction voltages, at a given junction temperature."""

from __future__ import annotations

from dataclasses import dataclass, fields
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.active import RESIDUAL, Bias, active_region
from biasband.circuit.junction import Flow, Laws, flow, laws
from biasband.circuit.network import Ports
from biasband.circuit.scenarios import Array, Scenarios, Values, rows_of
from biasband.circuit.topology import Node
from biasband.stage import Transistor

PATIENT_STEPS = 200
"""Newton steps before an element is given up as unsolved."""

_LONGEST_STEP = 4.0
"""A junction voltage rises by at most this many V_T in one step (junction-voltage limiting)."""

_SATURATED_START = 0.1
"""[V] V_CE from which a saturated scenario is started."""


class Status(IntEnum):
    """What became of a scenario."""

    SOLVED = 0
    RUNAWAY = 1
    UNSOLVED = 2


@dataclass(frozen=True)
class Problem:
    """One chunk of scenarios, ready to be solved at any junction temperature."""

    ports: Ports
    transistor: Transistor
    gain: Values
    base_emitter_voltage: Values
    leakage: Values
    ambient: Values

    @classmethod
    def of(cls, ports: Ports, transistor: Transistor, part: Scenarios) -> Problem:
        """The problem of a chunk; the gain is spread out so that every result has shape (N,)."""
        gain = np.broadcast_to(np.asarray(part.gain, dtype=float), (len(part),))
        return cls(ports, transistor, gain, part.base_emitter_voltage, part.leakage, part.temperature)

    def laws(self, temperature: Values) -> Laws:
        """The junction laws at a junction temperature [K]."""
        return laws(
            self.transistor,
            gain=self.gain,
            base_emitter_at_25=self.base_emitter_voltage,
            leakage_at_25=self.leakage,
            temperature=temperature,
        )

    def part(self, rows: NDArray[np.bool_]) -> Problem:
        """The problem of the scenarios at `rows`."""
        return Problem(
            self.ports.part(rows),
            self.transistor,
            gain=rows_of(self.gain, rows),
            base_emitter_voltage=rows_of(self.base_emitter_voltage, rows),
            leakage=rows_of(self.leakage, rows),
            ambient=rows_of(self.ambient, rows),
        )


@dataclass(frozen=True)
class Tangent:
    """The port equations linearised at (V_BE, V_BC): residuals [V], Jacobian and its determinant."""

    law: Laws
    flow: Flow
    f1: Values
    f2: Values
    j11: Values
    j12: Values
    j21: Values
    j22: Values
    determinant: Values

    @property
    def residual(self) -> Array:
        """The larger of the two residuals [V]."""
        return np.asarray(np.maximum(np.abs(self.f1), np.abs(self.f2)))

    def solve(self, g1: Values, g2: Values) -> tuple[Array, Array]:
        """The voltages (x1, x2) with J·x = g."""
        x1 = (self.j22 * g1 - self.j12 * g2) / self.determinant
        x2 = (self.j11 * g2 - self.j21 * g1) / self.determinant
        return np.asarray(x1), np.asarray(x2)


def tangent(ports: Ports, law: Laws, V_BE: Values, V_BC: Values) -> Tangent:
    """Linearise `v − open + Z·i(v) = 0` at the junction voltages [V]."""
    at = flow(law, V_BE, V_BC)
    j11 = 1.0 + ports.z11 * at.base_be + ports.z12 * at.collector_be
    j12 = ports.z11 * at.base_bc + ports.z12 * at.collector_bc
    j21 = ports.z21 * at.base_be + ports.z22 * at.collector_be
    j22 = 1.0 + ports.z21 * at.base_bc + ports.z22 * at.collector_bc
    return Tangent(
        law, at,
        f1=V_BE - ports.open_be + ports.z11 * at.base + ports.z12 * at.collector,
        f2=V_BC - ports.open_bc + ports.z21 * at.base + ports.z22 * at.collector,
        j11=j11, j12=j12, j21=j21, j22=j22, determinant=j11 * j22 - j12 * j21,
    )  # fmt: skip


def active_start(ports: Ports, law: Laws) -> tuple[Array, Array]:
    """Junction voltages [V] near the solution: two passes over the closed form of the active region.

    With the reverse junction off, the forward current β·x follows from
    `x = (open_be + (z11 − z12)·I_CBO − V_BE) / (z11 + β·z12)` and V_BE moves by V_T·ln; the second
    pass knows V_CE and so the Early factor. A scenario that comes out below 0.1 V of V_CE is
    started in saturation.
    """
    V_T, leakage = law.thermal_voltage, law.leakage
    lift = ports.open_be + (ports.z11 - ports.z12) * leakage
    V_BE, gain = law.reference_voltage, law.forward_gain
    for _ in range(2):
        drive = np.maximum(lift - V_BE, V_T) / (ports.z11 + gain * ports.z12)
        V_BE = law.reference_voltage + V_T * np.log(law.forward_gain * drive / law.reference_current)
        V_BC = ports.open_bc - ports.z21 * (drive - leakage) - ports.z22 * (gain * drive + leakage)
        gain = law.forward_gain * (1.0 - V_BC * law.inverse_early)
    return np.asarray(V_BE), np.asarray(np.minimum(V_BC, V_BE - _SATURATED_START))


def limited(step: Array, thermal_voltage: Values) -> Array:
    """A Newton step [V] that does not shoot up an exponential."""
    return np.minimum(step, _LONGEST_STEP * thermal_voltage)


def newton(ports: Ports, law: Laws, V_BE: Array, V_BC: Array) -> Bias:
    """Newton's method on both port equations, until all are solved or patience ends."""
    here = tangent(ports, law, V_BE, V_BC)
    for _ in range(PATIENT_STEPS):
        if np.all(here.residual < RESIDUAL):
            break
        d_be, d_bc = here.solve(here.f1, here.f2)
        V_BE = V_BE + limited(-d_be, law.thermal_voltage)
        V_BC = V_BC + limited(-d_bc, law.thermal_voltage)
        here = tangent(ports, law, V_BE, V_BC)
    I_B, I_C = np.asarray(here.flow.base), np.asarray(here.flow.collector)
    return Bias(V_BE, V_BC, I_B, I_C, here.residual < RESIDUAL)


def patient(problem: Problem, temperature: Values) -> Bias:
    """Solve a chunk by the full equations at the junction temperature [K]."""
    law = problem.laws(temperature)
    return newton(problem.ports, law, *active_start(problem.ports, law))


def isothermal(problem: Problem, temperature: Values) -> Bias:
    """Solve a chunk at the junction temperature [K]: as active, and patiently what is not."""
    law = problem.laws(temperature)
    bias, _ = active_region(problem.ports, law)
    left = ~bias.solved
    return merged(bias, left, patient(problem.part(left), rows_of(temperature, left))) if left.any() else bias


def merged(bias: Bias, rows: NDArray[np.bool_], other: Bias) -> Bias:
    """The bias with the scenarios at `rows` taken from `other`, in place."""
    for field in fields(Bias):
        getattr(bias, field.name)[rows] = getattr(other, field.name)
    return bias


@dataclass(frozen=True)
class Trial:
    """What became of a chunk: the fields of an operating point, each of shape (N,)."""

    V_BE: Array
    V_BC: Array
    V_E: Values
    I_B: Array
    I_C: Array
    T_j: Values
    status: NDArray[np.int8]

    @classmethod
    def of(cls, ports: Ports, bias: Bias, *, T_j: Values, status: NDArray[np.int8]) -> Trial:
        """The trial that a solved bias amounts to."""
        V_E = ports.voltage(Node.EMITTER, bias.I_B, bias.I_C)
        return cls(bias.V_BE, bias.V_BC, V_E, bias.I_B, bias.I_C, T_j, status)

    def rows(self) -> tuple[Values, ...]:
        """The values in the order of the fields, status left out."""
        return tuple(getattr(self, field.name) for field in fields(self) if field.name != "status")
