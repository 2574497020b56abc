"""The most that an output could swing: the load line's optimum, found again by trying biases."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from biasband.circuit.most_swing import most_swing
from biasband.stage import IdealTransistor, Limits, Signal
from circuit.stages import Case, value


def textbook(saturation_voltage: float = 0.0) -> IdealTransistor:
    return IdealTransistor(
        gain=Limits.exactly(1e6),
        base_emitter_voltage=Limits.exactly(0.7),
        saturation_voltage=saturation_voltage,
    )


def test_cathey_3_26_bias_for_the_largest_swing() -> None:
    """15 V, RC 500 Ω, RE 300 Ω: 9.375 mA. Cathey, Schaum's Electronic Devices and Circuits, 3.26."""
    case = Case(
        topology="divider", resistances={"R1": 11.86e3, "R2": 4.016e3, "RC": 500.0, "RE": 300.0},
        supply=15.0, transistor=textbook(), signal=Signal(),
    )  # fmt: skip
    assert most_swing(case.reading())[0] == pytest.approx(9.375e-3 * 500.0, rel=1e-12)


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize(
    ("topology", "fixed", "signal"),
    [
        ("divider", {"R2": 10e3, "RC": 3.3e3, "RE": 1e3}, Signal(load=4.7e3, bypassed=True)),
        ("divider", {"R2": 10e3, "RC": 3.3e3, "RE1": 220.0, "RE2": 820.0}, Signal(load=4.7e3, bypassed=True)),
        ("divider", {"R2": 10e3, "RC": 3.3e3, "RE": 1e3}, Signal()),
        ("follower", {"R2": 10e3, "RE": 1e3}, Signal(load=680.0)),
    ],
)
def test_no_bias_swings_farther(
    topology: str, fixed: dict[str, float], signal: Signal, polarity: str
) -> None:
    """Bias after bias by R1: the best of them comes to what the load line says, and none beyond."""
    case = Case(
        topology=topology, resistances={"R1": 1e4, **fixed}, supply=12.0, transistor=textbook(0.2),
        signal=signal, polarity=polarity,
    )  # fmt: skip
    trials = [replace(case, resistances={"R1": ohms, **fixed}) for ohms in np.geomspace(1e3, 1e6, 400)]
    swings = [value(trial.reading(), "symmetric_peak_swing") for trial in trials]
    # 400 biases over three decades: 1.7 % from one to the next, at a corner of two straight lines.
    assert max(swings) == pytest.approx(most_swing(case.reading())[0], rel=0.03)
    assert max(swings) <= most_swing(case.reading())[0] * (1.0 + 1e-5)  # I_C is I_E but for 1e-6
