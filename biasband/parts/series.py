"""Preferred series, and the step from any value to one that can be bought.

A series is one decade of mantissas, repeated over all decades. A place in it is an integer: 0 is
the first mantissa of the decade 1 … 10, and each step up or down is the next preferred value.
Everything is decided in decimal and turned into a double last, so that 4.7 in the decade of 10³ is
4700.0 and not a product that is nearly that.
"""

from __future__ import annotations

from bisect import bisect_left, bisect_right
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from math import isnan, nan, sqrt

from biasband.errors import UsageError
from biasband.stage import Series as Series

SMALLEST, LARGEST = 1e-200, 1e200
MOST_STEPS = 100
"""What may be snapped, and how far around it: no neighbour leaves the range of a double."""


@dataclass(frozen=True, kw_only=True)
class Snap:
    """A value and the preferred values around it, all in the value's own unit.

    `below` and `above` enclose `value` and coincide with it where it is itself preferred; `chosen`
    is the nearer one by ratio; `error` is chosen / value − 1.
    """

    series: str
    value: float
    below: float
    above: float
    chosen: float
    error: float


def nearest(series: Series, value: float) -> Snap:
    """Find the preferred value nearest to `value` by ratio.

    By ratio means that the two neighbours change places at their geometric mean, √(below · above),
    because tolerances, and what they do to a stage, are ratios too. Near a midpoint this can differ
    from nearest by difference, whose border is the arithmetic mean. On the border itself the lower
    value is chosen. `value` is taken as the shortest decimal that reads back as the same double.

    Raises UsageError where `value` is not a number from 1e-200 to 1e200.

    Worked case, E12: 5.0 kΩ lies between 4.7 and 5.6 kΩ, their geometric mean is 5.13 kΩ, so 4.7 kΩ
    is chosen and the error is −6 %.
    Source: common practice (the series: IEC 60063).
    """
    exact = _exact(value)
    below = _place_below(series, exact)
    above = below if series.exact_at(below) == exact else below + 1
    chosen = series.value_at(_nearest_place(series, exact))
    return Snap(
        series=series.name,
        value=float(value),
        below=series.value_at(below),
        above=series.value_at(above),
        chosen=chosen,
        error=chosen / float(value) - 1.0,
    )


def nearest_among(values: Sequence[float], value: float, *, name: str) -> Snap:
    """Find which of some values, ascending, is nearest to `value` by ratio; `name` says what they are.

    As `nearest`, but for a list that has an end: `below` is NaN before its first value, `above` behind its
    last. Raises UsageError where there are no values, or `value` is not from 1e-200 to 1e200.

    Worked case: of 1.0, 2.2 and 4.7 kΩ, 3.3 kΩ is nearest to 4.7 kΩ, since √(2.2 · 4.7) = 3.22.
    """
    exact = _exact(value)
    if not values:
        raise UsageError(f"{name}: there are no values to choose from")
    place = bisect_left(values, float(value))
    above = values[place] if place < len(values) else nan
    below = above if above == value else values[place - 1] if place else nan
    ends = [Fraction(repr(end)) for end in (below, above) if not isnan(end)]
    chosen = float(ends[0] if len(ends) == 1 or Fraction(exact) ** 2 <= ends[0] * ends[1] else ends[1])
    return Snap(
        series=name, value=float(value), below=below, above=above, chosen=chosen,
        error=chosen / float(value) - 1.0,
    )  # fmt: skip


def neighbours(series: Series, value: float, *, steps: int) -> tuple[float, ...]:
    """List the nearest preferred value and `steps` more on each side, ascending.

    Raises UsageError where `steps` is not from 0 to 100, or `value` not from 1e-200 to 1e200.

    Worked case, E12: 5.0 kΩ, one step: 3.9, 4.7 and 5.6 kΩ.
    """
    if not 0 <= steps <= MOST_STEPS:
        raise UsageError(f"steps must be from 0 to {MOST_STEPS}, not {steps}")
    centre = _nearest_place(series, _exact(value))
    return tuple(series.value_at(place) for place in range(centre - steps, centre + steps + 1))


def worst_error(series: Series) -> float:
    """Compute the largest |chosen / value − 1| that `nearest` can make in this series.

    √(above / below) − 1 for the widest gap, reached just above its geometric mean.

    Worked case, E3: the widest gap is 1.0 … 2.2, and √2.2 − 1 = 48.32 %.
    """
    places = range(len(series.mantissas))
    widest = max(series.exact_at(place + 1) / series.exact_at(place) for place in places)
    return sqrt(widest) - 1.0


def _exact(value: float) -> Decimal:
    if not SMALLEST <= value <= LARGEST:  # NaN fails this too
        raise UsageError(
            f"a value to snap must be above 0 and finite ({SMALLEST:g} … {LARGEST:g}), not {value:g}"
        )
    return Decimal(repr(float(value)))


def _place_below(series: Series, exact: Decimal) -> int:
    """The place of the largest preferred value that is not above `exact`."""
    decade = exact.adjusted()
    index = bisect_right(series.mantissas, exact.scaleb(-decade)) - 1
    return decade * len(series.mantissas) + index


def _nearest_place(series: Series, exact: Decimal) -> int:
    below = _place_below(series, exact)
    # Fractions: the square has up to 34 digits, more than a Decimal product keeps.
    lower, upper = Fraction(series.exact_at(below)), Fraction(series.exact_at(below + 1))
    return below if Fraction(exact) ** 2 <= lower * upper else below + 1
