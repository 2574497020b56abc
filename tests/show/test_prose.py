"""Sentences say where the worst is, what causes it and how a value came about."""

from dataclasses import replace

import pytest

from biasband.circuit.topology import Node
from biasband.files.stage_file import read_stage
from biasband.show.prose import (
    contributor,
    formula,
    frozen_or_chosen,
    head,
    joint_yield,
    place,
    places,
    rss_assumption,
    sampled,
    worst,
)
from biasband.signoff.study import design
from biasband.stage import FileRecord
from biasband.values.ideal import Step
from biasband.variation.corners import Extreme
from tests.show.reviews import BOARDS, EVERY, FAILING, HIVE, PNP, SAMPLES, SPLIT, reviewed

NAN = float("nan")


def row_with(causes, coordinates, at=None, value=1.0):
    row = reviewed(HIVE).rows[0]
    return replace(row, causes=causes, worst=Extreme(value, coordinates, at or {}, interior=False))


def test_worst_line_reads_as_the_formats_promise():
    # formats.md and issue 2: "worst: hot, h_FE low, R1 high; mostly h_FE (62 %)".
    causes = {"gain": 0.62, "temperature": 0.4, "R1": 0.2}
    row = row_with(causes, {"temperature": 1.0, "gain": -1.0, "R1": 1.0})
    assert worst(row) == "worst: h_FE low, hot, R1 high; mostly h_FE (62 %)"


def test_only_contributors_that_matter_are_named_and_four_at_most():
    names = ("R1", "R2", "RC", "RE", "gain")
    coordinates = dict.fromkeys(names, -1.0)
    few = worst(row_with({"R1": 0.3, "R2": 0.05, "RC": 0.01, "RE": -0.2, "gain": NAN}, coordinates))
    assert few == "worst: R1 low; most from R1 (30 %)"
    many = worst(row_with(dict.fromkeys(names, 0.2), coordinates))
    assert many == "worst: R1 low, R2 low, RC low, RE low; most from R1 (20 %)"


def test_worst_that_was_not_solved_says_so():
    assert worst(row_with({"R1": NAN}, {"R1": 1.0}, value=NAN)) == "worst: no corner has a value here"


def test_worst_without_causes_is_nominal():
    assert "nothing that varies moves it" in worst(row_with({}, {"R1": 1.0}))


@pytest.mark.parametrize(
    ("name", "x", "value", "words"),
    [
        ("temperature", -1.0, 263.15, "cold"),
        ("temperature", 1.0, 323.15, "hot"),
        ("temperature", 0.2, 303.15, "temperature inside (30 °C)"),
        ("gain", 0.5, 58.0, "h_FE inside (58)"),
        ("base_emitter_voltage", 1.0, 0.72, "V_BE high"),
        ("leakage", -1.0, 0.0, "leakage low"),
        ("ripple", 1.0, 0.05, "ripple high"),
        ("negative_supply", -1.0, -12.6, "negative supply -12.6 V"),
        ("R1", 0.5, 4700.0, "R1 inside (4.7 kΩ)"),
    ],
)
def test_place_of_a_contributor_in_words(name, x, value, words):
    assert place(name, Extreme(0.0, {name: x}, {name: value}, interior=abs(x) < 1.0)) == words


def test_shared_tempco_of_a_group_has_a_place_without_a_value():
    extreme = Extreme(0.0, {"group reel": 0.3}, {}, interior=True)
    assert places(extreme) == "tempco of group reel inside"
    assert contributor("group reel") == "tempco of group reel"


def test_stage_in_which_nothing_varies_says_so():
    assert places(Extreme(0.0, {}, {}, interior=False)) == "nothing varies"


@pytest.mark.parametrize(
    ("frozen", "chosen", "words"),
    [
        (4, 0, "values: 4 frozen"),
        (0, 4, "values: 4 chosen in this run: freeze before ordering"),
        (1, 3, "values: 1 frozen, 3 chosen in this run: freeze before ordering"),
    ],
)
def test_header_says_how_many_values_are_frozen(frozen, chosen, words):
    assert frozen_or_chosen(frozen, chosen) == words


def test_head_leaves_out_what_the_file_does_not_say():
    stage = replace(
        reviewed(HIVE).stage, document="", revision="", designed_by="A. Weaver",
        files=(FileRecord(path="x.toml", sha256="0123456789abcdef"),),
    )  # fmt: skip
    assert head(stage)[0] == "designed by A. Weaver"
    assert head(stage)[-1] == "file x.toml, SHA-256 0123456789ab"
    assert head(replace(stage, designed_by=""))[0].startswith("divider, NPN")


def test_joint_yield_carries_its_own_bound():
    review = replace(reviewed(HIVE), joint_yield=1.0)
    # No failure in N boards: the bound b solves b^N = 0.05 (Clopper & Pearson 1934, closed form).
    bound = 100.0 * 0.05 ** (1.0 / BOARDS)
    text = joint_yield(review)
    assert f"100 % of {BOARDS} boards" in text
    shown = float(text.split("at least ")[1].split(" %")[0])
    assert 0.0 <= bound - shown < 0.001  # rounded down to a thousandth of a per cent


def test_boards_in_batches_are_told_and_bound_by_batches():
    review = reviewed("ice_warner")
    boards = review.evidence.boards
    batches = -(-BOARDS // 200)
    assert sampled(boards).startswith(f"{BOARDS} boards in {batches} batches, seed 1, ")
    # No failure in N/n batches: the bound b solves b^(N/n) = 0.05 (Clopper & Pearson 1934, closed form).
    bound = 100.0 * 0.05 ** (200.0 / BOARDS)
    text = joint_yield(replace(review, joint_yield=1.0))
    assert "95 % confidence, counted in batches: at least" in text
    assert 0.0 <= bound - float(text.split("at least ")[1].split(" %")[0]) < 0.001  # rounded down
    assert " in " not in sampled(reviewed(HIVE).evidence.boards).split(",")[0]


def test_what_a_group_shares_is_called_by_its_name():
    assert contributor("group array A") == "tempco of group array A"
    assert contributor("batch array A") == "batch mean of group array A"


def test_share_inside_rss_is_measured_per_required_quantity():
    review = reviewed(HIVE)
    text = rss_assumption(review)
    for name in ("collector_voltage", "symmetric_peak_swing"):
        low, high = review.evidence.rss[name].low, review.evidence.rss[name].high
        spread = review.spread[name]
        values = zip(spread.lowest_in_use.values, spread.highest_in_use.values, strict=True)
        inside = 100.0 * sum(low <= a and b <= high for a, b in values) / BOARDS
        shown = float(text.split(f"{name} ")[1].split(" %")[0])
        assert 0.0 <= inside - shown < 0.001  # rounded down to a thousandth of a per cent
    assert "resistor_power" not in text


def step(**changes) -> Step:
    plain = {
        "resistor": "RC", "ohms": 3850.0, "high_node": Node.COLLECTOR_RAIL, "high": 9.0,
        "low_node": Node.COLLECTOR, "low": 5.15, "current": 1e-3,
    }  # fmt: skip
    return Step(**{**plain, **changes})


def test_formula_reads_as_in_the_brief():
    # (9 V - 5.15 V) / 1 mA = 3.85 kΩ, by hand.
    shown = formula(step(), reviewed(HIVE).stage)
    assert shown == "(V_CC − V_C) / I = (9 V − 5.15 V) / 1 mA = 3.85 kΩ"


def test_ground_is_not_subtracted():
    grounded = step(
        resistor="RE", ohms=1e3, high_node=Node.EMITTER, high=1.0, low_node=Node.EMITTER_RAIL, low=0.0
    )
    assert formula(grounded, reviewed(HIVE).stage) == "V_E / I = 1 V / 1 mA = 1 kΩ"


def test_part_in_series_is_taken_off():
    shown = formula(step(resistor="RE2", ohms=3750.0, beside=100.0), reviewed(HIVE).stage)
    assert shown.endswith("/ I − RE1 = (9 V − 5.15 V) / 1 mA − 100 Ω = 3.75 kΩ")


def test_rule_for_the_current_is_named_behind_the_formula():
    ruled = formula(step(current_rule="10 times I_B"), reviewed(HIVE).stage)
    assert ruled.endswith("= 3.85 kΩ, I = 10 times I_B")


def test_rule_in_the_formulas_place_stands_alone():
    ruled = step(resistor="RB", ohms=12e3, high=0.0, low=0.0, rule="0.1 h_FE RE")
    assert formula(ruled, reviewed(SPLIT).stage) == "0.1 h_FE RE = 12 kΩ"


def test_negative_voltage_is_bracketed_where_it_is_subtracted():
    emitter = step(high_node=Node.EMITTER, high=-0.7, low_node=Node.EMITTER_RAIL, low=-12.0)
    assert formula(emitter, reviewed(SPLIT).stage).startswith("(V_E − V_EE) / I = (-700 mV − (-12 V)) / 1 mA")


def test_rails_of_a_pnp_stage_change_places():
    rail = step(high_node=Node.EMITTER_RAIL, low_node=Node.EMITTER)
    assert formula(rail, reviewed(PNP).stage).startswith("(V_CC − V_E) / I")


@pytest.mark.parametrize("name", EVERY)
def test_every_formula_of_every_sample_comes_out_at_its_value(name):
    parts = design(read_stage(SAMPLES / f"{name}.toml")).parts
    for made in (
        found for part in parts for found in (part.hand, part.ideal) if found and found.high != found.low
    ):
        value = (made.high - made.low) / made.current - made.beside
        assert made.ohms == pytest.approx(value, rel=1e-9)  # rounding of a subtraction and a division


def test_failing_sample_blames_the_gain():
    failing = [row for row in reviewed(FAILING).rows if row.verdict == "fail"]
    assert failing and all("h_FE" in worst(row) for row in failing)
