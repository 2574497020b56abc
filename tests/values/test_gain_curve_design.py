"""A design far from the test current uses the h_FE that the gain curve gives there."""

from __future__ import annotations

from dataclasses import replace

import pytest
from circuit.stages import TOPOLOGY_RESISTORS, real, value

from biasband.circuit.reading import read
from biasband.gain_curve import GainCurve
from biasband.stage import Limits, Resistor, Stage, Supply, Target
from biasband.values.device import hand, refined
from biasband.values.ideal import ideal
from biasband.variation.contributors import realise

CURVE = GainCurve(((0.1e-3, 180.0), (1e-3, 240.0), (10e-3, 260.0), (50e-3, 130.0)))


def wanted(topology: str, current: float, polarity: str = "npn") -> Stage:
    """A stage without values that is to carry a collector current [A]."""
    names, split = TOPOLOGY_RESISTORS[topology][0], topology == "split-supply"
    transistor = real(
        240.0, test_current=1e-3, early_voltage=70.0, thermal_resistance=100.0, gain_curve=CURVE
    )
    return Stage(
        title="target", topology=topology, polarity=polarity, transistor=transistor,
        supply=Supply(voltage=Limits.exactly(9.0)),
        negative_supply=Supply(voltage=Limits.exactly(-9.0)) if split else None,
        resistors=tuple(Resistor(name=name) for name in names), target=Target(collector_current=current),
    )  # fmt: skip


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("current", [0.05e-3, 0.3e-3, 20e-3, 60e-3])
@pytest.mark.parametrize("topology", TOPOLOGY_RESISTORS)
def test_refined_stage_meets_its_target(topology: str, current: float, polarity: str) -> None:
    stage = wanted(topology, current, polarity)
    assert stage.target is not None
    steps = ideal(stage, stage.target, {}, refined(stage)).steps
    values = tuple(replace(each, value=steps[each.name].ohms) for each in stage.resistors)
    done = replace(stage, resistors=values)
    # physics.md section 7: to 0.1 %.
    assert value(read(done, realise(done, {})), "collector_current") == pytest.approx(current, rel=1e-3)


@pytest.mark.parametrize(("current", "gain"), [(0.1e-3, 180.0), (1e-3, 240.0), (50e-3, 130.0), (0.2, 130.0)])
def test_hand_calculation_reads_h_fe_off_the_curve(current: float, gain: float) -> None:
    need = hand(wanted("divider", current))(current, 5.0)
    # I_B = I_C/h_FE, the typical h_FE being the curve's here; rounding of a logarithm.
    assert need.I_B == pytest.approx(current / gain, rel=1e-12)
    assert (need.I_C, need.I_E, need.V_BE) == (current, current, 0.7)
