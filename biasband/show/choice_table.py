"""The sets of values that were compared, side by side, so that a designer can overrule the choice."""

from __future__ import annotations

import math
from collections.abc import Iterator

from biasband.quantity import Kind
from biasband.show.table import REGION_WORDS, Column, Row, Table, computed, figure, whole_percent
from biasband.stage import Stage
from biasband.values.joint import NEAR, Contender, Contest, finalist_boards

_PLACES = ("chosen", "2nd", "3rd", *(f"{place}th" for place in range(4, 20)))


def choice_table(contest: Contest, stage: Stage) -> Table:
    """The chosen set, the runners-up and the nearest set, each with its worst case."""
    columns = (
        Column("set", "left"),
        *(Column(name) for name in contest.names),
        Column("I_C"),
        *((Column("swing"),) if contest.by_swing else ()),
        Column("share"),
        Column("smallest margin", "left", spare=1),
    )
    rows = tuple(_row(place, contender, contest) for place, contender in _placed(contest))
    title = f"Values compared: {contest.sets} sets by their worst case"
    return Table(title, columns, rows, tuple(_notes(contest, stage)))


def _placed(contest: Contest) -> Iterator[tuple[str, Contender]]:
    for place, contender in zip(_PLACES, contest.contenders, strict=False):
        same = contest.nearest is not None and contender.values == contest.nearest.values
        yield (f"{place}, nearest" if same else place), contender
    values = [contender.values for contender in contest.contenders]
    if contest.nearest is not None and contest.nearest.values not in values:
        yield "nearest", contest.nearest


def _row(place: str, contender: Contender, contest: Contest) -> Row:
    smallest = contender.smallest
    on = smallest.quantity if smallest.standing else f"{smallest.id} {smallest.quantity}"
    cells = (
        place,
        *(figure(ohms, Kind.RESISTANCE, digits=6) for ohms in contender.values),
        computed(contender.current, Kind.CURRENT, digits=3),
        *((computed(contender.swing, Kind.VOLTAGE, digits=3),) if contest.by_swing else ()),
        whole_percent(contender.share) if math.isfinite(contender.share) else "none",
        on,
    )
    failing = [row.quantity if row.standing else f"{row.id} {row.quantity}" for row in contender.failing]
    lost = [f"{REGION_WORDS[region]} at a corner" for region in contender.regions]
    below = (f"FAILS {', '.join(lost or dict.fromkeys(failing))}",) if failing else ()
    return Row(cells, below, "fail" if failing else "")


def _notes(contest: Contest, stage: Stage) -> Iterator[str]:
    if contest.by_swing:
        yield (
            "No requirements: the largest smallest swing at any corner decides, of the sets that pass the "
            f"standing checks with a nominal I_C within {whole_percent(NEAR)} of its target, if any do."
        )
    else:
        yield (
            "share: the smallest margin share over all requirements and standing checks at all corners; "
            "equal ones are settled by I_C near its target, then by fewer different values."
        )
    target = stage.target
    off = 0.0 if target is None else contest.contenders[0].current / target.collector_current - 1.0
    if not abs(off) <= NEAR:
        yield (
            f"I_C of the chosen set is {100.0 * off:+.0f} % off its target: where that matters, require "
            'limits for collector_current, or set snapping = "nearest" under [resistors].'
        )
    if all(contender.failing for contender in contest.contenders):
        yield "No set passes: the best of them is shown with what fails."
    if any(requirement.judged_by != "corners" for requirement in stage.requirements):
        boards = finalist_boards(stage)
        sampled = f", yields on {boards} boards" if boards > 1 else ""
        yield f"The sets that lead at the corners are ranked by each requirement's own method{sampled}."
    yield "To overrule, for example: --keep " + _example(contest)


def _example(contest: Contest) -> str:
    other = contest.contenders[min(1, len(contest.contenders) - 1)]
    best = contest.contenders[0].values
    changed = [k for k, (a, b) in enumerate(zip(other.values, best, strict=True)) if a != b] or [0]
    text = figure(other.values[changed[0]], Kind.RESISTANCE, digits=6)
    return f"{contest.names[changed[0]]}={text.replace(' ', '').replace('Ω', '')}"
