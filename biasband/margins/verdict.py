"""The verdict: pass, fail or inconclusive, why, and what it rests on."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import isnan
from typing import Literal

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import LOW_CORNER
from biasband.margins.checks import Standing
from biasband.margins.records import Evidence, Margin
from biasband.quantity import format_quantity
from biasband.stage import Stage

Outcome = Literal["pass", "fail", "inconclusive"]

_NAMES = {
    Region.SATURATED: "saturated",
    Region.CUT_OFF: "cut off",
    Region.RUNAWAY: "in thermal runaway",
    Region.UNSOLVED: "not solved",
}


@dataclass(frozen=True)
class Verdict:
    """The outcome, its reasons (the gravest first) and the line that counts what it rests on."""

    outcome: Outcome
    because: tuple[str, ...]
    line: str


def judge(
    stage: Stage, nominal: Region, margins: Sequence[Margin], standing: Standing, evidence: Evidence
) -> Verdict:
    """Judge a stage: anything that fails makes it fail, else anything unknown makes it inconclusive."""
    failures = [*_failures(nominal, margins, evidence)]
    doubts = [*_doubts(nominal, margins, evidence), *_unstated(stage)]
    outcome: Outcome = "fail" if failures else "inconclusive" if doubts else "pass"
    reservations = [_reservation(margin) for margin in margins if margin.only_by_method]
    return Verdict(
        outcome, (*failures, *doubts), _line(outcome, stage, margins, standing, reservations)
    )


def _failures(nominal: Region, margins: Sequence[Margin], evidence: Evidence) -> Iterator[str]:
    if nominal in (Region.SATURATED, Region.CUT_OFF, Region.RUNAWAY):
        yield f"the nominal point itself is {_NAMES[nominal]}"
    hot = evidence.corners.regions.get(Region.RUNAWAY, 0)
    if hot:
        yield f"thermal runaway in {hot} of {evidence.corners.count} corners"
    hot_boards = evidence.boards.regions.get(Region.RUNAWAY, 0)
    if hot_boards and not hot:
        yield f"thermal runaway in {hot_boards} of {_scenarios(evidence)} sampled scenarios"
    for margin in margins:
        if margin.verdict == "fail" and not _unknown(margin, evidence):
            yield f"{label(margin)}: {_how_it_fails(margin)}"


def _unknown(margin: Margin, evidence: Evidence) -> bool:
    """Whether a row lacks the value that it is to be judged by: not solved, or not computable.

    A yield that fails while boards are unsolved is unknown: they count as failed, and may not be.
    """
    if margin.judged_by == "yield" and evidence.boards.regions.get(Region.UNSOLVED):
        return margin.verdict == "fail"
    needed = {"corners": margin.corners, "rss": margin.rss, "yield": margin.nominal}
    return isnan(margin.nominal) or isnan(needed[margin.judged_by])


def label(margin: Margin) -> str:
    """What a row is called in reasons: its id (or that it is a check), quantity and limit."""
    name = f"check {margin.quantity}" if margin.standing else f"{margin.id} {margin.quantity}"
    sign = "≥" if margin.side == "at_least" else "≤"
    return f"{name} {sign} {format_quantity(margin.limit, margin.kind)}"


def _how_it_fails(margin: Margin) -> str:
    if margin.margin_share is None:
        return "the nominal value is itself on or beyond the limit"
    return "fails by yield" if margin.judged_by == "yield" else f"fails by {margin.judged_by}"


def _reservation(margin: Margin) -> str:
    return f"{label(margin)}: pass by {margin.judged_by}, FAILS AT CORNERS"


def _doubts(nominal: Region, margins: Sequence[Margin], evidence: Evidence) -> Iterator[str]:
    if nominal is Region.UNSOLVED:
        yield "the nominal point was not solved"
    corners = evidence.corners.regions.get(Region.UNSOLVED, 0)
    if corners:
        yield f"{corners} of {evidence.corners.count} corners were not solved"
    sampled = evidence.boards.regions.get(Region.UNSOLVED, 0)
    if sampled:
        yield f"{sampled} of {_scenarios(evidence)} sampled scenarios were not solved"
    for margin in margins:
        if _unknown(margin, evidence):
            yield f"{label(margin)}: could not be judged, a value that it needs is not there"


def _scenarios(evidence: Evidence) -> int:
    return evidence.boards.boards * evidence.boards.points


def _unstated(stage: Stage) -> Iterator[str]:
    """Variations that are neither stated nor written as zero: a sign-off without them is not one."""
    missing = []
    missing += ["ambient range"] if not stage.ambient.stated else []
    missing += ["supply tolerance"] if not stage.supply.voltage.stated else []
    negative = stage.negative_supply
    missing += ["negative supply tolerance"] if negative is not None and not negative.voltage.stated else []
    missing += [f"tolerance of {r.name}" for r in stage.resistors if not r.tolerance_stated]
    if any(requirement.quantity == LOW_CORNER for requirement in stage.requirements):
        missing += [f"tolerance of {c.name}" for c in stage.capacitors if not c.tolerance_stated]
    missing += ["gain limits"] if not stage.transistor.gain.stated else []
    if missing:
        how = 'write zero as "0 %", or as min = max'
        yield f"not stated, so taken as no variation ({how}): {', '.join(missing)}"


def _line(
    outcome: Outcome, stage: Stage, margins: Sequence[Margin], standing: Standing, reservations: Sequence[str]
) -> str:
    made, total = len(standing.made), len(standing.made) + len(standing.not_made)
    asked = len(stage.requirements)
    failing = [margin for margin in margins if margin.verdict == "fail"]
    text = f"{_counted(asked, 'requirement')}, {made} of {total} standing checks"
    if not asked:
        text = f"standing checks only, {made} of {total}"
    if outcome == "fail" and failing:
        unmet = len({margin.id for margin in failing if not margin.standing})
        broken = sum(margin.standing for margin in failing)
        text = f"{unmet} of {_counted(asked, 'requirement')} fail, {broken} of {made} standing checks fail"
    text = f"{outcome.upper()}: {text}"
    if standing.not_made:
        keys = dict.fromkeys(check.missing for check in standing.not_made)
        text += f"; not checked, no limit given: {', '.join(keys)}"
    return "; ".join([text, *reservations])


def _counted(count: int, what: str) -> str:
    return f"{count} {what}" if count == 1 else f"{count} {what}s"
