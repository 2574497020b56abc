"""Contrast: one target in every topology, each with the values that it would be bought with."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from math import nan
from typing import TYPE_CHECKING

from biasband.boards.outside import Outside
from biasband.circuit.quantities import words
from biasband.circuit.topology import TOPOLOGIES, Topology
from biasband.constants import BOARDS
from biasband.errors import PhysicallyImpossible, UsageError
from biasband.margins.holding import Holding, Nominal, hold, nominal
from biasband.margins.limits import required_limits
from biasband.margins.records import Margin
from biasband.margins.verdict import Verdict, judge
from biasband.signoff.intake import known_series
from biasband.signoff.merits import Strength, strengths
from biasband.signoff.recasting import LeftOut, Recast, recast, target_of
from biasband.signoff.steadiness import CURRENT, Steadiness, steadiness
from biasband.signoff.study import CHOOSING, check_sampling
from biasband.signoff.warnings import warnings_of
from biasband.stage import Stage, Target, Transistor
from biasband.values.choosing import Design, choose
from biasband.values.joint import FINALISTS, Progress, silent
from biasband.variation.corners import Corners, corners
from biasband.variation.evaluation import Measures, cut_off_current

if TYPE_CHECKING:
    import pandas as pd

SWING = "symmetric_peak_swing"
SHOWN = (CURRENT, "supply_current", "voltage_gain", "input_resistance", "output_resistance")
"""What is shown of a nominal point."""


@dataclass(frozen=True)
class Trial:
    """One topology designed, snapped by its worst case, held against its limits and judged.

    `swing` [V] is the smallest symmetric one at any corner.
    """

    design: Design
    nominal: Nominal
    held: Holding
    verdict: Verdict
    warnings: tuple[str, ...]
    steadiness: Steadiness
    swing: float

    @property
    def smallest(self) -> Margin | None:
        """The row with the smallest margin."""
        return self.held.rows[0] if self.held.rows else None

    @cached_property
    def figures(self) -> Mapping[str, float]:
        """What topologies are compared by [SI]."""
        values, smallest = self.nominal.values, self.smallest
        share = None if smallest is None else smallest.margin_share
        return {
            "parts": float(len(self.design.parts)),
            "current_ratio": self.steadiness.current_ratio,
            "swing": self.swing,
            "margin_share": nan if share is None else share,
            **{name: values[name] for name in SHOWN},
            "voltage_gain": abs(values["voltage_gain"]),
        }


@dataclass(frozen=True)
class Contrasted:
    """One topology: its trial, or the problem that leaves none; what differs there, what it is best at."""

    topology: str
    trial: Trial | None
    problem: str
    left_out: tuple[LeftOut, ...] = ()
    differs: tuple[str, ...] = ()
    strengths: tuple[Strength, ...] = ()

    @property
    def passes(self) -> bool:
        """Whether there is a trial with a verdict of pass."""
        return self.trial is not None and self.trial.verdict.outcome == "pass"


@dataclass(frozen=True)
class Contrast:
    """Every topology with the same target, the stage's own first; `lent` where its nominal point lent it."""

    stage: Stage
    target: Target
    lent: bool
    boards: int
    seed: int
    rows: tuple[Contrasted, ...]

    @property
    def passing(self) -> tuple[Contrasted, ...]:
        """The topologies that pass."""
        return tuple(row for row in self.rows if row.passes)

    @property
    def table(self) -> pd.DataFrame:
        """A row per topology: its verdict, and what topologies are compared by [SI]."""
        from biasband.signoff.frames import contrast_frame

        return contrast_frame(self.rows)


def contrast(stage: Stage, *, boards: int = BOARDS, seed: int = 1, progress: Progress = silent) -> Contrast:
    """Design a stage's target in every topology, hold each against the same requirements and compare.

    In its own topology the stage keeps the values that it gives; the others are designed anew, in their
    plainest form. A stage without a target lends its nominal point. What each is best at is said among those
    that pass, or among all where none does. `boards` are sampled of each.

    Raises UsageError for boards or a seed that cannot be sampled with; PhysicallyImpossible where the nominal
    point cannot lend a target. A topology that cannot be built is a row with the reason.
    """
    check_sampling(boards, seed)
    target = target_of(stage)
    names = [stage.topology, *(name for name in TOPOLOGIES if name != stage.topology)]
    rows = []
    for place, name in enumerate(names):
        rows.append(
            _contrasted(
                stage, target, TOPOLOGIES[name], boards=boards, seed=seed,
                progress=lambda done, place=place: progress((place + done) / len(names)),  # type: ignore[misc]
            )
        )  # fmt: skip
        progress((place + 1) / len(names))
    return Contrast(stage, target, stage.target is None, boards, seed, tuple(_compared(rows)))


def _compared(rows: Sequence[Contrasted]) -> Iterator[Contrasted]:
    """The rows with what each is best at, among those that pass or, where none does, among all."""
    pool = [k for k, row in enumerate(rows) if row.passes] or range(len(rows))
    figures = {k: _comparable(rows[k], trial) for k in pool if (trial := rows[k].trial) is not None}
    best = dict(zip(figures, strengths(list(figures.values())), strict=True))
    for k, row in enumerate(rows):
        yield replace(row, strengths=best.get(k, ()))


def _comparable(row: Contrasted, trial: Trial) -> Mapping[str, float]:
    """What a row is compared by; its margin only where it is held against all that the others are."""
    return {**trial.figures, "margin_share": nan} if row.left_out else trial.figures


def _contrasted(
    stage: Stage, target: Target, topology: Topology, *, boards: int, seed: int, progress: Progress
) -> Contrasted:
    try:
        new = recast(stage, target, topology)
        finalists = FINALISTS if topology.name == stage.topology else 1
        trial = _tried(new, finalists=finalists, boards=boards, seed=seed, progress=progress)
    except PhysicallyImpossible as error:
        return Contrasted(topology.name, None, "; ".join(fault.problem for fault in error.faults))
    except UsageError as error:
        return Contrasted(topology.name, None, str(error))
    return Contrasted(topology.name, trial, "", new.left_out, new.differs)


def _tried(new: Recast, *, finalists: int, boards: int, seed: int, progress: Progress) -> Trial:
    """Design a recast stage, hold it against its limits and judge it."""
    known = known_series(new.stage)
    chosen = choose(new.stage, known, finalists=finalists, progress=lambda done: progress(CHOOSING * done))
    stage, sides = chosen.stage, _sides(chosen.stage)
    here = nominal(stage, _named(stage, SHOWN))
    held = hold(
        stage, _named(stage, sides), boards=_sampled(stage, boards), seed=seed,
        sides={name: side for name, side in sides.items() if side}, found=_found(chosen, sides),
    )  # fmt: skip
    evidence = replace(held.evidence, outside=tuple(_looked_for(held.evidence.outside, sides)))
    return Trial(
        design=chosen,
        nominal=here,
        held=replace(held, evidence=evidence),
        verdict=judge(stage, here.region, held.rows, held.standing, evidence),
        warnings=warnings_of(chosen, here.values, evidence),
        steadiness=steadiness(stage),
        swing=_smallest_swing(stage, evidence.corners, sides),
    )


def _found(chosen: Design, sides: Mapping[str, float]) -> Corners | None:
    """The corners that the winner of a contest was held at; None where they lack what is looked for."""
    found = None if chosen.contest is None else chosen.contest.contenders[0].corners
    return found if found is not None and sides.keys() <= found.ranges.keys() else None


def _smallest_swing(stage: Stage, found: Corners, sides: Mapping[str, float]) -> float:
    """The smallest symmetric swing [V] at any corner."""
    if sides.get(SWING, 1.0) > 0.0:
        found = corners(stage, _named(stage, [SWING]), cut_off=cut_off_current(stage), sides={SWING: -1.0})
    return found.ranges[SWING].low.value


def _named(stage: Stage, names: Iterable[str]) -> Measures:
    vocabulary = words(stage)
    return {name: vocabulary[name] for name in names}


def _sampled(stage: Stage, boards: int) -> int:
    """How many boards are sampled: one where nothing is judged by its yield, which tells as much."""
    return boards if any(each.judged_by == "yield" for each in stage.requirements) else 1


def _sides(stage: Stage) -> Mapping[str, float]:
    """What the worst case is looked for of, each with the side that matters: −1 low, +1 high, 0 both."""
    asked: dict[str, set[float]] = {}
    here = nominal(stage, _named(stage, {each.quantity for each in stage.requirements})).values
    for limit in required_limits(stage.requirements, words(stage), here):
        asked.setdefault(limit.measure.name, set()).add(-1.0 if limit.lower else 1.0)
    if isinstance(stage.transistor, Transistor) and stage.transistor.gain_curve is not None:
        asked[CURRENT] = {-1.0, 1.0}  # whether it leaves the curve
    return {name: sum(signs) for name, signs in asked.items()}


def _looked_for(outside: Sequence[Outside], sides: Mapping[str, float]) -> Iterator[Outside]:
    """Boards beyond the ends that were looked for: the other ends are merely what came along."""
    for each in outside:
        if sides[each.measure] * (each.value - each.limit) >= 0.0:
            yield each
