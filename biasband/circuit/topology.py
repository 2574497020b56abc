"""Topologies as data, and the wiring that a stage makes of one.

No solver knows a topology's name: a topology is a list of branches between the transistor's
terminals and the rails, and one more entry here is one more topology. The rails are named by what
they do for the transistor, so that an NPN and a PNP stage share their entry: the *collector rail*
is the positive supply of an NPN stage and ground (split supply: the negative supply) of a PNP one.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from types import MappingProxyType


class Node(StrEnum):
    """A place in the bias network: a terminal of the transistor, a rail, or a capacitor's far end."""

    BASE = "base"
    COLLECTOR = "collector"
    EMITTER = "emitter"
    COLLECTOR_RAIL = "collector rail"
    EMITTER_RAIL = "emitter rail"
    GROUND = "ground"
    SOURCE = "source"
    LOAD = "load"
    BYPASS = "bypass"


TERMINALS = (Node.BASE, Node.COLLECTOR, Node.EMITTER)


@dataclass(frozen=True)
class Branch:
    """A resistor between two nodes.

    Where an `optional` resistor is absent the branch is open, unless it was the only one at a
    terminal: then the terminal is tied to the rail.
    """

    resistor: str
    node: Node
    other: Node
    optional: bool = False


@dataclass(frozen=True)
class Topology:
    """A named bias network; `ties` maps terminals that sit directly on a rail.

    A branch that ends on a rail names it as `other`; a base with two branches has one of them to the
    emitter rail, which carries the divider current when both are designed.
    """

    name: str
    branches: tuple[Branch, ...]
    output: Node = Node.COLLECTOR
    split_supply: bool = False
    ties: Mapping[Node, Node] = field(default_factory=dict)

    @property
    def resistors(self) -> tuple[str, ...]:
        """The names of all resistors that the topology can hold, in order."""
        return tuple(branch.resistor for branch in self.branches)

    @property
    def compulsory(self) -> tuple[str, ...]:
        """The names of those that it cannot do without."""
        return tuple(branch.resistor for branch in self.branches if not branch.optional)


_ALL = (
    Topology(
        "base-resistor",
        (
            Branch("RB", Node.BASE, Node.COLLECTOR_RAIL),
            Branch("RC", Node.COLLECTOR, Node.COLLECTOR_RAIL),
            Branch("RE", Node.EMITTER, Node.EMITTER_RAIL, optional=True),
        ),
    ),
    Topology(
        "collector-feedback",
        (
            Branch("RB", Node.BASE, Node.COLLECTOR),
            Branch("R2", Node.BASE, Node.EMITTER_RAIL, optional=True),
            Branch("RC", Node.COLLECTOR, Node.COLLECTOR_RAIL),
            Branch("RE", Node.EMITTER, Node.EMITTER_RAIL, optional=True),
        ),
    ),
    Topology(
        "divider",
        (
            Branch("R1", Node.BASE, Node.COLLECTOR_RAIL),
            Branch("R2", Node.BASE, Node.EMITTER_RAIL),
            Branch("RC", Node.COLLECTOR, Node.COLLECTOR_RAIL),
            Branch("RE", Node.EMITTER, Node.EMITTER_RAIL),
        ),
    ),
    Topology(
        "split-supply",
        (
            Branch("RB", Node.BASE, Node.GROUND),
            Branch("RC", Node.COLLECTOR, Node.COLLECTOR_RAIL),
            Branch("RE", Node.EMITTER, Node.EMITTER_RAIL),
        ),
        split_supply=True,
    ),
    Topology(
        "follower",
        (
            Branch("R1", Node.BASE, Node.COLLECTOR_RAIL),
            Branch("R2", Node.BASE, Node.EMITTER_RAIL),
            Branch("RE", Node.EMITTER, Node.EMITTER_RAIL),
        ),
        output=Node.EMITTER,
        ties={Node.COLLECTOR: Node.COLLECTOR_RAIL},
    ),
)

TOPOLOGIES: Mapping[str, Topology] = MappingProxyType({topology.name: topology for topology in _ALL})
"""Every topology by name (physics: "Bias network")."""

EMITTER_PARTS = ("RE1", "RE2")
"""RE may be given as two resistors in series: RE1 next to the emitter, RE2 bypassed."""


@dataclass(frozen=True)
class Wire:
    """A branch as wired in a stage: one or more resistors in series between two nodes."""

    parts: tuple[str, ...]
    node: Node
    other: Node


@dataclass(frozen=True)
class Wiring:
    """What a stage makes of its topology: the wires present, and the terminals tied to a rail."""

    wires: tuple[Wire, ...]
    ties: Mapping[Node, Node]
    output: Node


def wire(topology: Topology, names: tuple[str, ...]) -> Wiring:
    """Wire a topology with the resistors that a stage has.

    `names` holds the stage's resistors; RE1 and RE2 stand for RE. Raises KeyError where a
    compulsory resistor is missing.
    """
    wires, ties = [], dict(topology.ties)
    for branch in topology.branches:
        parts = EMITTER_PARTS if branch.resistor == "RE" and "RE1" in names else (branch.resistor,)
        if all(part in names for part in parts):
            wires.append(Wire(parts, branch.node, branch.other))
        elif not branch.optional:
            raise KeyError(branch.resistor)
        elif not any(branch.node in (w.node, w.other) for w in wires):
            ties[branch.node] = branch.other
    return Wiring(tuple(wires), MappingProxyType(ties), topology.output)
