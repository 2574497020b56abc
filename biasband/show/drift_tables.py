"""The tables of a drift: each quantity over ambient temperature, and where limits first fail."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Literal

from biasband.circuit.operating_point import Region
from biasband.margins.over_temperature import Failure
from biasband.quantity import Kind
from biasband.show.pictures import legend, off_axis
from biasband.show.prose import limit_on, limit_text
from biasband.show.table import (
    NOT_KNOWN,
    REGION_WORDS,
    Bound,
    Column,
    Passage,
    Picture,
    Row,
    Strip,
    Table,
    computed,
    difference,
    figure,
)
from biasband.signoff.drifting import Drift, DriftStudy, LimitDrift
from biasband.variation.sweep import without_point

DRIFT_COLUMNS = (Column("ambient"), Column("lowest"), Column("nominal"), Column("highest"))

FAILURE_COLUMNS = (
    Column("limit on", "left"),
    Column("limit"),
    Column("going colder", "left", toned=True),
    Column("going hotter", "left", toned=True),
)

_SHORT = 3
_UNKNOWN = {Region.RUNAWAY: "in thermal runaway", Region.UNSOLVED: "not solved"}


def swept(study: DriftStudy) -> Passage:
    """What was swept and how, and what the pictures' signs mean."""
    first, last = _degrees(study.temperatures[0]), _degrees(study.temperatures[-1])
    step, middle = difference(study.step, Kind.TEMPERATURE), _degrees(study.nominal_ambient)
    outside = "" if study.start == study.nominal_ambient else ", which lies outside"
    return Passage(
        "Swept",
        (
            f"ambient {first} to {last} in steps of {step}; nominal ambient {middle}{outside}",
            "lowest and highest: every combination of all other limits at that ambient, searched inside the "
            "limits too",
            legend(),
            *_regions(study),
        ),
    )


def _regions(study: DriftStudy) -> Iterator[str]:
    """Which temperatures have points that are not active."""
    for region in Region:
        if region is Region.ACTIVE:
            continue
        middle = [_degrees(T) for T, r in zip(study.temperatures, study.regions, strict=True) if r is region]
        if middle:
            yield f"nominal point {_word(region)} at {', '.join(middle)}"
        found = zip(study.temperatures, study.corners, strict=True)
        counts = [(T, each.regions.get(region, 0), each.count) for T, each in found]
        some = [f"{_degrees(T)} ({count} of {total})" for T, count, total in counts if count]
        if some:
            yield f"corners {_word(region)} at {', '.join(some)}"


def _word(region: Region) -> str:
    return _UNKNOWN.get(region, REGION_WORDS[region])


def drift_table(study: DriftStudy, name: str) -> Table:
    """One quantity over the sweep, with its picture."""
    drift = study.drifts[name]
    limits = [each.limit for each in study.limits if each.limit.quantity == name and not each.limit.standing]
    bounds = tuple(Bound(limit.bound, limit.lower) for limit in limits)
    strips = tuple(Strip(*each) for each in zip(drift.low, drift.nominal, drift.high, strict=True))
    picture = Picture(drift.quantity.kind, strips, bounds)
    rows = tuple(_drift_row(study, drift, bounds, place) for place in range(len(strips)))
    left_out = [figure(bound.value, drift.quantity.kind) for bound in off_axis(picture)]
    notes = [f"limits beyond the picture: {', '.join(left_out)}"] if left_out else []
    return Table(_title(study, drift), DRIFT_COLUMNS, rows, tuple(notes), picture=picture)


def _title(study: DriftStudy, drift: Drift) -> str:
    here = _slope(drift, drift.slope, drift.relative_slope)
    mean = _slope(drift, drift.mean_slope, drift.relative_mean_slope)
    where = _degrees(study.nominal_ambient)
    return f"{drift.quantity.name}: {here} at {where}, {mean} from end to end"


def _slope(drift: Drift, slope: float, relative: float) -> str:
    if math.isnan(slope):
        return NOT_KNOWN
    share = "" if math.isnan(relative) else f" ({100.0 * relative:+.{_SHORT}g} %/K)"
    return f"{difference(slope, drift.quantity.kind)}/K{share}"


def _drift_row(study: DriftStudy, drift: Drift, bounds: tuple[Bound, ...], place: int) -> Row:
    kind, corners = drift.quantity.kind, study.corners[place]
    low, middle, high = (float(values[place]) for values in (drift.low, drift.nominal, drift.high))
    missing = without_point(corners)
    below = [] if missing is None else [f"no worst case: {_word(missing)} in some corners"]
    if study.regions[place] in _UNKNOWN:
        below = [f"nominal point: {_word(study.regions[place])}", *below]
    broken = any(low < bound.value if bound.lower else high > bound.value for bound in bounds)
    cells = (_degrees(study.temperatures[place]), *(computed(value, kind) for value in (low, middle, high)))
    return Row(cells, tuple(below), "fail" if broken else "")


def failure_table(study: DriftStudy) -> Table:
    """Where each limit first fails; standing checks that hold are named below."""
    limits = sorted(study.limits, key=lambda each: _nearest(study, each))
    rows = [each for each in limits if not each.limit.standing or not _holds(each)] or limits
    start = _degrees(study.start)
    return Table(
        f"Where the worst case first fails, from {start} outwards",
        FAILURE_COLUMNS,
        tuple(_failure_row(each) for each in rows),
        tuple(_failure_notes(study)),
    )


def _failure_row(each: LimitDrift) -> Row:
    cells = (limit_on(each.limit), limit_text(each.limit), _failure(each.colder), _failure(each.hotter))
    return Row(cells, (), "" if _holds(each) else "fail")


def _failure(failure: Failure) -> str:
    where = _degrees(failure.temperature)
    words = {
        "holds": "holds",
        "fails": where,
        "fails at start": f"fails at {where} already",
        "runaway": f"{where}: {REGION_WORDS[Region.RUNAWAY]}",
        "unsolved": f"{where}: {REGION_WORDS[Region.UNSOLVED]}",
        "not known": NOT_KNOWN,
        "not swept": "not swept",
    }
    return words[failure.ending]


def _holds(each: LimitDrift) -> bool:
    return all(way.ending in ("holds", "not swept") for way in (each.colder, each.hotter))


def _nearest(study: DriftStudy, each: LimitDrift) -> float:
    """How far from the start the limit first fails [K]; what holds comes last."""
    return min(_distance(study, way) for way in (each.colder, each.hotter))


def _distance(study: DriftStudy, way: Failure) -> float:
    if way.ending == "not known":
        return -1.0
    return math.inf if math.isnan(way.temperature) else abs(way.temperature - study.start)


def _failure_notes(study: DriftStudy) -> Iterator[str]:
    yield "Held at the corners at each ambient, whatever a requirement is judged by."
    yield (
        f"What fails and holds again within a step of {difference(study.step, Kind.TEMPERATURE)} is not "
        "seen; --points makes it smaller."
    )
    holding = [each.limit.quantity for each in study.limits if each.limit.standing and _holds(each)]
    if holding:
        yield f"Standing checks that hold over the whole sweep: {', '.join(holding)}."
    missing = dict.fromkeys(check.missing for check in study.standing.not_made)
    if missing:
        yield f"Not checked, no limit given: {', '.join(missing)}."


def first_to_fail(study: DriftStudy) -> Passage:
    """What fails first in either direction, in one sentence each."""
    ways: tuple[Literal["colder"], Literal["hotter"]] = ("colder", "hotter")
    sentences = tuple(_first(study, way) for way in ways)
    fails = any(not _holds(each) for each in study.limits)
    return Passage("First to fail", sentences, "fail" if fails else "pass")


def _first(study: DriftStudy, way: Literal["colder", "hotter"]) -> str:
    ends: list[tuple[LimitDrift, Failure]] = [(each, getattr(each, way)) for each in study.limits]
    failing = [(each, end) for each, end in ends if end.ending not in ("holds", "not swept")]
    last = _degrees(study.temperatures[0] if way == "colder" else study.temperatures[-1])
    if ends and all(end.ending == "not swept" for _, end in ends):
        return f"going {way}: not swept"
    if not failing:
        return f"going {way}: nothing, {'down' if way == 'colder' else 'up'} to {last}"
    each, end = min(failing, key=lambda found: _distance(study, found[1]))
    limit = f"{limit_on(each.limit)} {limit_text(each.limit)}".rstrip()
    return f"going {way}: {limit}, {_failure(end)}"


def _degrees(temperature: float) -> str:
    return figure(float(temperature), Kind.TEMPERATURE)
