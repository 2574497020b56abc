"""Published designs: resistors from a target, by hand formulas, and the preferred values nearest to them.

What our rules do not do is left out: Bell 5-16 has its base at ground without a resistor (ours takes
R_B = 0.1·β·RE); Cathey 3.26 sizes the divider by R_B = β·RE/10, a rule that ours has for a split supply
only, so
its divider is not checked; Millman & Halkias 9-2 designs from limits of the current; Neamen 3.14 and
Floyd 5-6
are analyses, not designs.
"""

from __future__ import annotations

import numpy as np
import pytest
from circuit.stages import value
from variation.stages import Limits, stage
from variation.stages import ideal as ideal_transistor

from biasband.circuit.reading import read
from biasband.files.series_files import load_series
from biasband.parts.series import nearest
from biasband.stage import IdealTransistor, Signal, Stage, Supply, Target
from biasband.values.device import Device, hand, refined
from biasband.values.ideal import ideal
from biasband.variation.contributors import realise

NAMES = {
    "base-resistor": ("RB", "RC"),
    "collector-feedback": ("RB", "RC"),
    "divider": ("R1", "R2", "RC", "RE"),
    "split-supply": ("RB", "RC", "RE"),
}


def target_stage(
    topology: str, supply: float, transistor: IdealTransistor, target: Target, negative: float = 0.0
) -> Stage:
    """A stage whose resistors are all to be designed."""
    return stage(
        topology,
        dict.fromkeys(NAMES[topology], None),
        transistor,
        supply,
        negative_supply=Supply(voltage=Limits.exactly(negative)) if negative else None,
        target=target,
    )


def designed(of: Stage, device: Device, **fixed: float) -> dict[str, float]:
    """The free resistors [Ω]."""
    return {name: step.ohms for name, step in ideal(of, of.target, fixed, device).steps.items()}


H_FE_100 = ideal_transistor(100.0)


def test_bell_5_11_base_resistor():
    # Bell, Electronic Devices and Circuits, ex. 5-11: 15 V, V_CE 5 V, 5 mA, h_FE 100: RC 2 k, RB 286 k.
    of = target_stage("base-resistor", 15.0, H_FE_100, Target(collector_current=5e-3, collector=5.0))
    found = designed(of, hand(of))
    assert found["RC"] == pytest.approx(2e3, rel=1e-12)
    assert found["RB"] == pytest.approx(286e3, rel=1e-12)  # (15 − 0.7)/50 µA exactly


def test_bell_5_12_collector_feedback():
    # Bell 5-12: same target: RC 1.98 k, RB 86 k.
    of = target_stage("collector-feedback", 15.0, H_FE_100, Target(collector_current=5e-3, collector=5.0))
    found = designed(of, hand(of))
    assert found["RC"] == pytest.approx(1.98e3, abs=5.0)  # half of the last printed digit
    assert found["RB"] == pytest.approx(86e3, rel=1e-12)  # (5 − 0.7)/50 µA exactly


def test_bell_5_13_divider():
    # Bell 5-13: V_E 5 V, I_2 = I_C/10 (with h_FE 100 ten times I_B): RE 1 k, RC 1 k, R2 11.4 k, R1 18.6 k.
    aim = Target(collector_current=5e-3, collector=10.0, emitter_voltage=5.0, divider_current_ratio=10.0)
    of = target_stage("divider", 15.0, H_FE_100, aim)
    found = designed(of, hand(of))
    # Exact: the hand column takes I_E = I_C and an unloaded divider, as the book does.
    expected = {"RE": 1e3, "RC": 1e3, "R2": 11.4e3, "R1": 18.6e3}
    assert found == pytest.approx(expected, rel=1e-12)


def test_bell_5_14_snapping_to_twelve_values_per_decade():
    # Bell 5-14: 12 V, V_E 5 V, V_CE 3 V, 1 mA: RE 5 k → 4.7 k; then V_B = 5.4 V, I_2 = I_C/10 gives 54
    # k → 56 k;
    # then I_2 = 5.4/56 k = 96.4 µA and R1 = 6.6/96.4 µA = 68.4 k → 68 k. The book keeps I_C while RE is
    # snapped.
    series = load_series("E12")
    aim = Target(collector_current=1e-3, collector=8.0, emitter_voltage=5.0)
    of = target_stage("divider", 12.0, H_FE_100, aim)
    first = designed(of, hand(of))
    assert first["RE"] == pytest.approx(5e3, rel=1e-12)
    assert nearest(series, first["RE"]).chosen == 4.7e3
    second = designed(of, hand(of), RE=4.7e3)
    assert second["R2"] == pytest.approx(54e3, rel=1e-9)
    assert nearest(series, second["R2"]).chosen == 56e3
    third = designed(of, hand(of), RE=4.7e3, R2=56e3)
    assert third["R1"] == pytest.approx(68.4e3, abs=50.0)  # half of the last printed digit
    assert nearest(series, third["R1"]).chosen == 68e3


def test_bell_5_16_split_supply_emitter_and_collector():
    # Bell 5-16: ±9 V, V_C 5 V, 1 mA, h_FE 70, base at ground: RE 8.3 k → 8.2 k, RC 4 k → 3.9 k, V_C 5.1 V.
    of = target_stage(
        "split-supply", 9.0, ideal_transistor(70.0), Target(collector_current=1e-3, collector=5.0), -9.0
    )
    found = designed(of, hand(of))
    assert found["RE"] == pytest.approx(8.3e3, rel=1e-12)
    assert found["RC"] == pytest.approx(4e3, rel=1e-12)
    # Twelve values per decade: the book's own series.
    assert nearest(load_series("E12"), found["RE"]).chosen == 8.2e3
    assert nearest(load_series("E12"), found["RC"]).chosen == 3.9e3


def test_bell_5_16_collector_voltage_with_the_snapped_values():
    # V_C = 9 − 3.9 k · I_C, I_C = 8.3/8.2 k less the base current that the book leaves out: 5.1 V.
    many = ideal_transistor(1e9)  # the book's I_E = I_C
    of = stage(
        "split-supply",
        {"RB": 1.0, "RC": 3.9e3, "RE": 8.2e3},
        many,
        9.0,
        negative_supply=Supply(voltage=Limits.exactly(-9.0)),
    )
    assert value(read(of, realise(of, {})), "collector_voltage") == pytest.approx(5.1, abs=0.05)


def test_cathey_3_26_maximum_swing_current():
    # Cathey, Schaum's Electronic Devices and Circuits, 3.26: 15 V, RC 500, RE 300 bypassed, β 100: for
    # maximum
    # symmetric swing I_CQ = 9.375 mA (alpha taken as 1, V_CE(sat) 0): 15/(R_ac + R_dc) with R_ac = r_ac
    # + r_e.
    # The book has RE unbypassed for its load line: R_ac = R_dc = 800: I_CQ = 15/1600 = 9.375 mA. With that
    # current as the target and max-swing, our rule gives back the book's RC beside its RE.
    many = ideal_transistor(1e9)
    aim = Target(collector_current=9.375e-3, collector="max-swing", emitter_voltage=9.375e-3 * 300.0)
    of = target_stage("divider", 15.0, many, aim)
    found = designed(of, hand(of))
    assert found["RC"] == pytest.approx(500.0, rel=1e-6)  # a bisection
    assert found["RE"] == pytest.approx(300.0, rel=1e-9)


def test_neamen_4_9_load_line():
    # Neamen, Electronic Circuit Analysis and Design, ex. 4.9: 0.894 mA, RC 5 k, load 2 k: 2.55 V peak
    # to peak,
    # limited by cut-off: 2 · I_CQ · (RC ‖ load). The divider is ours; it only has to keep V_CE high enough.
    of = stage(
        "divider",
        {"R1": 56e3, "R2": 12.2e3, "RC": 5e3, "RE": 500.0},
        ideal_transistor(1e9),
        12.0,
        signal=Signal(load=2e3, bypassed=True),
    )
    # V_B = 0.7 + 0.894 mA · RE fixes the divider's R1.
    base = 0.7 + 0.894e-3 * 500.0
    R1 = 12.2e3 * (12.0 - base) / base
    of = stage(
        "divider",
        {"R1": R1, "R2": 12.2e3, "RC": 5e3, "RE": 500.0},
        ideal_transistor(1e9),
        12.0,
        signal=of.signal,
    )
    reading = read(of, realise(of, {}))
    assert value(reading, "collector_current") == pytest.approx(0.894e-3, rel=1e-6)
    assert 2.0 * value(reading, "symmetric_peak_swing") == pytest.approx(2.55, abs=0.005)
    assert 2.0 * value(reading, "symmetric_peak_swing") == pytest.approx(2.554, abs=0.0005)


@pytest.mark.parametrize("topology", ["base-resistor", "collector-feedback", "divider"])
def test_refined_bell_designs_meet_their_target(topology):
    aim = Target(
        collector_current=5e-3,
        collector=10.0 if topology == "divider" else 5.0,
        emitter_voltage=5.0 if topology == "divider" else None,
    )
    of = target_stage(topology, 15.0, H_FE_100, aim)
    made = stage(topology, designed(of, refined(of)), H_FE_100, 15.0)
    reading = read(made, realise(made, {}))
    assert value(reading, "collector_current") == pytest.approx(5e-3, rel=1e-9)
    assert value(reading, "collector_emitter_voltage") == pytest.approx(5.0, rel=1e-9)
    assert np.all(np.array(list(designed(of, refined(of)).values())) > 0.0)
