"""The bias network, condensed to the two ports that the junctions see.

The network is linear, so its nodes are eliminated once, for all scenarios together. Everything
here is in the *transistor's frame*: a PNP stage has every voltage and current reversed, so that
the collector rail is always the higher one and the laws of the NPN transistor hold.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from biasband.circuit.scenarios import Rows, Scenarios, Values, rows_of
from biasband.circuit.topology import TERMINALS, Node, Wire, Wiring
from biasband.stage import Polarity

Rails = Mapping[Node, Values]
"""The voltage [V] of each rail, in the transistor's frame."""


@dataclass(frozen=True)
class Ports:
    """A linear network seen from the junctions: `v = open − Z·i`, v = (V_BE, V_BC), i = (I_B, I_C).

    `open_be`, `open_bc` [V] and `z11` … `z22` [Ω] have shape (N,) or are numbers. `node_open` [V]
    and `node_z` [Ω] give each terminal's own voltage, `node_open − node_z[0]·I_B − node_z[1]·I_C`.
    """

    open_be: Values
    open_bc: Values
    z11: Values
    z12: Values
    z21: Values
    z22: Values
    node_open: Mapping[Node, Values]
    node_z: Mapping[Node, tuple[Values, Values]]

    def part(self, rows: Rows) -> Ports:
        """The network of the scenarios at `rows`."""
        plain = (rows_of(getattr(self, name), rows) for name in _PLAIN_PORTS)
        open_be, open_bc, z11, z12, z21, z22 = plain
        return Ports(
            open_be, open_bc, z11, z12, z21, z22,
            node_open={node: rows_of(volts, rows) for node, volts in self.node_open.items()},
            node_z={node: (rows_of(b, rows), rows_of(c, rows)) for node, (b, c) in self.node_z.items()},
        )  # fmt: skip

    def currents(self, V_BE: Values, V_BC: Values) -> tuple[Values, Values]:
        """(I_B, I_C) [A] that the network drives with both junction voltages [V] held: Z⁻¹·(open − v)."""
        over_be, over_bc = self.open_be - V_BE, self.open_bc - V_BC
        determinant = self.z11 * self.z22 - self.z12 * self.z21
        return (
            (self.z22 * over_be - self.z12 * over_bc) / determinant,
            (self.z11 * over_bc - self.z21 * over_be) / determinant,
        )

    def voltage(self, node: Node, base_current: Values, collector_current: Values) -> Values:
        """Voltage [V] of a terminal while the transistor draws these currents [A]."""
        z_base, z_collector = self.node_z[node]
        return self.node_open[node] - z_base * base_current - z_collector * collector_current


_PLAIN_PORTS = ("open_be", "open_bc", "z11", "z12", "z21", "z22")


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


def condense(wiring: Wiring, resistances: Mapping[str, Values], rail_voltages: Rails) -> Ports:
    """Eliminate the nodes of a wired network.

    Nodal analysis, G·v = J − i, solved for three right-hand sides by elimination without pivoting
    (G is a diagonally dominant M-matrix). Entries that are structurally zero cost nothing.
    Source: nodal analysis and elimination as in any text on circuit theory ("common practice").
    """
    solved: dict[Node, list[Values]] = {}
    known = dict(rail_voltages)
    for node, rail in wiring.ties.items():
        known[node] = rail_voltages[rail]
        solved[node] = [known[node], 0.0, 0.0]
    for node in TERMINALS:
        lone = _lone_wire(wiring, node, known)
        if lone is not None:
            ohms = total(lone, resistances)
            solved[node] = [known[lone.other], *(_product(share, ohms) for share in _drawn(node))]
    free = [node for node in TERMINALS if node not in solved]
    matrix: dict[tuple[Node, Node], Values] = {(row, column): 0.0 for row in free for column in free}
    currents: dict[Node, Values] = dict.fromkeys(free, 0.0)
    for wire in wiring.wires:
        _stamp(wire, resistances, known, matrix, currents)
    columns = [[currents[node], *_drawn(node)] for node in free]
    _eliminate([[matrix[row, column] for column in free] for row in free], columns)
    return _ports({**solved, **dict(zip(free, columns, strict=True))})


def _lone_wire(wiring: Wiring, node: Node, known: Mapping[Node, Values]) -> Wire | None:
    """The wire of a terminal that one wire joins to a known voltage: nothing to eliminate."""
    wires = [wire for wire in wiring.wires if node in (wire.node, wire.other)]
    return wires[0] if len(wires) == 1 and node not in known and wires[0].other in known else None


def _drawn(node: Node) -> tuple[float, float]:
    """What the transistor draws from a node per ampere of I_B and of I_C (I_E = I_B + I_C flows in)."""
    return {Node.BASE: (1.0, 0.0), Node.COLLECTOR: (0.0, 1.0), Node.EMITTER: (-1.0, -1.0)}[node]


def _stamp(
    wire: Wire,
    resistances: Mapping[str, Values],
    known: Mapping[Node, Values],
    matrix: dict[tuple[Node, Node], Values],
    currents: dict[Node, Values],
) -> None:
    """Add one wire's conductance to the nodal equations."""
    if wire.node not in currents and wire.other not in currents:
        return
    conductance = 1.0 / total(wire, resistances)
    for here, there in ((wire.node, wire.other), (wire.other, wire.node)):
        if here not in currents:
            continue
        matrix[here, here] = matrix[here, here] + conductance
        if there in currents:
            matrix[here, there] = matrix[here, there] - conductance
        elif not _is_zero(known[there]):
            currents[here] = currents[here] + conductance * known[there]


def _eliminate(matrix: list[list[Values]], columns: list[list[Values]]) -> None:
    """Gauss–Jordan in place: afterwards `columns` holds the solution."""
    size = len(matrix)
    for pivot in range(size):
        inverse = 1.0 / matrix[pivot][pivot]
        others = [row for row in range(size) if row != pivot and not _is_zero(matrix[row][pivot])]
        if others:
            matrix[pivot] = [_product(entry, inverse) for entry in matrix[pivot]]
        columns[pivot][:] = [_product(entry, inverse) for entry in columns[pivot]]
        for row in others:
            factor = matrix[row][pivot]
            matrix[row] = _less(matrix[row], factor, matrix[pivot])
            columns[row][:] = _less(columns[row], factor, columns[pivot])


def _less(row: list[Values], factor: Values, pivot_row: list[Values]) -> list[Values]:
    pairs = zip(row, pivot_row, strict=True)
    return [entry if _is_zero(other) else entry - _product(other, factor) for entry, other in pairs]


def _product(entry: Values, factor: Values) -> Values:
    if _is_zero(entry) or _is_one(factor):
        return entry
    return factor if _is_one(entry) else entry * factor


def _is_zero(entry: Values) -> bool:
    """A structural zero, not an array that happens to hold zeros."""
    return isinstance(entry, float) and entry == 0.0


def _is_one(entry: Values) -> bool:
    return isinstance(entry, float) and entry == 1.0


def _ports(nodes: Mapping[Node, list[Values]]) -> Ports:
    base, collector, emitter = (nodes[node] for node in TERMINALS)
    open_be, z11, z12 = _less(base, 1.0, emitter)
    open_bc, z21, z22 = _less(base, 1.0, collector)
    return Ports(
        open_be, open_bc, z11, z12, z21, z22,
        node_open={node: values[0] for node, values in nodes.items()},
        node_z={node: (values[1], values[2]) for node, values in nodes.items()},
    )  # fmt: skip


def total(wire: Wire, resistances: Mapping[str, Values]) -> Values:
    """Resistance [Ω] of a wire: its parts in series."""
    first, *others = (resistances[part] for part in wire.parts)
    return sum(others, start=first)
