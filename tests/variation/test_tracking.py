"""Tracking: a divider's ratio drifts far less with two resistors of one array than with two separate ones."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from biasband.boards.draws import coordinates
from biasband.boards.sampling import Spread, sample
from biasband.files.stage_file import read_stage
from biasband.stage import Distribution, Stage
from biasband.variation.contributors import realise
from biasband.variation.corners import corners
from biasband.variation.points_of_use import points_of_use
from variation.stages import some, with_resistor

SAMPLE = Path(__file__).parents[2] / "samples" / "ice_warner.toml"

TOLERANCE, WITHIN, TEMPCO, TRACKING, LIFE = 0.01, 0.001, 100e-6, 5e-6, 0.001
COLDEST = 55.0
"""[K] From 25 °C down to −30 °C, further than up to 60 °C."""


@cache
def array() -> Stage:
    """The sample: R1 and R2 in one array."""
    return read_stage(SAMPLE)


@cache
def separate() -> Stage:
    """The sample with two separate resistors of the same data sheet."""
    of = array()
    for name in ("R1", "R2"):
        of = with_resistor(of, name, group=None, tracking=None, distribution=Distribution())
    return of


def ratios(of: Stage, x: dict[str, np.ndarray]) -> np.ndarray:
    """R2/(R1 + R2) at coordinates."""
    found = realise(of, x).resistances
    return np.asarray(found["R2"] / (found["R1"] + found["R2"]))


def at_corners(of: Stage) -> np.ndarray:
    """R2/(R1 + R2) at every corner of what moves R1, R2 and the ambient."""
    names = ("R1", "R2", "group array A", "batch array A", "temperature")
    points = 2.0 * np.indices((2,) * len(names)).reshape(len(names), -1).T - 1.0
    return ratios(of, dict(zip(names, points.T, strict=True)))


def of_boards(of: Stage) -> np.ndarray:
    """R2/(R1 + R2) of 4000 boards at the coldest point of use."""
    return ratios(of, {**coordinates(of, slice(0, 4000), seed=1), "temperature": np.array(-1.0)})


def test_sample_is_the_one_that_the_figures_here_are_of():
    one, other = array().resistor("R1"), array().resistor("R2")
    assert one.group == other.group == "array A"
    for resistor in (one, other):
        assert (resistor.tolerance, resistor.tempco, resistor.tracking) == (TOLERANCE, TEMPCO, TRACKING)
        assert (resistor.distribution.within_batch, resistor.life_drift) == (WITHIN, LIFE)


@pytest.mark.parametrize(
    ("of", "each"),
    [(array, WITHIN + LIFE + TRACKING * COLDEST), (separate, TOLERANCE + LIFE + TEMPCO * COLDEST)],
    ids=["array", "separate"],
)
def test_ratio_at_the_corners_is_off_by_what_each_resistor_has_for_itself(of, each):
    # k = R2/(R1 + R2): dk/k = (1 − k)·(δ2 − δ1), and δ2 − δ1 is twice what each has for itself.
    nominal = ratios(of(), {})
    reach = np.abs(at_corners(of()) / nominal - 1.0).max()
    # First order; the second is a few δ more, and the common 1.5 % scale the own part.
    assert reach == pytest.approx((1.0 - nominal) * 2.0 * each, rel=0.04)


def test_ratio_drifts_a_sixth_at_the_corners_and_on_the_boards():
    # 2·0.2275 % against 2·1.65 %: 7.25 times less at the corners.
    assert np.ptp(at_corners(separate())) / np.ptp(at_corners(array())) == pytest.approx(7.25, rel=0.04)
    # Uniform parts: √(w² + d² + (c·ΔT)²) for each; 1.4247e-3 against 1.1456e-2, 8.04 times less.
    expected = np.sqrt(TOLERANCE**2 + LIFE**2 + (TEMPCO * COLDEST) ** 2)
    expected /= np.sqrt(WITHIN**2 + LIFE**2 + (TRACKING * COLDEST) ** 2)
    found = np.std(of_boards(separate())) / np.std(of_boards(array()))
    # A deviation of N boards strays by less than 1/√(2N) = 1.1 %; four of them for two.
    assert found == pytest.approx(expected, rel=4 * np.sqrt(2.0) * 0.0112)


def test_boards_ratio_lies_inside_its_corners():
    for of in (array(), separate()):
        low, high = at_corners(of).min(), at_corners(of).max()
        assert np.all((of_boards(of) >= low) & (of_boards(of) <= high))


def quiet(of: Stage) -> Stage:
    """The stage with a supply that is what it says, so that the divider is what moves the base."""
    exact = replace(of.supply.voltage, low=9.0, high=9.0)
    return replace(of, supply=replace(of.supply, voltage=exact))


def spread(of: Stage) -> Spread:
    """The base voltage of 2000 boards."""
    measures = some(of, "base_voltage")
    return sample(of, measures, points_of_use(of), boards=2000, seed=1, cut_off=0.0).spread["base_voltage"]


def test_base_voltage_moves_far_less_with_the_array():
    # Not as much less as the ratio: the base current, through gain and V_BE, moves it too.
    widths = {}
    for name, of in (("array", quiet(array())), ("separate", quiet(separate()))):
        found = corners(of, some(of, "base_voltage"), cut_off=0.0).ranges["base_voltage"]
        drawn = spread(of)
        widths[name] = (found.high.value - found.low.value, drawn.nominal_use.sd)
        assert found.low.value <= drawn.lowest_in_use.lowest
        assert found.high.value >= drawn.highest_in_use.highest
    for of_array, of_separate in zip(widths["array"], widths["separate"], strict=True):
        assert of_separate > 2.0 * of_array
