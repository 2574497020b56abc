"""The verdict: pass, fail or inconclusive, why, in which order, and what it rests on."""

from __future__ import annotations

from dataclasses import replace

import pytest
from variation.stages import ideal, stage, with_resistor

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import LOW_CORNER, vocabulary
from biasband.margins.checks import Check, NotMade, Standing
from biasband.margins.requirements import requirement_margins
from biasband.margins.verdict import Verdict, judge
from biasband.stage import Capacitor, Limits, Requirement, Signal, Stage, Supply
from margins.evidence import evidence, requirement

WORDS = vocabulary(("RB", "RC"))
GOOD = {"nominal": 5.0, "corners": (4.0, 6.0), "boards": [5.0] * 1000}
BAD = {"nominal": 5.0, "corners": (2.0, 6.0), "boards": [5.0] * 1000}
ASKED = (requirement(at_least=3.0),)


def stated() -> Stage:
    """A stage whose every variation is written, if only as zero."""
    return stage(
        "base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(100.0), 18.0, ambient=Limits.exactly(298.15)
    )


def standing(*missing: str) -> Standing:
    """Two checks made and one not made for each missing key."""
    quantity = WORDS["collector_current"]
    made = tuple(Check(name, "at_most", quantity, lambda r: 1.0) for name in ("one", "two"))
    return Standing(made, tuple(NotMade(key, f"transistor.{key}") for key in missing))


def verdict(
    found: dict,
    *,
    of: Stage | None = None,
    nominal: Region = Region.ACTIVE,
    asked: tuple[Requirement, ...] = ASKED,
    rests_on: Standing | None = None,
) -> Verdict:
    """The verdict on a stage with these requirements and this evidence."""
    of = replace(stated() if of is None else of, requirements=asked)
    known = evidence(**found)
    rows = requirement_margins(asked, WORDS, known)
    return judge(of, nominal, rows, rests_on or standing(), known)


def test_everything_stated_and_met_is_a_pass():
    found = verdict(GOOD)
    assert found.outcome == "pass"
    assert found.because == ()


def test_one_failed_row_is_a_fail_with_its_name():
    found = verdict(BAD)
    assert found.outcome == "fail"
    assert len(found.because) == 1
    assert "R-1" in found.because[0] and "collector_voltage" in found.because[0]
    assert "fails by corners" in found.because[0]


@pytest.mark.parametrize("region", [Region.SATURATED, Region.CUT_OFF, Region.RUNAWAY])
def test_nominal_point_that_is_no_active_one_fails_said_first(region):
    found = verdict(BAD, nominal=region)
    words = {Region.SATURATED: "saturated", Region.CUT_OFF: "cut off", Region.RUNAWAY: "runaway"}
    assert found.outcome == "fail"
    assert "nominal point" in found.because[0] and words[region] in found.because[0]
    assert len(found.because) == 2


def test_nominal_point_fails_without_any_failed_row():
    assert verdict(GOOD, nominal=Region.SATURATED).outcome == "fail"


def test_runaway_corner_fails():
    found = verdict({**GOOD, "regions": {Region.ACTIVE: 3, Region.RUNAWAY: 1}})
    assert found.outcome == "fail"
    assert "thermal runaway in 1 of 4 corners" in found.because[0]


def test_runaway_on_a_sampled_board_alone_fails_too():
    found = verdict({**GOOD, "board_regions": {Region.ACTIVE: 999, Region.RUNAWAY: 1}})
    assert found.outcome == "fail"
    assert "1 of 1000 sampled" in found.because[0]


@pytest.mark.parametrize(
    "found",
    [
        {"regions": {Region.ACTIVE: 3, Region.UNSOLVED: 1}},
        {"board_regions": {Region.ACTIVE: 999, Region.UNSOLVED: 1}},
    ],
)
def test_unsolved_scenario_is_inconclusive(found):
    judged = verdict({**GOOD, **found})
    assert judged.outcome == "inconclusive"
    assert "1 of" in judged.because[0] and "not solved" in judged.because[0]


def test_unsolved_nominal_point_is_inconclusive():
    assert verdict(GOOD, nominal=Region.UNSOLVED).outcome == "inconclusive"


def test_failure_outranks_doubt_and_both_are_told():
    found = verdict({**BAD, "regions": {Region.ACTIVE: 3, Region.UNSOLVED: 1}})
    assert found.outcome == "fail"
    assert "fails by corners" in found.because[0]
    assert any("not solved" in reason for reason in found.because[1:])


def split(stated_negative: bool) -> Stage:
    """A split-supply stage with everything else stated."""
    return stage(
        "split-supply", {"RB": 10e3, "RC": 2.2e3, "RE": 8e3}, ideal(100.0), 9.0,
        ambient=Limits.exactly(298.15),
        negative_supply=Supply(voltage=Limits.exactly(-9.0, stated=stated_negative)),
    )  # fmt: skip


UNSTATED = {
    "ambient": (replace(stated(), ambient=Limits.exactly(298.15, stated=False)), "ambient"),
    "supply": (replace(stated(), supply=Supply(voltage=Limits.exactly(18.0, stated=False))), "supply"),
    "negative supply": (split(False), "negative supply"),
    "resistor": (with_resistor(stated(), "RC", tolerance_stated=False), "RC"),
    "gain": (replace(stated(), transistor=ideal(Limits.exactly(100.0, stated=False))), "gain"),
}


@pytest.mark.parametrize("name", UNSTATED)
def test_variation_that_is_not_stated_is_inconclusive_and_named(name):
    of, word = UNSTATED[name]
    found = verdict(GOOD, of=of)
    assert found.outcome == "inconclusive"
    assert len(found.because) == 1
    assert word in found.because[0] and "not stated" in found.because[0]


def test_variation_written_as_zero_is_a_pass():
    assert verdict(GOOD, of=split(True)).outcome == "pass"


def test_all_unstated_variations_are_told_together():
    of = replace(
        stated(),
        ambient=Limits.exactly(298.15, stated=False),
        supply=Supply(voltage=Limits.exactly(18.0, stated=False)),
    )
    (reason,) = verdict(GOOD, of=of).because
    assert "ambient" in reason and "supply" in reason


def test_pass_by_yield_that_fails_at_corners_is_repeated_in_the_line():
    asked = (requirement(at_least=3.0, judged_by="yield", yield_at_least=0.9),)
    found = verdict(BAD, asked=asked)
    assert found.outcome == "pass"
    # formats.md, word for word.
    assert "pass by yield, FAILS AT CORNERS" in found.line
    assert found.because == ()


def test_row_that_fails_at_nominal_says_so():
    found = verdict({"nominal": 2.9, "corners": (2.0, 6.0), "boards": [2.9] * 10})
    assert "nominal value" in found.because[0]


def test_line_counts_what_the_verdict_rests_on():
    asked = (requirement(at_least=3.0), requirement(at_most=7.0), requirement(at_least=1.0))
    found = verdict(GOOD, asked=asked, rests_on=standing("max_power", "max_current"))
    assert found.line.startswith("PASS: 3 requirements, 2 of 4 standing checks")
    assert "max_power" in found.line and "max_current" in found.line
    assert "not checked, no limit given" in found.line


def test_line_of_one_requirement_is_singular_and_hides_nothing_missing():
    found = verdict(GOOD)
    assert found.line == "PASS: 1 requirement, 2 of 2 standing checks"


def test_line_without_requirements_says_standing_checks_only():
    found = verdict(GOOD, asked=())
    assert found.line.startswith("PASS")
    assert "standing checks only" in found.line


@pytest.mark.parametrize(("found", "word"), [(BAD, "FAIL"), (GOOD, "PASS")])
def test_line_starts_with_the_outcome(found, word):
    assert verdict(found).line.startswith(f"{word}: ")
    assert verdict(GOOD, of=UNSTATED["gain"][0]).line.startswith("INCONCLUSIVE: ")


NOWHERE = float("nan")


@pytest.mark.parametrize("lost", [(NOWHERE, NOWHERE), (NOWHERE, 5.5)])
def test_row_judged_by_an_rss_that_is_not_known_is_a_doubt_and_no_failure(lost):
    found = verdict({**GOOD, "rss": lost}, asked=(requirement(at_least=3.0, judged_by="rss"),))
    assert found.outcome == "inconclusive"
    assert len(found.because) == 1
    assert "R-1 collector_voltage" in found.because[0]
    assert "fails" not in found.because[0]
    assert found.line.startswith("INCONCLUSIVE: ")


@pytest.mark.parametrize("method", ["corners", "yield"])
def test_rss_that_is_not_known_is_no_matter_where_another_method_judges(method):
    asked = (requirement(at_least=3.0, judged_by=method, yield_at_least=0.9),)
    assert verdict({**GOOD, "rss": (NOWHERE, NOWHERE)}, asked=asked).outcome == "pass"


def test_known_rss_that_fails_is_a_failure():
    asked = (requirement(at_least=3.0, judged_by="rss"),)
    found = verdict({**BAD, "rss": (2.5, 5.5)}, asked=asked)
    assert found.outcome == "fail"
    assert "fails by rss" in found.because[0]


UNKNOWN = {"nominal": NOWHERE, "corners": (NOWHERE, NOWHERE), "boards": [NOWHERE] * 10}


def test_row_without_a_nominal_value_is_a_doubt_and_no_failure():
    found = verdict(UNKNOWN, nominal=Region.UNSOLVED)
    assert found.outcome == "inconclusive"
    assert any("R-1 collector_voltage" in reason for reason in found.because)
    assert not any("fail" in reason for reason in found.because)


def test_row_without_a_nominal_value_is_a_doubt_even_where_the_nominal_point_is_solved():
    # A quantity may have no value at a point that is solved.
    found = verdict(UNKNOWN)
    assert found.outcome == "inconclusive"
    assert len(found.because) == 1 and "R-1 collector_voltage" in found.because[0]


def test_row_without_a_nominal_value_is_a_doubt_even_where_its_corners_hold():
    found = verdict({**GOOD, "nominal": NOWHERE})
    assert found.outcome == "inconclusive"
    assert len(found.because) == 1 and "R-1 collector_voltage" in found.because[0]


def test_row_without_a_corner_value_is_a_doubt_and_no_failure():
    found = verdict({**GOOD, "corners": (NOWHERE, 6.0), "regions": {Region.ACTIVE: 3, Region.UNSOLVED: 1}})
    assert found.outcome == "inconclusive"
    assert not any("fails" in reason for reason in found.because)


def test_row_without_a_value_does_not_hide_thermal_runaway():
    for where in ({"nominal": Region.RUNAWAY}, {"found": {"regions": {Region.RUNAWAY: 4}}}):
        found = verdict({**UNKNOWN, **where.get("found", {})}, nominal=where.get("nominal", Region.ACTIVE))
        assert found.outcome == "fail"
        assert "runaway" in found.because[0]


def test_row_without_a_value_does_not_hide_one_that_fails():
    asked = (requirement(at_least=3.0, judged_by="rss"), requirement(id="R-2", at_least=4.5))
    found = verdict({**GOOD, "rss": (NOWHERE, NOWHERE)}, asked=asked)
    assert found.outcome == "fail"
    assert "R-2" in found.because[0] and "fails by corners" in found.because[0]
    assert any("R-1" in reason for reason in found.because[1:])


@pytest.mark.parametrize(
    ("quantity", "stated_tolerance", "outcome"),
    [(LOW_CORNER, False, "inconclusive"), (LOW_CORNER, True, "pass"), ("collector_voltage", False, "pass")],
)
def test_tolerance_of_a_capacitor_matters_where_a_requirement_needs_it(quantity, stated_tolerance, outcome):
    coupling = Capacitor(name="C_in", value=1e-6, tolerance_stated=stated_tolerance)
    of = replace(stated(), signal=Signal(), capacitors=(coupling,))
    of = replace(of, requirements=(requirement(quantity=quantity, at_least=3.0),))
    found = judge(of, Region.ACTIVE, (), standing(), evidence(**GOOD))
    assert found.outcome == outcome
    assert ("tolerance of C_in" in "".join(found.because)) is (outcome == "inconclusive")
