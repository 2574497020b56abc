"""The conventions that the table of topologies keeps, and that designing and wiring rest on."""

from __future__ import annotations

import pytest

from biasband.circuit.topology import TERMINALS, TOPOLOGIES, Node, Topology, wire
from circuit.stages import TOPOLOGY_RESISTORS

RAILS = {Node.COLLECTOR_RAIL, Node.EMITTER_RAIL, Node.GROUND}

TABLE = {
    "base-resistor": {"RB": "B C-rail", "RC": "C C-rail", "RE": "E E-rail"},
    "collector-feedback": {"RB": "B C", "R2": "B E-rail", "RC": "C C-rail", "RE": "E E-rail"},
    "divider": {"R1": "B C-rail", "R2": "B E-rail", "RC": "C C-rail", "RE": "E E-rail"},
    "split-supply": {"RB": "B ground", "RC": "C C-rail", "RE": "E E-rail"},
    "follower": {"R1": "B C-rail", "R2": "B E-rail", "RE": "E E-rail"},
}
"""The table of physics.md section 3, for an NPN, its rails named by what they do."""

SHORT = {
    Node.BASE: "B",
    Node.COLLECTOR: "C",
    Node.EMITTER: "E",
    Node.COLLECTOR_RAIL: "C-rail",
    Node.EMITTER_RAIL: "E-rail",
    Node.GROUND: "ground",
}

every = pytest.mark.parametrize("topology", TOPOLOGIES.values(), ids=lambda topology: topology.name)


@every
def test_branches_are_those_of_the_table_of_the_physics(topology: Topology) -> None:
    branches = {b.resistor: f"{SHORT[b.node]} {SHORT[b.other]}" for b in topology.branches}
    assert branches == TABLE[topology.name]


@every
def test_branch_starts_at_a_terminal_and_lists_its_rail_as_the_other_end(topology: Topology) -> None:
    for branch in topology.branches:
        assert branch.node in TERMINALS, branch
        assert branch.other in RAILS | set(TERMINALS), branch
        assert branch.other is not branch.node, branch


@every
def test_base_with_two_branches_has_exactly_one_to_the_emitter_rail(topology: Topology) -> None:
    at_base = [b for b in topology.branches if Node.BASE in (b.node, b.other)]
    assert 1 <= len(at_base) <= 2
    if len(at_base) == 2:
        assert [b.other for b in at_base].count(Node.EMITTER_RAIL) == 1


@every
def test_tie_goes_from_a_terminal_to_a_rail_whichever_resistors_are_left_out(topology: Topology) -> None:
    for names in TOPOLOGY_RESISTORS[topology.name]:
        wiring = wire(topology, names)
        assert {part for w in wiring.wires for part in w.parts} == set(names)
        for terminal, rail in wiring.ties.items():
            assert terminal in TERMINALS and rail in RAILS
            # A tied terminal has no resistor of its own left.
            assert not any(terminal in (w.node, w.other) for w in wiring.wires)


@every
def test_every_terminal_has_a_resistor_or_a_tie(topology: Topology) -> None:
    for names in TOPOLOGY_RESISTORS[topology.name]:
        wiring = wire(topology, names)
        held = {node for w in wiring.wires for node in (w.node, w.other)} | set(wiring.ties)
        assert set(TERMINALS) <= held
