"""The low corner: what the coupling and bypass capacitors take from the gain at low frequencies.

A capacitor in series with the source or the load, or across a part of the emitter resistor, only changes
the impedance of a wire. So the nodes and their equations stay those of `network`, with complex numbers in
the place of resistances.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import cast

import numpy as np
from numpy.typing import NDArray

from biasband.circuit import signal
from biasband.circuit.reading import Reading
from biasband.circuit.scenarios import Array, Values
from biasband.circuit.topology import Node, Wire, Wiring
from biasband.coupling import BYPASS, INPUT, OUTPUT, Signal

_HALF_POWER = 0.5 * np.log(2.0)
"""ln √2: how far the gain has fallen at the corner."""

_OCTAVE, _OCTAVES = np.log(2.0), 70
"""The search for an interval goes in octaves, and over so many: 21 decades."""

_STEPS, _CLOSE = 80, 1e-12
"""Steps within the interval at most, and the level or the interval that is none any more."""

Level = Callable[[Array], Array]
"""How far the gain, in its logarithm, is above the corner's, at the logarithm of a frequency; (N,) each."""


def seen_resistances(reading: Reading) -> Mapping[str, Values]:
    """The resistance [Ω] that each capacitor sees with the others short, by its name, shape (N,).

    Of the source and the input, of the load and the output, of what lies across the bypass capacitor.
    Source: short-circuit time constants; Gray & Meyer, "Analysis and Design of Analog Integrated
    Circuits" (memory).
    """
    asked, coupled, law, point = _asked(reading), reading.coupled, reading.law, reading.quiet
    seen = {INPUT: asked.source_resistance + signal.input_resistance(coupled, law, point)}
    if asked.load is not None:
        seen[OUTPUT] = asked.load + signal.output_resistance(coupled, law, point)
    if asked.bypassed:
        seen[BYPASS] = _across_bypass(reading, asked)
    return seen


def _across_bypass(reading: Reading, asked: Signal) -> Values:
    """RE or RE2, in parallel with the emitter and whatever of its resistor is not bypassed."""
    ohms = reading.scenarios.resistances
    *before, across = _emitter_wire(reading.wiring).parts
    plain = signal.couple(reading.wiring, replace(asked, bypassed=False), ohms)
    driven = plain.with_quiet_source().tied_to_source(Node.EMITTER, without=across)
    emitter = signal.driving_point(driven, reading.law, reading.quiet, Node.EMITTER)
    path = sum((ohms[part] for part in before), start=emitter)
    return 1.0 / (1.0 / path + 1.0 / ohms[across])


def _asked(reading: Reading) -> Signal:
    return reading.stage.signal or Signal()


def _emitter_wire(wiring: Wiring) -> Wire:
    return next(wire for wire in wiring.wires if wire.node is Node.EMITTER)


def gain_at(reading: Reading, frequency: Values) -> NDArray[np.complex128]:
    """From the source's EMF to the load, or to the output without one, at a frequency [Hz]; shape (N,)."""
    s, asked = 2j * np.pi * np.asarray(frequency), _asked(reading)
    ohms, farads = reading.scenarios.resistances, reading.scenarios.capacitances
    changed = {signal.SOURCE: asked.source_resistance + 1.0 / (s * farads[INPUT])}
    wires = [*reading.wiring.wires, Wire((signal.SOURCE,), Node.BASE, Node.SOURCE)]
    share: NDArray[np.complex128] | float = 1.0
    if asked.load is not None:
        changed[signal.LOAD] = asked.load + 1.0 / (s * farads[OUTPUT])
        wires.append(Wire((signal.LOAD,), reading.wiring.output, Node.GROUND))
        share = asked.load / changed[signal.LOAD]
    if asked.bypassed:
        across = _emitter_wire(reading.wiring).parts[-1]
        changed[across] = 1.0 / (1.0 / ohms[across] + s * farads[BYPASS])
    # The nodal equations do not mind that these numbers are complex.
    impedances = {**ohms, **cast(Mapping[str, Values], changed)}
    coupled = signal.Coupled(Wiring(tuple(wires), reading.wiring.ties, reading.wiring.output), impedances)
    gain = signal.voltage_gain(coupled, reading.law, reading.quiet)
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
        midband = signal.voltage_gain(reading.coupled, reading.law, reading.quiet)
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
