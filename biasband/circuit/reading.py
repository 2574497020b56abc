"""A reading: N scenarios solved, and everything that can be read off them.

Ripple moves the rails in the solve, capacitors open. Where a signal section says that capacitors
couple, the output and its headrooms are taken from the point without ripple instead, and move by
`output_ripple` either way.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.flow import Flow, flow
from biasband.circuit.junction import Laws, Sheet, laws, sheet
from biasband.circuit.network import Network, condense, rails, supply_excitation, total
from biasband.circuit.operating_point import OperatingPoint, regions, solve
from biasband.circuit.scenarios import Array, Scenarios, Values
from biasband.circuit.signal import Coupled, Linear, bypassed
from biasband.circuit.structure import minus, plus, times
from biasband.circuit.topology import TOPOLOGIES, Node, Wire, Wiring, wire
from biasband.stage import IdealTransistor, Signal, Stage, Transistor

CUT_OFF_SHARE = 0.01
"""A stage is cut off below this share of its target (else nominal) collector current."""


def wiring_of(stage: Stage) -> Wiring:
    """The wiring of a stage's topology with the stage's resistors."""
    return wire(TOPOLOGIES[stage.topology], tuple(resistor.name for resistor in stage.resistors))


@dataclass(frozen=True)
class Reading:
    """N solved scenarios of a stage; `quiet` is `point` where ripple does not couple."""

    stage: Stage
    wiring: Wiring
    scenarios: Scenarios
    point: OperatingPoint
    quiet: OperatingPoint

    @cached_property
    def flow(self) -> Flow:
        """The junctions' flow at the point; NaN for an ideal transistor, which has no laws."""
        return self._flow(self.point)

    @cached_property
    def quiet_flow(self) -> Flow:
        """The junctions' flow at the quiet point."""
        return self.flow if self.quiet is self.point else self._flow(self.quiet)

    def _flow(self, point: OperatingPoint) -> Flow:
        if isinstance(self.stage.transistor, IdealTransistor):
            law = Laws(*(np.nan for each in fields(Laws) if not each.kw_only))
        else:
            law = laws(self.sheet, point.junction_temperature)
        return flow(law, point.base_emitter, point.base_collector)

    @cached_property
    def sheet(self) -> Sheet:
        """The figures at 25 °C of a transistor that has a data sheet."""
        assert isinstance(self.stage.transistor, Transistor)
        return sheet(
            self.stage.transistor,
            gain=self.scenarios.gain,
            base_emitter_voltage=self.scenarios.base_emitter_voltage,
            leakage=self.scenarios.leakage,
        )

    @cached_property
    def network(self) -> Network:
        """The bias network, capacitors open."""
        return condense(self.wiring, self.scenarios.resistances)

    @cached_property
    def linear(self) -> Linear:
        """The stage as a linear circuit at the quiet point, capacitors open."""
        return Linear.of(self.network, self.quiet_flow)

    @cached_property
    def shorted_wiring(self) -> Wiring:
        """The wiring with the bypass capacitor, if there is one, a short."""
        return bypassed(self.wiring) if self._signal.bypassed else self.wiring

    @cached_property
    def shorted(self) -> Linear:
        """The stage as a linear circuit at the quiet point, the bypass capacitor short."""
        if not self._signal.bypassed:
            return self.linear
        return Linear.of(condense(self.shorted_wiring, self.scenarios.resistances), self.quiet_flow)

    @cached_property
    def coupled(self) -> Coupled:
        """The stage between source and load, capacitors short; without [signal] base driven, no load."""
        source, load = self._signal.source_resistance, self._signal.load
        return Coupled.of(self.shorted, self.wiring.output, source=source, load=load)

    @property
    def _signal(self) -> Signal:
        return self.stage.signal or Signal()

    @cached_property
    def unbypassed(self) -> Values:
        """The emitter resistance [Ω] that the signal sees."""
        wires = [wire for wire in self.shorted_wiring.wires if wire.node is Node.EMITTER]
        return sum((total(wire, self.scenarios.resistances) for wire in wires), start=0.0)

    @cached_property
    def rails(self) -> Mapping[Node, Values]:
        """Rail voltages [V] in the transistor's frame, ripple included."""
        return rails(self.stage.polarity, self.scenarios)

    @cached_property
    def quiet_rails(self) -> Mapping[Node, Values]:
        """Rail voltages [V] in the transistor's frame at the quiet point."""
        quiet = self.scenarios if self.quiet is self.point else self.scenarios.without_ripple()
        return rails(self.stage.polarity, quiet)

    @cached_property
    def feedthrough_open(self) -> Values:
        """Output over supply with capacitors open."""
        return self.real(self._supply_open[self.wiring.output])

    @cached_property
    def feedthrough_short(self) -> Values:
        """Output over supply with capacitors short, the source connected by its resistance."""
        moved = self._supply_open
        if self.shorted is not self.linear:
            moved = self.shorted.driven(supply_excitation(self.stage.polarity))
        return self.real(self.coupled.feedthrough(moved, self.wiring.output))

    @cached_property
    def _supply_open(self) -> Mapping[Node, Values]:
        return self.linear.driven(supply_excitation(self.stage.polarity))

    @cached_property
    def output_per_ripple(self) -> Values:
        """How far the output moves per volt of ripple: the larger of open and (if coupled) short."""
        if self.stage.signal is None:
            return np.abs(self.feedthrough_open)
        return np.maximum(np.abs(self.feedthrough_open), np.abs(self.feedthrough_short))

    @cached_property
    def coupled_ripple(self) -> Values:
        """How far [V] ripple moves the output beyond the quiet point; 0 where it does not couple.

        It is there at its peak or not at all: the output swings through both signs of it.
        """
        if self.quiet is self.point:
            return 0.0
        peak = np.where(np.asarray(self.scenarios.ripple) != 0.0, self.stage.supply.ripple_peak, 0.0)
        return self.output_per_ripple * peak

    def real(self, frame_voltage: Values) -> Values:
        """A node voltage [V] to the stage's ground from one in the transistor's frame."""
        return frame_voltage if self.stage.polarity == "npn" else -frame_voltage

    @cached_property
    def volts(self) -> Mapping[Node, Values]:
        """The voltage [V] of every terminal and rail, in the transistor's frame."""
        return self._volts(self.point, self.rails)

    @cached_property
    def quiet_volts(self) -> Mapping[Node, Values]:
        """The voltage [V] of every terminal and rail at the quiet point, in the transistor's frame."""
        return self.volts if self.quiet is self.point else self._volts(self.quiet, self.quiet_rails)

    def _volts(self, point: OperatingPoint, rail_voltages: Mapping[Node, Values]) -> Mapping[Node, Values]:
        currents = {
            Node.BASE: point.base_current,
            Node.COLLECTOR: point.collector_current,
            Node.EMITTER: point.emitter_current,
        }
        open_voltage = self.network.open(Node.EMITTER, rail_voltages)
        emitter = self.network.loaded(Node.EMITTER, open_voltage, currents)
        collector, base = plus(emitter, point.collector_emitter), plus(emitter, point.base_emitter)
        terminals = {Node.BASE: base, Node.COLLECTOR: collector, Node.EMITTER: emitter}
        tied = {node: rail_voltages[rail] for node, rail in self.wiring.ties.items()}
        return {**rail_voltages, **terminals, **tied}

    def wire_of(self, resistor: str) -> Wire:
        """The wire that a resistor is part of."""
        return next(wire for wire in self.wiring.wires if resistor in wire.parts)

    @cached_property
    def wire_currents(self) -> Mapping[Wire, Array]:
        """The current [A] from each wire's first node to its other."""
        volts, ohms = self.volts, self.scenarios.resistances
        return {
            wire: np.asarray(minus(volts[wire.node], volts[wire.other]) / total(wire, ohms))
            for wire in self.wiring.wires
        }

    @cached_property
    def output_conductance(self) -> Values:
        """Everything that loads the output at signal frequency [S]: its wires and the load."""
        ohms, output, load = self.scenarios.resistances, self.wiring.output, self._signal.load
        wires = [wire for wire in self.wiring.wires if output in (wire.node, wire.other)]
        return sum((1.0 / total(wire, ohms) for wire in wires), start=0.0 if load is None else 1.0 / load)

    @cached_property
    def into_cut_off(self) -> Values:
        """Peak [V] the output can move while the transistor turns off, never beyond its rail."""
        point, volts = self.quiet, self.quiet_volts
        if self.wiring.output is Node.EMITTER:
            swing = point.emitter_current / self.output_conductance
            return np.minimum(swing, minus(volts[Node.EMITTER], volts[Node.EMITTER_RAIL]))
        swing = point.collector_current / self.output_conductance
        return np.minimum(swing, volts[Node.COLLECTOR_RAIL] - volts[Node.COLLECTOR])

    @cached_property
    def into_saturation(self) -> Values:
        """Peak [V] the output can move until V_CE(sat) is reached: room·r_ac/(r_ac + r_e)."""
        room = self.quiet.collector_emitter - self.stage.saturation_voltage
        if self.wiring.output is Node.EMITTER:
            return room
        return room / plus(1.0, times(self.unbypassed, self.output_conductance))

    def regions(self, cut_off_current: float) -> NDArray[np.int8]:
        """The region of each scenario, shape (N,); cut off below the current [A] given."""
        return regions(
            self.point,
            saturation_voltage=self.stage.saturation_voltage,
            cut_off_current=cut_off_current,
        )


def read(stage: Stage, scenarios: Scenarios) -> Reading:
    """Solve a stage in N scenarios."""
    wiring = wiring_of(stage)
    point = quiet = solve(wiring, stage.transistor, stage.polarity, scenarios)
    if stage.signal is not None and np.any(scenarios.ripple):
        quiet = solve(wiring, stage.transistor, stage.polarity, scenarios.without_ripple())
    return Reading(stage, wiring, scenarios, point, quiet)
