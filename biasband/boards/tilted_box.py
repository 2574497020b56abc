"""Pieces: places of the cube of uniform numbers described by boxes with a tilt along each axis.

A number that does not matter keeps the whole axis and no tilt. Places that lie apart, or that one box
describes badly, are divided into parts.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array

_MOST_PARTS = 40
"""Places are divided into so many parts at most: a part has at least its share of them."""

_ROOM = 0.5
"""A box is wider than its places, by this share of their range either way: it costs few draws."""

_NARROWEST = 1e-13
"""A box has at least so much room: doubles near 1 can still be told apart, and a density is finite."""

_UNTILTED = 1e-6
"""A tilt below this is none: it changes a density by less than a millionth."""

_NEAREST = 2.0**-54
"""A uniform number is kept this far from 0, and as far as a double can from 1: scores stay finite."""


def normal_scores(places: Array) -> Array:
    """`Φ⁻¹(u)`: draws apart what lies near 0 and near 1."""
    from scipy.special import ndtri

    return np.asarray(ndtri(np.clip(places, _NEAREST, 1.0 - _NEAREST)))


@dataclass(frozen=True)
class Piece:
    """A density on a box, `∝ Π e^{τ·t}`, `t = (u − low)/(high − low)`: low, high and tilt τ have shape (K,).

    The truncated exponential of each axis is the one with the places' mean, the likeliest of its kind;
    of a sum of numbers beyond a limit it is the best there is ("exponential tilting", Siegmund 1976, memory).
    """

    low: Array
    high: Array
    tilt: Array

    @classmethod
    def whole(cls, axes: int) -> Piece:
        """The whole cube, uniformly."""
        return cls(np.zeros(axes), np.ones(axes), np.zeros(axes))

    @classmethod
    def around(cls, places: Array) -> Piece:
        """The piece for places (M, K)."""
        least, greatest = places.min(axis=0), places.max(axis=0)
        room = np.maximum(_ROOM * (greatest - least), _NARROWEST)
        low, high = np.maximum(least - room, 0.0), np.minimum(greatest + room, 1.0)
        return cls(low, high, _tilt(np.mean((places - low) / (high - low), axis=0)))

    def draw(self, uniforms: Array) -> Array:
        """Places of this density from uniform numbers, (N, K) both: its inverse distribution function."""
        steep = np.maximum(np.abs(self.tilt), _UNTILTED)
        fallen = -np.log1p(uniforms * np.expm1(-steep)) / steep
        t = np.where(self.tilt > 0.0, 1.0 - fallen, fallen)
        t = np.where(np.abs(self.tilt) < _UNTILTED, uniforms, t)
        return np.clip(self.low + t * (self.high - self.low), self.low, self.high)

    def log_density(self, places: Array) -> Array:
        """The logarithm of the density at places (N, K), shape (N,); −inf outside the box."""
        t = (places - self.low) / (self.high - self.low)
        fallen = np.where(self.tilt > 0.0, 1.0 - t, t)
        inside = np.all((places >= self.low) & (places <= self.high), axis=1)
        logs = _log_height(np.abs(self.tilt)) - np.log(self.high - self.low) - np.abs(self.tilt) * fallen
        return np.where(inside, np.sum(logs, axis=1), -np.inf)


def _log_height(steep: Array) -> Array:
    """Of `s·e^{−st}/(1 − e^{−s})` on [0, 1]: the logarithm at t = 0."""
    s = np.maximum(steep, _UNTILTED)
    return np.where(steep < _UNTILTED, 0.0, np.log(s / -np.expm1(-s)))


def _tilt(mean: Array) -> Array:
    """The tilt whose density on [0, 1] has this mean, (K,) both: by halving, since the mean falls with it."""
    towards = np.where(mean > 0.5, 1.0, -1.0)
    short = np.clip(np.minimum(mean, 1.0 - mean), 1e-6, 0.5)
    flat, steep = np.zeros_like(short), 1.0 / short
    for _ in range(50):
        middle = 0.5 * (flat + steep)
        too_flat = _fallen_mean(middle) > short
        flat, steep = np.where(too_flat, middle, flat), np.where(too_flat, steep, middle)
    return np.asarray(towards * flat)


def _fallen_mean(steep: Array) -> Array:
    """The mean of `∝ e^{−st}` on [0, 1]: `1/s − 1/(e^s − 1)`; near 0 its series, for rounding."""
    s = np.maximum(steep, 1e-3)
    with np.errstate(over="ignore"):
        return np.where(steep < 1e-3, 0.5 - steep / 12.0, 1.0 / s - 1.0 / np.expm1(s))


def parts(places: Array) -> Iterator[NDArray[np.intp]]:
    """Rows of places (M, K), part by part: divided in two, and again, as long as that describes them better.

    Better is a likelihood that pays for the limits and tilts of one more piece (Schwarz, "Estimating the
    dimension of a model", Annals of Statistics 6, 1978). In many dimensions a part too many costs draws: its
    box is too small.
    """
    fewest = max(len(places) // _MOST_PARTS, 1)
    yield from _divided(places, normal_scores(places), np.arange(len(places)), fewest)


def _divided(places: Array, scores: Array, rows: NDArray[np.intp], fewest: int) -> Iterator[NDArray[np.intp]]:
    price = 0.5 * (3 * places.shape[1] + 1) * np.log(len(rows))
    best, most = None, _likelihood(places[rows]) + price
    for upper in _divisions(scores[rows], fewest) if len(rows) >= 2 * fewest else ():
        halves = rows[upper], rows[~upper]
        if min(map(len, halves)) < fewest:
            continue
        mixed = sum(len(h) * np.log(len(h) / len(rows)) + _likelihood(places[h]) for h in halves)
        if mixed > most:
            best, most = halves, mixed
    if best is None:
        yield rows
    else:
        for half in best:
            yield from _divided(places, scores, half, fewest)


def _likelihood(places: Array) -> float:
    """The log-likelihood of places under their own piece, which has none of them outside its box."""
    piece = Piece.around(places)
    middle = piece.log_density(places.mean(axis=0)[None, :])
    return len(places) * float(middle[0])


def _divisions(scores: Array, fewest: int) -> Iterator[NDArray[np.bool_]]:
    """Ways to divide scores (M, K) in two: across the way they are spread most, and across each axis."""
    centred = scores - scores.mean(axis=0)
    widest = np.linalg.svd(centred, full_matrices=False)[2][0]
    for line in (centred @ widest, *centred.T):
        yield line > _cut(line, fewest)


def _cut(line: Array, fewest: int) -> float:
    """Where to cut numbers (M,) in two so that the two means lie apart most, `n₁·n₂·(m₁ − m₂)²`.

    Source: Otsu, "A threshold selection method from gray-level histograms", IEEE Trans. Systems, Man and
    Cybernetics 9 (1979).
    """
    ordered = np.sort(line)
    below = np.arange(1, len(line))
    sums = np.cumsum(ordered)
    apart = (sums[-1] * below / len(line) - sums[:-1]) ** 2 / (below * below[::-1])
    return float(ordered[fewest - 1 + np.argmax(apart[fewest - 1 : len(line) - fewest])])
