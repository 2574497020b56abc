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

from biasband.circuit import signal
from biasband.circuit.junction import Laws, laws, sheet
from biasband.circuit.network import condense, rails, sign, total
from biasband.circuit.operating_point import OperatingPoint, regions, solve
from biasband.circuit.scenarios import Array, Scenarios, Values
from biasband.circuit.topology import TOPOLOGIES, Node, Wire, Wiring, wire
from biasband.stage import IdealTransistor, Stage

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
    def coupled(self) -> signal.Coupled:
        """The stage as the signal sees it."""
        return signal.couple(self.wiring, self.stage.signal, self.scenarios.resistances)

    @cached_property
    def unbypassed(self) -> Values:
        """The emitter resistance [Ω] that the signal sees."""
        coupled = self.coupled
        wires = [w for w in coupled.wiring.wires if w.node is Node.EMITTER and w.other is Node.EMITTER_RAIL]
        return sum((total(wire, coupled.resistances) for wire in wires), start=0.0)

    @cached_property
    def law(self) -> Laws:
        """The junction laws at the quiet point's junction temperature; NaN for an ideal transistor."""
        transistor, scenarios = self.stage.transistor, self.scenarios
        if isinstance(transistor, IdealTransistor):
            return Laws(*(np.nan for each in fields(Laws) if not each.kw_only))
        figures = sheet(
            transistor,
            gain=scenarios.gain,
            base_emitter_voltage=scenarios.base_emitter_voltage,
            leakage=scenarios.leakage,
        )
        return laws(figures, self.quiet.junction_temperature)

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
        open_wiring = signal.Coupled(self.wiring, self.scenarios.resistances)
        return signal.feedthrough(open_wiring, self.law, self.quiet, self.stage.polarity)

    @cached_property
    def feedthrough_short(self) -> Values:
        """Output over supply with capacitors short, the source connected by its resistance."""
        return signal.feedthrough(self.coupled, self.law, self.quiet, self.stage.polarity)

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
        return sign(self.stage.polarity) * frame_voltage

    @cached_property
    def volts(self) -> Mapping[Node, Values]:
        """The voltage [V] of every terminal and rail, in the transistor's frame."""
        return self._volts(self.point, self.rails)

    @cached_property
    def quiet_volts(self) -> Mapping[Node, Values]:
        """The voltage [V] of every terminal and rail at the quiet point, in the transistor's frame."""
        return self.volts if self.quiet is self.point else self._volts(self.quiet, self.quiet_rails)

    def _volts(self, point: OperatingPoint, rail_voltages: Mapping[Node, Values]) -> Mapping[Node, Values]:
        ports = condense(self.wiring, self.scenarios.resistances, rail_voltages)
        emitter = ports.voltage(Node.EMITTER, point.base_current, point.collector_current)
        collector, base = emitter + point.collector_emitter, emitter + point.base_emitter
        terminals = {Node.BASE: base, Node.COLLECTOR: collector, Node.EMITTER: emitter}
        tied = {node: rail_voltages[rail] for node, rail in self.wiring.ties.items()}
        return {**rail_voltages, **terminals, **tied}

    def wire_of(self, resistor: str) -> Wire:
        """The wire that a resistor is part of."""
        return next(wire for wire in self.wiring.wires if resistor in wire.parts)

    def wire_current(self, wire: Wire) -> Array:
        """The current [A] from a wire's first node to its other."""
        across = np.asarray(self.volts[wire.node] - self.volts[wire.other])
        return across / total(wire, self.scenarios.resistances)

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
