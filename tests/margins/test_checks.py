"""Standing checks: which are made, and each limit and worst value by hand."""

from __future__ import annotations

from dataclasses import replace

import pytest
from variation.stages import ROOM, ideal, limits, stage, with_resistors

from biasband.boards.sampling import sample
from biasband.circuit.quantities import vocabulary
from biasband.margins.checks import check_margins, standing_checks
from biasband.margins.records import Evidence, Margin
from biasband.parts.derating import PROFILES
from biasband.stage import Derating, Limits, Signal, Stage, Supply
from biasband.variation.causes import causes
from biasband.variation.corners import corners
from biasband.variation.points_of_use import points_of_use
from biasband.variation.rss import rss

HOT = 358.15  # 85 °C
RATINGS = {
    "saturation_voltage": 0.3,
    "max_power": 0.44,
    "max_collector_emitter": 36.0,
    "max_current": 0.12,
    "max_junction": 423.15,
    "max_emitter_base": 5.0,
    "thermal_resistance": 280.0,
}


def rated(*, without: str = "", derating: Derating = PROFILES["full"], **more) -> Stage:
    """A divider of a textbook transistor with every rating stated, between −10 and 85 °C."""
    ratings = {name: value for name, value in {**RATINGS, **more}.items() if name != without}
    if without == "saturation_voltage":
        ratings["saturation_voltage"] = None
    of = stage(
        "divider",
        {"R1": 33e3, "R2": 12e3, "RC": 1.2e3, "RE": 1e3},
        ideal(limits(50.0, 100.0, 200.0), **ratings),
        Supply(voltage=limits(17.1, 18.0, 18.9), ripple_peak=0.1),
        ambient=limits(263.15, ROOM, HOT),
        signal=Signal(bypassed=True),
        derating=derating,
    )
    return with_resistors(of, power_rating=0.25)


def rows(of: Stage, cut_off: float = 1e-5) -> dict[str, Margin]:
    """The rows of the standing checks by name."""
    standing = standing_checks(of, cut_off=cut_off)
    measures = {**vocabulary(tuple(r.name for r in of.resistors)), **standing.measures}
    found = corners(of, standing.measures, cut_off=cut_off)
    evidence = Evidence(
        nominal={},
        corners=found,
        rss=rss(of, {}, cut_off=cut_off),
        boards=sample(of, {}, points_of_use(of), boards=1, seed=1, cut_off=cut_off),
        causes=causes(of, found.ranges, measures, cut_off=cut_off),
    )
    return {row.quantity: row for row in check_margins(of, standing.made, evidence)}


ALL = {
    "saturation", "cut_off", "transistor_power", "supply_voltage", "collector_current",
    "junction_temperature", "emitter_base_voltage",
    "resistor_power.R1", "resistor_power.R2", "resistor_power.RC", "resistor_power.RE",
}  # fmt: skip


def test_every_check_is_made_where_every_rating_is_stated():
    standing = standing_checks(rated(), cut_off=1e-5)
    assert {check.name for check in standing.made} == ALL
    assert standing.not_made == ()


@pytest.mark.parametrize(
    ("key", "check"),
    [
        ("max_collector_emitter", "supply_voltage"),
        ("max_current", "collector_current"),
        ("max_junction", "junction_temperature"),
        ("thermal_resistance", "junction_temperature"),
        ("max_emitter_base", "emitter_base_voltage"),
    ],
)
def test_check_whose_key_is_missing_is_not_made_and_says_which(key, check):
    standing = standing_checks(rated(without=key), cut_off=1e-5)
    assert [(missed.check, missed.missing) for missed in standing.not_made] == [(check, f"transistor.{key}")]
    assert {made.name for made in standing.made} == ALL - {check}


def test_saturation_is_checked_against_the_assumed_voltage_where_none_is_stated():
    # Common practice: V_CE(sat) is about 0.2 V; the review names the assumption in a warning.
    found = rows(rated(without="saturation_voltage"))
    assert found["saturation"].limit == pytest.approx(0.2, abs=2e-9)  # solved to 1e-9 V


def test_power_is_limited_by_the_junction_alone_where_no_rating_is_stated():
    # (T_j max − T_a)/R_θJA where it is hot, T_j max 150 °C.
    of = rated(without="max_power")
    wanted = (423.15 - HOT) / of.transistor.thermal_resistance
    assert rows(of)["transistor_power"].limit == pytest.approx(wanted, rel=1e-12)


def test_power_is_not_checked_where_neither_rating_nor_junction_limit_is_stated():
    of = rated(without="max_power")
    of = replace(of, transistor=replace(of.transistor, max_junction=None))
    missed = [(one.check, one.missing) for one in standing_checks(of, cut_off=1e-5).not_made]
    assert ("transistor_power", "transistor.max_power") in missed


def test_resistor_without_a_rating_is_not_checked_and_named():
    standing = standing_checks(with_resistors(rated(), power_rating=None), cut_off=1e-5)
    assert [missed.missing for missed in standing.not_made] == [
        f"resistors.{name}.power_rating" for name in ("R1", "R2", "RC", "RE")
    ]


@pytest.mark.parametrize("signal", [None, Signal(bypassed=False)])
def test_emitter_base_is_no_question_where_nothing_is_bypassed(signal):
    standing = standing_checks(replace(rated(), signal=signal), cut_off=1e-5)
    assert "emitter_base_voltage" not in {c.name for c in standing.made}
    assert standing.not_made == ()


def collector_current(supply: float, beta: float) -> float:
    """I_C [A] of the divider by hand."""
    I_B = (supply * 12 / 45 - 0.7) / (33e3 * 12e3 / 45e3 + (beta + 1) * 1e3)
    return beta * I_B


FACTORS = {
    # physics.md 8: profile → (transistor power, supply, current, resistor power, V_EBO, T_j limit in K)
    "full": (1.0, 1.0, 1.0, 1.0, 1.0, 423.15),
    "half-power": (1.0, 0.8, 1.0, 0.5, 0.8, 423.15),
    "stringent": (0.65, 0.75, 0.75, 0.5, 0.75, 383.15),  # min(110 °C, 150 − 40 °C)
}


@pytest.mark.parametrize("profile", FACTORS)
def test_limits_are_the_profile_s_share_of_each_rating(profile):
    power, supply, current, resistor, emitter_base, junction = FACTORS[profile]
    found = rows(rated(derating=PROFILES[profile]))
    assert found["saturation"].limit == pytest.approx(0.3, abs=2e-9)  # above it by what is solved, 1e-9 V
    assert found["cut_off"].limit == 1e-5
    assert found["supply_voltage"].limit == pytest.approx(supply * 36.0, rel=1e-12)
    assert found["collector_current"].limit == pytest.approx(current * 0.12, rel=1e-12)
    assert found["emitter_base_voltage"].limit == pytest.approx(emitter_base * 5.0, rel=1e-12)
    assert found["junction_temperature"].limit == pytest.approx(junction, rel=1e-12)
    # At 85 °C: (150 − 85)/280 K/W = 232 mW, less than P_tot; a resistor keeps (155 − 85)/(155 − 70) of
    # 0.25 W.
    assert found["transistor_power"].limit == pytest.approx(power * 65.0 / 280.0, rel=1e-12)
    assert found["resistor_power.RC"].limit == pytest.approx(resistor * 0.25 * 70.0 / 85.0, rel=1e-12)


def test_limits_are_the_share_of_a_profile_of_one_s_own():
    own = Derating(name="own", transistor_power=0.7, junction_margin=60.0, junction_ceiling=400.0)
    found = rows(rated(derating=own))
    # 70 % of (150 − 85) K / 280 K/W; the lower of 400 K and 150 °C − 60 K; the rest as rated.
    assert found["transistor_power"].limit == pytest.approx(0.7 * 65.0 / 280.0, rel=1e-12)
    assert found["junction_temperature"].limit == pytest.approx(363.15, rel=1e-12)
    assert found["supply_voltage"].limit == pytest.approx(36.0, rel=1e-12)


def test_worst_values_by_hand():
    found = rows(rated())
    most = collector_current(19.0, 200.0)  # supply, tolerance and ripple
    assert found["supply_voltage"].corners == pytest.approx(19.0, rel=1e-12)
    assert found["collector_current"].corners == pytest.approx(most, rel=1e-9)
    assert found["resistor_power.RC"].corners == pytest.approx(most**2 * 1.2e3, rel=1e-9)
    assert found["emitter_base_voltage"].corners == pytest.approx(most * (201 / 200) * 1e3, rel=1e-9)
    assert found["cut_off"].corners == pytest.approx(collector_current(17.0, 50.0), rel=1e-9)


def test_margin_is_the_distance_between_worst_and_limit():
    for name, row in rows(rated()).items():
        sign = 1.0 if row.side == "at_least" else -1.0
        assert row.margin == pytest.approx(sign * (row.corners - row.limit), rel=1e-9), name
        assert (row.verdict == "pass") is (row.margin >= 0.0)
        assert row.standing and row.judged_by == "corners"


def test_at_least_and_at_most_are_on_the_right_side():
    sides = {check.name: check.side for check in standing_checks(rated(), cut_off=1e-5).made}
    assert {name for name, side in sides.items() if side == "at_least"} == {"saturation", "cut_off"}


def test_nominal_value_and_share_by_hand():
    row = rows(rated())["supply_voltage"]
    assert row.nominal == 18.0
    assert row.margin_share == pytest.approx((36.0 - 19.0) / (36.0 - 18.0), rel=1e-9)


def test_power_limit_is_total_power_where_the_junction_allows_more():
    cool = replace(rated(), ambient=Limits.exactly(ROOM))
    # (150 − 25)/280 = 446 mW: P_tot of 440 mW is less.
    assert rows(cool)["transistor_power"].limit == pytest.approx(0.44, rel=1e-12)


@pytest.mark.parametrize("without", ["max_junction", "thermal_resistance"])
def test_power_limit_is_total_power_where_the_junction_is_not_stated(without):
    assert rows(rated(without=without))["transistor_power"].limit == pytest.approx(0.44, rel=1e-12)


def test_split_supply_is_checked_rail_to_rail():
    of = stage(
        "split-supply",
        {"RB": 10e3, "RC": 3.9e3, "RE": 8.2e3},
        ideal(100.0, **RATINGS),
        Supply(voltage=limits(8.1, 9.0, 9.9), ripple_peak=0.1),
        negative_supply=Supply(voltage=limits(-12.0, -11.0, -10.0)),
    )
    standing = standing_checks(of, cut_off=0.0)
    found = corners(of, standing.measures, cut_off=0.0)
    slack = found.ranges["check supply_voltage"].low
    assert slack.value == pytest.approx(36.0 - (9.9 + 0.1 + 12.0), rel=1e-12)


def test_saturated_corner_fails_the_saturation_check():
    strong = rated()
    of = replace(
        strong, resistors=tuple(replace(r, value=4.7e3) if r.name == "RC" else r for r in strong.resistors)
    )
    row = rows(of)["saturation"]
    assert row.corners <= 0.3 + 1e-12
    assert not row.margin > 0.0


def test_hotter_resistor_keeps_nothing_at_its_end():
    of = with_resistors(rated(), derate_from=313.15, derate_to=353.15)
    row = rows(of)["resistor_power.RC"]
    assert row.limit == 0.0
    assert row.verdict == "fail"


HELD = {
    # I_E = (drive − 0.7 V)/(RB/(β + 1) + RE) at β 200, the drive being what lies between ground and RE's
    # rail: an NPN's at −12 V; a PNP's at 9.9 V and 0.1 V of ripple.
    "npn": 12.0,
    "pnp": 10.0,
}


@pytest.mark.parametrize("polarity", HELD)
def test_split_supply_s_capacitor_holds_the_emitter_up_from_its_own_rail(polarity):
    of = stage(
        "split-supply",
        {"RB": 10e3, "RC": 1e3, "RE": 8.2e3},
        ideal(limits(50.0, 100.0, 200.0), **RATINGS),
        Supply(voltage=limits(8.1, 9.0, 9.9), ripple_peak=0.1),
        negative_supply=Supply(voltage=limits(-12.0, -11.0, -10.0)),
        signal=Signal(bypassed=True),
        polarity=polarity,
    )
    row = rows(of)["emitter_base_voltage"]
    held = (HELD[polarity] - 0.7) / (10e3 / 201 + 8.2e3) * 8.2e3
    assert row.corners == pytest.approx(held, rel=1e-9)  # the ideal transistor is solved in closed form
    nominal = (11.0 if polarity == "npn" else 9.0) - 0.7
    assert row.nominal == pytest.approx(nominal / (10e3 / 101 + 8.2e3) * 8.2e3, rel=1e-9)
    assert row.verdict == "fail"  # 5 V are allowed


def test_pnp_s_capacitor_holds_what_lies_across_the_emitter_resistor():
    row = rows(replace(rated(), polarity="pnp"))["emitter_base_voltage"]
    # The mirror image of the NPN: I_E·RE, although the emitter stands near 14 V to ground.
    assert row.corners == pytest.approx(collector_current(19.0, 200.0) * (201 / 200) * 1e3, rel=1e-9)
    assert row.verdict == "pass"
