"""Small-signal answers at the operating point: one linear solve with capacitors open or short.

The junctions are replaced by their tangent with T_j held (self-heating is too slow for the
signal), so g_m, r_π and r_o need no formulas of their own. An ideal transistor has no tangent:
its signal quantities are NaN.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.junction import Laws
from biasband.circuit.network import Ports, Rails, condense, sign, supply_excitation, total
from biasband.circuit.newton import tangent
from biasband.circuit.operating_point import OperatingPoint
from biasband.circuit.scenarios import Array, Values
from biasband.circuit.topology import TERMINALS, Node, Wire, Wiring
from biasband.stage import Polarity, Signal

LOAD, SOURCE = "load", "source"
"""The names under which load and source resistance stand among the resistances."""

_RAILS = (Node.COLLECTOR_RAIL, Node.EMITTER_RAIL, Node.GROUND, Node.SOURCE)
_QUIET: Rails = dict.fromkeys(_RAILS, 0.0)


@dataclass(frozen=True)
class Coupled:
    """The stage as the signal sees it: capacitors short, supplies ground; resistances [Ω] by name."""

    wiring: Wiring
    resistances: Mapping[str, Values]

    def tied_to_source(self, node: Node, *, without: str = "") -> Coupled:
        """The same with a terminal driven directly, and the wire named `without` taken off."""
        wires = tuple(wire for wire in self.wiring.wires if without not in wire.parts)
        wiring = Wiring(wires, {**self.wiring.ties, node: Node.SOURCE}, self.wiring.output)
        return Coupled(wiring, self.resistances)

    def with_quiet_source(self) -> Coupled:
        """The same with the source's EMF zero."""
        wires = tuple(
            Wire(wire.parts, wire.node, Node.GROUND) if wire.other is Node.SOURCE else wire
            for wire in self.wiring.wires
        )
        ties = {n: Node.GROUND if rail is Node.SOURCE else rail for n, rail in self.wiring.ties.items()}
        return Coupled(Wiring(wires, ties, self.wiring.output), self.resistances)


def couple(wiring: Wiring, signal: Signal | None, resistances: Mapping[str, Values]) -> Coupled:
    """Wire the stage for the signal; without a signal section base driven, RE unbypassed, no load."""
    asked = signal or Signal()
    wires, ties = list(wiring.wires), dict(wiring.ties)
    if asked.bypassed:
        wires, ties = _bypass(wires, ties)
    ohms = dict(resistances)
    if asked.load is not None:
        wires.append(Wire((LOAD,), wiring.output, Node.GROUND))
        ohms[LOAD] = asked.load
    if asked.source_resistance > 0.0:
        wires.append(Wire((SOURCE,), Node.BASE, Node.SOURCE))
        ohms[SOURCE] = asked.source_resistance
    else:
        ties[Node.BASE] = Node.SOURCE
    return Coupled(Wiring(tuple(wires), ties, wiring.output), ohms)


def _bypass(wires: list[Wire], ties: dict[Node, Node]) -> tuple[list[Wire], dict[Node, Node]]:
    """Short the emitter resistor, or the second of its two parts."""
    kept: list[Wire] = []
    for wire in wires:
        if wire.node is not Node.EMITTER:
            kept.append(wire)
        elif len(wire.parts) > 1:
            kept.append(Wire(wire.parts[:1], wire.node, wire.other))
        else:
            ties = {**ties, Node.EMITTER: wire.other}
    return kept, ties


@dataclass(frozen=True)
class Answer:
    """How terminals and terminal currents move with an excitation, per volt of it."""

    volts: Mapping[Node, Values]
    base_current: Array
    collector_current: Array


def answer(ports: Ports, law: Laws, point: OperatingPoint) -> Answer:
    """Solve `v = open − Z·Y·v` for the junction voltages, then the terminals follow.

    Y is the junctions' Jacobian at the point; shape (N,) throughout. Source: small-signal analysis as
    in any text on electronic circuits ("common practice").
    """
    here = tangent(ports, law, point.base_emitter, point.base_collector)
    v_be, v_bc = here.solve(ports.open_be, ports.open_bc)
    i_b = here.flow.base_be * v_be + here.flow.base_bc * v_bc
    i_c = here.flow.collector_be * v_be + here.flow.collector_bc * v_bc
    return Answer({node: ports.voltage(node, i_b, i_c) for node in TERMINALS}, i_b, i_c)


def feedthrough(coupled: Coupled, law: Laws, point: OperatingPoint, polarity: Polarity) -> Values:
    """Output over supply for the wiring given: the DC wiring (open) or the coupled one (short)."""
    excitation = {**_QUIET, **supply_excitation(polarity)}
    ports = condense(coupled.wiring, coupled.resistances, excitation)
    return sign(polarity) * answer(ports, law, point).volts[coupled.wiring.output]


def voltage_gain(coupled: Coupled, law: Laws, point: OperatingPoint) -> Values:
    """From the source's EMF to the output, a ratio; negative where the stage inverts.

    Worked case: bypassed, no load, a stiff source: −g_m·(RC ‖ r_o), g_m = I_C/V_T.
    """
    ports = condense(coupled.wiring, coupled.resistances, {**_QUIET, Node.SOURCE: 1.0})
    return answer(ports, law, point).volts[coupled.wiring.output]


def input_resistance(coupled: Coupled, law: Laws, point: OperatingPoint) -> Values:
    """Seen from the source's terminal, load on [Ω]."""
    return driving_point(coupled.tied_to_source(Node.BASE, without=SOURCE), law, point, Node.BASE)


def output_resistance(coupled: Coupled, law: Laws, point: OperatingPoint) -> Values:
    """Seen from the load, with the source's EMF zero and the load off [Ω]."""
    output = coupled.wiring.output
    driven = coupled.with_quiet_source().tied_to_source(output, without=LOAD)
    return driving_point(driven, law, point, output)


def driving_point(driven: Coupled, law: Laws, point: OperatingPoint, node: Node) -> Values:
    """Resistance [Ω] seen by one volt at a driven terminal: the currents of its wires and its own."""
    ports = condense(driven.wiring, driven.resistances, {**_QUIET, Node.SOURCE: 1.0})
    moved = answer(ports, law, point)
    volts = {**_QUIET, **moved.volts}
    own = {
        Node.BASE: moved.base_current,
        Node.COLLECTOR: moved.collector_current,
        Node.EMITTER: -(moved.base_current + moved.collector_current),
    }[node]
    current = own
    for wire in driven.wiring.wires:
        if node in (wire.node, wire.other):
            far = wire.other if wire.node is node else wire.node
            current = current + (1.0 - volts[far]) / total(wire, driven.resistances)
    with np.errstate(divide="ignore"):
        return 1.0 / current
