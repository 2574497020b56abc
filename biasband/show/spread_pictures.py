"""The histograms of a spread: limits, corners and RSS beside the boards, so that margin is a distance."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from biasband.boards.sampling import QUANTILES
from biasband.boards.summary import NAN
from biasband.margins.limits import HeldLimit
from biasband.show.focus import Focus, focuses
from biasband.show.histogram import legend, picture_of
from biasband.show.pictures import off_axis
from biasband.show.prose import limit_text
from biasband.show.table import Bound, Histogram, Panel, Strip, figure
from biasband.signoff.spread_study import SpreadStudy


def histograms(study: SpreadStudy) -> tuple[Histogram, ...]:
    """A histogram of every quantity that a requirement is about, of the output where there is none."""
    sides: dict[str, list[Focus]] = {}
    for focus in focuses(study):
        sides.setdefault(focus.measure.name, []).append(focus)
    ordered = (sorted(each, key=lambda side: not side.lower) for each in sides.values())
    first, *others = (_histogram(study, each) for each in ordered)
    return replace(first, notes=(legend(), *first.notes)), *others


def _histogram(study: SpreadStudy, sides: Sequence[Focus]) -> Histogram:
    measure = sides[0].measure
    limits = [limit for side in sides for _, limit in side.limits]
    corner, summed = study.corners.ranges[measure.name], study.rss[measure.name]
    found = Histogram(
        title=f"Boards by {measure.name}: {', '.join(map(_short, limits)) or 'no limits'}",
        kind=measure.kind,
        panels=tuple(_panel(study, side) for side in sides),
        strips={
            "RSS": Strip(summed.low, NAN, summed.high),
            "corners": Strip(corner.low.value, NAN, corner.high.value),
        },
        bounds=tuple(dict.fromkeys(Bound(limit.bound, limit.lower) for limit in limits)),
    )
    return replace(found, notes=tuple(_notes(found, limits)))


def _panel(study: SpreadStudy, side: Focus) -> Panel:
    found = study.summary(side.measure.name, side.place)
    low, middle, high = (side.figures(study).quantiles[share].value for share in QUANTILES)
    panel = Panel(side.words, found, Strip(low, middle, high))
    if side.tightest is None:
        return panel
    row, limit = side.tightest
    beyond = found.solved - int(study.total.held[row, 0])
    return replace(panel, bound=Bound(limit.bound, limit.lower), beyond=beyond)


def _short(limit: HeldLimit) -> str:
    return f"{limit.id} {limit_text(limit)}"


def _notes(histogram: Histogram, limits: Sequence[HeldLimit]) -> Iterator[str]:
    far = [figure(bound.value, histogram.kind) for bound in off_axis(picture_of(histogram))]
    if far:
        yield f"limits beyond the picture: {', '.join(far)}"
    if any(limit.bound != limit.limit for limit in limits):
        yield "The stage inverts: a limit on the magnitude stands at the value below zero."
