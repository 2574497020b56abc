"""A bounded local search for extremes inside the box, for all measures and starts at once.

Compass search: from every start try a step up and down along each axis, move to the best, halve the
step when nothing helps. Source: Hooke & Jeeves, "Direct search solution of numerical and
statistical problems", J. ACM 8 (1961), in its simplest form.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array
from biasband.variation.evaluation import Measures, Outcome, evaluate
from biasband.variation.family import Family

_STEPS = tuple(0.75 * 2.0**-k for k in range(14))
"""Never a sum that leads from a limit to exactly nominal, where ripple is absent."""

_TRIAL_STEPS = 6
"""A start that none of the first steps (down to 1/43 of an axis) improves is left alone."""

_MOVES_PER_STEP = 4
_WORTHWHILE = 1e-9
"""Relative improvement below which a move is rounding."""


@dataclass(frozen=True)
class Climbs:
    """S climbs through the box: `point` (S, K), the `score` (S,) that each raises, and of what.

    `member` (S,) says for which stage of a family, `measure` (S,) counts into the measures; a climb
    raises `sign` × that measure. The score is −inf where the point is not solved.
    """

    member: NDArray[np.intp]
    measure: NDArray[np.intp]
    sign: Array
    point: Array
    score: Array

    def part(self, rows: NDArray[np.intp]) -> Climbs:
        """The climbs at `rows`."""
        return Climbs(*(getattr(self, field.name)[rows] for field in fields(self)))

    def joined(self, other: Climbs) -> Climbs:
        """These climbs and then those."""
        names = [field.name for field in fields(self)]
        return Climbs(*(np.concatenate([getattr(self, n), getattr(other, n)]) for n in names))

    def at(self, point: Array, score: Array) -> Climbs:
        """The same climbs, higher up."""
        return replace(self, point=point, score=score)


def scores(outcome: Outcome, names: tuple[str, ...], climbs: Climbs) -> Array:
    """What each climb scores in its own block of the outcome's scenarios, shape (S, N/S)."""
    table = np.empty((len(climbs.sign), outcome.region.size // len(climbs.sign)))
    for row, name in enumerate(names):
        for sign, values in ((-1.0, outcome.low[name]), (1.0, outcome.high[name])):
            mine = np.flatnonzero((climbs.measure == row) & (climbs.sign == sign))
            table[mine] = sign * values.reshape(table.shape)[mine]
    return np.where(np.isnan(table), -np.inf, table)


def search(family: Family, climbs: Climbs, measures: Measures, *, cut_off: float) -> Climbs:
    """Drive every climb as high as it goes; one that nothing improves, or not solved, keeps its start."""
    point, score = climbs.point.copy(), climbs.score.copy()
    moved, live = np.zeros(len(score), dtype=bool), np.isfinite(score)
    for count, step in enumerate(_STEPS if family.box else ()):
        rows = np.flatnonzero(live)
        for _ in range(_MOVES_PER_STEP):
            if not rows.size:
                break
            here = climbs.at(point, score).part(rows)
            better = _neighbours(family, here, step, measures, cut_off)
            rounding = _WORTHWHILE * np.abs(np.nan_to_num(better.score, neginf=0.0))
            gained = better.score > here.score + rounding
            rows, better = rows[gained], better.part(np.flatnonzero(gained))
            point[rows], score[rows], moved[rows] = better.point, better.score, True
        if count >= _TRIAL_STEPS:
            live &= moved
    return climbs.at(point, score)


def _neighbours(family: Family, here: Climbs, step: float, measures: Measures, cut_off: float) -> Climbs:
    """Each climb at the best of the points one step away along an axis."""
    axes = len(family.box)
    directions = np.concatenate([np.eye(axes), -np.eye(axes)]) * step
    tried = np.clip(here.point[:, None, :] + directions, -1.0, 1.0)
    x = family.columns(tried.reshape(-1, axes), np.repeat(here.member, 2 * axes))
    table = scores(evaluate(family.stage, x, measures, cut_off=cut_off), tuple(measures), here)
    best = np.argmax(table, axis=1)
    rows = np.arange(len(best))
    return here.at(tried[rows, best], table[rows, best])
