"""Polish: drive an extreme inside the box to its very end, where a compass search stalls.

Two kinds stall: a long curved crest (power against gain and temperature), and a ridge where the
least of several smooth pieces is greatest (a symmetric swing where up equals down). Both are
"maximise t with every piece ≥ t", smooth again, which a library's sequential quadratic programming
(scipy.optimize, SLSQP; Kraft, DFVLR-FB 88-28, 1988) solves from where the compass search stopped.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.quantities import Pieces, Quantity
from biasband.circuit.reading import read
from biasband.circuit.scenarios import Array
from biasband.variation.contributors import RIPPLE, Axis, realise
from biasband.variation.evaluation import Measures, evaluate
from biasband.variation.family import Family
from biasband.variation.interior import Climbs

_STARTS = 2
"""So many of a measure's best climbs are polished."""

_DIFFERENCE = 1e-6
"""Step of the slopes, in coordinates: far above the 1e-9 V that points are solved to."""

_SHORT_WAY, _WORTHWHILE = 0.02, 1e-6
"""A climb goes on where so short a way, in coordinates, may gain this share of the height."""

Heights = Callable[[Array], Array]
"""What must all be high, at points of the box: (M, K) → (M, P)."""


def polish(family: Family, climbs: Climbs, measures: Measures, *, cut_off: float) -> Climbs:
    """Drive on the climbs of every measure whose best ends inside the box or may end on a ridge."""
    point, score, box = climbs.point.copy(), climbs.score.copy(), family.box
    for rows in _alike(climbs):
        member, measure, sign = (int(each[rows[0]]) for each in (climbs.member, climbs.measure, climbs.sign))
        name = tuple(measures)[measure]
        best = rows[np.argsort(-score[rows], kind="stable")][:_STARTS]
        if not (_on_ridge(measures[name], sign) or _inside(box, point[best[0]])):
            continue
        heights = _heights(family, member, name, measures[name], sign, cut_off)
        for row in best:
            if not _rises(heights, box, point[row]):
                continue
            found = _highest(heights, box, point[row])
            reached = float(heights(found[None, :]).min())
            if reached > score[row]:
                point[row], score[row] = found, reached
    return climbs.at(point, score)


def _alike(climbs: Climbs) -> Iterator[NDArray[np.intp]]:
    """The climbs that were solved, those for one member, measure and sign together."""
    solved = np.flatnonzero(np.isfinite(climbs.score))
    kinds = np.stack([climbs.member, climbs.measure, climbs.sign])[:, solved]
    for kind in np.unique(kinds, axis=1).T:
        yield solved[(kinds == kind[:, None]).all(axis=0)]


def _on_ridge(measure: Quantity, sign: float) -> bool:
    return isinstance(measure.read, Pieces) and measure.read.least is (sign > 0.0)


def _inside(box: tuple[Axis, ...], point: Array) -> bool:
    return any(abs(x) < 1.0 for axis, x in zip(box, point, strict=True) if axis.name != RIPPLE)


def _heights(
    family: Family, member: int, name: str, measure: Quantity, sign: float, cut_off: float
) -> Heights:
    """The pieces of a ridge, or the measure itself, signed so that higher is more extreme."""
    stage, pieces = family.stage, measure.read

    def columns(points: Array) -> dict[str, Array]:
        return family.columns(points, np.full(len(points), member))

    def on_ridge(points: Array) -> Array:
        with np.errstate(all="ignore"):
            reading = read(stage, realise(stage, columns(points)))
            assert isinstance(pieces, Pieces)
            return sign * np.stack([np.broadcast_to(p, len(points)) for p in pieces.read(reading)], axis=1)

    def alone(points: Array) -> Array:
        outcome = evaluate(stage, columns(points), {name: measure}, cut_off=cut_off)
        return sign * (outcome.low if sign < 0.0 else outcome.high)[name][:, None]

    return on_ridge if _on_ridge(measure, sign) else alone


def _rises(heights: Heights, box: tuple[Axis, ...], start: Array) -> bool:
    """Whether a short way along the axes promises a height worth the climb, or a ridge hides it."""
    x, inward = start, _inward(start)
    values = heights(np.vstack([x, x + np.diag(inward)]))
    if not np.all(np.isfinite(values)) or values.shape[1] > 1:
        return bool(np.all(np.isfinite(values)))
    slopes = (values[1:, 0] - values[0, 0]) / inward
    free = np.array([axis.name != RIPPLE for axis in box]) & (np.where(slopes > 0.0, x < 1.0, x > -1.0))
    return bool(_SHORT_WAY * np.sum(np.abs(slopes[free])) > _WORTHWHILE * abs(values[0, 0]))


def _inward(start: Array) -> Array:
    """Small steps along the axes that stay inside the box."""
    return np.where(start > 0.0, -_DIFFERENCE, _DIFFERENCE)


def _highest(heights: Heights, box: tuple[Axis, ...], start: Array) -> Array:
    """The point (K,) of the box where the least of the heights is highest, near a start."""
    from scipy.optimize import minimize

    level = float(heights(start[None, :]).min())
    scale = abs(level) or 1.0
    inward = _inward(start)

    @functools.lru_cache(maxsize=2)
    def around(point: bytes) -> Array:
        """Heights at a point and one small step along each axis; asked for twice, for value and slope."""
        x = np.frombuffer(point)
        return heights(np.vstack([x, x + np.diag(inward)])) / scale

    def room(z: Array) -> Array:
        return np.asarray(around(z[:-1].tobytes())[0] - z[-1])

    def slopes(z: Array) -> Array:
        values = around(z[:-1].tobytes())
        return np.hstack([((values[1:] - values[0]) / inward[:, None]).T, -np.ones((values.shape[1], 1))])

    result = minimize(  # type: ignore[call-overload]  # the stubs know no SLSQP options
        lambda z: -z[-1],
        np.append(start, level / scale),
        jac=lambda z: np.append(np.zeros(len(start)), -1.0),
        bounds=[*_bounds(box, start), (None, None)],
        constraints={"type": "ineq", "fun": room, "jac": slopes},
        method="SLSQP",
        options={"maxiter": 15, "ftol": 1e-10},
    )
    return _snapped(result.x[:-1], start)


def _snapped(found: Array, start: NDArray[np.float64]) -> Array:
    """The point found, exactly on a limit where it is there but for rounding; else the start."""
    if not np.all(np.isfinite(found)):
        return start
    return np.where(np.abs(found) > 1.0 - _DIFFERENCE, np.sign(found), found)


def _bounds(box: tuple[Axis, ...], start: Array) -> list[tuple[float, float]]:
    """The box, with ripple held where it is: it is there at its peak or not at all."""
    return [(x, x) if axis.name == RIPPLE else (-1.0, 1.0) for axis, x in zip(box, start, strict=True)]
