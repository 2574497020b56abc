"""Causes, both lists side by side: the share of the worst case and the share of the variance."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import replace

from biasband.boards.pick_freeze import Share, VarianceShares
from biasband.show.focus import Focus, focuses
from biasband.show.prose import contributor
from biasband.show.table import Column, Row, Table, whole_percent
from biasband.signoff.spread_study import SpreadStudy
from biasband.stage import Stage
from biasband.variation.contributors import batch_axis, board_axes, group_axis, use_axes

SMALL = 0.01
"""A contributor with less in either list is left out, and counted."""

CAUSE_COLUMNS = (
    Column("contributor", "left"),
    Column("worst case"),
    Column("variance"),
    Column("alone"),
    Column("total"),
    Column("together"),
)
_IN_USE, _SHARED = "in use", "in members"
_ERRORS = 2.0
"""Standard errors: a 95 % interval, nearly, and what a difference must exceed."""


def cause_tables(study: SpreadStudy) -> tuple[Table, ...]:
    """A table for every side that a limit is on, the largest share of the worst case first."""
    if not study.shares:
        return ()
    *first, last = (_table(study, side) for side in focuses(study))
    together = any(len(table.columns) == len(CAUSE_COLUMNS) for table in (*first, last))
    notes = _notes(study.job.stage, together=together)
    return (*first, replace(last, notes=(*last.notes, *notes)))


def _table(study: SpreadStudy, side: Focus) -> Table:
    found, divided = study.causes[side.measure.name], study.shares[side.measure.name]
    worst = found.low if side.lower else found.high
    shares = divided.lowest_in_use if side.lower else divided.highest_in_use
    names = list(dict.fromkeys([*worst, *shares.total]))
    kept = [name for name in names if _matters(worst, shares, name)]
    rows = [_cells(study.job.stage, name, worst, shares) for name in kept]
    columns = len(CAUSE_COLUMNS) - (not any(cells[-1] for cells in rows))
    return Table(
        f"Causes: {side.title}",
        CAUSE_COLUMNS[:columns],
        tuple(Row(cells[:columns]) for cells in rows),
        tuple(_left_out(len(names) - len(kept), worst, shares)),
    )


def _matters(worst: Mapping[str, float], shares: VarianceShares, name: str) -> bool:
    """Whether either list gives it a share worth a row, or one that is not known."""
    found = [worst.get(name, 0.0)]
    found += [kind[name].value for kind in (shares.first, shares.total, shares.shapley) if name in kind]
    return any(not abs(share) < SMALL for share in found)


def _cells(stage: Stage, name: str, worst: Mapping[str, float], shares: VarianceShares) -> tuple[str, ...]:
    label, share = contributor(name), whole_percent(worst[name]) if name in worst else ""
    if name not in shares.total:
        return label, share, _why_none(stage, name), "", "", ""
    kinds = (shares.shapley[name], shares.first[name], shares.total[name])
    return label, share, *map(_share, kinds), _together(shares, name)


def _why_none(stage: Stage, name: str) -> str:
    """Why a contributor has no share of the variance."""
    if name in {axis.name for axis in use_axes(stage)}:
        return _IN_USE
    return _SHARED if name in _shared(stage) else ""


def _share(found: Share) -> str:
    """A share, with two standard errors where they would show."""
    error = _ERRORS * found.standard_error
    return _rounded(found.value) + (f" ±{100.0 * error:.0f}" if error >= SMALL else "")


def _rounded(share: float) -> str:
    """A share in whole %, none of them "-0 %"."""
    return whole_percent(round(share, 2) + 0.0)


def _together(shares: VarianceShares, name: str) -> str:
    """What a contributor does only together with others, where that is beyond its error."""
    first, total = shares.first[name], shares.total[name]
    error = _ERRORS * math.hypot(first.standard_error, total.standard_error)
    together = shares.interaction[name]
    return whole_percent(together) if abs(together) >= max(SMALL, error) else ""


def _shared(stage: Stage) -> set[str]:
    """The contributors that members of a group have in common."""
    groups = {resistor.group for resistor in stage.resistors if resistor.group is not None}
    names = {axis(group) for group in groups for axis in (group_axis, batch_axis)}
    return names & {axis.name for axis in board_axes(stage)}


def _left_out(count: int, worst: Mapping[str, float], shares: VarianceShares) -> Iterator[str]:
    if not worst:
        yield "Nothing that varies moves it towards this side."
    if not shares.total:
        yield "There is no variance between boards."
    if shares.unsolved:
        yield f"{shares.unsolved} of {shares.boards} boards did not solve: variance is that of the others."
    if count:
        yield f"{count} more with less than {whole_percent(SMALL)} in either list."


def _notes(stage: Stage, *, together: bool) -> Iterator[str]:
    yield (
        "worst case: how far the worst limit moves back when this one alone is frozen at nominal; shares "
        "need not add up to 100 %."
    )
    yield (
        "variance: the share of what differs between boards (Shapley, adds up to 100 %); alone: what is gone "
        "when this one is known; total: what is left when all others are."
    )
    if together:
        yield "together: total less alone, what it does only together with others."
    if use_axes(stage):
        yield "in use: every board meets it; it moves the worst case, but no board differs by it."
    if _shared(stage):
        yield (
            "Members of a group are correlated: alone and total do not bound their share; what they have in "
            "common counts with them."
        )
