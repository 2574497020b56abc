"""Sentences: where the worst is and what causes it, how a value came about, what was sampled."""

from __future__ import annotations

import math
from collections.abc import Mapping

from biasband.boards.intervals import yield_bound, yield_interval
from biasband.boards.sampling import Boards
from biasband.circuit.topology import EMITTER_PARTS, Node
from biasband.constants import VERSION
from biasband.coupling import BYPASS, INPUT, OUTPUT
from biasband.margins.limits import HeldLimit
from biasband.margins.records import Margin
from biasband.quantity import Kind
from biasband.show.table import figure, percent, whole_percent, yield_percent
from biasband.signoff.study import Review
from biasband.stage import Stage, Transistor
from biasband.values.ideal import Step
from biasband.variation.contributors import (
    BASE_EMITTER,
    GAIN,
    LEAKAGE,
    NEGATIVE,
    RIPPLE,
    SUPPLY,
    TEMPERATURE,
)
from biasband.variation.corners import Extreme

MATTERS = 0.05
"""A contributor with a smaller share of the way to the worst is not named."""

MOST_NAMED = 4

RSS_HOLDS = 0.9973
"""The share within ±3σ of a normal distribution: what RSS would hold, were its assumption true."""

GROUND = "0"
"""The symbol of the node that all voltages are counted from."""

_NAMES = {GAIN: "h_FE", BASE_EMITTER: "V_BE", NEGATIVE: "negative supply"}
_KINDS = {
    GAIN: Kind.NUMBER,
    BASE_EMITTER: Kind.VOLTAGE,
    LEAKAGE: Kind.CURRENT,
    SUPPLY: Kind.VOLTAGE,
    RIPPLE: Kind.VOLTAGE,
    NEGATIVE: Kind.VOLTAGE,
    TEMPERATURE: Kind.TEMPERATURE,
    **dict.fromkeys((INPUT, OUTPUT, BYPASS), Kind.CAPACITANCE),
}


def contributor(name: str) -> str:
    """A contributor as people call it; the name itself where that is what they do."""
    if name.startswith("batch "):
        return f"batch mean of group {name.removeprefix('batch ')}"
    return f"tempco of {name}" if name.startswith("group ") else _NAMES.get(name, name)


def place(name: str, extreme: Extreme) -> str:
    """Where a contributor stands at an extreme: "hot", "h_FE low", "V_BE inside (0.66 V)"."""
    x, value = extreme.coordinates[name], extreme.at.get(name)
    shown = "" if value is None else figure(value, _KINDS.get(name, Kind.RESISTANCE))
    if abs(x) < 1.0:
        return f"{contributor(name)} inside ({shown})" if shown else f"{contributor(name)} inside"
    if name == TEMPERATURE:
        return "cold" if x < 0.0 else "hot"
    if name == NEGATIVE:  # "low" could be meant as the more negative or as the smaller
        return f"{contributor(name)} {shown}"
    return f"{contributor(name)} {'low' if x < 0.0 else 'high'}"


def places(extreme: Extreme) -> str:
    """Where every contributor stands at an extreme, those in use first."""
    if not extreme.coordinates:
        return "nothing varies"
    return ", ".join(place(name, extreme) for name in reversed(tuple(extreme.coordinates)))


def main_places(extreme: Extreme, causes: Mapping[str, float], *, most: int = MOST_NAMED) -> str:
    """Where the contributors stand that matter at an extreme, the main one first; empty where none does."""
    return ", ".join(place(name, extreme) for name in _main_causes(causes)[:most])


def _main_causes(causes: Mapping[str, float]) -> list[str]:
    return [name for name, share in causes.items() if share > MATTERS]


def limit_on(limit: HeldLimit) -> str:
    """What a limit is on: its id and quantity, or that it is a check."""
    return f"check {limit.quantity}" if limit.standing else f"{limit.id} {limit.quantity}"


def limit_text(limit: HeldLimit) -> str:
    """A limit as it was required; empty for a check."""
    sign = "≥" if limit.side == "at_least" else "≤"
    return "" if limit.standing else f"{sign} {figure(limit.limit, limit.kind)}"


def worst(row: Margin) -> str:
    """Where a row's worst corner is and what causes it, the main contributors only."""
    if math.isnan(row.worst.value):
        return "worst: no corner has a value here"
    named = _main_causes(row.causes)
    if not named:
        return "worst: as nominal, nothing that varies moves it towards this limit"
    return f"worst: {main_places(row.worst, row.causes)}; {_main(named[0], row.causes[named[0]])}"


def _main(name: str, share: float) -> str:
    how = "mostly" if share > 0.5 else "most from"
    return f"{how} {contributor(name)} ({whole_percent(share)})"


def frozen_or_chosen(frozen: int, chosen: int, *, kept: int = 0) -> str:
    """How many values the file gave, how many the caller, and how many were chosen in this run."""
    parts = [f"{frozen} frozen"] if frozen or not (chosen or kept) else []
    parts += [f"{kept} kept for this run"] if kept else []
    parts += [f"{chosen} chosen in this run: freeze before ordering"] if chosen else []
    return f"values: {', '.join(parts)}"


def head(stage: Stage) -> tuple[str, ...]:
    """Which stage this is: its document, what kind it is, and the files that were read."""
    revision = f"revision {stage.revision}" if stage.revision else ""
    designer = f"designed by {stage.designed_by}" if stage.designed_by else ""
    document = [text for text in (stage.document, revision, designer) if text]
    label = stage.transistor.label if isinstance(stage.transistor, Transistor) else ""
    kind = [stage.topology, stage.polarity.upper(), *([label] if label else [])]
    source = stage.transistor.source if isinstance(stage.transistor, Transistor) else ""
    files = [f"file {file.path}, SHA-256 {file.sha256[:12]}" for file in stage.files]
    origin = [f"transistor data: {source}"] if source else []
    return (*([", ".join(document)] if document else []), ", ".join(kind), *origin, *files)


def sampled(boards: Boards) -> str:
    """What was sampled, and by which program."""
    batches = f" in {boards.batches} batches" if boards.boards_per_batch > 1 else ""
    counts = f"{boards.boards} boards{batches}, seed {boards.seed}, {boards.points} points of use"
    return f"{counts}, biasband {VERSION}"


def joint_yield(review: Review) -> str:
    """The share of boards that hold every limit of every requirement."""
    boards, batch = review.evidence.boards.boards, review.evidence.boards.boards_per_batch
    bound = yield_bound(round(review.joint_yield * boards), boards, boards_per_batch=batch)
    counted = ", counted in batches" if batch > 1 else ""
    return (
        f"All requirements together: {yield_percent(review.joint_yield)} of {boards} boards hold every limit "
        f"at every point of use (95 % confidence{counted}: at least {yield_percent(bound)})."
    )


def rss_assumption(review: Review) -> str:
    """What RSS assumes, how many sampled boards its intervals hold, and whether that contradicts it."""
    names = dict.fromkeys(row.quantity for row in review.rows if not row.standing)
    boards, batch = review.evidence.boards.boards, review.evidence.boards.boards_per_batch
    inside = {name: _inside(review, name) for name in names}
    return rss_words(
        inside, {name: rss_most(share, boards, boards_per_batch=batch) for name, share in inside.items()}
    )


def rss_words(inside: Mapping[str, float], most: Mapping[str, float]) -> str:
    """The same by quantity: the share inside, and the most that it can be for all boards (NaN: not known)."""
    shares = ", ".join(f"{name} {yield_percent(share)}" for name, share in inside.items())
    against = [f"{name} {yield_percent(share, up=True)}" for name, share in most.items() if share < RSS_HOLDS]
    said = (
        "RSS takes contributors as independent and their limits as 3σ; "
        f"boards measured inside its interval at every point of use: {shares}."
    )
    if not against:
        return said
    return (
        f"{said} RSS is contradicted: by its assumption {percent(RSS_HOLDS, digits=4)} would be inside, but "
        f"it is at most (95 % confidence) {', '.join(against)}."
    )


def rss_most(share: float, boards: int, *, boards_per_batch: int) -> float:
    """The upper end of the two-sided 95 % interval of a share of boards; NaN for one that is not known."""
    if math.isnan(share):
        return share
    return yield_interval(round(share * boards), boards, boards_per_batch=boards_per_batch).high


def _inside(review: Review, name: str) -> float:
    interval = review.evidence.rss[name]
    if math.isnan(interval.low) or math.isnan(interval.high):
        return math.nan
    return review.spread[name].inside(interval.low, interval.high)


def formula(step: Step, stage: Stage) -> str:
    """A resistor's formula with its numbers: "(V_CC − V_C) / I = (9 V − 5.15 V) / 1 mA = 3.85 kΩ"."""
    result = figure(step.ohms, Kind.RESISTANCE)
    if step.rule:
        return f"{step.rule} = {result}"
    names = _symbols(stage)
    high, low = figure(step.high, Kind.VOLTAGE), figure(step.low, Kind.VOLTAGE)
    low = f"({low})" if step.low < 0.0 else low
    current = figure(step.current, Kind.CURRENT)
    letters, numbers = f"{names[step.high_node]} / I", f"{high} / {current}"
    if names[step.low_node] != GROUND:
        letters = f"({names[step.high_node]} − {names[step.low_node]}) / I"
        numbers = f"({high} − {low}) / {current}"
    if step.beside:
        other = next(part for part in EMITTER_PARTS if part != step.resistor)
        letters, numbers = f"{letters} − {other}", f"{numbers} − {figure(step.beside, Kind.RESISTANCE)}"
    rule = f", I = {step.current_rule}" if step.current_rule else ""
    return f"{letters} = {numbers} = {result}{rule}"


def _symbols(stage: Stage) -> dict[Node, str]:
    """The field's symbols; which supply a rail is depends on the polarity."""
    lower = GROUND if stage.negative_supply is None else "V_EE"
    collector, emitter = ("V_CC", lower) if stage.polarity == "npn" else (lower, "V_CC")
    return {
        Node.BASE: "V_B",
        Node.COLLECTOR: "V_C",
        Node.EMITTER: "V_E",
        Node.COLLECTOR_RAIL: collector,
        Node.EMITTER_RAIL: emitter,
        Node.GROUND: GROUND,
    }
