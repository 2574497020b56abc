"""Intervals: how far each figure of a sample may lie from what all boards would show.

Each kind of figure has its own interval, and they are never mixed: a share of boards has Clopper–
Pearson's, a quantile order statistics, a mean Student's t, and a figure of quasi-random points
Student's t over independent scramblings.

Boards of one batch are dependent, at worst all alike, so boards count in batches: N boards, n to a
batch, show as much as B = N/n independent ones, of which k/n held where k boards did. Beta and t
distributions take such fractions. That is exact where the boards of a batch are all alike, and
conservative where they are not (a design effect of n, the largest there is; Kish, "Survey Sampling",
1965, memory).
"""

from __future__ import annotations

import functools
import math
from bisect import bisect_left, bisect_right
from collections.abc import Sequence
from dataclasses import dataclass

from biasband.errors import UsageError


@dataclass(frozen=True)
class Between:
    """A confidence interval [the figure's own unit], 95 % unless asked otherwise; NaN where there is none."""

    low: float
    high: float


@dataclass(frozen=True)
class Ranks:
    """The boards that bound a quantile, counted from 1 at the lowest; None where no board reaches so far."""

    low: int | None
    high: int | None


NOWHERE = Between(math.nan, math.nan)
"""The interval of a figure that too few boards or scramblings stand behind."""


def yield_interval(held: int, boards: int, *, boards_per_batch: int = 1, confidence: float = 0.95) -> Between:
    """Bound the share of all boards that hold, `held` of `boards` having done so; two-sided, equal tails.

    `low = I⁻¹(α/2; k, f + 1)` and `high = I⁻¹(1 − α/2; k + 1, f)`, I the regularised incomplete beta
    function, k held and f failed, both counted in batches, α = 1 − confidence. Boards are plain random draws.
    No board at all shows nothing: 0 to 1. Worked case: 5 of 10 000 fail: 0.0162 % to 0.1166 %.
    Raises UsageError where a count, the batch or the confidence is out of its range.
    Source: Clopper & Pearson, "The use of confidence or fiducial limits", Biometrika 26 (1934).
    """
    _require(
        _confidence_fault(confidence), _batch_fault(boards_per_batch), _boards_fault(boards),
        "" if 0 <= held <= boards else f"held: from 0 to {boards}, the boards; read {held}",
    )  # fmt: skip
    tail = (1.0 - confidence) / 2.0
    passed, failed = held / boards_per_batch, (boards - held) / boards_per_batch
    return Between(_least_share(passed, failed, tail), _greatest_share(passed, failed, tail))


def yield_bound(held: int, boards: int, *, boards_per_batch: int = 1, confidence: float = 0.95) -> float:
    """The one-sided lower bound of a yield, by which it is judged: `held` of `boards` passed.

    As `yield_interval`, all of 1 − confidence on this side.
    """
    return _least_share(held / boards_per_batch, (boards - held) / boards_per_batch, 1.0 - confidence)


@functools.lru_cache(maxsize=256)
def allowed_failures(
    boards: int, required: float, *, boards_per_batch: int = 1, confidence: float = 0.95
) -> int:
    """How many boards may fail while the bound still reaches the required yield; −1: not even none."""
    from scipy.special import betainc

    def too_many(failed: int) -> bool:
        # The bound reaches `required` when P(X >= held) at that yield is at most 1 - confidence.
        held = (boards - failed) / boards_per_batch
        return bool(betainc(held, failed / boards_per_batch + 1.0, required) > 1.0 - confidence)

    return bisect_left(range(boards), True, key=too_many) - 1


def _least_share(held: float, failed: float, tail: float) -> float:
    """The share at which this many or more would hold with probability `tail`."""
    from scipy.special import betaincinv

    return float(betaincinv(held, failed + 1.0, tail)) if held > 0.0 else 0.0


def _greatest_share(held: float, failed: float, tail: float) -> float:
    """The share at which this many or fewer would hold with probability `tail`."""
    from scipy.special import betainccinv

    return float(betainccinv(held + 1.0, failed, tail)) if failed > 0.0 else 1.0


def quantile_ranks(
    boards: int, share: float, *, boards_per_batch: int = 1, confidence: float = 0.95
) -> Ranks:
    """Find which boards, sorted by a figure, bound the value that `share` of all boards do not exceed.

    Whatever the distribution: the number K of draws at or below the quantile is binomial, so the low
    rank is the greatest r with `P(K ≤ r − 1) ≤ α/2`, the high rank the least s with `P(K ≥ s) ≤ α/2`
    (Wilks, "Determination of sample sizes for setting tolerance limits", Ann. Math. Stat. 12, 1941;
    David & Nagaraja, "Order Statistics", 3rd ed., 7.1; memory). Ties only make it surer. Boards are
    plain random draws, all of them solved: what did not solve has no rank.

    In batches K/n of B counts, and the ranks are rounded outwards to whole boards. So a rank is where
    `yield_interval`, the share being a yield, stops to contain it; where the boards of a batch are
    all alike it is a board of the very batch that batches alone would give.

    Worked case: with 59 boards the highest bounds the 95 % quantile from above with one-sided 95 %
    (`confidence=0.9`): 1 − 0.95⁵⁹ = 0.9515; with 58 none does. Takes any number of boards: halving finds
    the rank. Raises UsageError where a count, the share, the batch or the confidence is out of its range.
    """
    _require(
        _confidence_fault(confidence), _batch_fault(boards_per_batch), _boards_fault(boards),
        "" if 0.0 <= share <= 1.0 else f"share: from 0 to 1; read {share:g}",
    )  # fmt: skip
    tail = (1.0 - confidence) / 2.0
    below = _unlikely_counts(boards, 1.0 - share, tail, boards_per_batch)
    above = _unlikely_counts(boards, share, tail, boards_per_batch)
    return Ranks(low=below or None, high=boards + 1 - above if above else None)


def _unlikely_counts(boards: int, others: float, tail: float, boards_per_batch: int) -> int:
    """How many of the counts 0, 1, 2 … are so few that so few or fewer come with at most `tail`.

    A board counts where it is on the quantile's one side; `others` is the share on the other side.
    """
    from scipy.special import betainc

    def so_few(count: int) -> float:
        missed = (boards - count) / boards_per_batch
        return float(betainc(missed, count / boards_per_batch + 1.0, others))

    return bisect_right(range(boards), tail, key=so_few)


def mean_interval(
    mean: float, sd: float, boards: int, *, boards_per_batch: int = 1, confidence: float = 0.95
) -> Between:
    """Bound the mean of all boards by Student's t with B − 1 degrees of freedom, B batches (or boards).

    `mean ± t·s·√((N − 1)/(N − n))/√B`, s the standard deviation over N boards with N − 1; the root,
    1 for independent boards, makes it that of B batch means with B − 1. Assumes that the mean is
    nearly normal: bounded figures and some tens of batches (central limit). NaN where there is not more
    than one batch. Worked case: mean 2, s = 1, three boards: 2 ± 4.303/√3 = −0.484 … 4.484.
    Raises UsageError where a count, the batch or the confidence is out of its range.
    Source: Student, "The probable error of a mean", Biometrika 6 (1908), memory.
    """
    _require(_confidence_fault(confidence), _batch_fault(boards_per_batch), _boards_fault(boards))
    batches = boards / boards_per_batch
    if batches <= 1.0:
        return NOWHERE
    spread = sd * math.sqrt((boards - 1) / (boards - boards_per_batch))
    return _around(mean, spread / math.sqrt(batches), batches - 1.0, confidence)


def over_scramblings(estimates: Sequence[float], *, confidence: float = 0.95) -> Between:
    """Bound what independent scramblings of one quasi-random set estimate, each of them once.

    `mean ± t·s/√k`, t of k − 1 degrees of freedom, s the standard deviation of the k estimates with
    k − 1. Within one scrambling points are dependent and nothing can be said of the error; between
    scramblings estimates are independent and alike, and nearly normal (assumed). Serves means and
    quantiles, never a yield: without a failure in any, it would read as certain. NaN for fewer than two,
    and where an estimate is NaN. Worked case: 1, 2 and 3: 2 ± 4.303/√3 = −0.484 … 4.484.
    Raises UsageError where the confidence is out of its range.
    Source: Owen, "Randomly permuted (t,m,s)-nets and (t,s)-sequences", 1995; L'Ecuyer, Nakayama, Owen &
    Tuffin, "Confidence intervals for randomized quasi-Monte Carlo estimators", 2023: of those compared
    Student's t was the most reliable; both memory.
    """
    _require(_confidence_fault(confidence))
    count = len(estimates)
    if count < 2:
        return NOWHERE
    mean = math.fsum(estimates) / count
    variance = math.fsum((each - mean) ** 2 for each in estimates) / (count - 1)
    return _around(mean, math.sqrt(variance / count), count - 1.0, confidence)


def _around(mean: float, deviation: float, freedom: float, confidence: float) -> Between:
    """Student's interval: `deviation` is that of the mean itself."""
    from scipy.special import stdtrit

    half = float(stdtrit(freedom, (1.0 + confidence) / 2.0)) * deviation
    return Between(mean - half, mean + half)


def _require(*faults: str) -> None:
    """Raise UsageError with every fault there is; an empty text is none."""
    if any(faults):
        raise UsageError("\n".join(filter(None, faults)))


def _confidence_fault(confidence: float) -> str:
    return "" if 0.0 < confidence < 1.0 else f"confidence: above 0 and below 1; read {confidence:g}"


def _batch_fault(boards_per_batch: int) -> str:
    return "" if boards_per_batch >= 1 else f"boards_per_batch: from 1; read {boards_per_batch}"


def _boards_fault(boards: int) -> str:
    return "" if boards >= 0 else f"boards: from 0; read {boards}"
