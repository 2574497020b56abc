"""Stopping: when a run has drawn enough for the figures that are asked of it.

Two rules. A yield is good enough when its interval is narrow. Means, deviations and coverage
intervals are good enough when the average over sequences of draws moves by less than the digits that
will be printed (JCGM 101:2008, "Propagation of distributions using a Monte Carlo method", 7.9; its
clauses are cited from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from biasband.boards.intervals import yield_interval
from biasband.circuit.scenarios import Array
from biasband.errors import UsageError

LEAST_DRAWS = 10_000
"""No sequence is shorter (JCGM 101:2008, 7.9.4 b, memory)."""

DRAWS_BEYOND = 100
"""How many draws of a sequence are to lie outside the coverage interval (the same clause)."""

ROUNDING = 1e-12
"""Relative: sums of doubles differ by so much, so no figure can be asked to be stabler."""


def numerical_tolerance(uncertainty: float, digits: int) -> float:
    """Find what a standard uncertainty may be off by when `digits` of its figures count, 1 or 2.

    With u = c·10^l, c a whole number of that many digits, `δ = ½·10^l` [u's own unit]. Rounded first: 9.97
    is 10 to two digits, so δ is 0.5. Worked cases (the standard's own, memory): 0.00035 g to two digits:
    35·10⁻⁵, δ = 0.000005 g; to one digit 4·10⁻⁴, δ = 0.00005 g; 2 K to one digit: δ = 0.5 K.
    Zero gives zero; NaN and infinity give NaN. Raises UsageError for a negative uncertainty, or other digits.
    Source: JCGM 101:2008, 7.9.2.
    """
    faults = [] if digits in (1, 2) else [f"digits: 1 or 2; read {digits}"]
    if uncertainty < 0.0:
        faults.append(f"uncertainty: from 0; read {uncertainty:g}")
    if faults:
        raise UsageError("\n".join(faults))
    if uncertainty == 0.0 or not math.isfinite(uncertainty):
        return uncertainty * 0.0
    power = int(f"{uncertainty:.{digits - 1}e}".partition("e")[2]) - (digits - 1)
    return float(f"0.5e{power}")


def least_sequence(coverage: float) -> int:
    """Find how many draws a sequence takes at least, for an interval that covers this share of draws.

    The least whole number from `100/(1 − coverage)`, and never below 10 000; reckoned in the decimals that
    were written, since 1 − 0.9999 in doubles is a little less than 1e-4. Worked cases: 95 %: 10 000;
    99.73 %: 100/0.0027 = 37 037.04, so 37 038. Raises UsageError unless 0 < coverage < 1.
    Source: JCGM 101:2008, 7.9.4 b.
    """
    if not 0.0 < coverage < 1.0:
        raise UsageError(f"coverage: above 0 and below 1; read {coverage:g}")
    return max(LEAST_DRAWS, math.ceil(DRAWS_BEYOND / (1 - Fraction(str(float(coverage))))))


@dataclass(frozen=True)
class SequenceFigures:
    """What each of h sequences of draws says of Q quantities: shapes (h, Q) [the quantity's own unit].

    `estimate` is the mean y, `uncertainty` the standard deviation u(y), `low` and `high` the ends of the
    coverage interval, each from one sequence alone. Sequences are independent and of one length.
    """

    estimate: Array
    uncertainty: Array
    low: Array
    high: Array

    @property
    def sequences(self) -> int:
        """How many there are: h."""
        return len(self.estimate)


@dataclass(frozen=True)
class Stable:
    """How steady Q quantities are: shapes (Q,) [the quantity's own unit].

    `deviation` is twice the standard deviation of the average over sequences, the largest of the four
    figures, `tolerance` what it may be; NaN where the quantity has not solved everywhere or there are
    not two sequences, and then it is not stable.
    """

    deviation: Array
    tolerance: Array

    @property
    def each(self) -> NDArray[np.bool_]:
        """Which quantities are stable, shape (Q,)."""
        return self.deviation <= self.tolerance

    @property
    def all(self) -> bool:
        """Whether the run may stop: every quantity is stable."""
        return bool(np.all(self.each))


def stable(figures: SequenceFigures, uncertainty: Array, *, digits: int) -> Stable:
    """Judge by h sequences whether more draws would still change the digits that count.

    Stable: for y, u(y), y_low and y_high alike `2s ≤ δ`, `s² = Σ(y_r − ȳ)²/(h(h − 1))` over the
    sequences, δ the numerical tolerance of `uncertainty`, u(y) over all h·M draws, shape (Q,). What
    does not vary is stable: 2s is zero, or no more than rounding makes it. Two sequences are the least;
    with so few s is itself uncertain and a run may stop by luck: of 200 runs on the sum of four N(0, 1)
    to two digits 47 stopped at two, and an end was more than δ off in about one of ten (measured).
    Worked case: estimates 1.0, 1.1 and 1.2, all else the same in each: s = 0.0577, 2s = 0.115;
    u = 2.0 to one digit: δ = 0.5, stable; to two digits: δ = 0.05, not yet.
    Raises UsageError for a negative uncertainty, or for digits other than 1 or 2.
    Source: JCGM 101:2008, 7.9.4.
    """
    table = np.stack([getattr(figures, each.name) for each in fields(figures)])
    tolerance = np.array([numerical_tolerance(float(u), digits) for u in uncertainty])
    return Stable(
        deviation=2.0 * _deviation_of_average(table).max(axis=0),
        tolerance=np.maximum(tolerance, ROUNDING * np.abs(table).max(axis=(0, 1), initial=0.0)),
    )


def _deviation_of_average(table: Array) -> Array:
    """The standard deviation of an average over sequences: (4, h, Q) → (4, Q); NaN for fewer than two."""
    count = table.shape[1]
    if count < 2:
        return np.full((table.shape[0], table.shape[2]), np.nan)
    with np.errstate(invalid="ignore"):  # an infinite figure has no deviation: NaN, not stable
        return np.asarray(np.std(table, axis=1, ddof=1) / np.sqrt(count))


def narrow(held: int, boards: int, half_width: float, *, boards_per_batch: int = 1) -> bool:
    """Tell whether a yield is known to ± `half_width`: its two-sided 95 % interval reaches no further.

    Both ways are measured from held/boards, since Clopper and Pearson's interval is not symmetric. With
    no board there is no yield: False. A run that looks after every chunk decides by the width only,
    never by which side of a limit the yield is on. Worked case: 5 of 10 000 fail, 0.0162…0.1166 %
    around 0.05 %: known to ± 0.07 %, not to ± 0.06 %.
    Raises UsageError unless half_width is above 0, and as `yield_interval` does.
    """
    if not half_width > 0.0:
        raise UsageError(f"half_width: above 0; read {half_width:g}")
    interval = yield_interval(held, boards, boards_per_batch=boards_per_batch)
    if boards == 0:
        return False
    found = held / boards
    return max(interval.high - found, found - interval.low) <= half_width
