"""The bias network, condensed to the two ports that the junctions see.

The network is linear, so its nodes are eliminated once, for all scenarios together. Everything
here is in the *transistor's frame*: a PNP stage has every voltage and current reversed, so that
the collector rail is always the higher one and the laws of the NPN transistor hold.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from functools import cached_property

from biasband.circuit.scenarios import Rows, Scenarios, Values, rows_of
from biasband.circuit.structure import is_zero, minus, plus, times
from biasband.circuit.topology import TERMINALS, Node, Wire, Wiring
from biasband.stage import Polarity

Rails = Mapping[Node, Values]
"""The voltage [V] of each rail, in the transistor's frame."""


@dataclass(frozen=True)
class Impedances:
    """What the junctions lose in a network: `Z·i`, i = (I_B, I_C); [Ω], shape (N,) or numbers."""

    z11: Values
    z12: Values
    z21: Values
    z22: Values

    def lost(self, base: Values, collector: Values) -> tuple[Values, Values]:
        """Z·(base, collector): by how much (V_BE, V_BC) [V] fall where the transistor draws these [A]."""
        return (
            plus(times(self.z11, base), times(self.z12, collector)),
            plus(times(self.z21, base), times(self.z22, collector)),
        )


@dataclass(frozen=True)
class Ports(Impedances):
    """A linear network seen from the junctions: `v = open − Z·i`, v = (V_BE, V_BC); open voltages [V]."""

    open_be: Values
    open_bc: Values

    def part(self, rows: Rows) -> Ports:
        """The network of the scenarios at `rows`."""
        return Ports(**{each.name: rows_of(getattr(self, each.name), rows) for each in fields(Ports)})

    def currents(self, V_BE: Values, V_BC: Values) -> tuple[Values, Values]:
        """(I_B, I_C) [A] that the network drives with both junction voltages [V] held: Z⁻¹·(open − v)."""
        over_be, over_bc = self.open_be - V_BE, self.open_bc - V_BC
        determinant = self.z11 * self.z22 - self.z12 * self.z21
        return (
            (self.z22 * over_be - self.z12 * over_bc) / determinant,
            (self.z11 * over_bc - self.z21 * over_be) / determinant,
        )


@dataclass(frozen=True)
class Network:
    """A wired network seen from the transistor's terminals, every other node eliminated.

    `ohms[a][b]` [Ω]: how far terminal a rises per ampere into terminal b; nothing where it is missing.
    `feeds[a][r]` [S]: what joins terminal a to rail r; a terminal that has a rail's voltage while the
    transistor draws nothing stands in `held` instead.
    """

    ohms: Mapping[Node, Mapping[Node, Values]]
    feeds: Mapping[Node, Mapping[Node, Values]]
    held: Mapping[Node, Node]

    @cached_property
    def impedances(self) -> Impedances:
        """What the junctions see, V_BE above and V_BC below: I_B and I_C are put into the emitter again."""
        return Impedances(
            self._fall(Node.EMITTER, Node.BASE), self._fall(Node.EMITTER, Node.COLLECTOR),
            self._fall(Node.COLLECTOR, Node.BASE), self._fall(Node.COLLECTOR, Node.COLLECTOR),
        )  # fmt: skip

    def _fall(self, other: Node, drawn: Node) -> Values:
        """By how much base to `other` [V] falls per ampere drawn from a terminal and put into the emitter."""

        def ohms(node: Node, into: Node) -> Values:
            return self.ohms[node].get(into, 0.0)

        falls = plus(ohms(Node.BASE, drawn), ohms(other, Node.EMITTER))
        return minus(falls, plus(ohms(Node.BASE, Node.EMITTER), ohms(other, drawn)))

    def ports(self, rails: Rails) -> Ports:
        """What the junctions see at these voltages of the rails."""
        z = self.impedances
        base, collector, emitter = (self.open(node, rails) for node in TERMINALS)
        return Ports(z.z11, z.z12, z.z21, z.z22, minus(base, emitter), minus(base, collector))

    def open(self, node: Node, rails: Rails) -> Values:
        """Voltage [V] of a terminal while the transistor draws nothing; a rail not named is at 0 V."""
        if node in self.held:
            return rails.get(self.held[node], 0.0)
        volts: Values = 0.0
        for other, ohms in self.ohms[node].items():
            driven: Values = 0.0
            for rail, siemens in self.feeds[other].items():
                driven = plus(driven, times(siemens, rails.get(rail, 0.0)))
            volts = plus(volts, times(driven, ohms))
        return volts

    def loaded(self, node: Node, open_voltage: Values, currents: Mapping[Node, Values]) -> Values:
        """Voltage [V] of a terminal while I_B and I_C [A] are drawn and I_E is put in, from its open one."""
        volts = open_voltage
        for other, ohms in self.ohms[node].items():
            change = times(ohms, currents[other])
            volts = plus(volts, change) if other is Node.EMITTER else minus(volts, change)
        return volts


def sign(polarity: Polarity) -> float:
    """+1 for NPN, −1 for PNP: what a real voltage is multiplied by to reach the transistor's frame."""
    return 1.0 if polarity == "npn" else -1.0


def rails(polarity: Polarity, scenarios: Scenarios) -> Rails:
    """Rail voltages [V] in the transistor's frame, ripple included."""
    positive = scenarios.supply + scenarios.ripple
    negative = scenarios.negative_supply
    upper, lower = (positive, negative) if polarity == "npn" else (-negative, -positive)
    return {Node.COLLECTOR_RAIL: upper, Node.EMITTER_RAIL: lower, Node.GROUND: 0.0}


def supply_excitation(polarity: Polarity) -> Rails:
    """How the rails move, in the transistor's frame, per real volt of the positive supply."""
    moving = Node.COLLECTOR_RAIL if polarity == "npn" else Node.EMITTER_RAIL
    still = dict.fromkeys((Node.COLLECTOR_RAIL, Node.EMITTER_RAIL, Node.GROUND), 0.0)
    return {**still, moving: sign(polarity)}


def condense(wiring: Wiring, resistances: Mapping[str, Values]) -> Network:
    """Eliminate the nodes of a wired network.

    Nodal analysis, G·v = J + i, inverted by elimination without pivoting (G is a diagonally dominant
    M-matrix). Entries that are structurally zero cost nothing, nor does a terminal that is tied to a
    rail or that one wire alone joins to it.
    Source: nodal analysis and elimination as in any text on circuit theory ("common practice").
    """
    ties = wiring.ties
    ohms: dict[Node, Mapping[Node, Values]] = {node: {} for node in ties}
    held = dict(ties)
    for node in TERMINALS:
        lone = _lone_wire(wiring, node)
        if lone is not None:
            ohms[node] = {node: total(lone, resistances)}
            held[node] = ties.get(lone.other, lone.other)
    free = [node for node in TERMINALS if node not in held]
    feeds: dict[Node, dict[Node, Values]] = {node: {} for node in free}
    matrix: dict[tuple[Node, Node], Values] = {(row, column): 0.0 for row in free for column in free}
    for wire in wiring.wires:
        _stamp(wire, resistances, ties, matrix, feeds)
    inverse = _inverse([[matrix[row, column] for column in free] for row in free])
    ohms |= {node: dict(zip(free, row, strict=True)) for node, row in zip(free, inverse, strict=True)}
    return Network(ohms, feeds, held)


def _lone_wire(wiring: Wiring, node: Node) -> Wire | None:
    """The wire of a terminal that one wire joins to a known voltage: nothing to eliminate."""
    wires = [wire for wire in wiring.wires if node in (wire.node, wire.other)]
    known = node not in wiring.ties and len(wires) == 1 and _is_known(wires[0].other, wiring.ties)
    return wires[0] if known else None


def _is_known(node: Node, ties: Mapping[Node, Node]) -> bool:
    """Whether a node's voltage is that of a rail."""
    return node in ties or node not in TERMINALS


def _stamp(
    wire: Wire,
    resistances: Mapping[str, Values],
    ties: Mapping[Node, Node],
    matrix: dict[tuple[Node, Node], Values],
    feeds: dict[Node, dict[Node, Values]],
) -> None:
    """Add one wire's conductance to the nodal equations."""
    if wire.node not in feeds and wire.other not in feeds:
        return
    conductance = 1.0 / total(wire, resistances)
    for here, there in ((wire.node, wire.other), (wire.other, wire.node)):
        if here not in feeds:
            continue
        matrix[here, here] = plus(matrix[here, here], conductance)
        if there in feeds:
            matrix[here, there] = minus(matrix[here, there], conductance)
        else:
            rail = ties.get(there, there)
            feeds[here][rail] = plus(feeds[here].get(rail, 0.0), conductance)


def _inverse(matrix: list[list[Values]]) -> list[list[Values]]:
    """Gauss–Jordan: the columns that begin as the unit matrix end as the inverse."""
    size = len(matrix)
    columns: list[list[Values]] = [[float(row == column) for column in range(size)] for row in range(size)]
    for pivot in range(size):
        inverse = 1.0 / matrix[pivot][pivot]
        others = [row for row in range(size) if row != pivot and not is_zero(matrix[row][pivot])]
        if others:
            matrix[pivot] = [times(entry, inverse) for entry in matrix[pivot]]
        columns[pivot] = [times(entry, inverse) for entry in columns[pivot]]
        for row in others:
            factor = matrix[row][pivot]
            matrix[row] = _less(matrix[row], factor, matrix[pivot])
            columns[row] = _less(columns[row], factor, columns[pivot])
    return columns


def _less(row: list[Values], factor: Values, pivot_row: list[Values]) -> list[Values]:
    return [minus(entry, times(other, factor)) for entry, other in zip(row, pivot_row, strict=True)]


def total(wire: Wire, resistances: Mapping[str, Values]) -> Values:
    """Resistance [Ω] of a wire: its parts in series."""
    first, *others = (resistances[part] for part in wire.parts)
    return sum(others, start=first)
