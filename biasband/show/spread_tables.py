"""The tables of a spread: mean, deviation and quantiles of every quantity, with their intervals."""

from __future__ import annotations

import math
from collections.abc import Iterator

from biasband.boards.estimates import Estimate, Figures
from biasband.boards.in_use import PLACES
from biasband.boards.sampling import QUANTILES
from biasband.boards.tally import BINS
from biasband.quantity import Kind
from biasband.show.table import NOT_KNOWN, Column, Row, Table, computed, difference
from biasband.signoff.spread_study import SpreadStudy

ESTIMATE_COLUMNS = (
    Column("quantity", "left"),
    Column("mean", spare=2),
    Column("sd", spare=3),
    *(Column(f"{100 * share:g} %") for share in QUANTILES),
    Column("±", "left", spare=1),
)

_TITLES = dict(
    zip(PLACES, ("At nominal use", "Each board's lowest in use", "Each board's highest in use"), strict=True)
)
_INTERVAL_DIGITS = 2


def estimate_tables(study: SpreadStudy) -> tuple[Table, ...]:
    """Mean, deviation and quantiles of every quantity at each place of use, with their intervals."""
    return tuple(
        Table(
            title,
            ESTIMATE_COLUMNS,
            tuple(
                _estimate_row(measure.name, measure.kind, getattr(study.estimates[name], place))
                for name, measure in study.job.measures.items()
            ),
            tuple(_estimate_notes(study)) if place == PLACES[-1] else (),
        )
        for place, title in _TITLES.items()
    )


def _estimate_row(name: str, kind: Kind, found: Figures) -> Row:
    quantiles = (computed(each.value, kind) for each in found.quantiles.values())
    deviation = difference(found.sd, kind)
    return Row((name, computed(found.mean.value, kind), deviation, *quantiles, _intervals(found, kind)))


def _intervals(found: Figures, kind: Kind) -> str:
    """How far each figure may be off; empty where boards do not differ."""
    if found.lowest == found.highest:
        return ""
    figures = {"mean": found.mean, **{f"{100 * share:g} %": each for share, each in found.quantiles.items()}}
    return ", ".join(f"{name} {_wider(each, kind)}" for name, each in figures.items())


def _wider(found: Estimate, kind: Kind) -> str:
    """The wider side of an interval, or the one side that there is, with its sign."""
    below, above = found.value - found.interval.low, found.interval.high - found.value
    sign = "+" if math.isnan(below) else "−" if math.isnan(above) else ""
    return _half(max((side for side in (below, above) if not math.isnan(side)), default=math.nan), kind, sign)


def _half(width: float, kind: Kind, sign: str = "") -> str:
    if math.isnan(width):
        return NOT_KNOWN
    return f"{sign}{difference(max(width, 0.0), kind, digits=_INTERVAL_DIGITS)}"


def _estimate_notes(study: SpreadStudy) -> Iterator[str]:
    if study.sampling == "plain":
        batches = ", boards counted in batches" if study.boards_per_batch > 1 else ""
        yield (
            "±: the wider side of the 95 % interval, of a mean by Student's t, of a quantile by order "
            f"statistics{batches}; with a + or −: too few boards for the other side."
        )
    else:
        yield f"±: the 95 % interval by Student's t over the {len(study.tallies)} scramblings."
    worst = max(_resolutions(study), default=None)
    if worst is not None:
        _, name, width = worst
        yield (
            f"Quantiles are counted in {BINS} bins between the corner limits and may be off by a bin, which "
            f"matters most for {name}: {width}."
        )


def _resolutions(study: SpreadStudy) -> Iterator[tuple[float, str, str]]:
    """How wide a bin is against the deviation, of what, and the bin's width."""
    for name, each in study.estimates.items():
        found: list[Figures] = [getattr(each, place) for place in PLACES]
        deviation = min((figures.sd for figures in found if figures.sd > 0.0), default=math.nan)
        if not math.isnan(deviation):
            kind, width = study.job.measures[name].kind, found[0].resolution
            bin_, sd = (_half(value, kind) for value in (width, deviation))
            yield width / deviation, name, f"{bin_} at a deviation of {sd}"
