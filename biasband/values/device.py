"""The transistor turned round: what it needs in order to carry a wanted collector current."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from biasband.circuit.gain_curve import GainScaling
from biasband.circuit.junction import Laws, Sheet, laws, sheet
from biasband.constants import HAND_BASE_EMITTER_VOLTAGE, HOTTEST_JUNCTION
from biasband.stage import AnyTransistor, IdealTransistor, Stage, Transistor

_PASSES = 60
_SETTLED = 1e-12


@dataclass(frozen=True)
class Need:
    """What a collector current [A] takes: V_BE [V] and terminal currents [A].

    In a hand calculation I_E = I_C, and `stiff` says that a divider is taken as unloaded.
    """

    V_BE: float
    I_B: float
    I_C: float
    I_E: float
    stiff: bool = False


Device = Callable[[float, float], Need]
"""The need at a collector current [A] and V_CE [V]."""


def hand(stage: Stage) -> Device:
    """The transistor of a hand calculation: V_BE = 0.7 V, I_B = I_C/h_FE, I_E = I_C (common practice)."""
    ideal = isinstance(stage.transistor, IdealTransistor)
    V_BE = stage.transistor.base_emitter_voltage.nominal if ideal else HAND_BASE_EMITTER_VOLTAGE
    return lambda I_C, V_CE: Need(V_BE, I_C / _read_gain(stage.transistor, I_C), I_C, I_C, stiff=True)


def _read_gain(transistor: AnyTransistor, I_C: float) -> float:
    """h_FE as one reads it off the data sheet: the typical one, along the gain curve where there is one."""
    gain = transistor.gain.nominal
    if isinstance(transistor, IdealTransistor) or transistor.gain_curve is None:
        return gain
    scaling = GainScaling.of(transistor.gain_curve, test_current=transistor.test_current)
    return gain * float(scaling.at(I_C).factor)


def refined(stage: Stage) -> Device:
    """The real transistor at its nominal parameters and ambient, self-heating included."""
    transistor = stage.transistor
    if isinstance(transistor, IdealTransistor):
        beta, V_BE = transistor.gain.nominal, transistor.base_emitter_voltage.nominal
        return lambda I_C, V_CE: Need(V_BE, I_C / beta, I_C, I_C * (1.0 + 1.0 / beta))
    return lambda I_C, V_CE: _need(stage, transistor, I_C, V_CE)


def _need(stage: Stage, transistor: Transistor, I_C: float, V_CE: float) -> Need:
    """Invert the junction laws at T_j = T_a + R_θJA·P, by fixed point on V_BE and T_j.

    The junction is taken no hotter than the model allows; the solver tells whether it would be.
    """
    V_BE, I_B = transistor.base_emitter_voltage.nominal, 0.0
    for _ in range(_PASSES):
        before = V_BE
        rise = (transistor.thermal_resistance or 0.0) * max(V_CE * I_C + V_BE * I_B, 0.0)
        law = laws(_nominal_sheet(transistor), min(stage.ambient.nominal + rise, HOTTEST_JUNCTION))
        V_BE, I_B = _inverted(law, I_C, V_CE, V_BE)
        if abs(V_BE - before) < _SETTLED:
            break
    return Need(V_BE, I_B, I_C, I_C + I_B)


def _nominal_sheet(transistor: Transistor) -> Sheet:
    return sheet(
        transistor,
        gain=transistor.gain.nominal,
        base_emitter_voltage=transistor.base_emitter_voltage.nominal,
        leakage=0.0,
    )


def _inverted(law: Laws, I_C: float, V_CE: float, V_BE: float) -> tuple[float, float]:
    """V_BE [V] and I_B [A] at which the laws give I_C with V_CE held, starting from a V_BE [V]."""
    I_S, V_T = float(law.saturation_current), float(law.thermal_voltage)
    V_BC = V_BE - V_CE
    reverse = I_S * float(np.exp(V_BC / V_T))
    back = (reverse - I_S) * law.inverse_reverse_gain
    forward = (I_C + back) / (1.0 - V_BC * law.inverse_early) + reverse
    gain = float(law.forward_gain) * float(law.scaled(forward, V_BC).factor)
    return V_T * float(np.log(forward / I_S)), (forward - I_S) / gain + back
