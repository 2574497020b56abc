"""Published stability factors: S(I_CO) and S(V_BE) in closed form, and what they make of a change."""

from __future__ import annotations

import pytest

from biasband.circuit.operating_point import Region
from biasband.variation.finite_change import FiniteChange, Stability, stability
from tests.published.test_stability import BELL
from tests.variation.stages import ideal, limits, stage


def change(found: Stability, name: str) -> FiniteChange:
    """The change of one contributor."""
    return next(each for each in found.changes if each.name == name)


def found_at(topology: str, ohms: dict[str, float], supply: float, **transistor: object) -> Stability:
    """The stability of a stage with a textbook transistor."""
    of = stage(topology, ohms, ideal(**{"gain": 100.0, **transistor}), supply)
    return stability(of, coldest=298.15, hottest=378.15, cut_off=0.0)


@pytest.mark.parametrize(
    ("topology", "published", "digit"),
    # Bell, Electronic Devices and Circuits, ex. 5-17: 101, 56 and 8.2; the last is a slip, the exact (β+1)
    # form gives 9.01 (the project's check values, computed). The tolerance is half the last digit.
    [("base-resistor", 101.0, 0.05), ("collector-feedback", 55.9, 0.05), ("divider", 9.01, 0.005)],
)
def test_factor_of_leakage_is_as_published(topology: str, published: float, digit: float) -> None:
    found = found_at(topology, BELL[topology], 18.0)
    assert found.beta == pytest.approx(100.0, rel=1e-12)
    assert change(found, "leakage").factor == pytest.approx(published, abs=digit)


@pytest.mark.parametrize(
    ("topology", "published"),
    # Bell, ex. 5-18: I_CBO 15 nA at 25 °C doubles eight times up to 105 °C, so it rises by 255 · 15 nA;
    # 386.3, 213.7 and (with the slip mended) 34.5 µA. One in the last digit: 213.65 stands there as 213.7.
    [("base-resistor", 386.3e-6), ("collector-feedback", 213.7e-6), ("divider", 34.5e-6)],
)
def test_rise_of_leakage_times_the_factor_is_as_published(topology: str, published: float) -> None:
    factor = change(found_at(topology, BELL[topology], 18.0), "leakage").factor
    assert factor * 255 * 15e-9 == pytest.approx(published, abs=0.1e-6)


def test_factor_of_base_emitter_voltage_and_its_change_are_as_published() -> None:
    # Boylestad & Nashelsky, Electronic Devices and Circuit Theory, ex. 4.36: RB 240 k, β 100, V_BE from
    # 0.65 V at 25 °C to 0.48 V at 100 °C: S(V_BE) −0.417e-3, ΔI_C 70.9 µA; exactly −100/240 k and 70.8 µA.
    V_BE = limits(0.48, 0.65, 0.65)
    found = change(
        found_at("base-resistor", {"RB": 240e3, "RC": 1e3}, 12.0, base_emitter_voltage=V_BE),
        "base_emitter_voltage",
    )
    assert found.factor == pytest.approx(-0.41667e-3, abs=0.5e-8)  # half the last digit
    assert found.by_factor == pytest.approx(-70.8e-6, abs=0.05e-6)  # from 0.48 V up to 0.65 V I_C falls
    assert found.measured == pytest.approx(found.by_factor, rel=1e-9)  # I_C is linear in V_BE
    assert found.region is Region.ACTIVE


def test_published_change_of_gain_and_voltage_together() -> None:
    # Floyd, Electronic Devices, ex. 5-6: 12 V, RB 100 k, RC 560 Ω; β 85 → 100, V_BE 0.7 → 0.6 V: +18.69 %.
    # Without RE I_C is linear in β at either V_BE, so the factors at the end give the whole change.
    ohms = {"RB": 100e3, "RC": 560.0}
    gain, V_BE = limits(85.0, 100.0, 100.0), limits(0.6, 0.7, 0.7)
    by_gain = change(found_at("base-resistor", ohms, 12.0, gain=gain, base_emitter_voltage=0.7), "gain")
    by_voltage = change(
        found_at("base-resistor", ohms, 12.0, base_emitter_voltage=V_BE), "base_emitter_voltage"
    )
    start = 85.0 * (12.0 - 0.7) / 100e3
    assert (by_gain.by_factor - by_voltage.by_factor) / start == pytest.approx(0.1869, abs=0.5e-4)
    assert by_gain.measured == pytest.approx(by_gain.by_factor, rel=1e-9)
