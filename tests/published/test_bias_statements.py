"""What textbooks say of bias stability, as inequalities over random stages in the active region.

Sources: Millman & Halkias, Integrated Electronics, chapter on transistor biasing and thermal stabilization
(an emitter resistor, and a small R_B before it, make I_C less sensitive to β): the statements from memory, no
page was read. I_C = β·(V − V_BE)/(R_B + (β + 1)·R_E), on which they rest, is common practice.

They hold for transistors without the Early effect: with it, V_CE moves I_C too. Stages that leave the active
region within their gain limits are not looked at.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from biasband.circuit.operating_point import Region
from biasband.margins.holding import nominal
from biasband.stage import AnyTransistor, Stage
from biasband.variation.corners import corners
from tests.variation.stages import ideal, limits, real, some, stage

BOUNDED = settings(
    max_examples=60, derandomize=True, deadline=None, suppress_health_check=[HealthCheck.filter_too_much]
)
ROUNDING = 1e-7
"""Two solves of the same currents agree to the solver's residual, 1e-9 V, over V_T and a little more."""


@dataclass(frozen=True)
class Point:
    """What a stage does at its nominal point [A], [V]."""

    I_C: float
    I_B: float
    V_B: float
    V_E: float


def point(of: Stage) -> Point:
    """The nominal point of a stage."""
    names = ("collector_current", "base_current", "base_voltage", "emitter_voltage")
    return Point(*nominal(of, some(of, *names)).values.values())


def current_ratio(of: Stage) -> float:
    """The highest I_C over the lowest between the gain limits; an example is dropped that is not active."""
    found = corners(of, some(of, "collector_current"), cut_off=0.0)
    assume(set(found.regions) == {Region.ACTIVE})
    range_ = found.ranges["collector_current"]
    return range_.high.value / range_.low.value


@st.composite
def transistors(draw: st.DrawFn) -> AnyTransistor:
    """Textbook transistors and real ones, their gain spread by 1.2 to 5 and nothing else uncertain."""
    least, spread = draw(st.floats(20.0, 300.0)), draw(st.floats(1.2, 5.0))
    typical = least * spread ** draw(st.floats(0.2, 0.8))
    figures: dict[str, Any] = {"gain": limits(least, typical, least * spread)}
    if draw(st.booleans()):
        return ideal(**figures)
    V_BE = draw(st.floats(0.55, 0.75))
    return real(**figures, base_emitter_voltage=limits(V_BE, V_BE, V_BE), early_voltage=None)


@st.composite
def fed_by_one_resistor(draw: st.DrawFn) -> Stage:
    """A base-resistor stage without emitter resistor, and room for one."""
    transistor, supply = draw(transistors()), draw(st.floats(5.0, 40.0))
    RB, gain = draw(st.floats(1e5, 5e6)), transistor.gain
    I_C = gain.high * (supply - 0.6) / RB
    return stage(
        "base-resistor", {"RB": RB, "RC": draw(st.floats(0.1, 0.5)) * supply / I_C}, transistor, supply
    )


@BOUNDED
@given(without=fed_by_one_resistor(), share=st.floats(0.02, 0.3))
def test_emitter_resistor_never_widens_the_spread_of_the_current(without: Stage, share: float) -> None:
    there, supply = point(without), without.supply.voltage.nominal
    RE = share * supply / (there.I_C + there.I_B)
    RB = (supply - there.V_B - share * supply) / there.I_B
    RC = without.resistor("RC").value
    assert RC is not None
    held = stage("base-resistor", {"RB": RB, "RC": RC, "RE": RE}, without.transistor, supply)
    assert abs(point(held).I_C / there.I_C - 1.0) < ROUNDING  # at equal nominal I_C
    # An emitter resistor with 2 % of the supply across it already shows: never worse, here always better.
    assert current_ratio(held) < current_ratio(without)


@BOUNDED
@given(without=fed_by_one_resistor())
def test_current_of_a_base_resistor_alone_follows_the_gain(without: Stage) -> None:
    # I_B is fixed but for V_BE, which moves by V_T·ln(5) = 41 mV at most where 4.2 V and more drive it: 1 %.
    gain = without.transistor.gain
    assert 0.99 < current_ratio(without) / (gain.high / gain.low) < 1.0 + ROUNDING


@st.composite
def divided(draw: st.DrawFn) -> Stage:
    """A divider stage, from stiff (a hundredth of β·RE) to soft (three times β·RE)."""
    transistor, supply = draw(transistors()), draw(st.floats(6.0, 40.0))
    I_C, V_E = draw(st.floats(1e-4, 5e-3)), draw(st.floats(0.05, 0.25)) * supply
    RE, beta = V_E / I_C, transistor.gain.nominal
    R_TH, V_B = beta * RE * 10.0 ** draw(st.floats(-2.0, 0.5)), V_E + 0.65
    V_TH = V_B + I_C / beta * R_TH
    assume(V_TH < 0.95 * supply)
    ohms = {"R1": R_TH * supply / V_TH, "R2": R_TH * supply / (supply - V_TH)}
    RC = draw(st.floats(0.05, 0.4)) * supply / (I_C * transistor.gain.high / beta)
    return stage("divider", {**ohms, "RC": RC, "RE": RE}, transistor, supply)


def stiffened(soft: Stage, factor: float) -> Stage:
    """The stage with R1‖R2 times a factor and the same base voltage, base current included."""
    there, supply = point(soft), soft.supply.voltage.nominal
    ohms = {resistor.name: resistor.value or 0.0 for resistor in soft.resistors}
    R_TH = factor * ohms["R1"] * ohms["R2"] / (ohms["R1"] + ohms["R2"])
    V_TH = there.V_B + there.I_B * R_TH
    stiff = {"R1": R_TH * supply / V_TH, "R2": R_TH * supply / (supply - V_TH)}
    return stage("divider", {**ohms, **stiff}, soft.transistor, supply)


@BOUNDED
@given(soft=divided(), factor=st.floats(0.01, 0.9))
def test_stiffer_divider_never_widens_the_spread_of_the_current(soft: Stage, factor: float) -> None:
    stiff = stiffened(soft, factor)
    assert abs(point(stiff).V_B / point(soft).V_B - 1.0) < ROUNDING  # the same V_B
    assert current_ratio(stiff) < current_ratio(soft) * (1.0 + ROUNDING)


@BOUNDED
@given(soft=divided())
def test_divider_with_an_emitter_resistor_never_follows_the_gain(soft: Stage) -> None:
    # I_C goes with β/(R_B + (β + 1)·RE), of which the denominator rises with β: less than in proportion.
    gain = soft.transistor.gain
    assert current_ratio(soft) < gain.high / gain.low
