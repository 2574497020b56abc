"""A stage far from the test current is warned of; with a gain curve, only beyond the curve's ends."""

from __future__ import annotations

import pytest
from circuit.stages import real

from biasband.gain_curve import GainCurve
from biasband.show.surroundings import surroundings
from biasband.signoff.study import review
from biasband.stage import Limits, Resistor, Stage, Supply


def curve(low: float, high: float) -> GainCurve:
    """A nearly flat curve between two currents [A]."""
    return GainCurve(((low, 200.0), (high, 210.0)))


def divider(gain_curve: GainCurve | None, *, test_current: float = 1.5e-3) -> Stage:
    """A divider of about 1.0 mA, some 0.6 to 1.5 mA at its corners."""
    ohms = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 820.0}
    return Stage(
        title="divider", topology="divider", polarity="npn",
        supply=Supply(voltage=Limits(low=8.1, nominal=9.0, high=9.9)),
        transistor=real(
            test_current=test_current, gain_curve=gain_curve, leakage=40e-9, thermal_resistance=280.0,
            saturation_voltage=0.3,
        ),
        resistors=tuple(Resistor(name=name, value=value, tolerance=0.01) for name, value in ohms.items()),
        ambient=Limits(low=263.15, nominal=298.15, high=323.15),
    )  # fmt: skip


def warned(stage: Stage) -> tuple[str, ...]:
    """The warnings of a review."""
    return review(stage, boards=4).warnings


def test_current_that_the_curve_covers_is_not_warned_of_however_far_from_the_test_current() -> None:
    assert warned(divider(curve(0.1e-3, 100e-3), test_current=50e-3)) == ()
    assert any("test current" in warning for warning in warned(divider(None, test_current=50e-3)))


@pytest.mark.parametrize(("low", "high"), [(1.3e-3, 10e-3), (1e-5, 0.7e-3)])
def test_stage_beyond_the_ends_is_warned_of(low: float, high: float) -> None:
    test_current = (low * high) ** 0.5
    (warning,) = warned(divider(curve(low, high), test_current=test_current))
    assert "the stage runs at" in warning and "beyond the gain curve" in warning and "held" in warning


@pytest.mark.parametrize(("low", "high"), [(0.85e-3, 10e-3), (1e-5, 1.1e-3)])
def test_corners_beyond_the_ends_are_warned_of(low: float, high: float) -> None:
    stage = divider(curve(low, high), test_current=(low * high) ** 0.5)
    found = review(stage, boards=4)
    currents = found.evidence.corners.ranges["collector_current"]
    assert low < found.nominal.values["collector_current"] < high
    assert currents.low.value < low or currents.high.value > high
    (warning,) = found.warnings
    assert warning.startswith("some corners run at") and "beyond the gain curve" in warning


def test_test_current_beyond_the_curve_is_warned_of() -> None:
    (warning,) = warned(divider(curve(0.1e-3, 10e-3), test_current=20e-3))
    assert "the test current, 20 mA, is beyond the gain curve (100 µA to 10 mA)" in warning


def test_report_says_that_a_curve_was_used() -> None:
    stage = divider(curve(0.1e-3, 10e-3))
    lines = "\n".join(surroundings(stage, review(stage, boards=4).nominal))
    assert "h_FE following the gain curve from 100 µA to 10 mA" in lines
