"""Chooses values jointly: of all sets around the ideal values, the one whose worst case is best.

Branch and bound. Held at a few corners a set looks no worse than it is, so sets are looked at in the
order of what they could be at best: those that lead are held at every corner, and those that lead
then are searched inside the box too. The winner is the one that holding every set against
everything would find.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from math import inf

import numpy as np

from biasband.boards.draws import batch_size
from biasband.boards.intervals import allowed_failures
from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import words
from biasband.circuit.scenarios import Array
from biasband.constants import BOARDS
from biasband.margins.holding import Holding, hold_all, nominal
from biasband.margins.records import NAN, Margin
from biasband.stage import Stage, Target
from biasband.values.bench import CURRENT, SWING, Bench, Indices, bench, hold_sets
from biasband.variation.corners import Corners

FINALISTS = 3
"""How many sets are held against everything and shown side by side."""

DIGITS = 3
"""Shares that agree to this many decimals, 0.1 %, are equal."""

NEAR = 0.10
"""Without requirements, collector currents within the same tenth of the target are equally near to it."""

FINALIST_BOARDS = 2**13
"""Boards sampled for each finalist where they can show the yield asked for; else as many as usual."""

MOST_HELD = 12
"""Sets held against everything at most. Healthy stages need a handful; one that saturates or runs away
at many corners, where the worst lies inside the box, could need them all."""

_BATCH = 32
"""Sets that are held at every corner in one go."""

_SEED = 1

Progress = Callable[[float], None]
"""Told the share of the work that is done."""


@dataclass(frozen=True)
class Contender:
    """A set of values [Ω] held against everything.

    `share` is its smallest margin share by each limit's own method, `corner_share` the smallest at the
    corners; both are −inf where a nominal value fails. `smallest` is the row with the smallest share,
    `failing` are those that fail. `current` [A] is the nominal collector current, `swing` [V] the
    smallest symmetric swing at any corner, NaN where neither a requirement nor the choice is about it.
    `corners` are those that it was held at. `regions` are runaway and unsolved, where a corner lies there:
    then every row counts as failing.
    """

    values: tuple[float, ...]
    share: float
    corner_share: float
    smallest: Margin
    failing: tuple[Margin, ...]
    failing_at_corners: int
    current: float
    swing: float
    corners: Corners
    regions: tuple[Region, ...] = ()


@dataclass(frozen=True)
class Contest:
    """What the joint choice found: contenders for the resistors `names`, the best first.

    `nearest` is the set that nearness alone gives, among the contenders or behind them; None where the
    stock list has too few pieces for it, or a single contender was asked for. `sets` is how many were
    compared; `by_swing` says that it was by their swing, the stage having no requirements. `proved` is
    False where the search was given up, so that a better set is not ruled out.
    """

    names: tuple[str, ...]
    contenders: tuple[Contender, ...]
    nearest: Contender | None
    sets: int
    by_swing: bool
    proved: bool = True


def silent(done: float) -> None:
    """Tell nobody."""


def contest(
    stage: Stage,
    names: tuple[str, ...],
    values: Array,
    *,
    nearest: int | None,
    finalists: int = FINALISTS,
    progress: Progress = silent,
) -> Contest:
    """Compare S sets of values [Ω] for the resistors `names`, shape (S, P); `nearest` is the row of one.

    With a single one of the `finalists` the best at the corners wins, whatever requirements are judged by,
    and the nearest set is not held against it.

    With requirements, the smallest margin share over them and the standing checks decides. Without, it is
    failing checks, then how many tenths the collector current is off its target, then the swing. Then
    come nearness of the collector current to its target and fewer distinct values. The other resistors
    of the stage have values.
    """
    search = _Search(bench(_valued(stage, names, values[nearest or 0]), names), values, finalists, progress)
    home = [] if nearest is None or finalists == 1 else [nearest]
    known = {*search.finalists(beside=home), *home}
    return Contest(
        names=names,
        contenders=tuple(sorted((search.exact[row] for row in known), key=search.rule.own_key)[:finalists]),
        nearest=search.exact[home[0]] if home else None,
        sets=len(values),
        by_swing=search.rule.by_swing,
        proved=search.proved,
    )


@dataclass(frozen=True)
class _Rule:
    """What decides between sets, as columns to sort by, first to last, the smaller the better."""

    target: Target
    supply: float
    by_swing: bool

    def columns(self, shares: Array, failing: Array, swing: Array, current: Array, values: Array) -> Array:
        """A row per set, from arrays (S,) and the values (S, P); what is not solved is worst."""
        off = np.nan_to_num(np.abs(current / self.target.collector_current - 1.0), nan=inf)
        distinct = (np.diff(np.sort(values, axis=1), axis=1) > 0.0).sum(axis=1)
        first = [-np.round(shares, DIGITS), failing]
        if self.by_swing:
            room = np.nan_to_num(np.round(swing / self.supply, DIGITS), nan=-inf)
            first = [failing, np.floor(off / NEAR), -room]
        return np.column_stack([*first, off, distinct, values])

    def corner_key(self, contender: Contender) -> tuple[float, ...]:
        """The columns of one contender at the corners."""
        return self._key(contender, contender.corner_share, contender.failing_at_corners)

    def own_key(self, contender: Contender) -> tuple[float, ...]:
        """The columns of one contender by each limit's own method, then at the corners."""
        own = self._key(contender, contender.share, len(contender.failing))
        return (*own[: 3 if self.by_swing else 2], *self.corner_key(contender))

    def _key(self, contender: Contender, share: float, failing: int) -> tuple[float, ...]:
        shares, fails, swing, current = np.array([[share], [failing], [contender.swing], [contender.current]])
        return tuple(self.columns(shares, fails, swing, current, np.array([contender.values]))[0].tolist())


class _Search:
    """A branch and bound under way: bounds for all sets, exact figures for those that needed them."""

    def __init__(self, bench: Bench, values: Array, count: int, progress: Progress) -> None:
        self.bench, self.values, self.count, self.progress = bench, values, count, progress
        self.rule = _rule(bench.stage)
        self.everywhere = np.arange(len(bench.corners))
        self.pool = self._telling_corners()
        self.scores = hold_sets(bench, values, self.pool, progress=progress)
        self.held_everywhere = np.zeros(len(values), dtype=bool)
        self.exact: dict[int, Contender] = {}
        self.proved = True

    def finalists(self, *, beside: Sequence[int] = ()) -> list[int]:
        """The best sets, the best first, all held against everything, as are those `beside` them."""
        while True:
            order = self._order()
            leading = order[: self.count]
            if not self.held_everywhere[leading].all():
                self._hold_everywhere(order[~self.held_everywhere[order]][:_BATCH])
                continue
            bounded = [int(row) for row in leading if row not in self.exact]
            if not bounded:
                return [int(row) for row in leading]
            if len(self.exact) >= MOST_HELD:
                self.proved = False
                return sorted(self.exact, key=lambda row: self.rule.corner_key(self.exact[row]))[: self.count]
            self.hold_exactly([*bounded, *beside])

    def hold_exactly(self, rows: Sequence[int]) -> None:
        """Hold sets against everything: every corner, the inside of the box, each limit's own method."""
        new = [row for row in rows if row not in self.exact]
        if new:
            self.exact.update(zip(new, _contenders(self.bench, self.values[new]), strict=True))

    def _telling_corners(self) -> Indices:
        """The corners that are worst for the smallest, the middle and the largest set."""
        order = np.argsort(np.log(self.values).sum(axis=1), kind="stable")
        some = order[[0, len(order) // 2, -1]]
        return np.unique(hold_sets(self.bench, self.values[some], self.everywhere).worst)

    def _order(self) -> Indices:
        """All sets, the best first by what is known of them."""
        scores = self.scores
        shares, failing = scores.shares.min(axis=1), (~(scores.slack >= 0.0)).sum(axis=1)
        keys = self.rule.columns(shares, failing, scores.swing, scores.current, self.values)
        for row, contender in self.exact.items():
            keys[row] = self.rule.corner_key(contender)
        return np.lexsort(keys.T[::-1])

    def _hold_everywhere(self, sets: Indices) -> None:
        """Hold some sets at every corner, and all others at those that turned out to be worst."""
        held = hold_sets(self.bench, self.values[sets], self.everywhere)
        self.scores = self.scores.with_rows(sets, held)
        self.held_everywhere[sets] = True
        new, left = np.setdiff1d(held.worst, self.pool), np.flatnonzero(~self.held_everywhere)
        self.pool = np.union1d(self.pool, new)
        if new.size and left.size:
            again = hold_sets(self.bench, self.values[left], new)
            self.scores = self.scores.with_rows(left, self.scores.rows(left).worse(again))


def _rule(stage: Stage) -> _Rule:
    """The rule of a stage; one without a target would have nothing to choose."""
    assert stage.target is not None
    return _Rule(stage.target, stage.supply.voltage.nominal, not stage.requirements)


def _contenders(bench: Bench, values: Array) -> Iterator[Contender]:
    """Sets of values (S, P) held against everything."""
    stages = [_valued(bench.stage, bench.names, row) for row in values]
    vocabulary, sides = words(stages[0]), bench.sides
    held = hold_all(
        stages,
        {name: vocabulary[name] for name in sides},
        boards=finalist_boards(bench.stage),
        seed=_SEED,
        sides={name: side for name, side in sides.items() if side},
    )
    current = {CURRENT: vocabulary[CURRENT]}
    for row, stage, holding in zip(values, stages, held, strict=True):
        yield _contender(row, nominal(stage, current).values[CURRENT], holding)


def finalist_boards(stage: Stage) -> int:
    """How many boards each finalist is sampled with; one where no requirement is judged by its yield."""
    yields = [r.yield_at_least for r in stage.requirements if r.judged_by == "yield"]
    batch = batch_size(stage)
    few = all(allowed_failures(FINALIST_BOARDS, y, boards_per_batch=batch) >= 0 for y in yields)
    return (FINALIST_BOARDS if few else BOARDS) if yields else 1


def _contender(values: Array, current: float, held: Holding) -> Contender:
    """A set as it was held; one that runs away, or is not solved, at some corner is the worst there is."""
    corners = held.evidence.corners
    lost = corners.regions.keys() & {Region.RUNAWAY, Region.UNSOLVED}
    return Contender(
        values=tuple(values.tolist()),
        share=-inf if lost else _least(row.margin_share for row in held.rows),
        corner_share=-inf if lost else _least(row.corner_share for row in held.rows),
        smallest=held.rows[0],
        failing=held.rows if lost else tuple(row for row in held.rows if row.verdict == "fail"),
        failing_at_corners=sum(bool(lost) or not row.passes_at_corners for row in held.rows),
        current=current,
        corners=corners,
        swing=corners.ranges[SWING].low.value if SWING in corners.ranges and not lost else NAN,
        regions=tuple(sorted(lost)),
    )


def _least(shares: Iterable[float | None]) -> float:
    return min((-inf if share is None or np.isnan(share) else share for share in shares), default=inf)


def _valued(stage: Stage, names: Sequence[str], values: Array) -> Stage:
    given = dict(zip(names, values.tolist(), strict=True))
    resistors = tuple(replace(r, value=given.get(r.name, r.value)) for r in stage.resistors)
    return replace(stage, resistors=resistors)
