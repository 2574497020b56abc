"""Self-heating: the junction temperature as part of the solve, and thermal runaway as a status.

T_j is the lowest fixed point of `T_j = T_a + R_θJA·P(T_j)` at or above ambient. Runaway is: no
fixed point below 250 °C, or a thermal loop gain G = R_θJA·dP/dT_j of one or more anywhere between
ambient and it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.active import Bias, active_region
from biasband.circuit.flow import flow, flow_drift
from biasband.circuit.junction import Sheet
from biasband.circuit.network import Impedances, Ports
from biasband.circuit.newton import Tangent
from biasband.circuit.scenarios import Array, Scenarios, Values
from biasband.circuit.solution import Problem, Status, Trial, isothermal, merged
from biasband.constants import HOTTEST_JUNCTION
from biasband.stage import Transistor

_QUICKLY, _PATIENTLY = 2, 7
"""Secant steps: enough for a small loop gain, and for any that is no runaway."""

_WARM_STEPS = 1
"""Newton steps in the active region at each temperature, warm from the one before."""

_MOST_SLACK = 2.0
"""A gap counts as settled by 1 − G, but not by more than this."""

SETTLED = 1e-6
"""[K] A junction temperature that moves less than this is settled."""

_SUSPICIOUS_GAIN = 0.25
"""A loop gain from which the way between ambient and T_j is looked at point by point."""

_NEGLIGIBLE_RISE = 1e-3
"""[K] A rise below which an average loop gain says nothing."""

_TELLING_MOVE = 1e-4
"""[K] A move from which a slope can be told from rounding."""

_LONG_WAY = 40.0
"""[K] A first rise beyond which the slope between two temperatures tells nothing of either end."""

_CLIMB_POINTS = 32
_BISECTIONS = 32


def power_slope(problem: Problem, temperature: Values, bias: Bias) -> Array:
    """dP/dT_j [W/K] of a problem at a solved bias, resistors held: times R_θJA the thermal loop gain."""
    at = flow(problem.laws(temperature), bias.V_BE, bias.V_BC)
    here = Tangent.of(problem.ports, at)
    return slope_of_power(problem.sheet, problem.ports, here, I_B=bias.I_B, I_C=bias.I_C)


def slope_of_power(sheet: Sheet, z: Impedances, here: Tangent, *, I_B: Array, I_C: Array) -> Array:
    """dP/dT_j [W/K] at a tangent and its currents, resistors held: the circuit answers with both voltages.

    From the port equations `J·dv + Z·∂i/∂T·dT = 0` and P = V_CE·I_C + V_BE·I_B.
    Source: implicit differentiation of the model.
    """
    at, drift = here.flow, flow_drift(sheet, here.flow)
    V_BE, V_CE = at.V_BE, at.V_BE - at.V_BC
    push_be, push_bc = here.solve(*z.lost(drift.base, drift.collector))
    power_be = I_C + I_B + V_CE * at.collector_be + V_BE * at.base_be
    power_bc = V_CE * at.collector_bc + V_BE * at.base_bc - I_C
    pushed = power_be * push_be + power_bc * push_bc
    return np.asarray(V_CE * drift.collector + V_BE * drift.base - pushed)


@dataclass(frozen=True)
class Heated:
    """A bias with its junction temperature [K], and what the way there says about the loop gain.

    `first_rise` is R_θ·P at ambient [K], `gain_cold` and `gain_hot` are G near ambient and near
    T_j; `settled` is True where ports and temperature both hold.
    """

    bias: Bias
    ambient: Values
    T_j: Array
    first_rise: Array
    gain_cold: Array
    gain_hot: Array
    settled: NDArray[np.bool_]

    @property
    def doubtful(self) -> NDArray[np.bool_]:
        """Where runaway cannot be ruled out by G at both ends and on average between them.

        The average of G over [T_a, T_j] is exactly `1 − R_θ·P(T_a)/(T_j − T_a)`; a G that falls on
        the way up betrays a stage that ran into saturation, and a long way may hide anything.
        """
        rise = self.T_j - self.ambient
        mean = (rise - self.first_rise) / np.maximum(rise, _NEGLIGIBLE_RISE)
        worst = np.maximum(np.maximum(self.gain_cold, self.gain_hot), mean)
        falls = self.gain_cold > self.gain_hot + _SUSPICIOUS_GAIN
        return ~self.settled | (worst > _SUSPICIOUS_GAIN) | falls | (self.first_rise > _LONG_WAY)


def settle(ports: Ports, transistor: Transistor, part: Scenarios) -> Trial:
    """Solve a chunk with its self-heating; without a thermal resistance T_j is the ambient."""
    problem = Problem.of(ports, transistor, part)
    if not transistor.thermal_resistance:
        bias = isothermal(problem, problem.ambient)
        status = np.where(bias.solved, np.int8(Status.SOLVED), np.int8(Status.UNSOLVED))
        return Trial.of(bias, T_j=problem.ambient, status=status)
    R = transistor.thermal_resistance
    heated = _warm_up(
        problem, R, lambda T, F: active_region(ports, problem.laws(T), F, steps=_WARM_STEPS), steps=_QUICKLY
    )
    status = np.full(heated.T_j.shape, Status.SOLVED, dtype=np.int8)
    doubtful = heated.doubtful
    if doubtful.any():
        found = _carefully(problem.part(doubtful), R)
        merged(heated.bias, doubtful, found.bias)
        heated.T_j[doubtful], status[doubtful] = found.T_j, found.status
    return Trial.of(heated.bias, T_j=heated.T_j, status=status)


Solver = Callable[[Values, Array | None], tuple[Bias, Array | None]]
"""Solve a chunk at a junction temperature [K], from the forward current found before, if any."""


def _warm_up(problem: Problem, R: float, solve: Solver, *, steps: int) -> Heated:
    """Secant steps on T_j − T_a − R_θ·P(T_j) = 0.

    The first step is the plain one, T_a + R_θ·P(T_a); the next ones know the loop gain as the
    slope between two temperatures. Who is settled moves no more.
    """
    ambient = problem.ambient
    bias, forward = solve(ambient, None)
    first_rise = wanted = _rise(bias, R)
    T = np.minimum(ambient + first_rise, HOTTEST_JUNCTION)
    gain = gain_cold = np.zeros_like(T)
    move, settled = T - ambient, np.zeros(T.shape, dtype=bool)
    for step in range(steps):
        bias, forward = solve(T, forward)
        before, wanted = wanted, _rise(bias, R)
        gain = np.where(np.abs(move) > _TELLING_MOVE, (wanted - before) / move, gain)
        gain_cold = gain if step == 0 else gain_cold
        slack = 1.0 - gain
        gap = ambient + wanted - T
        settled = bias.solved & (np.abs(gap) < SETTLED * np.minimum(slack, _MOST_SLACK))
        if forward is None and settled.all():  # a solver that starts from nothing would find the same
            break
        if step + 1 < steps:
            move = np.where(settled, 0.0, np.minimum(T + gap / slack, HOTTEST_JUNCTION) - T)
            T = T + move
    return Heated(bias, ambient, T, first_rise, gain_cold, gain, settled & (T < HOTTEST_JUNCTION))


@dataclass(frozen=True)
class Found:
    """What a careful solve found: the bias at T_j [K] and a status per scenario."""

    bias: Bias
    T_j: Array
    status: NDArray[np.int8]


def _carefully(problem: Problem, R: float) -> Found:
    """Solve a chunk by the full equations, and climb where runaway cannot be ruled out."""
    heated = _warm_up(problem, R, lambda T, F: (isothermal(problem, T), None), steps=_PATIENTLY)
    T_j, status = heated.T_j, np.full(heated.T_j.shape, Status.SOLVED, dtype=np.int8)
    doubtful = heated.doubtful
    if doubtful.any():
        top = np.where(heated.settled, T_j, HOTTEST_JUNCTION)[doubtful]
        found = _climb(problem.part(doubtful), R, top)
        merged(heated.bias, doubtful, found.bias)
        T_j[doubtful], status[doubtful] = found.T_j, found.status
    return Found(heated.bias, T_j, status)


def _climb(problem: Problem, R: float, top: Array) -> Found:
    """Walk from ambient to `top` [K] (a fixed point, where known, else the hottest junction).

    RUNAWAY where G reaches one at or before the first fixed point, or where there is none;
    UNSOLVED where the junctions could not be solved on the way. Whoever is decided walks no further.
    """
    start = problem.ambient + np.zeros_like(top)
    low, high, gap = start.copy(), start.copy(), np.zeros_like(top)
    status = np.full(top.shape, Status.RUNAWAY, dtype=np.int8)
    walking = np.arange(top.size)
    for share in np.linspace(0.0, 1.0, _CLIMB_POINTS + 1):
        high[walking] = start[walking] + (top - start)[walking] * share
        here = _gap(problem.part(walking), R, high[walking])
        status[walking[~here.solved]] = Status.UNSOLVED
        status[walking[here.arrived]] = Status.SOLVED
        on = here.solved & (here.gain < 1.0) & ~here.arrived
        walking = walking[on]
        low[walking], gap[walking] = high[walking], here.gap[on]
        if not walking.size:
            break
    near = np.flatnonzero((status == Status.RUNAWAY) & (gap < 2.0 * (high - low)))
    _look_into_dips(problem, R, low, high, status, near)
    rows = np.flatnonzero(status == Status.SOLVED)
    T_j = high.copy()
    T_j[rows] = _bisect(problem.part(rows), R, low[rows], high[rows], lambda here: here.gap > 0.0)
    return Found(isothermal(problem, T_j), T_j, status)


def _look_into_dips(
    problem: Problem, R: float, low: Array, high: Array, status: NDArray[np.int8], rows: NDArray[np.intp]
) -> None:
    """Between two points the gap may dip below zero and rise again: it is least where G is one."""
    if not rows.size:
        return
    some = problem.part(rows)
    least = _bisect(some, R, low[rows], high[rows], lambda here: here.gain < 1.0)
    dips = _gap(some, R, least).gap <= 0.0
    high[rows[dips]] = least[dips]
    status[rows[dips]] = Status.SOLVED


@dataclass(frozen=True)
class _Gap:
    """How far [K] the junction wants to rise above a temperature, the loop gain there, where solved."""

    gap: Array
    gain: Array
    solved: NDArray[np.bool_]

    @property
    def arrived(self) -> NDArray[np.bool_]:
        """Where a fixed point is reached, as exactly as one may be known."""
        return self.solved & (self.gain < 1.0) & (self.gap <= _MOST_SLACK * SETTLED)


def _bisect(
    problem: Problem, R: float, low: Array, high: Array, below: Callable[[_Gap], NDArray[np.bool_]]
) -> Array:
    """The temperature [K] between `low` and `high` up to which `below` holds."""
    for _ in range(_BISECTIONS if low.size else 0):
        middle = 0.5 * (low + high)
        up = below(_gap(problem, R, middle))
        low, high = np.where(up, middle, low), np.where(up, high, middle)
    return 0.5 * (low + high)


def _gap(problem: Problem, R: float, T: Array) -> _Gap:
    bias = isothermal(problem, T)
    gain = R * power_slope(problem, T, bias)
    return _Gap(problem.ambient + _rise(bias, R) - T, gain, bias.solved)


def _rise(bias: Bias, R: float) -> Array:
    """R_θ·P [K], never below zero: in deep cut-off the model's constant leakage delivers a whisper."""
    return np.maximum(R * bias.power, 0.0)
