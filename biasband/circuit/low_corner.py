"""The low corner: what the coupling and bypass capacitors take from the gain at low frequencies.

A capacitor in series with the source or the load, or across a part of the emitter resistor, only changes
the impedance of a wire. So the nodes and their equations stay those of `network`, with complex numbers in
the place of resistances.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import cast

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.network import condense, total
from biasband.circuit.reading import Reading
from biasband.circuit.scenarios import Array, Values
from biasband.circuit.signal import Coupled, Linear
from biasband.circuit.topology import Node, Wire, Wiring
from biasband.coupling import BYPASS, INPUT, OUTPUT, Signal

_HALF_POWER = 0.5 * np.log(2.0)
"""ln √2: how far the gain has fallen at the corner."""

_OCTAVE, _OCTAVES = np.log(2.0), 70
"""The search for an interval goes in octaves, and over so many: 21 decades."""

_STEPS, _CLOSE = 80, 1e-12
"""Steps within the interval at most, and the level or the interval that is none any more."""

_SOURCE, _LOAD = "source", "load"
"""The names under which source and load stand among the resistances."""

Level = Callable[[Array], Array]
"""How far the gain, in its logarithm, is above the corner's, at the logarithm of a frequency; (N,) each."""


def seen_resistances(reading: Reading) -> Mapping[str, Values]:
    """The resistance [Ω] that each capacitor sees with the others short, by its name, shape (N,).

    Of the source and the input, of the load and the output, of what lies across the bypass capacitor.
    Source: short-circuit time constants; Gray & Meyer, "Analysis and Design of Analog Integrated
    Circuits" (memory).
    """
    asked, coupled = _asked(reading), reading.coupled
    seen = {INPUT: asked.source_resistance + coupled.input_resistance}
    if asked.load is not None:
        seen[OUTPUT] = asked.load + coupled.output_resistance
    if asked.bypassed:
        seen[BYPASS] = _across_bypass(reading, asked)
    return seen


def _across_bypass(reading: Reading, asked: Signal) -> Values:
    """RE or RE2 with the emitter and whatever of its resistor is not bypassed, source and load connected.

    With the share s of the resistor that is bypassed, the rest of it, and the emitter's node unbypassed:
    `s²·r_node + s·rest`.
    """
    ohms = {**reading.scenarios.resistances, _SOURCE: asked.source_resistance}
    wires, ties = [*reading.wiring.wires], dict(reading.wiring.ties)
    if asked.load is not None:
        ohms[_LOAD] = asked.load
        wires.append(Wire((_LOAD,), reading.wiring.output, Node.GROUND))
    if asked.source_resistance > 0.0:
        wires.append(Wire((_SOURCE,), Node.BASE, Node.GROUND))
    else:
        ties[Node.BASE] = Node.GROUND
    network = condense(Wiring(tuple(wires), ties, reading.wiring.output), ohms)
    node = Linear.of(network, reading.quiet_flow).injected(Node.EMITTER)[Node.EMITTER]
    resistor = _emitter_wire(reading.wiring)
    across = ohms[resistor.parts[-1]]
    share, rest = across / total(resistor, ohms), total(resistor, ohms) - across
    return share * share * node + share * rest


def _asked(reading: Reading) -> Signal:
    return reading.stage.signal or Signal()


def _emitter_wire(wiring: Wiring) -> Wire:
    return next(wire for wire in wiring.wires if wire.node is Node.EMITTER)


def gain_at(reading: Reading, frequency: Values) -> NDArray[np.complex128]:
    """From the source's EMF to the load, or to the output without one, at a frequency [Hz]; shape (N,)."""
    s, asked = 2j * np.pi * np.asarray(frequency), _asked(reading)
    farads = reading.scenarios.capacitances
    # Neither the network nor the two-port minds that these resistances are complex.
    source = cast(Values, asked.source_resistance + 1.0 / (s * farads[INPUT]))
    load, share, stage = None, cast(Values, 1.0), reading.linear
    if asked.load is not None:
        load = cast(Values, asked.load + 1.0 / (s * farads[OUTPUT]))
        share = asked.load / load
    if asked.bypassed:
        ohms, across = reading.scenarios.resistances, _emitter_wire(reading.wiring).parts[-1]
        beside = cast(Values, 1.0 / (1.0 / ohms[across] + s * farads[BYPASS]))
        stage = Linear.of(condense(reading.wiring, {**ohms, across: beside}), reading.quiet_flow)
    gain = Coupled.of(stage, reading.wiring.output, source=source, load=load).voltage_gain
    return np.asarray(share * gain, dtype=np.complex128)


def low_corner_frequency(reading: Reading) -> Array:
    """The frequency [Hz] at which the gain has fallen to 1/√2 of what it is with capacitors short, (N,).

    Of several such frequencies the highest, found to one part in 10^11; the transistor's own speed is no
    part of the model. NaN for an ideal transistor, where not solved, and for a stage without capacitors.

    Worked case: one capacitor alone has its corner at 1/(2πRC); several well apart at about the sum of
    these (short-circuit time constants), which is more than the corner where they are not apart.
    """
    if not reading.scenarios.capacitances:
        return np.full(reading.point.status.shape, np.nan)
    with np.errstate(all="ignore"):
        midband = reading.coupled.voltage_gain
        corner = np.log(np.abs(midband)) - _HALF_POWER

        def level(log_frequency: Array) -> Array:
            return np.asarray(np.log(np.abs(gain_at(reading, np.exp(log_frequency)))) - corner)

        found = _root(level, _interval(level, _above(reading)))
        return np.asarray(np.exp(found))


def _above(reading: Reading) -> Array:
    """A frequency, as its logarithm, that is likely above the corner: twice the sum of the single ones."""
    seen, farads = seen_resistances(reading), reading.scenarios.capacitances
    poles = sum((1.0 / np.abs(ohms * farads[name]) for name, ohms in seen.items()), start=np.zeros(1))
    return np.broadcast_to(np.log(poles / np.pi), reading.point.status.shape)


@dataclass(frozen=True)
class _Interval:
    """Two logarithms of frequencies between which the level changes its sign, and the levels; (N,) each."""

    low: Array
    high: Array
    at_low: Array
    at_high: Array


def _interval(level: Level, start: Array) -> _Interval:
    """Go up until the gain is above the corner's, then down to the first octave in which it falls below."""
    high, at_high = start, level(start)
    for _ in range(_OCTAVES):
        short = at_high <= 0.0
        if not short.any():
            break
        high = np.where(short, high + _OCTAVE, high)
        at_high = np.where(short, level(high), at_high)
    low, at_low = high, at_high
    for _ in range(_OCTAVES):
        above = at_low > 0.0
        if not above.any():
            break
        high, at_high = np.where(above, low, high), np.where(above, at_low, at_high)
        low = np.where(above, low - _OCTAVE, low)
        at_low = np.where(above, level(low), at_low)
    return _Interval(low, high, at_low, at_high)


def _root(level: Level, between: _Interval) -> Array:
    """Where the level is nothing: false position in the Illinois form, each element for itself.

    The end that stays twice has its level halved, so that both ends close in. NaN where the interval has
    no change of sign. Source: Dowell & Jarratt, BIT 11 (1971) (memory).
    """
    low, high, at_low, at_high = between.low, between.high, between.at_low, between.at_high
    moving = (at_low <= 0.0) & (at_high > 0.0)
    root, last = np.full(low.shape, np.nan), np.zeros(low.shape)
    for _ in range(_STEPS):
        if not moving.any():
            break
        middle = high - at_high * (high - low) / (at_high - at_low)
        root = np.where(moving, middle, root)
        found = level(root)
        side = np.sign(found)
        at_low, at_high = (
            np.where(side > 0.0, np.where(last > 0.0, 0.5 * at_low, at_low), found),
            np.where(side > 0.0, found, np.where(last < 0.0, 0.5 * at_high, at_high)),
        )
        low, high = np.where(side > 0.0, low, root), np.where(side > 0.0, root, high)
        moving, last = moving & (np.abs(found) > _CLOSE) & (high - low > _CLOSE), side
    return np.where(moving, np.nan, root)
