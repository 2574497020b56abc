"""Where the nodes shall stand: a target and the resistors already fixed, turned into node voltages.

With I_C given, V_B = V_E + V_BE is known up to V_E, so two voltages remain, V_E and V_C. A terminal
whose resistors are all fixed gives one linear equation (Kirchhoff's current law); what freedom is
left goes to the target: the collector's place first, V_E after it. All in the transistor's frame.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from biasband.circuit.network import rails, sign, total
from biasband.circuit.reading import wiring_of
from biasband.circuit.topology import TERMINALS, Node, Wire, Wiring
from biasband.constants import DEFAULT_EMITTER_VOLTAGE
from biasband.stage import Signal, Stage, Target
from biasband.values.device import Device, Need
from biasband.variation.contributors import realise

STIFF_BASE = 0.1
"""R_B = 0.1·β·R_E for a base fed from ground (common practice)."""

MET = 1e-3
"""A current met to this share, a voltage met to this share of the supply, is met."""

_PASSES = 50
_BISECTIONS = 80
_CURRENTS = (float(np.log(1e-9)), float(np.log(100.0)))
_INDEPENDENT = 1e-9


@dataclass(frozen=True)
class Miss:
    """A wish that the fixed resistors leave no freedom for: quantity, what is reached and wished [SI]."""

    quantity: str
    reached: float
    wished: float


@dataclass(frozen=True)
class Aim:
    """Node voltages [V] in the transistor's frame, rails included, the transistor's need, the misses."""

    volts: Mapping[Node, float]
    need: Need
    missed: tuple[Miss, ...] = ()

    @property
    def V_CE(self) -> float:
        """V_CE [V]."""
        return self.volts[Node.COLLECTOR] - self.volts[Node.EMITTER]


@dataclass(frozen=True)
class _Equation:
    """`emitter·V_E + collector·V_C = right` [V]."""

    emitter: float
    collector: float
    right: float

    def left_over(self, V_E: float, V_C: float) -> float:
        """By how much [V] the voltages miss the equation."""
        return self.emitter * V_E + self.collector * V_C - self.right


def frame_rails(stage: Stage) -> dict[Node, float]:
    """The rails [V] at nominal supply, in the transistor's frame; resistors need no values yet."""
    bare = realise(replace(stage, resistors=()), {})
    return {node: float(volts) for node, volts in rails(stage.polarity, bare).items()}


def aim(stage: Stage, target: Target, fixed: Mapping[str, float], device: Device) -> Aim:
    """Node voltages that carry the target current, as far as the fixed resistors leave it free.

    V_BE and I_B depend a little on V_CE, so the voltages are found in a few passes. Where the fixed
    resistors decide the collector current, that current takes the target's place. Raises
    ArithmeticError where they decide on none between 1 nA and 100 A.
    """
    with np.errstate(over="ignore", invalid="ignore"):  # a wild trial current overflows and is rejected
        return _aim(_Equations(stage, target, fixed), device, target.collector_current)


def _aim(equations: _Equations, device: Device, I_C: float) -> Aim:
    if equations.surplus(device, I_C) is not None:
        I_C = _bisect(lambda log_I: equations.surplus(device, float(np.exp(log_I))) or 0.0, *_CURRENTS)
        I_C = float(np.exp(I_C))
    aimed = equations.solve(device, I_C)
    return replace(aimed, missed=tuple(equations.missed(aimed)))


class _Equations:
    """The linear equations for (V_E, V_C) of one stage: what is fixed first, then what is wished."""

    def __init__(self, stage: Stage, target: Target, fixed: Mapping[str, float]) -> None:
        self.stage, self.target, self.fixed = stage, target, fixed
        self.wiring, self.span = wiring_of(stage), frame_rails(stage)

    def solve(self, device: Device, I_C: float) -> Aim:
        """Pass after pass until V_CE, and with it V_BE and I_B, stands still."""
        V_CE = 0.5 * (self.span[Node.COLLECTOR_RAIL] - self.span[Node.EMITTER_RAIL])
        for _ in range(_PASSES):
            need = device(I_C, max(V_CE, self.stage.saturation_voltage))
            V_E, V_C = _voltages([*self._given(need), *self._wished(need)])
            before, V_CE = V_CE, V_C - V_E
            if abs(V_CE - before) < 1e-12:
                break
        nodes = {Node.BASE: V_E + need.V_BE, Node.COLLECTOR: V_C, Node.EMITTER: V_E}
        return Aim({**self.span, **nodes}, need)

    def surplus(self, device: Device, I_C: float) -> float | None:
        """By how much [V] a given equation too many is missed at this current; None without one."""
        aimed = self.solve(device, I_C)
        V_E, V_C = aimed.volts[Node.EMITTER], aimed.volts[Node.COLLECTOR]
        kept: list[_Equation] = []
        for equation in self._given(aimed.need):
            if not _adds(kept, equation):
                return equation.left_over(V_E, V_C)
            kept.append(equation)
        return None

    def missed(self, aimed: Aim) -> Iterator[Miss]:
        """The wishes that came to nothing, the collector current first."""
        wished_current = self.target.collector_current
        if abs(aimed.need.I_C / wished_current - 1.0) > MET:
            yield Miss("collector_current", aimed.need.I_C, wished_current)
        V_E, V_C, real = aimed.volts[Node.EMITTER], aimed.volts[Node.COLLECTOR], sign(self.stage.polarity)
        span = self.span[Node.COLLECTOR_RAIL] - self.span[Node.EMITTER_RAIL]
        for wish in self._wished(aimed.need):
            off = wish.left_over(V_E, V_C)
            is_tied = not wish.collector and Node.EMITTER in self.wiring.ties
            if abs(off) > MET * span and not is_tied:
                name, volts = ("collector_voltage", V_C) if wish.collector else ("emitter_voltage", V_E)
                yield Miss(name, real * volts, real * (volts - off))

    def _given(self, need: Need) -> Iterator[_Equation]:
        """Ties to a rail, and Kirchhoff's current law where all resistors of a terminal are fixed."""
        for node, rail in self.wiring.ties.items():
            is_emitter = node is Node.EMITTER
            yield _Equation(float(is_emitter), float(not is_emitter), self.span[rail])
        for node in TERMINALS:
            wires = wires_at(self.wiring, node)
            if node not in self.wiring.ties and all(part in self.fixed for w in wires for part in w.parts):
                yield self._current_law(node, wires, need)

    def _current_law(self, node: Node, wires: list[Wire], need: Need) -> _Equation:
        """Σ (V_node − V_other)/R = −(what the transistor draws), scaled to volts."""
        here, left, right = self._terms(node, need), np.zeros(2), -draw(node, wires, need)
        for wire in wires:
            there = self._terms(wire.other if wire.node is node else wire.node, need)
            siemens = 1.0 / float(total(wire, self.fixed))
            left += siemens * (here[:2] - there[:2])
            right -= siemens * float(here[2] - there[2])
        scale = float(np.abs(left).sum())
        return _Equation(left[0] / scale, left[1] / scale, right / scale)

    def _terms(self, node: Node, need: Need) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        """A node's voltage as (share of V_E, share of V_C, constant)."""
        terms = {
            Node.BASE: (1.0, 0.0, need.V_BE),
            Node.COLLECTOR: (0.0, 1.0, 0.0),
            Node.EMITTER: (1.0, 0.0, 0.0),
        }
        return np.array(terms.get(node) or (0.0, 0.0, self.span[node]))

    def _wished(self, need: Need) -> Iterator[_Equation]:
        """The output's place first, then the emitter's voltage."""
        lower = self.span[Node.EMITTER_RAIL]
        if self.wiring.output is Node.EMITTER:
            yield _Equation(1.0, 0.0, self._follower_place(need))
            return
        yield self._collector_place(need)
        drop = self._emitter_voltage()
        yield _Equation(1.0, 0.0, self._below_ground(need) if drop is None else lower + drop)

    def _emitter_voltage(self) -> float | None:
        """The wished voltage across the emitter resistor; None where the base's own rule decides."""
        target = self.target
        if target.emitter_voltage is not None:
            return target.emitter_voltage
        if target.supply_over is not None:
            return self.stage.supply.voltage.nominal / target.supply_over
        return None if fed_from_ground(self.wiring) else DEFAULT_EMITTER_VOLTAGE

    def _below_ground(self, need: Need) -> float:
        """V_E of a base fed from ground through R_B = 0.1·β·R_E; by hand the base is at ground."""
        available = -self.span[Node.EMITTER_RAIL] - need.V_BE
        share = 0.0 if need.stiff else STIFF_BASE * need.I_C / need.I_E
        return -need.V_BE - available * share / (1.0 + share)

    def _collector_place(self, need: Need) -> _Equation:
        upper, V_sat = self.span[Node.COLLECTOR_RAIL], self.stage.saturation_voltage
        place = self.target.collector
        if place == "mid-swing":
            return _Equation(-0.5, 1.0, 0.5 * (upper + V_sat))
        if place == "max-swing":
            return _Equation(0.0, 1.0, self._equal_headrooms(need))
        return _Equation(0.0, 1.0, sign(self.stage.polarity) * place)

    def _equal_headrooms(self, need: Need) -> float:
        """V_C with I_C·(r_ac + r_e) = V_CE − V_CE(sat): cut-off and saturation equally far."""
        upper, lower, V_sat = *_ends(self.span), self.stage.saturation_voltage
        middle = _Equation(-0.5, 1.0, 0.5 * (upper + V_sat))
        emitter = _Equation(1.0, 0.0, lower + (self._emitter_voltage() or 0.0))
        V_E, _ = _voltages([*self._given(need), middle, emitter])
        r_e = self._unbypassed((V_E - lower) / need.I_E)

        def imbalance(V_C: float) -> float:
            r_ac = _loaded((upper - V_C) / need.I_C, self.stage.signal)
            return V_C - V_E - V_sat - need.I_C * (r_ac + r_e)

        return _bisect(imbalance, V_E + V_sat, upper)

    def _follower_place(self, need: Need) -> float:
        upper, lower, V_sat = *_ends(self.span), self.stage.saturation_voltage
        drop = self.target.emitter_voltage or (self._emitter_voltage() if self.target.supply_over else None)
        if drop is not None:
            return lower + drop
        if self.target.collector != "max-swing":
            return 0.5 * (lower + upper - V_sat)

        def imbalance(V_E: float) -> float:
            return need.I_E * _loaded((V_E - lower) / need.I_E, self.stage.signal) - (upper - V_E - V_sat)

        return _bisect(imbalance, lower, upper)

    def _unbypassed(self, emitter_ohms: float) -> float:
        signal = self.stage.signal
        if signal is None or not signal.bypassed:
            return emitter_ohms
        return self.fixed.get("RE1", 0.0)


def wires_at(wiring: Wiring, node: Node) -> list[Wire]:
    """The wires that end at a terminal."""
    return [wire for wire in wiring.wires if node in (wire.node, wire.other)]


def fed_from_ground(wiring: Wiring) -> bool:
    """Whether the base hangs on ground alone (a split supply)."""
    return [wire.other for wire in wires_at(wiring, Node.BASE)] == [Node.GROUND]


def draw(node: Node, wires: list[Wire], need: Need) -> float:
    """What the transistor draws from a terminal [A]; by hand nothing from a divider."""
    stiff = need.stiff and any(wire.other is Node.EMITTER_RAIL for wire in wires)
    I_B = 0.0 if stiff else need.I_B
    return {Node.BASE: I_B, Node.COLLECTOR: need.I_C, Node.EMITTER: -need.I_E}[node]


def _loaded(ohms: float, signal: Signal | None) -> float:
    """A resistance with the load in parallel [Ω]."""
    load = None if signal is None else signal.load
    return ohms if load is None else ohms * load / (ohms + load)


def _ends(span: Mapping[Node, float]) -> tuple[float, float]:
    return span[Node.COLLECTOR_RAIL], span[Node.EMITTER_RAIL]


def _adds(kept: list[_Equation], equation: _Equation) -> bool:
    """Whether an equation tells something that the ones kept do not."""
    if not kept:
        return True
    first = kept[0]
    determinant = first.emitter * equation.collector - first.collector * equation.emitter
    return len(kept) < 2 and abs(determinant) > _INDEPENDENT


def _voltages(equations: list[_Equation]) -> tuple[float, float]:
    """(V_E, V_C) from the first two independent equations."""
    kept: list[_Equation] = []
    for equation in equations:
        if _adds(kept, equation):
            kept.append(equation)
    matrix = [[equation.emitter, equation.collector] for equation in kept]
    V_E, V_C = np.linalg.solve(matrix, [equation.right for equation in kept])
    return float(V_E), float(V_C)


def _bisect(function: Callable[[float], float], low: float, high: float) -> float:
    """The zero of a monotone function between two ends; ArithmeticError where there is none."""
    rising = function(low) < 0.0
    if rising is (function(high) < 0.0):
        raise ArithmeticError("no zero between the ends")
    for _ in range(_BISECTIONS):
        middle = 0.5 * (low + high)
        below = (function(middle) < 0.0) is rising
        low, high = (middle, high) if below else (low, middle)
    return 0.5 * (low + high)
