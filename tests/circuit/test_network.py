"""The condensed network against closed forms of series and parallel resistors."""

from __future__ import annotations

import pytest

from biasband.circuit.network import Network, condense, supply_excitation
from biasband.circuit.topology import TOPOLOGIES, Node, wire
from biasband.stage import Polarity

OHMS = {"R1": 68e3, "R2": 13e3, "RB": 470e3, "RC": 3.3e3, "RE": 1e3}
RAILS = {Node.COLLECTOR_RAIL: 9.0, Node.EMITTER_RAIL: -3.0, Node.GROUND: 0.0}
ROUNDING = 1e-14
"""A handful of operations on numbers of one sign."""


def network(topology: str, *names: str) -> Network:
    return condense(wire(TOPOLOGIES[topology], names), OHMS)


def test_divider_is_seen_as_its_thevenin_equivalent() -> None:
    ports = network("divider", "R1", "R2", "RC", "RE").ports(RAILS)
    base = 68e3 * 13e3 / 81e3
    assert ports.z11 == pytest.approx(base + 1e3, rel=ROUNDING)
    assert ports.z12 == 1e3
    assert ports.z21 == pytest.approx(base, rel=ROUNDING)
    assert ports.z22 == -3.3e3
    open_base = (9.0 * 13e3 - 3.0 * 68e3) / 81e3
    assert ports.open_be == pytest.approx(open_base + 3.0, rel=ROUNDING)
    assert ports.open_bc == pytest.approx(open_base - 9.0, rel=ROUNDING)


def test_collector_feedback_joins_base_and_collector() -> None:
    # 1 A into the base: R2 beside RB + RC. 1 A into the collector: RC beside RB + R2, divided at the base.
    z = network("collector-feedback", "RB", "R2", "RC").impedances
    around = 13e3 + 470e3 + 3.3e3
    at_base, at_collector = 13e3 * 473.3e3 / around, 3.3e3 * 483e3 / around
    across = 13e3 * 3.3e3 / around
    assert z.z11 == pytest.approx(at_base, rel=ROUNDING)
    assert z.z12 == pytest.approx(across, rel=ROUNDING)
    assert z.z21 == pytest.approx(at_base - across, rel=ROUNDING)
    assert z.z22 == pytest.approx(across - at_collector, rel=ROUNDING)


def test_terminal_on_a_rail_has_its_voltage_whatever_flows() -> None:
    follower = network("follower", "R1", "R2", "RE")
    currents = {Node.BASE: 1e-5, Node.COLLECTOR: 1e-3, Node.EMITTER: 1.01e-3}
    assert follower.loaded(Node.COLLECTOR, follower.open(Node.COLLECTOR, RAILS), currents) == 9.0
    # The emitter stands on RE alone: −3 V + 1.01 mA · 1 kΩ.
    emitter = follower.loaded(Node.EMITTER, follower.open(Node.EMITTER, RAILS), currents)
    assert emitter == pytest.approx(-1.99, rel=ROUNDING)


def test_base_falls_by_what_is_drawn_through_its_divider() -> None:
    divider = network("divider", "R1", "R2", "RC", "RE")
    currents = {Node.BASE: 1e-5, Node.COLLECTOR: 1e-3, Node.EMITTER: 1.01e-3}
    open_base = divider.open(Node.BASE, RAILS)
    fallen = open_base - divider.loaded(Node.BASE, open_base, currents)
    assert fallen == pytest.approx(1e-5 * 68e3 * 13e3 / 81e3, rel=1e-13)  # a difference of volts


@pytest.mark.parametrize(("polarity", "emitter"), [("npn", 0.0), ("pnp", -1.0)])
def test_a_volt_of_the_supply_moves_the_rail_that_hangs_on_it(polarity: Polarity, emitter: float) -> None:
    moved = supply_excitation(polarity)
    divider = network("divider", "R1", "R2", "RC", "RE")
    assert divider.open(Node.EMITTER, moved) == emitter
    share = 13e3 / 81e3 if polarity == "npn" else -68e3 / 81e3
    assert divider.open(Node.BASE, moved) == pytest.approx(share, rel=ROUNDING)
