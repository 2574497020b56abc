"""The drift of a stage: bands, slopes and failures against closed forms, and what cannot be swept."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import biasband as bb
from biasband.circuit.operating_point import Region
from biasband.errors import UsageError
from biasband.signoff.drifting import DriftStudy, LimitDrift, drift, shown_quantities
from biasband.stage import Limits, Requirement, Signal, Stage, Target
from biasband.variation.corners import corners
from tests.variation.stages import ROOM, coupled, ideal, limits, running_away, some, stage, with_resistors

EXACT = 2e-4
"""[K] Failures are found to 1e-4 K, and the tempco's closed form below adds rounding only."""


def of(study: DriftStudy, quantity: str) -> LimitDrift:
    """What became of the limit on a quantity."""
    return next(each for each in study.limits if each.limit.quantity == quantity)


def warmed(**more: object) -> Stage:
    """A textbook stage in which nothing but the resistors' tempco knows the temperature.

    12 V, RB 240 k, RC 2.2 k, V_BE 0.7 V, β 50…80, ±500 ppm/K: at |ΔT|,
    V_C = 12 − 2.2k·(1 + x)·80·11.3/(240k·(1 − x)), x = 5e-4·|ΔT|, is the lowest.
    """
    wanted = Requirement(id="R-1", quantity="collector_voltage", at_least=3.5)
    return stage(
        "base-resistor", {"RB": 240e3, "RC": 2.2e3}, ideal(limits(50.0, 60.0, 80.0)), 12.0,
        **{
            "resistor": {"tempco": 5e-4},
            "ambient": limits(233.15, ROOM, 358.15),
            "requirements": (wanted,),
            **more,
        },
    )  # fmt: skip


def away(limit: float) -> float:
    """|ΔT| [K] at which the lowest V_C of `warmed` is at a limit, from its closed form."""
    ratio = (12.0 - limit) * 240e3 / (2.2e3 * 80.0 * 11.3)
    return (ratio - 1.0) / (ratio + 1.0) / 5e-4


def test_failure_is_at_the_temperature_of_the_closed_form_either_way() -> None:
    found = of(drift(warmed()), "collector_voltage")
    # About 25.43 K: between the points of the sweep, which stand 9.6 K apart.
    assert found.hotter.temperature == pytest.approx(ROOM + away(3.5), abs=EXACT)
    assert found.colder.temperature == pytest.approx(ROOM - away(3.5), abs=EXACT)
    assert (found.colder.ending, found.hotter.ending) == ("fails", "fails")


def test_number_of_points_does_not_move_the_failure() -> None:
    temperatures = [
        of(drift(warmed(), points=points), "collector_voltage").hotter.temperature for points in (2, 7, 40)
    ]
    assert temperatures == pytest.approx([ROOM + away(3.5)] * 3, abs=EXACT)


def test_band_is_the_closed_form_at_each_temperature() -> None:
    study = drift(warmed())
    found, x = study.drifts["collector_voltage"], 5e-4 * np.abs(study.temperatures - ROOM)
    highest = 12.0 - 2.2e3 * (1 - x) * 50.0 * 11.3 / (240e3 * (1 + x))
    lowest = 12.0 - 2.2e3 * (1 + x) * 80.0 * 11.3 / (240e3 * (1 - x))
    assert found.low == pytest.approx(lowest, rel=1e-9)
    assert found.high == pytest.approx(highest, rel=1e-9)
    assert found.nominal == pytest.approx(12.0 - 2.2e3 * 60.0 * 11.3 / 240e3, rel=1e-9)
    assert (found.slope, found.mean_slope) == (0.0, 0.0)  # nominal resistors do not drift


def test_power_check_fails_where_the_ambient_leaves_too_little() -> None:
    """Boylestad & Nashelsky, ex. 4.1: 47.083 µA, 2.3542 mA, 6.8208 V; P = V_CE·I_C + V_BE·I_B = 16.09 mW.

    With 2000 K/W and T_j max 100 °C that is allowed up to 100 °C − 32.18 K.
    """
    sheet = ideal(50.0, thermal_resistance=2000.0, max_junction=373.15)
    hot = stage(
        "base-resistor", {"RB": 240e3, "RC": 2.2e3}, sheet, 12.0, ambient=limits(273.15, ROOM, 368.15)
    )
    power = 11.3 / 240e3 * (50.0 * (12.0 - 2.2e3 * 50.0 * 11.3 / 240e3) + 0.7)
    found = of(drift(hot), "transistor_power")
    assert found.limit.standing
    assert found.hotter.temperature == pytest.approx(373.15 - 2000.0 * power, abs=EXACT)
    assert found.colder.ending == "holds" and math.isnan(found.colder.temperature)


def test_worst_case_of_a_check_that_lies_inside_the_limits_is_found() -> None:
    """12 V, RB 240 k, RC 2.2 k, h_FE 30…100: 12.6 and 7.7 mW at the limits, 16.4 mW at h_FE 58 (physics)."""
    sheet = ideal(limits(30.0, 32.0, 100.0), max_power=15e-3)
    # With a load the swing is largest at another h_FE than the power, so that no other search leads there.
    hot = stage("base-resistor", {"RB": 240e3, "RC": 2.2e3}, sheet, 12.0, signal=Signal(load=2.2e3))
    study = drift(hot, coldest=290.0, hottest=300.0, points=2)
    found = of(study, "transistor_power")
    assert found.hotter.ending == "fails at start"
    # V_CE·I_C is 16.36 mW at most, (12 V)²/(4 · 2.2 k), and V_BE·I_B 33 µW on top.
    assert found.limit.margin(study.corners[0]) == pytest.approx(15e-3 - 16.40e-3, abs=0.01e-3)


def test_limit_missed_at_nominal_ambient_fails_at_once() -> None:
    wanted = Requirement(id="R-1", quantity="collector_voltage", at_least=4.0)  # 3.71 V at 25 °C
    found = of(drift(warmed(requirements=(wanted,))), "collector_voltage")
    assert (found.colder.ending, found.hotter.ending) == ("fails at start", "fails at start")
    assert found.hotter.temperature == ROOM


def test_runaway_inside_the_sweep_is_named_and_its_onset_found() -> None:
    study = drift(running_away(limits(273.15, ROOM, 358.15)))
    found = of(study, "cut_off").hotter
    assert found.ending == "runaway"
    current = study.drifts["collector_current"]
    hot = study.temperatures > found.temperature
    assert np.all(np.isnan(current.high[hot])) and np.all(np.isfinite(current.high[~hot]))
    assert np.all(np.isnan(current.low[hot])) and np.all(np.isfinite(current.nominal))
    for each, is_hot in zip(study.corners, hot, strict=True):
        assert (Region.RUNAWAY in each.regions) == is_hot
    # Just below its onset all corners have a point, just above one has not.
    for side, runs_away in ((-1e-3, False), (1e-3, True)):
        near = replace(running_away(), ambient=Limits.exactly(found.temperature + side))
        assert (Region.RUNAWAY in corners(near, {}, cut_off=0.0).regions) is runs_away


def test_ambient_beyond_the_junction_limit_is_a_failing_check() -> None:
    sheet = replace(
        coupled().transistor, max_junction=398.15, max_power=0.4, gain=Limits.exactly(260.0), leakage=0.0
    )
    hot = replace(
        with_resistors(coupled(), tolerance=0.0, life_drift=0.0),
        transistor=sheet,
        ambient=limits(273.15, ROOM, 423.15),
    )
    study = drift(hot, points=4)
    for name in ("junction_temperature", "transistor_power"):
        found = of(study, name).hotter
        assert found.ending == "fails" and found.temperature < 398.15  # self-heating comes on top


def test_nominal_ambient_joins_the_sweep_and_is_its_start() -> None:
    study = drift(coupled(), points=4)
    assert study.temperatures == pytest.approx([263.15, 283.15, ROOM, 303.15, 323.15])
    assert (study.start, study.nominal_ambient, study.step) == (ROOM, ROOM, pytest.approx(20.0))


@pytest.mark.parametrize(
    ("coldest", "hottest", "start", "way"), [(310.0, 330.0, 310.0, "colder"), (250.0, 280.0, 280.0, "hotter")]
)
def test_sweep_beside_nominal_ambient_starts_at_its_nearer_end(
    coldest: float, hottest: float, start: float, way: str
) -> None:
    study = drift(coupled(), coldest=coldest, hottest=hottest, points=3)
    assert study.start == start and study.temperatures.size == 3
    assert {getattr(each, way).ending for each in study.limits} == {"not swept"}
    inside = drift(coupled(), points=2)
    # Slopes are those at nominal ambient wherever the sweep is.
    name = "collector_current"
    assert study.drifts[name].slope == pytest.approx(inside.drifts[name].slope, rel=1e-12)


def test_slopes_are_relative_to_the_value_at_nominal_ambient() -> None:
    found = drift(coupled(), points=2).drifts["collector_voltage"]
    assert found.relative_slope == pytest.approx(found.slope / found.at_nominal_ambient, rel=1e-12)
    mean = (found.nominal[-1] - found.nominal[0]) / 60.0
    assert found.mean_slope == pytest.approx(mean, rel=1e-12)
    assert found.relative_mean_slope == pytest.approx(mean / found.at_nominal_ambient, rel=1e-12)
    # −2 mV/K at the base is about +2 mV/K across RE 820, and −2 mV/K · 3.9/0.82 at the collector.
    assert found.slope == pytest.approx(-2e-3 * 3.9 / 0.82, rel=0.15)  # h_FE and V_T move it a little


def test_temperature_has_no_relative_slope() -> None:
    wanted = Requirement(id="R-1", quantity="junction_temperature", at_most=400.0)
    found = drift(replace(coupled(), requirements=(wanted,)), points=2).drifts["junction_temperature"]
    assert math.isnan(found.relative_slope) and found.slope == pytest.approx(1.0, abs=0.05)


def test_extremes_over_the_sweep_are_those_of_the_corners() -> None:
    current = drift(coupled(), points=2).drifts["collector_current"]
    measures = some(coupled(), "collector_current")
    found = corners(coupled(), measures, cut_off=1e-6).ranges["collector_current"]
    # I_C rises with temperature at every vertex, so its extremes stand at the ends; polished to 1e-6.
    assert np.min(current.low) == pytest.approx(found.low.value, rel=1e-6)
    assert np.max(current.high) == pytest.approx(found.high.value, rel=1e-6)


def test_quantities_are_those_required_and_always_the_swing() -> None:
    wanted = tuple(
        Requirement(id=f"R-{k}", quantity=name, at_least=0.0)
        for k, name in enumerate(("headroom_up", "base_voltage", "headroom_up"))
    )
    required = replace(coupled(), requirements=wanted)
    assert shown_quantities(required) == ("headroom_up", "base_voltage", "symmetric_peak_swing")
    usual = ("collector_voltage", "collector_current", "symmetric_peak_swing")
    assert shown_quantities(coupled()) == usual
    follower = stage("follower", {"R1": 68e3, "R2": 91e3, "RE": 3e3}, ideal(100.0), 9.0)
    assert shown_quantities(follower)[0] == "emitter_voltage"


def test_standing_checks_not_made_are_kept() -> None:
    study = drift(coupled(), points=2)
    assert {each.missing for each in study.standing.not_made} >= {"transistor.max_power"}


def test_values_are_designed_for_the_stages_own_ambient() -> None:
    free = replace(
        coupled(),
        resistors=tuple(replace(r, value=None) for r in coupled().resistors),
        target=Target(collector_current=1e-3),
    )
    study = drift(free, coldest="-40 degC", hottest="85 degC", points=2)
    assert study.design.stage.ambient == free.ambient
    chosen = bb.design(free).parts
    assert [part.value for part in study.design.parts] == [part.value for part in chosen]
    assert study.limits and all(each.limit.standing for each in study.limits)


def test_cut_off_is_measured_from_the_current_at_nominal_ambient() -> None:
    """Without a target: 1 % of nominal I_C, whatever it is elsewhere."""
    study = drift(coupled(), points=2)
    here = study.drifts["collector_current"].at_nominal_ambient
    low = study.drifts["collector_current"].low
    cut_off = of(study, "cut_off").limit
    margins = [cut_off.margin(each) for each in study.corners]
    assert margins == pytest.approx(low - 0.01 * here, rel=1e-6)  # polished to 1e-6


def test_table_has_a_row_per_quantity_and_temperature() -> None:
    study = bb.drift(coupled(), points=3)
    table = study.table
    assert isinstance(table, pd.DataFrame) and list(table.columns) == ["nominal", "low", "high"]
    assert table.index.names == ["quantity", "temperature"]
    assert len(table) == 3 * study.temperatures.size
    row = table.loc[("collector_voltage", 323.15)]
    assert list(row) == [getattr(study.drifts["collector_voltage"], name)[-1] for name in table.columns]


def test_progress_goes_from_nothing_to_all() -> None:
    told: list[float] = []
    drift(coupled(), points=3, progress=told.append)
    assert told == sorted(told) and told[-1] == pytest.approx(1.0) and len(told) >= 3


def test_faulty_sweep_is_refused_before_anything_is_designed() -> None:
    impossible = replace(coupled(), target=Target(collector_current=1e9))
    with pytest.raises(UsageError, match="not below"):
        drift(impossible, coldest=350.0, hottest=300.0)


def test_two_runs_are_equal() -> None:
    one, other = (drift(coupled(), points=3) for _ in range(2))
    pd.testing.assert_frame_equal(one.table, other.table, check_exact=True)
    assert one.stability == other.stability
