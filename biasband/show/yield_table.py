"""Yields of a spread beside the share of time, and what the boards say to RSS."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping

from biasband.circuit.operating_point import Region
from biasband.show.focus import limit_label
from biasband.show.prose import limit_text, rss_most, rss_words
from biasband.show.table import OUTCOME_TONES, Column, Passage, Report, Row, Table, yield_percent
from biasband.signoff.spread_study import Held, SpreadStudy
from biasband.stage import Requirement

YIELD_COLUMNS = (
    Column("limit on", "left"),
    Column("limit"),
    Column("boards"),
    Column("95 % interval", spare=1),
    Column("at least", toned=True),
    Column("time"),
)
_JUDGED_ON_PLAIN = ("95 % interval", "at least")
"""Columns that quasi-random boards leave out."""


def yield_table(study: SpreadStudy) -> Report:
    """How many boards hold each limit, and all of them; nothing where there are no requirements."""
    if not study.limits:
        return ()
    requirements = {each.id: each for each in study.job.stage.requirements}
    rows = [
        _yield_row(study, held, limit_label(limit), limit_text(limit), requirements[limit.id])
        for limit, held in zip(study.limits, study.yields, strict=True)
    ]
    rows.append(_yield_row(study, study.joint_yield, "all of them", "", None))
    keeps = [k for k, column in enumerate(YIELD_COLUMNS) if _kept(study, column)]
    return (
        Table(
            "Yield",
            tuple(YIELD_COLUMNS[k] for k in keeps),
            tuple(Row(tuple(row.cells[k] for k in keeps), row.below, row.tone) for row in rows),
            tuple(_yield_notes(study)),
        ),
    )


def _kept(study: SpreadStudy, column: Column) -> bool:
    return study.sampling == "plain" or column.heading not in _JUDGED_ON_PLAIN


def _yield_row(study: SpreadStudy, held: Held, label: str, limit: str, of: Requirement | None) -> Row:
    interval = f"{yield_percent(held.interval.low)} to {yield_percent(held.interval.high, up=True)}"
    shares = (yield_percent(held.boards), interval, yield_percent(held.bound), yield_percent(held.time))
    cells = (label, limit, *shares)
    if of is None or of.judged_by != "yield":
        return Row(cells)
    wanted = f"judged by yield, at least {yield_percent(of.yield_at_least)}"
    if math.isnan(held.bound):
        return Row(cells, (f"{wanted}: not on quasi-random boards",))
    outcome = _outcome(study, held, of)
    shown = outcome if outcome == "pass" else outcome.upper()
    return Row(cells, (f"{wanted}: {shown}",), OUTCOME_TONES[outcome])


def _outcome(study: SpreadStudy, held: Held, of: Requirement) -> str:
    """Unsolved boards count as failing, and may not be."""
    if held.bound >= of.yield_at_least:
        return "pass"
    return "inconclusive" if study.total.regions[Region.UNSOLVED] else "fail"


def _yield_notes(study: SpreadStudy) -> Iterator[str]:
    counted = ", counted in batches" if study.boards_per_batch > 1 else ""
    yield "boards: those that hold the limit at every point of use."
    if study.sampling == "plain":
        yield (
            f"95 % interval: two-sided, Clopper–Pearson{counted}; at least: the one-sided 95 % lower bound, "
            "by which a yield is judged."
        )
    else:
        yield "Informative only: a yield is judged on plain draws, so that no interval stands here."
    yield (
        "time: moments in use, one at random for each board, at which it is held: ambient and supplies "
        "uniform between their limits, ripple a sine. A board that fails on every hot day still holds it "
        "most of the time."
    )


def rss_passage(study: SpreadStudy) -> Report:
    """What RSS assumes, and what the boards say to that; nothing where there are no requirements."""
    inside = inside_rss(study)
    if not inside:
        return ()
    batch, plain = study.boards_per_batch, study.sampling == "plain"
    most = {name: rss_most(share, study.boards, boards_per_batch=batch) for name, share in inside.items()}
    return (Passage("", (rss_words(inside, most if plain else {}),)),)


def inside_rss(study: SpreadStudy) -> Mapping[str, float]:
    """The share of boards inside each RSS interval; NaN where there is none."""
    return {
        name: math.nan if math.isnan(study.rss[name].low) or math.isnan(study.rss[name].high) else share
        for name, share in study.inside_rss.items()
    }
