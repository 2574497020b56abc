"""What a whole range does to I_C: measured on the full model, beside what the factor makes of it."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from biasband.circuit.operating_point import Region
from biasband.margins.holding import nominal
from biasband.stage import Limits, Stage
from biasband.variation.finite_change import FiniteChange, stability
from biasband.variation.points_of_use import held_at
from tests.variation.stages import ROOM, coupled, ideal, limits, real, running_away, stage

COLD, HOT = 263.15, 323.15


def changes(of: Stage, coldest: float = COLD, hottest: float = HOT) -> dict[str, FiniteChange]:
    """The changes by contributor."""
    found = stability(of, coldest=coldest, hottest=hottest, cut_off=1e-6)
    return {change.name: change for change in found.changes}


def current(of: Stage) -> float:
    """Nominal I_C [A]."""
    return nominal(of).values["collector_current"]


def test_range_of_leakage_is_the_law_at_the_hottest_ambient() -> None:
    found = changes(coupled())["leakage"]
    # 40 nA at 25 °C doubles every 10 K: at 50 °C it is 40 nA · 2^2.5, by hand.
    assert (found.low, found.high) == (0.0, pytest.approx(40e-9 * 2**2.5, rel=1e-12))
    assert found.temperature == HOT


def test_measured_changes_are_differences_of_full_solves() -> None:
    of, found = coupled(), changes(coupled())
    V_BE, gain = of.transistor.base_emitter_voltage, of.transistor.gain

    def with_figures(**figures: object) -> float:
        return current(replace(of, transistor=replace(of.transistor, **figures)))

    by_voltage = with_figures(base_emitter_voltage=Limits.exactly(V_BE.high)) - with_figures(
        base_emitter_voltage=Limits.exactly(V_BE.low)
    )
    by_gain = with_figures(gain=Limits.exactly(gain.high)) - with_figures(gain=Limits.exactly(gain.low))
    # 1e-6: a point is solved to 1e-9 V, of some volts across the emitter resistor.
    assert found["base_emitter_voltage"].measured == pytest.approx(by_voltage, rel=1e-6)
    assert found["gain"].measured == pytest.approx(by_gain, rel=1e-6)
    warmed = current(held_at(of, HOT)) - current(held_at(of, COLD))
    assert found["temperature"].measured == pytest.approx(warmed, rel=1e-6)
    assert (found["temperature"].low, found["temperature"].high) == (COLD, HOT)


def test_factor_and_measurement_agree_where_the_way_is_short() -> None:
    short = real(
        gain=limits(259.0, 260.0, 261.0), base_emitter_voltage=limits(0.639, 0.64, 0.641), leakage=1e-9
    )
    of = stage("divider", {"R1": 68e3, "R2": 13e3, "RC": 3900.0, "RE": 820.0}, short, 9.0)
    found = changes(of, ROOM - 1.0, ROOM + 1.0)
    for name in ("leakage", "base_emitter_voltage", "gain", "temperature"):
        # The junction's own slope, V_T/I_C of 27 Ω, beside 820 Ω and a 26th of 10.9 k: 3 %; and Early.
        assert found[name].measured == pytest.approx(found[name].by_factor, rel=0.05)
        assert abs(found[name].measured) > 0.0


def test_textbook_sum_over_temperature_by_hand() -> None:
    # 12 V, RB 240 k, no RE: S(V_BE) = −β/RB, S(β) = I_B. V_BE falls 2 mV/K, β follows (T/T0)^(g·T0).
    plain = real(
        gain=Limits.exactly(100.0), base_emitter_voltage=Limits.exactly(0.65), early_voltage=None,
        gain_drift=5e-3, thermal_resistance=None,
    )  # fmt: skip
    of = stage("base-resistor", {"RB": 240e3, "RC": 1e3}, plain, 12.0)
    found = changes(of)["temperature"]
    I_B = current(of) / 100.0
    risen = 100.0 * ((HOT / ROOM) ** (5e-3 * ROOM) - (COLD / ROOM) ** (5e-3 * ROOM))
    assert found.by_factor == pytest.approx(-100.0 / 240e3 * -2e-3 * (HOT - COLD) + I_B * risen, rel=1e-9)
    assert math.isnan(found.factor) and math.isnan(found.temperature)


def test_factors_of_a_point_that_is_not_active_are_not_known() -> None:
    saturated = stage("base-resistor", {"RB": 24e3, "RC": 2.2e3}, real(), 12.0)
    found = stability(saturated, coldest=COLD, hottest=HOT, cut_off=1e-6)
    assert found.region is Region.SATURATED and math.isnan(found.beta)
    assert all(math.isnan(change.by_factor) for change in found.changes)
    assert all(math.isfinite(change.measured) for change in found.changes)


def test_cut_off_nominal_point_has_no_factors() -> None:
    found = stability(coupled(), coldest=COLD, hottest=HOT, cut_off=1.0)
    assert found.region is Region.CUT_OFF and math.isnan(found.beta)


def test_end_that_runs_away_is_named_and_not_measured() -> None:
    found = changes(running_away(), hottest=358.15)["leakage"]
    assert found.region is Region.RUNAWAY and math.isnan(found.measured)


def test_ideal_transistor_knows_neither_leakage_nor_temperature() -> None:
    of = stage("divider", {"R1": 33e3, "R2": 12e3, "RC": 1.2e3, "RE": 1e3}, ideal(100.0, leakage=1e-6), 18.0)
    found = changes(of)
    for name in ("leakage", "temperature"):
        assert (found[name].by_factor, found[name].measured) == (0.0, 0.0)
    assert found["leakage"].factor == pytest.approx(9.01, abs=0.005)  # Bell 5-17, the slip mended


def test_polarity_mirrors() -> None:
    npn = coupled()
    pnp = replace(npn, polarity="pnp")
    for name, change in changes(npn).items():
        other = changes(pnp)[name]
        assert other.by_factor == pytest.approx(change.by_factor, rel=1e-9)
        assert other.measured == pytest.approx(change.measured, rel=1e-6)  # solved to 1e-9 V
