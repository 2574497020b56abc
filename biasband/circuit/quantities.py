"""The vocabulary: every quantity of a stage, its kind and how it is read.

One row here is one more quantity for requirements, tables, JSON and the Python API. Node voltages
are real, to the stage's ground; V_CE and the currents are positive in conduction.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.heat import slope_of_power
from biasband.circuit.large_signal import distortion
from biasband.circuit.low_corner import low_corner_frequency
from biasband.circuit.newton import Tangent
from biasband.circuit.reading import Reading
from biasband.circuit.scenarios import Array, Values
from biasband.circuit.solution import Status
from biasband.circuit.structure import minus
from biasband.circuit.topology import Node
from biasband.quantity import Kind
from biasband.stage import IdealTransistor, Stage


@dataclass(frozen=True)
class Pieces:
    """Smooth functions of which a quantity is the least (else the greatest): it has ridges."""

    read: Callable[[Reading], tuple[Values, ...]]
    least: bool

    def __call__(self, reading: Reading) -> Values:
        pieces = self.read(reading)
        return functools.reduce(np.minimum if self.least else np.maximum, pieces)


@dataclass(frozen=True)
class Quantity:
    """A quantity: how it is read, shape (N,), and by how much coupled ripple moves it.

    `ripple` [same unit] widens the output's voltage either way, and takes from a headroom
    (`ripple_lifts` False). `by_magnitude` says that a requirement is judged by the magnitude, `costly`
    that a review looks beyond the nominal point only where a requirement is about it.
    """

    name: str
    kind: Kind
    read: Callable[[Reading], Values] | Pieces
    ripple: Callable[[Reading], Values] | None = None
    ripple_lifts: bool = True
    by_magnitude: bool = False
    costly: bool = False


def _node_voltage(node: Node) -> Callable[[Reading], Values]:
    def read(reading: Reading) -> Values:
        volts = reading.quiet_volts if node is reading.wiring.output else reading.volts
        return reading.real(volts[node])

    return read


def _output_ripple_at(node: Node) -> Callable[[Reading], Values]:
    return lambda reading: reading.coupled_ripple if node is reading.wiring.output else 0.0


def _coupled_ripple(reading: Reading) -> Values:
    return reading.coupled_ripple


def _supply_current(reading: Reading) -> Values:
    """What the positive supply delivers: its wires, and a terminal tied to it."""
    rail = Node.COLLECTOR_RAIL if reading.stage.polarity == "npn" else Node.EMITTER_RAIL
    current: Values = 0.0
    for wire in reading.wiring.wires:
        if rail is wire.other:
            current = minus(current, reading.wire_currents[wire])
    point = reading.point
    into = {Node.COLLECTOR: point.collector_current, Node.EMITTER: -point.emitter_current}
    for node, tied in reading.wiring.ties.items():
        current = current + into[node] if tied is rail else current
    return reading.real(current)


def _thermal_loop_gain(reading: Reading) -> Values:
    """G = R_θJA·dP/dT_j at the solved point, resistors held; a plain number.

    A small disturbance of the junction comes back G times: below one it dies out. 0 without a thermal
    resistance; NaN where not solved, and for an ideal transistor, whose laws know no temperature.
    Worked case: a 40 V divider that has warmed up to 50.3 °C has G = 0.047 (physics: "Transistor").
    """
    transistor, point, z = reading.stage.transistor, reading.point, reading.network.impedances
    if isinstance(transistor, IdealTransistor):
        return np.nan
    if not transistor.thermal_resistance:
        return np.where(point.status == Status.SOLVED, 0.0, np.nan)
    here = reading.linear.tangent if reading.quiet is point else Tangent.of(z, reading.flow)
    slope = slope_of_power(reading.sheet, z, here, I_B=point.base_current, I_C=point.collector_current)
    return transistor.thermal_resistance * slope


def _headroom(up: bool) -> Callable[[Reading], Values]:
    def read(reading: Reading) -> Values:
        rises_on_cut_off = reading.wiring.output is Node.COLLECTOR
        if reading.stage.polarity == "pnp":
            rises_on_cut_off = not rises_on_cut_off
        return reading.into_cut_off if up is rises_on_cut_off else reading.into_saturation

    return read


def clips_first(reading: Reading) -> str:
    """Where the output of the first scenario clips first: "cut-off" or "saturation"."""
    off, saturated = (float(np.ravel(side)[0]) for side in (reading.into_cut_off, reading.into_saturation))
    return "cut-off" if off < saturated else "saturation"


_SYMMETRIC = Pieces(lambda reading: (reading.into_cut_off, reading.into_saturation), least=True)


def _supply_feedthrough(reading: Reading) -> Values:
    return reading.feedthrough_open if reading.stage.signal is None else reading.feedthrough_short


def _ripple_pieces(reading: Reading) -> tuple[Values, ...]:
    """Output over supply both ways, capacitors open and (if they couple) short, at the ripple's peak."""
    ways = [reading.feedthrough_open]
    if reading.stage.signal is not None:
        ways.append(reading.feedthrough_short)
    peak = reading.stage.supply.ripple_peak
    return tuple(signed * way for way in ways for signed in (peak, -peak))


def judged_swing(stage: Stage) -> float | None:
    """The peak swing [V] that requirements ask for, at which distortion is read; None: where it clips."""
    asked = [r.at_least for r in stage.requirements if r.quantity == "symmetric_peak_swing"]
    return max((swing for swing in asked if swing is not None), default=None)


def _distortion(reading: Reading) -> Values:
    return distortion(reading, judged_swing(reading.stage) or _SYMMETRIC(reading))


_PLAIN = (
    Quantity(
        "collector_voltage", Kind.VOLTAGE, _node_voltage(Node.COLLECTOR), _output_ripple_at(Node.COLLECTOR)
    ),
    Quantity("base_voltage", Kind.VOLTAGE, _node_voltage(Node.BASE)),
    Quantity("emitter_voltage", Kind.VOLTAGE, _node_voltage(Node.EMITTER), _output_ripple_at(Node.EMITTER)),
    Quantity("collector_emitter_voltage", Kind.VOLTAGE, lambda r: r.point.collector_emitter),
    Quantity("collector_current", Kind.CURRENT, lambda r: r.point.collector_current),
    Quantity("base_current", Kind.CURRENT, lambda r: r.point.base_current),
    Quantity("emitter_current", Kind.CURRENT, lambda r: r.point.emitter_current),
    Quantity("supply_current", Kind.CURRENT, _supply_current),
    Quantity("transistor_power", Kind.POWER, lambda r: r.point.power),
    Quantity("junction_temperature", Kind.TEMPERATURE, lambda r: r.point.junction_temperature),
    Quantity("thermal_loop_gain", Kind.NUMBER, _thermal_loop_gain),
    Quantity("headroom_up", Kind.VOLTAGE, _headroom(up=True), _coupled_ripple, ripple_lifts=False),
    Quantity("headroom_down", Kind.VOLTAGE, _headroom(up=False), _coupled_ripple, ripple_lifts=False),
    Quantity("symmetric_peak_swing", Kind.VOLTAGE, _SYMMETRIC, _coupled_ripple, ripple_lifts=False),
    Quantity("voltage_gain", Kind.NUMBER, lambda r: r.coupled.voltage_gain, by_magnitude=True),
    Quantity("input_resistance", Kind.RESISTANCE, lambda r: r.coupled.input_resistance),
    Quantity("output_resistance", Kind.RESISTANCE, lambda r: r.coupled.output_resistance),
    Quantity("supply_feedthrough", Kind.NUMBER, _supply_feedthrough),
    Quantity("output_ripple", Kind.VOLTAGE, Pieces(_ripple_pieces, least=False)),
    Quantity("distortion", Kind.RATIO, _distortion, costly=True),
)


LOW_CORNER = "low_corner_frequency"
"""The one quantity that needs capacitors with values."""


def _resistor_power(name: str) -> Quantity:
    def read(reading: Reading) -> Array:
        current = reading.wire_currents[reading.wire_of(name)]
        return np.asarray(current**2 * reading.scenarios.resistances[name])

    return Quantity(f"resistor_power.{name}", Kind.POWER, read)


def _rows(resistor_names: tuple[str, ...], with_capacitors: bool) -> Iterator[Quantity]:
    yield from _PLAIN
    if with_capacitors:
        yield Quantity(LOW_CORNER, Kind.FREQUENCY, low_corner_frequency, costly=True)
    yield from map(_resistor_power, resistor_names)


def vocabulary(resistor_names: tuple[str, ...], *, with_capacitors: bool = False) -> Mapping[str, Quantity]:
    """Every quantity of a stage with these resistors, by name, in the order of the tables."""
    return {quantity.name: quantity for quantity in _rows(resistor_names, with_capacitors)}


def words(stage: Stage) -> Mapping[str, Quantity]:
    """The vocabulary of a stage."""
    names = tuple(resistor.name for resistor in stage.resistors)
    return vocabulary(names, with_capacitors=bool(stage.capacitors))


def quantity_units(resistor_names: tuple[str, ...], *, with_capacitors: bool = False) -> Mapping[str, Kind]:
    """The kind of every quantity of a stage with these resistors."""
    rows = vocabulary(resistor_names, with_capacitors=with_capacitors)
    return {name: quantity.kind for name, quantity in rows.items()}
