"""The swing of a worked example: Neamen, Electronic Circuit Analysis and Design, ex. 4.9."""

from __future__ import annotations

import pytest
from circuit.stages import Case, ideal

from biasband.stage import Signal


def test_symmetric_swing_into_a_load() -> None:
    """I_CQ 0.894 mA, RC 5 kΩ, load 2 kΩ: 2.55 V peak to peak."""
    # The book's stage in the shape that its swing depends on: a base resistor sets 0.894 mA, and the supply
    # is high enough that cut-off, not saturation, limits; 100 · (15 − 0.7) V / RB = 0.894 mA.
    RB = 100.0 * (15.0 - 0.7) / 0.894e-3
    case = Case(
        topology="base-resistor",
        resistances={"RB": RB, "RC": 5e3},
        supply=15.0,
        transistor=ideal(100.0),
        signal=Signal(load=2e3),
    )
    assert case.value("collector_current") == pytest.approx(0.894e-3, rel=1e-9)  # the example's given
    swing = 2.0 * case.value("symmetric_peak_swing")
    assert swing == pytest.approx(2.55, abs=0.005)  # published: two decimals
    assert swing == pytest.approx(2.554, abs=0.0005)  # exact (check values): three decimals
