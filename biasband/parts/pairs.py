"""Two preferred values in series or in parallel, where one alone does not come near enough.

The search is exact. Every value is the decimal that it is written as, all of them are whole numbers
of one small unit, and sums, products and comparisons of whole numbers and fractions do not round.
It needs no table of all pairs: beside a given first part the total rises with the second, so only
the neighbours of the second part that would be exactly right can be the best.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Collection, Iterable, Iterator, Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from heapq import nsmallest
from itertools import pairwise
from math import inf, lcm, sqrt
from typing import Literal, NamedTuple

from biasband.errors import UsageError
from biasband.parts.series import Series
from biasband.quantity import Kind, format_exact

Connection = Literal["series", "parallel"]

SMALLEST, LARGEST = 1e-4, 1e12
"""[Ω] What may be a part or a wanted value: as far as the letter code reaches."""
MOST_PAIRS = 100


@dataclass(frozen=True, kw_only=True)
class Pair:
    """Two resistors [Ω] that act as one: `first` >= `second`, together `total`, wanted `value`.

    `error` is total / value − 1. `first_share` and `second_share`, 1 together, say how much each
    part decides: series R / total, parallel total / R. The same figure is the part's share of the
    pair's power and the sensitivity d ln total / d ln R.
    `tolerance_low` (at most 0) and `tolerance_high` are the worst case, total / nominal total − 1
    with both parts at their limits; `rss_low` and `rss_high` the root of the summed squares of what
    each part does alone, moved in full, and never outside the worst case. `tempco` [1/K] is the
    worst case, both parts drifting the same way; `tempco_rss` [1/K] takes them as independent.
    Parasitic inductance, capacitance and wiring are not modelled.
    """

    first: float
    second: float
    connection: Connection
    value: float
    total: float
    error: float
    first_share: float
    second_share: float
    tolerance_low: float
    tolerance_high: float
    rss_low: float
    rss_high: float
    tempco: float
    tempco_rss: float


def pairs(
    series: Series,
    value: float,
    *,
    tolerance: float,
    tempco: float = 0.0,
    count: int = 5,
    lowest: float = 1.0,
    highest: float = 10e6,
) -> tuple[Pair, ...]:
    """Find the `count` pairs of a series that come nearest to `value` [Ω], the best first.

    Searches every preferred value from `lowest` to `highest` [Ω]; all parts have the same
    `tolerance` (a fraction) and `tempco` [1/K], both ±. Ranking and errors as in `pairs_among`.

    Worked case, E12: 5 kΩ is 10 kΩ ∥ 10 kΩ, exactly; 3.9 kΩ is the single value, but also
    1.2 kΩ + 2.7 kΩ.
    Source: Ohm's law; common practice (the series: IEC 60063).
    """
    _require(
        (
            SMALLEST <= lowest <= highest <= LARGEST,
            f"lowest and highest must ascend from {SMALLEST:g} to {LARGEST:g} Ω, "
            f"not {lowest:g} and {highest:g} Ω",
        ),
        *_rules(value, count),
    )
    values = _between(series, lowest, highest)
    _require((bool(values), f"{series.name} has no value from {lowest:g} to {highest:g} Ω"))
    return pairs_among(values, value, tolerance=tolerance, tempco=tempco, count=count)


def pairs_among(
    values: Sequence[float],
    value: float,
    *,
    tolerance: float | Sequence[float],
    tempco: float | Sequence[float] = 0.0,
    count: int = 5,
    alone: Collection[float] = (),
) -> tuple[Pair, ...]:
    """Find the `count` pairs of the given values [Ω] that come nearest to `value`, the best first.

    `values` ascend, none twice; a value may stand in a pair with itself, but for those in `alone`, of which
    there is one piece. `tolerance` (a fraction)
    and `tempco` [1/K], both ±, are one for all values or one for each. Both connections compete, and
    are ranked by |ln(total / value)|. Ties: the more equal pair (an equal one, of a single value,
    before all), then the lower total, then series. Each value is taken as the shortest decimal that
    reads back as the same double. Fewer than `count` where there are no more pairs.

    Raises UsageError with everything that is wrong: `value` or one of `values` not from 1e-4 to
    1e12 Ω, `values` not ascending, `count` not from 1 to 100, tolerances not from 0 to below 1,
    tempcos negative or infinite, or not as many as values; then, where `value` lies outside what
    pairs reach: from half the first value to twice the last.

    Worked case: among 100 and 300 Ω, 75 Ω is 300 Ω ∥ 100 Ω; at ±5 % each the pair has ±5 %, and
    100 Ω takes 3/4 of the power.
    Source: Ohm's law; common practice.
    """
    tolerances, tempcos = _for_each(tolerance, values), _for_each(tempco, values)
    _require(*_rules(value, count), *_part_rules(values, tolerances, tempcos))
    _require(_reach_rule(values, value))
    parts = [_Part(*map(_exact, each)) for each in zip(values, tolerances, tempcos, strict=True)]
    wanted = _exact(value)
    best = _best([part.ohms for part in parts], wanted, count, {_exact(each) for each in alone})
    return tuple(_pair(parts[each.first], parts[each.second], each.parallel, wanted) for each in best)


class _Part(NamedTuple):
    """A value [Ω], its tolerance and its tempco [1/K], exactly."""

    ohms: Fraction
    tolerance: Fraction
    tempco: Fraction


class _Candidate(NamedTuple):
    """A pair in the search; `first` and `second` are places among the values.

    `off` is the larger of total / value and value / total, which ranks as |ln(total / value)| does,
    rounded once. Rounding keeps order, so that it may merge ranks but never swaps two.
    """

    off: float
    first: int
    second: int
    parallel: bool


def _best(
    values: Sequence[Fraction], wanted: Fraction, count: int, alone: Collection[Fraction]
) -> list[_Candidate]:
    """The best pairs in order: all that could be among them by rounded rank, then by exact rank."""
    candidates = list(_candidates(values, wanted, keep=count, alone=alone))
    limit = max(nsmallest(count, (each.off for each in candidates)), default=inf)

    def rank(each: _Candidate) -> tuple[Fraction, Fraction, Fraction, bool]:
        first, second = values[each.first], values[each.second]
        total = _total(first, second, each.parallel)
        # No two pairs agree in all four, so that the order is one and the same in every run.
        return (max(total / wanted, wanted / total), first / second, total, each.parallel)

    return nsmallest(count, (each for each in candidates if each.off <= limit), key=rank)


def _candidates(
    values: Sequence[Fraction], wanted: Fraction, *, keep: int, alone: Collection[Fraction]
) -> Iterator[_Candidate]:
    """All pairs that can be among the best `keep`: for each first part, `keep` seconds on each side.

    A second part is never larger than the first, so that each pair comes up once, and smaller than one that
    is `alone`.
    """
    units = lcm(wanted.denominator, *(each.denominator for each in values))
    target, whole = int(wanted * units), [int(each * units) for each in values]
    for place, first in enumerate(whole):
        end = place if values[place] in alone else place + 1
        for parallel in (False, True):
            above = bisect_right(whole, _complement(first, target, parallel), hi=end)
            for other in range(max(above - keep, 0), min(above + keep, end)):
                yield _Candidate(_off(first, whole[other], target, parallel), place, other, parallel)


def _off(first: int, second: int, wanted: int, parallel: bool) -> float:
    total, asked = first + second, wanted
    if parallel:
        total, asked = first * second, wanted * total
    return max(total, asked) / min(total, asked)  # Python rounds a quotient of integers once


def _complement(first: int, wanted: int, parallel: bool) -> int:
    """The largest whole second part, not above `first`, with which the total is not above `wanted`.

    Negative where there is none. first·x / (first + x) <= wanted is (first − wanted)·x <= first·wanted.
    """
    if not parallel:
        return min(first, wanted - first)
    return first if first <= wanted else min(first, first * wanted // (first - wanted))


def _total(first: Fraction, second: Fraction, parallel: bool) -> Fraction:
    return first * second / (first + second) if parallel else first + second


def _pair(first: _Part, second: _Part, parallel: bool, value: Fraction) -> Pair:
    total = _total(first.ohms, second.ohms, parallel)
    share = total / first.ohms if parallel else first.ohms / total
    drifts = (share * first.tempco, (1 - share) * second.tempco)
    # The total rises with either part, so that its extremes are where both go the same way.
    low, high = (float(_change(first, second, parallel, by=by)) for by in ((-1, -1), (1, 1)))
    lows, highs = (
        _root_of_squares(_change(first, second, parallel, by=by) for by in ((side, 0), (0, side)))
        for side in (-1, 1)
    )
    return Pair(
        first=float(first.ohms),
        second=float(second.ohms),
        connection="parallel" if parallel else "series",
        value=float(value),
        total=float(total),
        error=float(total / value - 1),
        first_share=float(share),
        second_share=float(1 - share),
        tolerance_low=low,
        tolerance_high=high,
        rss_low=max(-lows, low),
        rss_high=min(highs, high),
        tempco=float(sum(drifts)),
        tempco_rss=_root_of_squares(drifts),
    )


def _change(first: _Part, second: _Part, parallel: bool, *, by: tuple[int, int]) -> Fraction:
    """The relative change of the total with each part at its low (−1), nominal (0) or high (1) value."""
    one, other = (
        part.ohms * (1 + side * part.tolerance) for part, side in zip((first, second), by, strict=True)
    )
    return _total(one, other, parallel) / _total(first.ohms, second.ohms, parallel) - 1


def _root_of_squares(terms: Iterable[Fraction]) -> float:
    return sqrt(sum(term**2 for term in terms))


def _between(series: Series, lowest: float, highest: float) -> tuple[float, ...]:
    """Every preferred value from `lowest` to `highest`, ascending."""
    start, stop = (Decimal(repr(float(each))).adjusted() for each in (lowest, highest))
    places = range(start * len(series.mantissas), (stop + 1) * len(series.mantissas))
    return tuple(each for each in map(series.value_at, places) if lowest <= each <= highest)


def _exact(number: float) -> Fraction:
    return Fraction(repr(float(number)))


def _for_each(figure: float | Sequence[float], values: Sequence[float]) -> Sequence[float]:
    return figure if isinstance(figure, Sequence) else [figure] * len(values)


_Rule = tuple[bool, str]
"""Whether it holds, and what to say where it does not."""


def _require(*rules: _Rule) -> None:
    broken = [said for holds, said in rules if not holds]
    if broken:
        raise UsageError("; ".join(broken))


def _possible(ohms: float) -> bool:
    return SMALLEST <= ohms <= LARGEST  # NaN fails this too


def _rules(value: float, count: int) -> tuple[_Rule, ...]:
    return (
        (_possible(value), f"the value must be from {SMALLEST:g} to {LARGEST:g} Ω, not {value:g} Ω"),
        (1 <= count <= MOST_PAIRS, f"count must be from 1 to {MOST_PAIRS}, not {count}"),
    )


def _part_rules(
    values: Sequence[float], tolerances: Sequence[float], tempcos: Sequence[float]
) -> tuple[_Rule, ...]:
    return (
        (bool(values), "at least one value is needed to make pairs of"),
        (all(map(_possible, values)), f"every part must be from {SMALLEST:g} to {LARGEST:g} Ω"),
        (all(low < high for low, high in pairwise(values)), "the values must ascend, none twice"),
        (all(0 <= each < 1 for each in tolerances), "every tolerance must be from 0 to below 1 (100 %)"),
        (all(0 <= each < inf for each in tempcos), "every tempco must be 0 or above, and finite"),
        (
            len(tolerances) == len(tempcos) == len(values),
            f"{len(values)} values need as many tolerances and tempcos, "
            f"not {len(tolerances)} and {len(tempcos)}",
        ),
    )


def _reach_rule(values: Sequence[float], value: float) -> _Rule:
    low, high = (format_exact(each, Kind.RESISTANCE) for each in (values[0] / 2, 2 * values[-1]))
    return (
        values[0] <= 2 * value and value <= 2 * values[-1],
        f"pairs of these values reach from {low} to {high}, not {format_exact(value, Kind.RESISTANCE)}",
    )
