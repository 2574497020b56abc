"""Causes: how much of the way to the worst is gone when one contributor alone is frozen."""

from __future__ import annotations

import numpy as np
import pytest

from biasband.circuit.reading import read
from biasband.variation.causes import causes
from biasband.variation.contributors import axes, realise
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current
from variation.stages import coupled, ideal, limits, some, stage, words


@pytest.mark.parametrize("name", ["collector_current", "transistor_power", "input_resistance"])
@pytest.mark.parametrize("side", ["low", "high"])
def test_share_is_what_a_loop_by_hand_finds(name, side):
    of = coupled()
    cut_off = cut_off_current(of)
    ranges = corners(of, some(of, name), cut_off=cut_off).ranges
    found = getattr(causes(of, ranges, some(of, name), cut_off=cut_off)[name], side)
    worst, quantity = getattr(ranges[name], side), words(of)[name]

    def value(x: dict[str, float]) -> float:
        return float(np.ravel(quantity.read(read(of, realise(of, x))))[0])

    nominal = value({})
    for axis in axes(of):
        frozen = value({**worst.coordinates, axis.name: axis.nominal})
        share = (worst.value - frozen) / (worst.value - nominal)
        # 1e-6: residuals below 1e-9 V, over a way of 0.1 V and more.
        assert found[axis.name] == pytest.approx(share, abs=1e-6), axis.name
    assert list(found.values()) == sorted(found.values(), reverse=True)


def test_the_only_contributor_takes_the_whole_way():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 100.0, 150.0)), 18.0)
    wanted = some(of, "collector_current")
    found = causes(of, corners(of, wanted, cut_off=0.0).ranges, wanted, cut_off=0.0)["collector_current"]
    assert found.low == {"gain": 1.0}
    assert found.high == {"gain": 1.0}


def test_shares_of_a_product_by_hand():
    # I_C = β·17.3/RB at β 150, RB −5 %: freezing β leaves 1/0.95, freezing RB leaves 1.5 of nominal.
    of = stage(
        "base-resistor",
        {"RB": 470e3, "RC": 2.2e3},
        ideal(limits(50.0, 100.0, 150.0)),
        18.0,
        resistor={"tolerance": 0.05},
    )
    wanted = some(of, "collector_current")
    found = causes(of, corners(of, wanted, cut_off=0.0).ranges, wanted, cut_off=0.0)["collector_current"].high
    worst = 1.5 / 0.95
    assert found["gain"] == pytest.approx((worst - 1 / 0.95) / (worst - 1.0), rel=1e-9)
    assert found["RB"] == pytest.approx((worst - 1.5) / (worst - 1.0), rel=1e-9)
    assert found["RC"] == pytest.approx(0.0, abs=1e-12)


def test_no_way_to_go_is_no_cause():
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 100.0, 150.0)), 18.0)
    wanted = some(of, "junction_temperature")
    found = causes(of, corners(of, wanted, cut_off=0.0).ranges, wanted, cut_off=0.0)["junction_temperature"]
    assert found.low == {} == found.high
