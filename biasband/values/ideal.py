"""Ideal resistors: every free one is the voltage across it over the current through it.

Done twice: by hand (V_BE = 0.7 V, I_E = I_C, an unloaded divider) and refined with the real
transistor, so that the ideal stage meets its target to 0.1 % and better. No topology has formulas
of its own: Kirchhoff's current law at each terminal gives the current of the one resistor there
that is free, and where a base has two, the one to the emitter's rail carries a multiple of I_B.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from biasband.circuit.network import sign, total
from biasband.circuit.reading import wiring_of
from biasband.circuit.topology import TERMINALS, Node, Wire, Wiring
from biasband.errors import Fault, PhysicallyImpossible
from biasband.quantity import Kind, format_quantity
from biasband.stage import Stage, Target
from biasband.values.aim import MET, STIFF_BASE, Aim, aim, draw, fed_from_ground, wires_at
from biasband.values.device import Device


@dataclass(frozen=True, kw_only=True)
class Step:
    """One resistor's formula with its numbers: `ohms = (high − low) / current − beside`.

    `high` and `low` are the real voltages [V] at `high_node` and `low_node`; `beside` [Ω] is a fixed
    part in series (RE1). `current_rule` names the rule that set the current; `rule` the one that
    stands in the formula's place.
    """

    resistor: str
    ohms: float
    high_node: Node
    high: float
    low_node: Node
    low: float
    current: float
    beside: float = 0.0
    current_rule: str = ""
    rule: str = ""


@dataclass(frozen=True)
class Ideal:
    """The free resistors that meet a target, by name, and the node voltages they were made for."""

    steps: Mapping[str, Step]
    aim: Aim


def ideal(stage: Stage, target: Target, fixed: Mapping[str, float], device: Device) -> Ideal:
    """Design the resistors that are not fixed [Ω].

    Raises PhysicallyImpossible where the fixed ones leave no V_CE, or where a free one would have to
    be zero or negative.
    """
    try:
        aimed = aim(stage, target, fixed, device)
    except ArithmeticError:
        held = ", ".join(fixed) or "the target"
        problem = f"no collector current satisfies {held} at this supply"
        raise PhysicallyImpossible((Fault(_file(stage), None, "resistors", problem),)) from None
    if not _between_rails(aimed) or not aimed.V_CE > stage.saturation_voltage:
        raise PhysicallyImpossible((_no_room(stage, fixed, aimed),))
    steps = {step.resistor: step for step in _Walk(stage, target, fixed, aimed).steps()}
    bad = [step for step in steps.values() if not step.ohms > 0.0]
    if bad:
        raise PhysicallyImpossible(tuple(_negative(stage, step) for step in bad))
    return Ideal(steps, aimed)


def _no_room(stage: Stage, fixed: Mapping[str, float], aimed: Aim) -> Fault:
    current = format_quantity(aimed.need.I_C, Kind.CURRENT)
    held = ", ".join(f"{name} {format_quantity(ohms, Kind.RESISTANCE)}" for name, ohms in fixed.items())
    real = sign(stage.polarity)
    nodes = (Node.COLLECTOR, Node.EMITTER, Node.COLLECTOR_RAIL, Node.EMITTER_RAIL)
    collector, emitter, upper, lower = (_volts(real * aimed.volts[node]) for node in nodes)
    problem = (
        f"{current} through {held or 'this stage'} would need the collector at {collector} and the emitter "
        f"at {emitter}: not between the rails, {lower} and {upper}, with more than V_CE(sat), "
        f"{_volts(stage.saturation_voltage)}, between them"
    )
    hint = "lower the current or the resistors that carry it, or raise the supply"
    return Fault(_file(stage), None, "target.collector_current", problem, hint=hint)


def _between_rails(aimed: Aim) -> bool:
    lower, upper = aimed.volts[Node.EMITTER_RAIL], aimed.volts[Node.COLLECTOR_RAIL]
    places = (aimed.volts[Node.EMITTER], aimed.volts[Node.COLLECTOR])
    return all(lower - MET <= volts <= upper + MET for volts in places)


def _volts(volts: float) -> str:
    return format_quantity(volts, Kind.VOLTAGE, digits=3)


def _negative(stage: Stage, step: Step) -> Fault:
    ends = f"{step.high_node} at {_volts(step.high)}, {step.low_node} at {_volts(step.low)}"
    ohms, current = format_quantity(step.ohms, Kind.RESISTANCE), format_quantity(step.current, Kind.CURRENT)
    problem = f"would have to be {ohms}: {ends}, {current} through it"
    key = f"resistors.{step.resistor}"
    return Fault(_file(stage), None, key, problem, hint="move the target or the fixed values")


def _file(stage: Stage) -> str:
    return stage.files[0].path if stage.files else stage.title


class _Walk:
    """One walk over the terminals, base first, that gives every free resistor its current."""

    def __init__(self, stage: Stage, target: Target, fixed: Mapping[str, float], aimed: Aim) -> None:
        self.stage, self.target, self.fixed, self.aim = stage, target, fixed, aimed
        self.wiring: Wiring = wiring_of(stage)
        self.currents: dict[Wire, float] = {
            wire: self._across(wire) / float(total(wire, fixed))
            for wire in self.wiring.wires
            if all(part in fixed for part in wire.parts)
        }

    def steps(self) -> list[Step]:
        """A step for every free resistor."""
        return [step for node in TERMINALS for step in self._at(node)]

    def _at(self, node: Node) -> list[Step]:
        wires = wires_at(self.wiring, node)
        free = [wire for wire in wires if wire not in self.currents]
        if node is Node.BASE and len(free) == 1 and self.aim.need.stiff and fed_from_ground(self.wiring):
            return [self._stiff_base(free[0])]
        steps = []
        if len(free) == 2:
            ruled = next(wire for wire in free if wire.other is Node.EMITTER_RAIL)
            ratio = self.target.divider_current_ratio
            self.currents[ruled] = ratio * self.aim.need.I_B
            steps.append(self._step(ruled, f"{ratio:g} times I_B"))
            free.remove(ruled)
        for wire in free:
            away = sum(self._leaving(node, other) for other in wires if other in self.currents)
            current = -(draw(node, wires, self.aim.need) + away)
            self.currents[wire] = current if wire.node is node else -current
            steps.append(self._step(wire))
        return steps

    def _stiff_base(self, wire: Wire) -> Step:
        """By hand the base is at ground, and R_B = 0.1·β·R_E."""
        need, volts = self.aim.need, self.aim.volts
        emitter_ohms = (volts[Node.EMITTER] - volts[Node.EMITTER_RAIL]) / need.I_E
        ohms = STIFF_BASE * need.I_C / need.I_B * emitter_ohms
        self.currents[wire] = -need.I_B
        return Step(
            resistor=wire.parts[0], ohms=ohms, high_node=wire.other, high=0.0, low_node=wire.node, low=0.0,
            current=need.I_B, rule=f"{STIFF_BASE:g} h_FE RE",
        )  # fmt: skip

    def _leaving(self, node: Node, wire: Wire) -> float:
        return self.currents[wire] if wire.node is node else -self.currents[wire]

    def _across(self, wire: Wire) -> float:
        return self.aim.volts[wire.node] - self.aim.volts[wire.other]

    def _step(self, wire: Wire, current_rule: str = "") -> Step:
        """The wire's one free part, written so that voltage and current are positive."""
        current, across = self.currents[wire], self._across(wire)
        beside = sum(self.fixed[part] for part in wire.parts if part in self.fixed)
        name = next(part for part in wire.parts if part not in self.fixed)
        real = {node: sign(self.stage.polarity) * volts for node, volts in self.aim.volts.items()}
        ends = sorted((wire.node, wire.other), key=lambda node: -real[node])
        ohms = (across / current if current else float("inf")) - beside
        return Step(
            resistor=name, ohms=ohms, high_node=ends[0], high=real[ends[0]], low_node=ends[1],
            low=real[ends[1]], current=abs(current), beside=beside, current_rule=current_rule,
        )  # fmt: skip
