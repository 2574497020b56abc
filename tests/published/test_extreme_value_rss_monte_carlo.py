"""One divider by extreme value, RSS and Monte Carlo, and the published figures of each method.

Source: the project's check values, computed for them by an independent program; the textbook divider
is Bell, Electronic Devices and Circuits, ex. 5-8.
"""

from __future__ import annotations

import numpy as np
import pytest
from variation.stages import ideal, stage

from biasband.boards.sampling import QUANTILES, Sample, sample
from biasband.circuit.quantities import vocabulary
from biasband.stage import IdealTransistor, Limits, Resistor, Stage, Supply
from biasband.variation.corners import corners
from biasband.variation.points_of_use import points_of_use
from biasband.variation.rss import rss

NAMES = ("collector_current", "collector_emitter_voltage")
MEASURES = {name: vocabulary(("R1", "R2", "RC", "RE"))[name] for name in NAMES}


def divider() -> Stage:
    """18 V ± 5 % by board, 33 k / 12 k / 1.2 k / 1 k all ± 5 %, β 50…200 uniform in ln β, V_BE
    0.60…0.75 V."""
    return stage(
        "divider",
        {"R1": 33e3, "R2": 12e3, "RC": 1.2e3, "RE": 1e3},
        ideal(Limits(low=50.0, nominal=100.0, high=200.0), Limits(low=0.60, nominal=0.675, high=0.75)),
        Supply(voltage=Limits(low=17.1, nominal=18.0, high=18.9), varies="by board"),
        resistor={"tolerance": 0.05},
    )


def test_extreme_values():
    found = corners(divider(), MEASURES, cut_off=0.0)
    current, volts = (found.ranges[name] for name in NAMES)
    assert found.count == 2**7
    # Half of the last printed digit.
    assert current.low.value == pytest.approx(2.803e-3, abs=0.5e-6)
    assert current.high.value == pytest.approx(4.820e-3, abs=0.5e-6)
    assert volts.low.value == pytest.approx(7.568, abs=0.5e-3)
    assert volts.high.value == pytest.approx(11.909, abs=0.5e-3)
    assert not current.interior and not volts.interior


def test_root_sum_of_squares():
    found = rss(divider(), MEASURES, cut_off=0.0)
    current, volts = (found[name] for name in NAMES)
    # Half of the last printed digit.
    assert current.low == pytest.approx(3.285e-3, abs=0.5e-6)
    assert current.high == pytest.approx(4.165e-3, abs=0.5e-6)
    assert volts.low == pytest.approx(8.878, abs=0.5e-3)
    assert volts.high == pytest.approx(10.663, abs=0.5e-3)


BOARDS = 2**22
"""So many that ±0.005 mA and ±0.005 V are three standard deviations of the quantiles (checked below)."""


@pytest.fixture(scope="module")
def nominal_use() -> dict[str, Sample]:
    """The sampled current and voltage at nominal use."""
    found = sample(divider(), MEASURES, points_of_use(divider()), boards=BOARDS, seed=1, cut_off=0.0)
    return {name: found.spread[name].nominal_use for name in NAMES}


@pytest.mark.parametrize(
    ("name", "low", "high", "tolerance"),
    [
        ("collector_current", 3.076e-3, 4.471e-3, 0.005e-3),
        ("collector_emitter_voltage", 8.337, 11.178, 0.005),
    ],
)
def test_monte_carlo(nominal_use, name, low, high, tolerance):
    found = nominal_use[name]
    assert found.quantile(QUANTILES[0]) == pytest.approx(low, abs=tolerance)
    assert found.quantile(QUANTILES[2]) == pytest.approx(high, abs=tolerance)
    for share in (0.00135, 0.99865):
        # The quantile of all boards scatters by the scatter over 16 batches divided by √16.
        scatter = np.quantile(found.values.reshape(16, -1), share, axis=1).std(ddof=1) / 4.0
        assert 3.0 * scatter < tolerance


def test_highest_power_lies_inside_the_box():
    # physics.md 5, computed for it: 12 V, RB 240 k, RC 2.2 k, no RE, V_BE 0.7 V, h_FE 30…100: V_CE·I_C
    # is 12.6
    # and 7.7 mW at the corners, 16.4 mW at h_FE ≈ 58. Our power holds V_BE·I_B = 0.033 mW too.
    gain = Limits(low=30.0, nominal=np.sqrt(3000.0), high=100.0)
    of = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(gain), 12.0)
    power = corners(of, {"transistor_power": vocabulary(())["transistor_power"]}, cut_off=0.0).ranges
    high, low = power["transistor_power"].high, power["transistor_power"].low
    base = 0.7 * 11.3 / 240e3
    assert high.interior and power["transistor_power"].interior and not low.interior
    assert high.value - base == pytest.approx(16.4e-3, abs=0.05e-3)  # half of the last printed digit
    assert high.value - base == pytest.approx(6.0**2 / 2.2e3, rel=1e-4)  # exactly (V_CC/2)²/RC
    assert high.at["gain"] == pytest.approx(58.0, abs=0.5)
    assert low.value - base == pytest.approx(7.7e-3, abs=0.05e-3)
    assert low.at["gain"] == pytest.approx(100.0, rel=1e-9)


def test_millman_9_2_collector_current_between_the_limits_of_the_gain():
    """Millman & Halkias, Integrated Electronics, ex. 9-2: 1.75…2.25 mA over β 36…90, V_BE 0.65 V.

    The book's design (20 V, RC 4 kΩ, RE 1 kΩ, R1 118 kΩ, R2 24.3 kΩ; R_B 20.1 kΩ) held at the corners of
    the gain must come out at the limits that it was designed for.
    """
    transistor = IdealTransistor(
        gain=Limits(low=36.0, nominal=57.0, high=90.0), base_emitter_voltage=Limits.exactly(0.65)
    )
    values = {"R1": 118e3, "R2": 24.3e3, "RC": 4e3, "RE": 1e3}
    of = Stage(
        title="published",
        topology="divider",
        polarity="npn",
        supply=Supply(voltage=Limits.exactly(20.0)),
        transistor=transistor,
        resistors=tuple(Resistor(name=name, value=ohms) for name, ohms in values.items()),
    )
    measures = {"collector_current": vocabulary(tuple(values))["collector_current"]}
    found = corners(of, measures, cut_off=0.0).ranges["collector_current"]
    # The book's resistors are rounded to three figures ("about"): 1 %.
    assert found.low.value == pytest.approx(1.75e-3, rel=0.01)
    assert found.high.value == pytest.approx(2.25e-3, rel=0.01)
    assert (found.low.at["gain"], found.high.at["gain"]) == (36.0, 90.0)
