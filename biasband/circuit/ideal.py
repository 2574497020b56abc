"""The ideal transistor: constant V_BE, no Early effect, no leakage, closed form.

So that textbook answers can be checked to the digit; it is in the library, not in the stage file.
"""

from __future__ import annotations

import numpy as np

from biasband.circuit.network import Ports
from biasband.circuit.scenarios import Scenarios
from biasband.circuit.solution import Status, Trial
from biasband.constants import ASSUMED_SATURATION_VOLTAGE
from biasband.stage import IdealTransistor


def solve(ports: Ports, transistor: IdealTransistor, part: Scenarios) -> Trial:
    """Solve a chunk in closed form.

    Active: `I_B = (open_be − V_BE) / (z11 + β·z12)`, `I_C = β·I_B`; cut off (no current) where that
    is negative. Saturated where V_CE would fall to V_CE(sat): both junction voltages are then
    held and the currents follow from `i = Z⁻¹·(open − v)`.
    Source: any text on electronic devices; "common practice".
    """
    held = transistor.saturation_voltage
    V_sat = ASSUMED_SATURATION_VOLTAGE if held is None else held
    beta = np.broadcast_to(np.asarray(part.gain, dtype=float), (len(part),))
    V_BE = part.base_emitter_voltage + np.zeros_like(beta)
    drive = np.maximum(ports.open_be - V_BE, 0.0)
    I_B = drive / (ports.z11 + beta * ports.z12)
    I_C = beta * I_B
    V_BE = np.where(drive > 0.0, V_BE, ports.open_be)
    V_BC = ports.open_bc - ports.z21 * I_B - ports.z22 * I_C
    saturated = V_BE - V_BC <= V_sat
    with np.errstate(divide="ignore", invalid="ignore"):
        held_B, held_C = ports.currents(V_BE, V_BE - V_sat)
        I_B, I_C = np.where(saturated, held_B, I_B), np.where(saturated, held_C, I_C)
    V_BC = np.where(saturated, V_BE - V_sat, V_BC)
    solved = np.isfinite(I_B) & np.isfinite(I_C) & np.isfinite(V_BC)
    status = np.where(solved, np.int8(Status.SOLVED), np.int8(Status.UNSOLVED))
    return Trial(V_BE, V_BC, I_B, I_C, part.temperature, status)
