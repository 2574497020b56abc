"""A bench on which many sets of values are held against the same limits at once.

Every requirement and standing check is a row; the sets of values are so many scenarios. Held at some
of the corners only, a set's share is never below what it is at all of them, so that a share found
here is a bound: a set that is behind by its bound is behind.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.quantities import Quantity, words
from biasband.circuit.scenarios import Array, chunks
from biasband.margins.checks import Check, standing_checks
from biasband.margins.records import Side
from biasband.margins.requirements import limits_of
from biasband.stage import Stage
from biasband.variation.contributors import Axis, axes, columns
from biasband.variation.corners import vertices
from biasband.variation.evaluation import Measures, Outcome, cut_off_current, evaluate

CHUNK = 24576
"""Scenarios evaluated in one go."""

SWING, CURRENT = "symmetric_peak_swing", "collector_current"
_LIMIT, _VALUE = "limit of ", "value of "

Indices = NDArray[np.intp]


@dataclass(frozen=True)
class Row:
    """One limit: a quantity on one side of it, `at_least` or `at_most`; `limits` is where it can be.

    A standing check's limit may move with the ambient, never with the resistors; `check` says that the
    row is one.
    """

    quantity: str
    side: Side
    limits: tuple[float, float]
    check: str = ""
    by_magnitude: bool = False


@dataclass(frozen=True)
class Bench:
    """A stage, the rows that its sets of values are held to, and the corners [M, K] of its box."""

    stage: Stage
    names: tuple[str, ...]
    rows: tuple[Row, ...]
    measures: Measures
    box: tuple[Axis, ...]
    corners: Array
    cut_off: float

    @property
    def sides(self) -> dict[str, float]:
        """What is asked of a set: quantities, each with the side it is held to, −1 low, +1 high, 0 both."""
        if not self.stage.requirements:
            return {SWING: -1.0}
        asked: dict[str, set[float]] = {}
        for row in (row for row in self.rows if not row.check):
            both = {-1.0, 1.0} if row.by_magnitude else {-1.0 if row.side == "at_least" else 1.0}
            asked.setdefault(row.quantity, set()).update(both)
        return {name: sum(signs) for name, signs in asked.items()}


@dataclass(frozen=True)
class Scores:
    """How S sets of values do, R rows each.

    `slack` (S, R) is the distance of the worst value from its limit, NaN where that is not solved,
    `worst` (S, R) the corner that it was met at; `nearest` and `farthest` (S, R) are the distances of
    the nominal value from the limit, wherever that lies. `current` [A] and `swing` [V] are nominal
    collector current and smallest symmetric swing, (S,).
    """

    slack: Array
    worst: Indices
    nearest: Array
    farthest: Array
    current: Array
    swing: Array

    @property
    def shares(self) -> Array:
        """The largest that each margin share can be, (S, R); −inf where the nominal value fails."""
        with np.errstate(divide="ignore", invalid="ignore"):
            passing = np.where(self.nearest > 0.0, self.slack / self.nearest, np.inf)
            bound = np.where(self.slack >= 0.0, passing, self.slack / self.farthest)
        return np.where((self.farthest > 0.0) & ~np.isnan(self.slack), bound, -np.inf)

    def rows(self, sets: Indices) -> Scores:
        """The scores of some of the sets."""
        return Scores(*(getattr(self, name)[sets] for name in _FIELDS))

    def with_rows(self, sets: Indices, other: Scores) -> Scores:
        """The same with the scores of some sets put in."""
        changed = {name: getattr(self, name).copy() for name in _FIELDS}
        for name in _FIELDS:
            changed[name][sets] = getattr(other, name)
        return Scores(**changed)

    def worse(self, other: Scores) -> Scores:
        """The same sets held at more corners: the worse of both."""
        takes = (other.slack < self.slack) | np.isnan(other.slack)
        return replace(
            self,
            slack=np.where(takes, other.slack, self.slack),
            worst=np.where(takes, other.worst, self.worst),
            swing=np.minimum(self.swing, other.swing),
        )


_FIELDS = ("slack", "worst", "nearest", "farthest", "current", "swing")


def bench(stage: Stage, names: tuple[str, ...]) -> Bench:
    """Set up the bench for a stage, every resistor valued, whose resistors `names` are to change."""
    cut_off, box, vocabulary = cut_off_current(stage), axes(stage), words(stage)
    checks = standing_checks(stage, cut_off=cut_off).made
    required = {requirement.quantity for requirement in stage.requirements}
    measures = {name: vocabulary[name] for name in (*required, SWING, CURRENT)}
    for check in checks:
        measures[check.slack.name] = check.slack
        measures[_VALUE + check.name] = check.value
    limits = {check.name: Quantity(_LIMIT + check.name, check.value.kind, check.limit) for check in checks}
    corners = vertices(box)
    places = np.vstack([[axis.nominal for axis in box], corners])
    outcome = evaluate(stage, columns(box, places), limits, cut_off=cut_off)
    rows = (*_required(stage), *(_checked(check, outcome) for check in checks))
    return Bench(stage, names, rows, measures, box, corners, cut_off)


def _required(stage: Stage) -> Iterator[Row]:
    for requirement in stage.requirements:
        by_magnitude = words(stage)[requirement.quantity].by_magnitude
        for side, limit in limits_of(requirement):
            yield Row(requirement.quantity, side, (limit, limit), by_magnitude=by_magnitude)


def _checked(check: Check, limits: Outcome) -> Row:
    found = limits.low[check.name]
    return Row(_VALUE + check.name, check.side, (float(found.min()), float(found.max())), check.slack.name)


def hold_sets(
    bench: Bench, values: Array, corners: Indices, *, progress: Callable[[float], None] = lambda done: None
) -> Scores:
    """Hold S sets of values [Ω], shape (S, P), against the bench's rows at some of its corners."""
    places = np.vstack([[axis.nominal for axis in bench.box], bench.corners[corners]])
    parts = []
    for rows in chunks(len(values), max(CHUNK // len(places), 1)):
        parts.append(_hold(bench, values[rows], corners, places))
        progress(rows.stop / len(values))
    return Scores(*(np.concatenate([getattr(part, name) for part in parts]) for name in _FIELDS))


def _hold(bench: Bench, values: Array, corners: Indices, places: Array) -> Scores:
    """One chunk: every set at nominal (first) and at the corners, one scenario each."""
    shape = (len(values), len(places))
    x = {name: np.tile(column, len(values)) for name, column in columns(bench.box, places).items()}
    for k, name in enumerate(bench.names):
        x[f"{name}.value"] = np.repeat(values[:, k], len(places))
    outcome = evaluate(bench.stage, x, bench.measures, cut_off=bench.cut_off)
    low = {name: found.reshape(shape) for name, found in outcome.low.items()}
    high = {name: found.reshape(shape) for name, found in outcome.high.items()}
    held = [_row(row, low, high) for row in bench.rows]
    slack = np.stack([each.slack for each in held], axis=1)
    # A corner that is not solved is the worst there is: argmin stops at a NaN.
    worst = np.argmin(slack, axis=2)
    return Scores(
        slack=np.take_along_axis(slack, worst[:, :, None], axis=2)[:, :, 0],
        worst=corners[worst],
        nearest=np.stack([each.nearest for each in held], axis=1),
        farthest=np.stack([each.farthest for each in held], axis=1),
        current=low[CURRENT][:, 0],
        swing=low[SWING][:, 1:].min(axis=1),
    )


@dataclass(frozen=True)
class _Held:
    """One row: slack (S, C) at the corners, distances (S,) of the nominal value from the limit."""

    slack: Array
    nearest: Array
    farthest: Array


def _row(row: Row, low: dict[str, Array], high: dict[str, Array]) -> _Held:
    nominal = low[row.quantity][:, 0]
    inverted = row.by_magnitude & (nominal < 0.0)
    nominal = np.where(inverted, -nominal, nominal)
    sign = 1.0 if row.side == "at_least" else -1.0
    ends = np.stack([sign * (nominal - limit) for limit in row.limits])
    if row.check:
        slack = low[row.check][:, 1:]
    else:
        lowest = np.where(inverted[:, None], -high[row.quantity], low[row.quantity])[:, 1:]
        highest = np.where(inverted[:, None], -low[row.quantity], high[row.quantity])[:, 1:]
        slack = sign * ((lowest if row.side == "at_least" else highest) - row.limits[0])
    return _Held(slack, ends.min(axis=0), ends.max(axis=0))
