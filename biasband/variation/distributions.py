"""Distributions: from a uniform number to a coordinate between the limits.

A coordinate runs from −1 (low limit) over 0 (nominal) to +1 (high limit), and no shape ever leaves
that range. Each draw takes one uniform number through the inverse distribution function, so that
quasi-random points can drive it as well as random ones. All shapes are symmetric: their mean is 0.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from biasband.circuit.scenarios import Array
from biasband.errors import UsageError
from biasband.stage import Distribution, Limits

_TRUNCATED_AT = 3.0
"""The limits of a normal coordinate are ±3σ of the normal distribution that is cut there."""

ROUNDING = 1e-9
"""Relative: 0.72 V − 0.64 V is a few parts in 1e16 less than 80 mV."""


class Shape(Protocol):
    """A distribution of a coordinate in [−1, 1]."""

    @property
    def mean(self) -> float:
        """The mean."""

    @property
    def variance(self) -> float:
        """The variance."""

    def quantile(self, share: Array) -> Array:
        """The coordinate that this share of draws does not exceed; shares in [0, 1], any shape."""


@dataclass(frozen=True)
class _Symmetric:
    """What all shapes have in common."""

    @property
    def mean(self) -> float:
        """Zero, by symmetry."""
        return 0.0


@dataclass(frozen=True)
class Uniform(_Symmetric):
    """Every coordinate alike: all that is known are two limits (JCGM 101:2008, 6.4.2)."""

    variance = 1.0 / 3.0

    def quantile(self, share: Array) -> Array:
        """`x = 2u − 1`."""
        x = 2.0 * share
        x -= 1.0
        return x


@dataclass(frozen=True)
class Normal(_Symmetric):
    """A normal distribution whose ±3σ are the limits, cut there (cutting: common practice)."""

    @property
    def variance(self) -> float:
        """`σ²·(1 − 2·a·φ(a)/(1 − 2·Φ(−a)))`, a = 3 and σ = 1/a: 2.7 % below 1/9."""
        from scipy.special import ndtr

        a = _TRUNCATED_AT
        density = np.exp(-0.5 * a * a) / np.sqrt(2.0 * np.pi)
        return float((1.0 - 2.0 * a * density / (1.0 - 2.0 * ndtr(-a))) / (a * a))

    def quantile(self, share: Array) -> Array:
        """`x = Φ⁻¹(Φ(−3) + u·(1 − 2Φ(−3)))/3`."""
        from scipy.special import ndtr, ndtri

        tail = ndtr(-_TRUNCATED_AT)
        return np.clip(ndtri(tail + share * (1.0 - 2.0 * tail)) / _TRUNCATED_AT, -1.0, 1.0)


@dataclass(frozen=True)
class Triangular(_Symmetric):
    """The sum of two like uniform parts (JCGM 101:2008, 6.4.5)."""

    variance = 1.0 / 6.0

    def quantile(self, share: Array) -> Array:
        """`x = √(2u) − 1` below the middle, its mirror image above."""
        return np.where(share < 0.5, np.sqrt(2.0 * share) - 1.0, 1.0 - np.sqrt(2.0 * (1.0 - share)))


@dataclass(frozen=True)
class Sine(_Symmetric):
    """The arc-sine law of what swings like a sine: the limits are likeliest (JCGM 101:2008, 6.4.6)."""

    variance = 0.5

    def quantile(self, share: Array) -> Array:
        """`x = −cos(πu)`."""
        return -np.cos(np.pi * share)


@dataclass(frozen=True)
class Hollow(_Symmetric):
    """Uniform with `|x| < inner` removed: the middle was sold as a tighter grade (common practice).

    Raises UsageError unless 0 ≤ inner < 1.
    """

    inner: float

    def __post_init__(self) -> None:
        if not 0.0 <= self.inner < 1.0:
            raise UsageError(f"hollow: the middle removed is from 0 to below the limits; read {self.inner:g}")

    @property
    def variance(self) -> float:
        """`(1 + h + h²)/3`, the mean square between h and 1."""
        return (1.0 + self.inner + self.inner**2) / 3.0

    def quantile(self, share: Array) -> Array:
        """`x = ±(h + (1 − h)·|2u − 1|)`."""
        spread = 2.0 * share - 1.0
        return np.copysign(self.inner + (1.0 - self.inner) * np.abs(spread), spread)


@dataclass(frozen=True)
class Trapezium(_Symmetric):
    """The sum of two uniform parts, `within` and the rest (JCGM 101:2008, 6.4.4).

    Over many batches a `Batch` follows it, where both limits are equally far from nominal.
    """

    within: float

    @property
    def variance(self) -> float:
        """`((1 − w)² + w²)/3`, two independent uniform parts."""
        return ((1.0 - self.within) ** 2 + self.within**2) / 3.0

    def quantile(self, share: Array) -> Array:
        """`x = √(8ABu) − 1` on the lower slope, 2A(u − ½) on the roof; A the wide part, B the narrow one."""
        narrow, wide = sorted((self.within, 1.0 - self.within))
        tail = np.minimum(share, 1.0 - share)
        slope = np.sqrt(8.0 * wide * narrow * tail) - 1.0
        lower = np.where(2.0 * wide * tail < narrow, slope, 2.0 * wide * (tail - 0.5))
        return np.where(share < 0.5, lower, -lower)


@dataclass(frozen=True)
class Batch:
    """A batch's mean, and around it a board that is off by `within` at most (common practice).

    `below` and `above` are the distances from nominal to the limits, in the unit of `within`. The
    mean is uniform on each side of nominal in what leaves room for `within`, half of the batches on
    either side; the board is uniform around it. Raises UsageError where `within` is more than the
    nearer limit's distance: then a nominal batch had boards beyond that limit.
    """

    within: float
    below: float
    above: float

    def __post_init__(self) -> None:
        room = min(self.below, self.above)
        if not 0.0 <= self.within <= room * (1.0 + ROUNDING):
            raise UsageError(f"within_batch: from 0 to {room:g}, the nearer limit; read {self.within:g}")

    def coordinate(self, mean: Array, board: Array) -> Array:
        """`offset = (below − w)·m + w·v` (m < 0; else above), from two shares in [0, 1], m and v = 2u − 1."""
        m = 2.0 * mean - 1.0
        offset = np.where(m < 0.0, self.below - self.within, self.above - self.within) * m
        offset = offset + self.within * (2.0 * board - 1.0)
        distance = np.where(offset < 0.0, self.below, self.above)
        x = np.divide(offset, distance, out=np.zeros_like(offset), where=distance > 0.0)
        return np.clip(x, -1.0, 1.0)


def shape_around(distribution: Distribution, tolerance: float) -> Shape | Batch:
    """Make the shape of a resistor's ±tolerance; `hollow_within` and `within_batch` are shares likewise.

    Raises UsageError where a companion is wider than the tolerance. Worked case: 5 % resistors,
    hollow within 1 %: nothing in |x| < 0.2.
    """
    if distribution.hollow_within is not None:
        return Hollow(distribution.hollow_within / tolerance if tolerance > 0.0 else np.inf)
    if distribution.within_batch is not None:
        return Batch(distribution.within_batch, tolerance, tolerance)
    return plain_shape(distribution)


def shape_between(limits: Limits, *, logarithmic: bool = False) -> Shape | Batch:
    """Make the shape of a figure between limits; `logarithmic` (h_FE) takes `within_batch` as a ratio.

    Raises UsageError where a batch finds no room, or where the distribution is hollow.
    """
    within = limits.distribution.within_batch
    if within is not None:
        return Batch(math.log1p(within) if logarithmic else within, *_distances(limits, logarithmic))
    return plain_shape(limits.distribution)


def plain_shape(distribution: Distribution) -> Shape:
    """Make the shape of a distribution that needs no figure of its own; UsageError for another."""
    if distribution.name not in PLAIN:
        raise UsageError(f"{distribution.name}: not here; allowed: {', '.join(PLAIN)}")
    return PLAIN[distribution.name]


def room_for_batch(limits: Limits, *, logarithmic: bool = False) -> float:
    """Find the widest `within_batch` between limits, in its unit: the nearer limit's distance."""
    nearer = min(_distances(limits, logarithmic))
    return math.expm1(nearer) if logarithmic else nearer


def _distances(limits: Limits, logarithmic: bool) -> tuple[float, float]:
    """From nominal down to the low limit and up to the high one; h_FE: of the logarithms."""
    if logarithmic:
        return math.log(limits.nominal / limits.low), math.log(limits.high / limits.nominal)
    return limits.nominal - limits.low, limits.high - limits.nominal


UNIFORM = Uniform()
"""The default: maximum entropy between two limits, and on either side of a typical value."""

PLAIN: Mapping[str, Shape] = {
    "uniform": UNIFORM,
    "normal": Normal(),
    "triangular": Triangular(),
    "sine": Sine(),
}
"""The shapes that need no figure of their own."""
