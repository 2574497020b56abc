"""The active region: one equation in the forward current, solved in a few cheap passes.

With the reverse junction off, both port equations fold into one equation in F = I_S·e^{VBE/VT},
which is nearly linear in F (the logarithm is small beside the drive), so that Newton's method on F
converges at once. What does not fit, a scenario near saturation or cut-off, is left to the full
equations.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.gain_curve import GainScaling
from biasband.circuit.junction import Laws
from biasband.circuit.network import Ports
from biasband.circuit.scenarios import Array, Values

RESIDUAL = 1e-9
"""[V] Both port equations hold to this where a scenario is solved."""

_REVERSE_OFF = -20.0
"""V_BC in units of V_T below which the reverse current, e⁻²⁰ or 2.1e-9 of I_S, is nothing."""

_LEAST_CHANGE = 0.1
"""A Newton step leaves at least this share of the forward current, which is never negative."""

FIRST_STEPS = 2
"""Newton steps that a start from nothing needs."""

_BENT_STEPS = 2
"""Newton steps that a gain curve takes in addition: the equation is no longer nearly linear."""


@dataclass(frozen=True)
class Bias:
    """Junction voltages [V] and terminal currents [A] of a chunk, and where they solve it."""

    V_BE: Array
    V_BC: Array
    I_B: Array
    I_C: Array
    solved: NDArray[np.bool_]

    @property
    def power(self) -> Array:
        """V_CE·I_C + V_BE·I_B [W]."""
        return (self.V_BE - self.V_BC) * self.I_C + self.V_BE * self.I_B


@dataclass(frozen=True)
class _Line:
    """The active region as one equation, `V_BE(F) + z_base·F + z12·G(F) − drive = 0`.

    G = F·(early + creep·F)/(1 − lean·F) is the collector's share of F with the Early effect, its
    V_BC already eliminated; beside F/β and G the base gives back, and the collector takes, a
    constant current of leakage.
    """

    drive: Values
    base_share: Values
    z_base: Values
    early: Values
    creep: Values
    lean: Values
    base_constant: Values
    collector_constant: Values


def _fold(ports: Ports, law: Laws) -> _Line:
    base_share = 1.0 / law.forward_gain
    collector_constant = law.saturation_current * law.inverse_reverse_gain + law.leakage
    base_constant = law.saturation_current * base_share + collector_constant
    quiet_bc = ports.open_bc + ports.z21 * base_constant - ports.z22 * collector_constant
    return _Line(
        drive=ports.open_be + ports.z11 * base_constant - ports.z12 * collector_constant,
        base_share=base_share,
        z_base=ports.z11 * base_share,
        early=1.0 - quiet_bc * law.inverse_early,
        creep=ports.z21 * base_share * law.inverse_early,
        lean=ports.z22 * law.inverse_early,
        base_constant=base_constant,
        collector_constant=collector_constant,
    )


def _first_forward(ports: Ports, law: Laws, line: _Line) -> Array:
    """A forward current [A] to start from: V_BE as at the test point, the Early effect half known."""
    drive = np.maximum(line.drive - law.reference_voltage, law.thermal_voltage)
    first = drive / (line.z_base + ports.z12)
    share = line.early / (1.0 - line.lean * first)
    share *= ports.z12
    share += line.z_base
    return np.asarray(drive / share)


@dataclass(frozen=True)
class _Guess:
    """The equation at a forward current F: V_BE [V], G [A], the residual [V] and its parts."""

    V_BE: Array
    G: Array
    residual: Array
    base: Array
    creep: Array
    room: Array


def _guess(ports: Ports, law: Laws, line: _Line, F: Array) -> _Guess:
    """Evaluate `V_BE(F) + z_base·F + z12·G(F) − drive`, in place where it can be: the hottest lines here."""
    V_BE = F / law.reference_current
    np.log(V_BE, out=V_BE)
    V_BE *= law.thermal_voltage
    V_BE += law.reference_voltage
    base, creep = line.z_base * F, line.creep * F
    room = 1.0 - line.lean * F
    G = line.early + creep
    G *= F
    G /= room
    residual = ports.z12 * G
    residual += V_BE
    residual += base
    residual -= line.drive
    return _Guess(V_BE, G, residual, base, creep, room)


def _advanced(ports: Ports, law: Laws, guess: _Guess, F: Array) -> Array:
    """The forward current after a Newton step; uses up the guess.

    F times the slope is V_T + z_base·F + z12·F·dG/dF, and F·dG/dF is exactly (G + creep·F²)/room.
    """
    slope = guess.creep
    slope *= F
    slope += guess.G
    slope /= guess.room
    slope *= ports.z12
    slope += guess.base
    slope += law.thermal_voltage
    change = 1.0 - guess.residual / slope
    np.maximum(change, _LEAST_CHANGE, out=change)
    change *= F
    return change


def active_region(
    ports: Ports, law: Laws, forward: Array | None = None, *, steps: int = FIRST_STEPS
) -> tuple[Bias, Array]:
    """Solve a chunk as if active, from a forward current [A] if given; also the one found.

    `solved` is False where the equation does not hold to 1e-9 V or the reverse junction matters.
    """
    line = _fold(ports, law)
    if law.curve is not None:
        return _bent_region(ports, law, law.curve, line, forward, steps=steps + _BENT_STEPS)
    F = _first_forward(ports, law, line) if forward is None else forward
    guess = _guess(ports, law, line, F)
    for _ in range(steps):
        F = _advanced(ports, law, guess, F)
        guess = _guess(ports, law, line, F)
    return _bias(ports, law, line, guess, F * line.base_share), F


def _bias(ports: Ports, law: Laws, line: _Line, guess: _Guess | _BentGuess, I_B: Array) -> Bias:
    """The bias that a guess amounts to, from the base current [A] without its constant; uses up both."""
    I_C = guess.G
    I_B -= line.base_constant
    I_C += line.collector_constant
    V_BC = ports.open_bc - ports.z21 * I_B
    V_BC -= ports.z22 * I_C
    solved = np.abs(guess.residual) < RESIDUAL
    solved &= V_BC < _REVERSE_OFF * law.thermal_voltage
    return Bias(guess.V_BE, V_BC, I_B, I_C, solved)


@dataclass(frozen=True)
class _BentGuess:
    """The equation at a collector's share G [A] of the forward current, with a gain curve.

    V_BE [V], the residual [V] and its slope against ln G [V], and the base's share [A] before the
    constant is taken off.
    """

    V_BE: Array
    G: Array
    residual: Array
    slope: Array
    base: Array


def _bent_region(
    ports: Ports, law: Laws, curve: GainScaling, line: _Line, start: Array | None, *, steps: int
) -> tuple[Bias, Array]:
    """The active region with a gain curve: the same equation, but in G, the current that the curve knows.

    From a current [A] if given; returns the G found.
    """
    G = _bent_start(ports, law, curve, line) if start is None else start
    guess = _bent_guess(ports, law, curve, line, G)
    for _ in range(steps):
        G = G * np.maximum(1.0 - guess.residual / guess.slope, _LEAST_CHANGE)
        guess = _bent_guess(ports, law, curve, line, G)
    found = G.copy()
    return _bias(ports, law, line, guess, guess.base), found


def _bent_start(ports: Ports, law: Laws, curve: GainScaling, line: _Line) -> Array:
    """A current [A] to start from: as without a curve, then with the gain that the curve has there."""
    factor = curve.at(_first_forward(ports, law, line)).factor
    return _first_forward(ports, law, replace(line, z_base=line.z_base / factor))


def _bent_guess(ports: Ports, law: Laws, curve: GainScaling, line: _Line, G: Array) -> _BentGuess:
    """Evaluate `V_BE(F) + z11·B + z12·G − drive`, B = (F − I_S)/(β·c) + I_S/β.

    G = F·(early + creep·β·B + lean·G) is a quadratic equation in F. From it follows d ln F/d ln G.
    """
    scaled, I_S = curve.at(G), law.saturation_current
    share = 1.0 / scaled.factor
    creep = line.creep * share
    early = line.early + (line.creep - creep) * I_S + line.lean * G
    F = 2.0 * G / (early + np.sqrt(early * early + 4.0 * creep * G))
    B = (F - I_S) * line.base_share * share + I_S * line.base_share
    V_BE = law.reference_voltage + law.thermal_voltage * np.log(F / law.reference_current)
    bend = scaled.slope * creep * F * F
    F_slope = (G * (1.0 - line.lean * F) + bend) / (G + creep * F * F)
    return _BentGuess(
        V_BE=V_BE,
        G=G,
        residual=V_BE + ports.z11 * B + ports.z12 * G - line.drive,
        slope=law.thermal_voltage * F_slope + ports.z12 * G + ports.z11 * B * (F_slope - scaled.slope),
        base=B,
    )
