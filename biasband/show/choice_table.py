"""The sets of values that were compared, side by side, so that a designer can overrule the choice."""

from __future__ import annotations

import math
from collections.abc import Iterator

from biasband.quantity import Kind
from biasband.show.table import REGION_WORDS, Column, Row, Table, code, computed, figure, whole_percent
from biasband.stage import Stage
from biasband.values.joint import NEAR, Contender, Contest, finalist_boards

LEAST_TYPED, MOST_TYPED = 0.1, 1e12
"""[Ω] Where a letter code exists and is also read as a resistance; milliohms (47L) are not."""

_PLACES = ("chosen", "2nd", "3rd", *(f"{place}th" for place in range(4, 20)))


def choice_table(contest: Contest, stage: Stage) -> Table:
    """The chosen set, the runners-up and the nearest set, each with its worst case."""
    columns = (
        Column("set", "left", toned=True),
        *(Column(name) for name in contest.names),
        Column("I_C"),
        *((Column("swing"),) if contest.by_swing else ()),
        Column("share"),
        Column("smallest margin", "left", spare=1),
    )
    rows = tuple(_row(place, contender, contest) for place, contender in _placed(contest))
    sets = "1 set" if contest.sets == 1 else f"{contest.sets} sets"
    title = f"Values compared: {sets} by their worst case"
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
    yield from _without_a_share(contest)
    yield from _off_target(contest, stage)
    if not contest.proved:
        yield "The search was given up, as worst cases lie inside the limits: a better set is not ruled out."
    if all(contender.failing for contender in contest.contenders):
        yield "No set passes: the best of them is shown with what fails."
    if any(requirement.judged_by != "corners" for requirement in stage.requirements):
        boards = finalist_boards(stage)
        sampled = f", yields on {boards} boards" if boards > 1 else ""
        yield f"The sets that lead at the corners are ranked by each requirement's own method{sampled}."
    yield from _overruling(contest)


def _without_a_share(contest: Contest) -> Iterator[str]:
    """What stands in a row instead of a share, and for a row that is not there."""
    if any(not math.isfinite(contender.share) for _, contender in _placed(contest)):
        yield "share none: a nominal value is itself on or beyond its limit, or some corner has no value."
    if contest.nearest is None:
        yield "The nearest set has no row: the stock list has too few pieces for it."


def _off_target(contest: Contest, stage: Stage) -> Iterator[str]:
    if stage.target is None:
        return
    off = contest.contenders[0].current / stage.target.collector_current - 1.0
    if math.isnan(off):
        yield "I_C of the chosen set is not solved at the nominal point."
    elif abs(off) > NEAR:
        yield (
            f"I_C of the chosen set is {100.0 * off:+.0f} % off its target: where that matters, require "
            'limits for collector_current, or set snapping = "nearest" under [resistors].'
        )


def _overruling(contest: Contest) -> Iterator[str]:
    """How to take the second set: every value of it, since what is left free is chosen anew."""
    if len(contest.contenders) < 2:
        return
    values = zip(contest.names, contest.contenders[1].values, strict=True)
    kept = " ".join(f"--keep {name}={typed(ohms)}" for name, ohms in values)
    yield f"To overrule, for example with the 2nd set: {kept}"


def typed(ohms: float) -> str:
    """A resistance as it is read back from a command line: its letter code, else in ohms."""
    return code(ohms) if LEAST_TYPED <= ohms < MOST_TYPED else repr(ohms)
