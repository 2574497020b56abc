"""Monotone or not: whether corners that pass prove that no board fails.

At a fixed point of use, a quantity that rises all the way or falls all the way along every by-board
axis, wherever the others stand, is extreme at vertices. That is looked at in many places, not proved.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from biasband.boards.streams import uniform
from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import Axis, board_axes, columns
from biasband.variation.corners import vertices
from biasband.variation.evaluation import Measures, Outcome, evaluate
from biasband.variation.points_of_use import PointOfUse

LINES = 64
"""So many lines along each axis at each point of use pass through the box at random."""

_MOST_EDGES = 64
"""The edges of the box along an axis are lines too, where there are so many of them at most (seven axes)."""

_STEPS = np.array([-1.0, -0.98, -0.5, 0.0, 0.5, 0.98, 1.0])
"""Where a line is looked at: short steps at its ends, where a line with a single turn always shows it."""

_ROUNDING = 1e-7
"""A smaller step, as a share of the greatest value at its point of use, is none.

Voltages are solved to 1e-9 V, which a junction's 26 mV make 4e-8 of a current.
"""


@dataclass(frozen=True)
class Monotone:
    """Whether a measure was monotone along every by-board axis wherever it was looked at.

    `looked_at` counts the places of the box, over all points of use; `unsolved` those of them that have no
    value: then it does not hold. `breaks_along` is the contributor along which it turns most.
    """

    holds: bool
    looked_at: int
    unsolved: int
    breaks_along: str | None


def monotone(
    stage: Stage, measures: Measures, points: Sequence[PointOfUse], *, seed: int, cut_off: float
) -> Mapping[str, Monotone]:
    """Look whether measures are monotone over the by-board box at every point of use.

    Each by-board axis is walked from limit to limit, the others at random places and at the vertices.
    Which way may differ from line to line: what never turns on any line has its extremes at vertices.
    A turn that comes back within a step, or lies in a corner of the box that no line meets, is not seen.
    """
    box = board_axes(stage)
    lines, count = _lines(box, seed), len(points)
    turns = {name: np.zeros(max(len(box), 1)) for name in measures}
    unsolved = dict.fromkeys(measures, 0)
    for point in points:
        outcome = evaluate(stage, {**columns(box, lines), **point.coordinates}, measures, cut_off=cut_off)
        for name in measures:
            values = np.stack([*_values(outcome, name)])
            unsolved[name] += int(np.sum(np.isnan(values).any(axis=0)))
            turns[name] = np.fmax(turns[name], _turns(values, len(box)))
    return {
        name: _judged(box, turns[name], unsolved=unsolved[name], looked_at=count * len(lines))
        for name in measures
    }


def _values(outcome: Outcome, name: str) -> Iterator[Array]:
    """The lowest and highest values of a measure at the scenarios: each is judged by a limit of its own."""
    yield outcome.low[name]
    yield outcome.high[name]


def _lines(box: tuple[Axis, ...], seed: int) -> Array:
    """Places on lines along each of K axes in turn, (K·L·S, K): the steps of a line are neighbours."""
    if not box:
        return np.zeros((1, 0))
    drawn = [2.0 * uniform(f"monotone: {axis.name}", slice(0, LINES), seed) - 1.0 for axis in box]
    anywhere = np.stack(drawn, axis=1)
    edges = vertices(box[1:])
    lines = []
    for k in range(len(box)):
        others = np.delete(anywhere, k, axis=1)
        others = np.vstack([others, edges]) if len(edges) <= _MOST_EDGES else others
        walked = np.tile(_STEPS, len(others))
        lines.append(np.insert(np.repeat(others, len(_STEPS), axis=0), k, walked, axis=1))
    return np.concatenate(lines)


def _turns(values: Array, axes: int) -> Array:
    """How far a measure, (2, N), turns back at most along each axis, (K,), as a share of its size."""
    scale = np.nanmax(np.abs(values), initial=0.0)
    if not axes or not scale:
        return np.zeros(max(axes, 1))
    steps = np.diff(values.reshape(2, axes, -1, len(_STEPS)), axis=-1) / scale
    steps = np.where(np.abs(steps) > _ROUNDING, steps, 0.0)
    back = np.minimum(np.sum(np.fmax(steps, 0.0), axis=-1), np.sum(np.fmax(-steps, 0.0), axis=-1))
    return np.asarray(back.max(axis=(0, 2)))


def _judged(box: tuple[Axis, ...], turns: Array, *, unsolved: int, looked_at: int) -> Monotone:
    worst = int(np.argmax(turns))
    breaks_along = box[worst].name if turns[worst] > 0.0 else None
    return Monotone(breaks_along is None and not unsolved, looked_at, unsolved, breaks_along)
