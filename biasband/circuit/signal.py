"""Small-signal answers at the operating point: the stage as a linear two-port, capacitors short.

The junctions are replaced by their tangent with T_j held (self-heating is too slow for the
signal), so g_m, r_π and r_o need no formulas of their own. An ideal transistor has no tangent:
its signal quantities are NaN.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

from biasband.circuit.flow import Flow
from biasband.circuit.network import Network, Rails
from biasband.circuit.newton import Tangent
from biasband.circuit.scenarios import Values
from biasband.circuit.structure import minus, plus
from biasband.circuit.topology import TERMINALS, Node, Wire, Wiring


def bypassed(wiring: Wiring) -> Wiring:
    """The wiring with the emitter resistor shorted, or the second of its two parts."""
    wires, ties = [], dict(wiring.ties)
    for wire in wiring.wires:
        if wire.node is not Node.EMITTER:
            wires.append(wire)
        elif len(wire.parts) > 1:
            wires.append(Wire(wire.parts[:1], wire.node, wire.other))
        else:
            ties[Node.EMITTER] = wire.other
    return Wiring(tuple(wires), ties, wiring.output)


@dataclass(frozen=True)
class Linear:
    """A network with the junctions' tangent in it: a linear circuit."""

    network: Network
    tangent: Tangent

    @classmethod
    def of(cls, network: Network, at: Flow) -> Linear:
        """The linear circuit that a network is with the junctions at their flow."""
        return cls(network, Tangent.of(network.impedances, at))

    def driven(self, rails: Rails) -> Mapping[Node, Values]:
        """How far the terminals move while the rails move so far [V]."""
        return self._moved({node: self.network.open(node, rails) for node in TERMINALS})

    def injected(self, node: Node) -> Mapping[Node, Values]:
        """How far the terminals move per ampere into one of them [Ω]."""
        return self._moved({other: self.network.ohms[other].get(node, 0.0) for other in TERMINALS})

    def _moved(self, open_: Mapping[Node, Values]) -> Mapping[Node, Values]:
        """Solve `J·v = open` for the junctions; the emitter follows from its current, the others from it.

        Shape (N,) throughout, from the terminals' voltages without the transistor. Source: small-signal
        analysis as in any text on electronic circuits ("common practice").
        """
        base, collector, emitter = (open_[node] for node in TERMINALS)
        v_be, v_bc = self.tangent.solve(minus(base, emitter), minus(base, collector))
        currents = {node: self._current(node, v_be, v_bc) for node in self.network.ohms[Node.EMITTER]}
        emitter = self.network.loaded(Node.EMITTER, emitter, currents)
        base = plus(emitter, v_be)
        return {Node.BASE: base, Node.COLLECTOR: base - v_bc, Node.EMITTER: emitter}

    def _current(self, node: Node, v_be: Values, v_bc: Values) -> Values:
        at = self.tangent.flow
        by_be, by_bc = {
            Node.BASE: (at.base_be, at.base_bc),
            Node.COLLECTOR: (at.collector_be, at.collector_bc),
            Node.EMITTER: (at.emitter_be, at.emitter_bc),
        }[node]
        return by_be * v_be + by_bc * v_bc


@dataclass(frozen=True)
class Coupled:
    """A stage between its source and its load [Ω], a linear two-port from base to output; shape (N,).

    Volts per ampere [Ω] while neither is connected: `input` at the base and `forward` at the output per
    ampere into the base, `back` at the base and `output` at the output per ampere into the output.
    Source: open-circuit impedance parameters, as in any text on circuit theory ("common practice").
    """

    input: Values
    forward: Values
    back: Values
    output: Values
    source: Values
    load: Values | None

    @classmethod
    def of(cls, stage: Linear, output: Node, *, source: Values, load: Values | None) -> Coupled:
        """A linear circuit, with its output at a terminal, between source and load."""
        by_base, by_output = stage.injected(Node.BASE), stage.injected(output)
        return cls(
            by_base[Node.BASE], by_base[output], by_output[Node.BASE], by_output[output], source, load
        )

    @cached_property
    def unloaded_gain(self) -> Values:
        """From the source's EMF to the output, the load off."""
        return self.forward / (self.input + self.source)

    @cached_property
    def voltage_gain(self) -> Values:
        """From the source's EMF to the output, a ratio; negative where the stage inverts.

        Worked case: bypassed, no load, a stiff source: −g_m·(RC ‖ r_o), g_m = I_C/V_T.
        """
        return self.unloaded_gain * self._load_share

    @cached_property
    def input_resistance(self) -> Values:
        """Seen from the source's terminal, load on [Ω]."""
        if self.load is None:
            return self.input
        return self.input - self.back * self.forward / (self.output + self.load)

    @cached_property
    def output_resistance(self) -> Values:
        """Seen from the load, with the source's EMF zero and the load off [Ω]."""
        return self.output - self.back * self.unloaded_gain

    def feedthrough(self, moved: Mapping[Node, Values], output: Node) -> Values:
        """How far the output moves, where the terminals would move so far without source and load."""
        return (moved[output] - self.unloaded_gain * moved[Node.BASE]) * self._load_share

    @cached_property
    def _load_share(self) -> Values:
        """What the load leaves of the output's voltage."""
        return 1.0 if self.load is None else self.load / (self.load + self.output_resistance)
