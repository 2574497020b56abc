"""A bounded local search for extremes inside the box, for all measures and starts at once.

Compass search: from every start try a step up and down along each axis, move to the best, halve the
step when nothing helps. Source: Hooke & Jeeves, "Direct search solution of numerical and
statistical problems", J. ACM 8 (1961), in its simplest form.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import Axis
from biasband.variation.evaluation import Measures, evaluate

_STEPS = tuple(0.75 * 2.0**-k for k in range(14))
"""Never a sum that leads from a limit to exactly nominal, where ripple is absent."""

_TRIAL_STEPS = 6
"""A start that none of the first steps (down to 1/32 of half the axis) improves is left alone."""

_MOVES_PER_STEP = 4
_WORTHWHILE = 1e-9
"""Relative improvement below which a move is rounding."""


@dataclass(frozen=True)
class Start:
    """A point of the box, shape (K,), from which a measure is driven down (−1) or up (+1)."""

    measure: str
    sign: float
    value: float
    point: Array

    @property
    def score(self) -> float:
        """What the search raises; −inf where the point is not solved."""
        return -np.inf if np.isnan(self.value) else self.sign * self.value


def search(
    stage: Stage, box: tuple[Axis, ...], starts: Sequence[Start], measures: Measures, *, cut_off: float
) -> dict[tuple[str, float], Start]:
    """The best point found for every (measure, sign); of equals the earlier start wins."""
    here, moved = list(starts), np.zeros(len(starts), dtype=bool)
    live = np.ones(len(starts), dtype=bool)
    for count, step in enumerate(_STEPS if box else ()):
        for _ in range(_MOVES_PER_STEP):
            rows = np.flatnonzero(live)
            if not rows.size:
                break
            better = _improve(stage, box, [here[row] for row in rows], step, measures, cut_off)
            changed = [b is not here[row] for row, b in zip(rows, better, strict=True)]
            for row, start in zip(rows, better, strict=True):
                here[row] = start
            moved[rows] |= changed
            if not any(changed):
                break
        if count >= _TRIAL_STEPS:
            live &= moved
    best: dict[tuple[str, float], Start] = {}
    for start in here:
        key = (start.measure, start.sign)
        if key not in best or start.score > best[key].score + _WORTHWHILE * abs(start.value):
            best[key] = start
    return best


def _improve(
    stage: Stage,
    box: tuple[Axis, ...],
    starts: Sequence[Start],
    step: float,
    measures: Measures,
    cut_off: float,
) -> list[Start]:
    """Each start moved to its best neighbour one step away, or the start itself."""
    directions = np.concatenate([np.eye(len(box)), -np.eye(len(box))]) * step
    tried = np.clip(np.stack([s.point for s in starts])[:, None, :] + directions, -1.0, 1.0)
    columns = {axis.name: tried[:, :, k].ravel() for k, axis in enumerate(box)}
    wanted = {start.measure: measures[start.measure] for start in starts}
    outcome = evaluate(stage, columns, wanted, cut_off=cut_off)
    shape = tried.shape[:2]
    low = {name: values.reshape(shape) for name, values in outcome.low.items()}
    high = {name: values.reshape(shape) for name, values in outcome.high.items()}
    return [
        _best(start, tried[row], (low if start.sign < 0.0 else high)[start.measure][row])
        for row, start in enumerate(starts)
    ]


def _best(start: Start, points: Array, values: Array) -> Start:
    score = np.where(np.isnan(values), -np.inf, start.sign * values)
    top = int(np.argmax(score))
    if not score[top] > start.score + _WORTHWHILE * abs(values[top]):
        return start
    return replace(start, value=float(values[top]), point=points[top])
