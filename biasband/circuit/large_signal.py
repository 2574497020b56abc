"""The large signal, quasi-static: every capacitor is replaced by the voltage that it holds at rest.

The junction's temperature is held too; both are too slow for the signal. The output's transfer curve
against the source's EMF follows point by point from the full equations, and its harmonics from that.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.active import Bias
from biasband.circuit.network import Network, Ports, Rails, condense
from biasband.circuit.reading import Reading
from biasband.circuit.scenarios import Array, Values
from biasband.circuit.solution import Problem, isothermal
from biasband.circuit.topology import Node, Wire, Wiring
from biasband.stage import Signal, Transistor

_PHASES, _HARMONICS = 16, 9
"""Points of half a period, and the highest harmonic that they are asked for."""

_WIDENINGS, _WIDER, _CHORDS = 24, 1.1, 5
"""How often a drive is widened till it reaches the swing, by how much; the steps of false position then."""

_SHY = 0.02
"""A swing missed by no more than this share is reached: V_CE(sat) is the sheet's limit, no sharp corner."""

_STIFF = 1e-3
"""[Ω] A source without a resistance: some nanovolts are lost in so much."""

_SOURCE, _LOAD = "source", "load"
"""The names under which source and load stand among the resistances."""

_STEPS, _LEAST_START, _MOST_START = 6, 1e-6, 3.0
"""Newton steps at each point, and where they start from, as a share of the current at rest."""

CANNOT = 1.0
"""The distortion of an output that cannot swing so far: all of it."""


@dataclass(frozen=True)
class LargeSignal:
    """N scenarios of a stage with its capacitors charged: rails [V] and wiring for a moving source."""

    reading: Reading
    network: Network
    rails: Mapping[Node, Values]
    rest: Array

    @classmethod
    def of(cls, reading: Reading) -> LargeSignal:
        """The stage at rest at its quiet point, in the transistor's frame."""
        volts, output = reading.quiet_volts, reading.wiring.output
        charged = {
            Node.SOURCE: volts[Node.BASE],
            Node.LOAD: volts[output],
            Node.BYPASS: _bypass_voltage(reading),
        }
        rails = {**reading.quiet_rails, **charged}
        return cls(reading, _charged(reading), rails, np.asarray(volts[output]))

    def moved(self, emf: Values) -> Array:
        """How far [V] the output moves while the source's EMF is off its rest by `emf` [V], (N,)."""
        output, bias = self.reading.wiring.output, self.bias(emf)
        currents = {Node.BASE: bias.I_B, Node.COLLECTOR: bias.I_C, Node.EMITTER: bias.I_B + bias.I_C}
        volts = self.network.loaded(output, self.network.open(output, self._rails(emf)), currents)
        return np.where(bias.solved, volts - self.rest, np.nan)

    def bias(self, emf: Values) -> Bias:
        """Junction voltages and terminal currents while the source's EMF is off its rest [V]."""
        reading, ports = self.reading, self.network.ports(self._rails(emf))
        assert isinstance(reading.stage.transistor, Transistor)
        problem = Problem.of(ports, reading.stage.transistor, reading.scenarios)
        with np.errstate(all="ignore"):
            return isothermal(problem, reading.quiet.junction_temperature, self._most(ports), steps=_STEPS)

    def _most(self, ports: Ports) -> Array:
        """The most [A] that the forward current can be: nothing of the drive lost in the network."""
        law = self.reading.quiet_flow.law
        with np.errstate(over="ignore"):
            folds = (ports.open_be - law.reference_voltage) / law.thermal_voltage
            most = law.reference_current * np.exp(folds)
        rest = self.reading.quiet.collector_current
        return np.asarray(np.clip(most, _LEAST_START * rest, _MOST_START * rest))

    def _rails(self, emf: Values) -> Rails:
        return {**self.rails, Node.SOURCE: self.rails[Node.SOURCE] + emf}


def _charged(reading: Reading) -> Network:
    """The signal's network: source, load and a bypassed emitter end at their capacitors' far ends."""
    asked, shorted = reading.stage.signal or Signal(), reading.shorted_wiring
    ohms = {**reading.scenarios.resistances, _SOURCE: asked.source_resistance or _STIFF}
    wires = [
        Wire(wire.parts, wire.node, Node.BYPASS) if asked.bypassed and wire.node is Node.EMITTER else wire
        for wire in shorted.wires
    ]
    wires.append(Wire((_SOURCE,), Node.BASE, Node.SOURCE))
    if asked.load is not None:
        ohms[_LOAD] = asked.load
        wires.append(Wire((_LOAD,), shorted.output, Node.LOAD))
    tied_anew = shorted.ties.keys() - reading.wiring.ties.keys()
    ties = {**shorted.ties, **dict.fromkeys(tied_anew, Node.BYPASS)}
    return condense(Wiring(tuple(wires), ties, shorted.output), ohms)


def _bypass_voltage(reading: Reading) -> Values:
    """Where the bypass capacitor holds its end of the emitter resistor: below the part not bypassed."""
    return reading.quiet_volts[Node.EMITTER] - reading.unbypassed * reading.quiet.emitter_current


def distortion(reading: Reading, swing: Values) -> Array:
    """Total harmonic distortion of the output, a ratio, at a peak `swing` [V], half of peak to peak.

    The source is a sine; harmonics up to the ninth, over the fundamental. 1 where the output cannot
    swing so far, NaN for an ideal transistor or where not solved.

    Worked case: a stiffly driven, bypassed stage without Early effect or load has
    `I_C = I_Q·e^{v/V_T}`, harmonics I_n(x)/I_1(x) (modified Bessel functions) and a swing of I_Q·RC·sinh(x):
    at its clipping swing, I_Q·RC, x = 0.88 and the second harmonic is 21 %.
    Source: Fourier analysis of the quasi-static transfer curve, "common practice".
    """
    count = reading.point.status.shape
    if not isinstance(reading.stage.transistor, Transistor):
        return np.full(count, np.nan)
    large, wanted = LargeSignal.of(reading), np.broadcast_to(np.asarray(swing, dtype=float), count)
    drive = _drive(large, wanted)
    phase = (np.arange(_PHASES) + 0.5) * np.pi / _PHASES
    moved = [large.moved(drive.emf * np.cos(angle)) for angle in phase]
    harmonics = [_weighted(np.cos(n * phase), moved) for n in range(1, _HARMONICS + 1)]
    with np.errstate(all="ignore"):
        ratio = np.sqrt(sum(harmonic**2 for harmonic in harmonics[1:])) / np.abs(harmonics[0])
    solved = ~np.isnan(wanted) & np.isfinite(large.rest)
    return np.where(solved, np.where(drive.reaches, ratio, CANNOT), np.nan)


def _weighted(weights: Array, moved: Sequence[Array]) -> Array:
    """Σ weight·moved, in this order: a matrix product's order, and so its bytes, depend on how many N are."""
    total = np.zeros_like(moved[0])
    for weight, each in zip(weights, moved, strict=True):
        total += weight * each
    return total


@dataclass(frozen=True)
class _Drive:
    """The peak EMF [V] that makes the output swing so far, and where there is one."""

    emf: Array
    reaches: NDArray[np.bool_]


def _drive(large: LargeSignal, swing: Array) -> _Drive:
    """The first drive at which the output swings far enough: beyond saturation it turns back."""

    def reached(emf: Array) -> Array:
        return np.asarray(0.5 * np.abs(large.moved(emf) - large.moved(-emf)))

    gain = np.abs(large.reading.coupled.voltage_gain)
    low, high = np.zeros_like(swing), swing / gain
    least, most = np.zeros_like(swing), reached(high)
    climbing = np.ones(swing.shape, dtype=bool)
    for _ in range(_WIDENINGS):
        climbing &= most < swing
        if not climbing.any():
            break
        swings = reached(_WIDER * high)
        climbing &= swings > most
        low, high = np.where(climbing, high, low), np.where(climbing, _WIDER * high, high)
        least, most = np.where(climbing, most, least), np.where(climbing, swings, most)
    over = most >= swing
    drive = high
    for _ in range(_CHORDS):
        drive = np.where(over, low + (high - low) * (swing - least) / (most - least), high)
        swings = reached(drive)
        short = over & (swings < swing)
        low, least = np.where(short, drive, low), np.where(short, swings, least)
        high, most = np.where(over & ~short, drive, high), np.where(over & ~short, swings, most)
    return _Drive(drive, over | (most >= (1.0 - _SHY) * swing))
