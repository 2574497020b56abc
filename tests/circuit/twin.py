"""A slow scalar twin of the solver, from the project's physics (sections 2 and 3) and scipy alone.

It works in the real frame, on the raw network, one case at a time, and shares no code with the
package: nodal equations by `numpy.linalg.solve`, junction voltages by two nested `brentq` (with the
network passive each of the two functions rises monotonically, so both brackets hold one root),
junction temperature by a scan and `brentq`.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass
from math import exp, log
from typing import cast

import numpy as np
from numpy.typing import NDArray
from scipy import optimize

from biasband.stage import Transistor
from circuit.stages import Case

K_OVER_Q = 1.380649e-23 / 1.602176634e-19  # SI 2019, exact
T0 = 298.15
HOTTEST = 523.15  # 250 °C, physics.md section 2

NETWORKS = {
    "base-resistor": [
        ("RB", "positive", "base"),
        ("RC", "positive", "collector"),
        ("RE", "emitter", "ground"),
    ],
    "collector-feedback": [
        ("RB", "collector", "base"),
        ("R2", "base", "ground"),
        ("RC", "positive", "collector"),
        ("RE", "emitter", "ground"),
    ],
    "divider": [
        ("R1", "positive", "base"),
        ("R2", "base", "ground"),
        ("RC", "positive", "collector"),
        ("RE", "emitter", "ground"),
    ],
    "split-supply": [
        ("RB", "base", "ground"),
        ("RC", "positive", "collector"),
        ("RE", "emitter", "negative"),
    ],
    "follower": [("R1", "positive", "base"), ("R2", "base", "ground"), ("RE", "emitter", "ground")],
}
"""The table of physics.md section 3, for an NPN."""

PNP_RAILS = {
    False: {"positive": "ground", "ground": "positive"},
    True: {"positive": "negative", "negative": "positive"},
}
"""Which rails change places for a PNP, with a single and with a split supply."""


@dataclass(frozen=True)
class Network:
    """The raw network of a case: (ohms, node, node), node → rail where tied, rail voltages [V]."""

    branches: list[tuple[float, str, str]]
    ties: dict[str, str]
    rails: dict[str, float]

    def place(self, node: str) -> str:
        """The rail that a tied node sits on, else the node."""
        return self.ties.get(node, node)

    @property
    def free(self) -> list[str]:
        """Nodes whose voltage is unknown."""
        return [node for node in ("base", "collector", "emitter") if node not in self.ties]


def network(case: Case) -> Network:
    """The raw network of a case; a PNP's rails change places."""
    swap = PNP_RAILS[case.topology == "split-supply"] if case.polarity == "pnp" else {}
    ohms = dict(case.resistances)
    if "RE1" in ohms:
        ohms["RE"] = ohms.pop("RE1") + ohms.pop("RE2")
    rows = [(name, swap.get(a, a), swap.get(b, b)) for name, a, b in NETWORKS[case.topology]]
    ties = {}
    if case.topology == "follower":
        ties["collector"] = swap.get("positive", "positive")
    if "RE" not in ohms:
        ties["emitter"] = swap.get("ground", "ground")
    rails = {"positive": case.supply + case.ripple, "ground": 0.0, "negative": case.negative_supply}
    return Network([(ohms[name], a, b) for name, a, b in rows if name in ohms], ties, rails)


def node_voltages(wired: Network, injected: dict[str, float]) -> dict[str, float]:
    """All voltages [V] while a current [A] is injected into each terminal."""
    free = wired.free
    G, J = np.zeros((len(free), len(free))), np.array([injected[node] for node in free])
    for ohms, a, b in wired.branches:
        for here, there in ((a, b), (b, a)):
            if here not in free:
                continue
            row = free.index(here)
            G[row, row] += 1.0 / ohms
            if there in free:
                G[row, free.index(there)] -= 1.0 / ohms
            else:
                J[row] += wired.rails[wired.place(there)] / ohms
    solved = dict(zip(free, np.linalg.solve(G, J).tolist(), strict=True))
    return {**wired.rails, **{node: wired.rails[rail] for node, rail in wired.ties.items()}, **solved}


@dataclass(frozen=True)
class Junctions:
    """The laws of physics.md section 2 at one junction temperature."""

    V_T: float
    I_S: float
    beta: float
    leakage: float
    per_early: float
    beta_reverse: float
    test_current: float
    points: tuple[tuple[float, float], ...] = ()

    def gain_at(self, current: float) -> float:
        """β at a current [A] to the collector: by the ratio of the curve's h_FE there and at the test."""
        return self.beta * self.h_FE(current) / self.h_FE(self.test_current) if self.points else self.beta

    def h_FE(self, current: float) -> float:
        """The curve's h_FE at a current [A]: a power law between two points, held beyond the ends."""
        if current <= self.points[0][0]:
            return self.points[0][1]
        for (low, gain_low), (high, gain_high) in itertools.pairwise(self.points):
            if current <= high:
                return gain_low * (gain_high / gain_low) ** (log(current / low) / log(high / low))
        return self.points[-1][1]

    def currents(self, v_be: float, v_bc: float) -> tuple[float, float]:
        """I_B and I_C [A]."""
        forward, reverse = exp(v_be / self.V_T), exp(v_bc / self.V_T)
        back = self.I_S / self.beta_reverse * (reverse - 1.0)
        I_C = self.I_S * (forward - reverse) * (1.0 - v_bc * self.per_early) - back + self.leakage
        beta = self.gain_at(self.I_S * forward * (1.0 - v_bc * self.per_early))
        I_B = self.I_S / beta * (forward - 1.0) + back - self.leakage
        return I_B, I_C


def junctions(case: Case, T: float) -> Junctions:
    """The laws of a case's transistor at the junction temperature T [K]."""
    part = cast(Transistor, case.transistor)
    vbe_25 = case.base_emitter_voltage
    V_T = K_OVER_Q * T
    if part.base_emitter_drift is None:  # band-gap law: E_g = 1.11 V, γ = 3 (memory, as physics.md says)
        vbe = 1.11 * (1.0 - T / T0) + vbe_25 * T / T0 - 3.0 * V_T * log(T / T0)
    else:
        vbe = vbe_25 + part.base_emitter_drift * (T - T0)
    per_early = 0.0 if part.early_voltage is None else 1.0 / part.early_voltage
    early = 1.0 if part.early_voltage is None else 1.0 + ((part.test_voltage or 0.0) - vbe_25) * per_early
    return Junctions(
        V_T=V_T,
        I_S=part.test_current / early * exp(-vbe / V_T),
        beta=case.gain / early * (T / T0) ** (part.gain_drift * T0),
        leakage=case.leakage * 2.0 ** ((T - T0) / part.leakage_doubling),
        per_early=per_early,
        beta_reverse=part.reverse_gain,
        test_current=part.test_current,
        points=() if part.gain_curve is None else part.gain_curve.points,
    )


@dataclass(frozen=True)
class Twin:
    """A solved case: real node voltages [V], currents [A] in conduction, junction temperature [K]."""

    volts: dict[str, float]
    v_be: float
    v_bc: float
    I_B: float
    I_C: float
    T_j: float

    @property
    def power(self) -> float:
        """V_CE·I_C + V_BE·I_B [W]."""
        return (self.v_be - self.v_bc) * self.I_C + self.v_be * self.I_B


def rising_root(function: Callable[[float], float], low: float, high: float, V_T: float) -> float:
    """The root of a rising function, its bracket widened: down by doubling, up by a few V_T at a time."""
    while function(low) > 0.0:
        low *= 2.0
    while function(high) < 0.0:
        high += 5.0 * V_T
    return float(optimize.brentq(function, low, high, xtol=1e-15, rtol=1e-15))


class Solver:
    """Solves one case at any junction temperature."""

    def __init__(self, case: Case) -> None:
        self.case = case
        self.sign = 1.0 if case.polarity == "npn" else -1.0
        self.wired = network(case)
        quiet, by_base, by_collector = (self._answer(*i) for i in ((0.0, 0.0), (1.0, 0.0), (0.0, 1.0)))
        self.open = quiet
        self.slopes = np.column_stack([by_base - quiet, by_collector - quiet])
        self.reach = 3.0 * sum(abs(volts) for volts in self.wired.rails.values()) + 5.0

    def _nodes(self, I_B: float, I_C: float) -> dict[str, float]:
        injected = {"base": -I_B, "collector": -I_C, "emitter": I_B + I_C}
        return node_voltages(self.wired, {node: self.sign * amps for node, amps in injected.items()})

    def _answer(self, I_B: float, I_C: float) -> NDArray[np.float64]:
        """(V_BE, V_BC) that the network leaves at these currents."""
        volts = self._nodes(I_B, I_C)
        return self.sign * np.array([volts["base"] - volts["emitter"], volts["base"] - volts["collector"]])

    def excess(self, law: Junctions, v_be: float, v_bc: float) -> tuple[float, float]:
        """Residuals [V]: junction voltages less what the network leaves."""
        I_B, I_C = law.currents(v_be, v_bc)
        (z11, z12), (z21, z22) = self.slopes
        return (
            v_be - self.open[0] - z11 * I_B - z12 * I_C,
            v_bc - self.open[1] - z21 * I_B - z22 * I_C,
        )

    def at(self, T: float) -> Twin:
        """The one solution at the junction temperature T [K], by nested bracketing."""
        law = junctions(self.case, T)

        def collector_for(v_be: float) -> float:
            return rising_root(lambda v: self.excess(law, v_be, v)[1], -self.reach, max(v_be, 0.0), law.V_T)

        v_be = rising_root(lambda v: self.excess(law, v, collector_for(v))[0], -self.reach, 0.0, law.V_T)
        return self._twin(law, v_be, collector_for(v_be), T)

    def near(self, T: float, start: Twin) -> Twin:
        """The solution at T [K] by scipy's general root finder from a near one; bracketed if that fails."""
        law = junctions(self.case, T)

        def residuals(v: NDArray[np.float64]) -> NDArray[np.float64]:
            below = np.minimum(v, 60.0 * law.V_T)  # no overflow
            return np.array(self.excess(law, float(below[0]), float(below[1])))

        with np.errstate(all="ignore"):
            found = optimize.root(residuals, np.array([start.v_be, start.v_bc]), tol=1e-12)
        v_be, v_bc = (float(v) for v in found.x)
        if max(v_be, v_bc) > 60.0 * law.V_T or max(map(abs, self.excess(law, v_be, v_bc))) > 1e-9:
            return self.at(T)
        return self._twin(law, v_be, v_bc, T)

    def _twin(self, law: Junctions, v_be: float, v_bc: float, T: float) -> Twin:
        I_B, I_C = law.currents(v_be, v_bc)
        return Twin(self._nodes(I_B, I_C), v_be, v_bc, I_B, I_C, T)


@dataclass(frozen=True)
class Warmed:
    """What a scan of the junction temperature found; `point` None means no fixed point below 250 °C.

    `worst_gain` is the largest G seen between ambient and the fixed point (or 250 °C), and `nearest`
    how close [K] the gap comes to zero before or without a fixed point.
    """

    point: Twin | None
    worst_gain: float
    nearest: float


def warmed(case: Case, *, step: float = 1.0) -> Warmed:
    """Scan T_j upwards from ambient for the lowest fixed point of `T_a + R_θ·P(T_j)`."""
    solver, R = Solver(case), case.transistor.thermal_resistance or 0.0
    here, worst, nearest = solver.at(case.temperature), -np.inf, np.inf
    gap = R * here.power
    if gap <= 0.0:  # the constant leakage of the model can deliver a whisper of power in deep cut-off
        return Warmed(here, worst, 0.0)
    while here.T_j < HOTTEST:
        if gap < 0.02:  # [K] as good as there: no wider step can be told from the fixed point
            nudge = solver.near(here.T_j + 0.02, here)
            worst = max(worst, R * (nudge.power - here.power) / 0.02)
        # A step no longer than the gap: with G at or above zero it cannot jump the fixed point.
        beyond = solver.near(here.T_j + min(step, max(gap, 0.01)), here)
        next_gap = case.temperature + R * beyond.power - beyond.T_j
        worst = max(worst, R * (beyond.power - here.power) / (beyond.T_j - here.T_j))
        if next_gap <= 0.0:

            def rise_left(T: float, start: Twin = here) -> float:
                return case.temperature + R * solver.near(T, start).power - T

            T_j = optimize.brentq(rise_left, here.T_j, beyond.T_j, xtol=1e-10)
            return Warmed(solver.at(float(T_j)), worst, nearest)
        nearest = min(nearest, next_gap)
        here, gap = beyond, next_gap
    return Warmed(None, worst, nearest)
