"""The most that a stage's output could swing with the best bias, its resistors and load as they are."""

from __future__ import annotations

import numpy as np

from biasband.circuit.network import total
from biasband.circuit.reading import Reading
from biasband.circuit.scenarios import Array
from biasband.circuit.topology import Node


def most_swing(reading: Reading) -> Array:
    """The largest symmetric peak swing [V] that any collector current could give, shape (N,).

    `I_CQ·r_ac` at `I_CQ = (V − V_CE(sat))/(R_ac + R_dc)`, where cut-off and saturation are equally far;
    V is rail to rail, R_ac the signal's resistance round the load line, R_dc the resistors in line with
    the transistor.

    Worked case: 15 V, RC 500 Ω, RE 300 Ω not bypassed, V_CE(sat) 0: 9.375 mA (Cathey, Schaum's
    Electronic Devices and Circuits, 3.26), so 4.6875 V.
    Source: the load line, as in any text on electronic circuits ("common practice").
    """
    ohms = reading.scenarios.resistances
    r_ac = 1.0 / reading.output_conductance
    beside = 0.0 if reading.wiring.output is Node.EMITTER else reading.unbypassed
    in_line = ((Node.COLLECTOR, Node.COLLECTOR_RAIL), (Node.EMITTER, Node.EMITTER_RAIL))
    R_dc = sum((total(w, ohms) for w in reading.wiring.wires if (w.node, w.other) in in_line), start=0.0)
    rails = reading.quiet_rails
    span = rails[Node.COLLECTOR_RAIL] - rails[Node.EMITTER_RAIL] - reading.stage.saturation_voltage
    swing = np.maximum(span, 0.0) * r_ac / (r_ac + beside + R_dc)
    return np.broadcast_to(np.asarray(swing, dtype=float), reading.point.status.shape)
