"""A spread: boards sampled by the thousand or the hundred million, and what they tell of a stage."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from concurrent.futures import Executor
from contextlib import AbstractContextManager, nullcontext
from dataclasses import dataclass
from typing import get_args

from biasband.boards.draws import batch_size, coordinates_from, numbers
from biasband.boards.estimates import from_plain, from_scramblings
from biasband.boards.in_use import PLACES
from biasband.boards.job import Job, merged
from biasband.boards.outside import Extended, Farthest, extended
from biasband.boards.quasi import Scrambled
from biasband.boards.streams import Plain, Source
from biasband.boards.tally import Bound, Scale, Tally
from biasband.boards.variance import VarianceCauses, variance_causes
from biasband.circuit.quantities import words
from biasband.constants import BOARDS
from biasband.errors import UsageError
from biasband.margins.holding import looked_into, nominal, points_met
from biasband.margins.limits import HeldLimit, required_limits
from biasband.signoff.beyond import Beyond, beyond
from biasband.signoff.crew import crew
from biasband.signoff.goals import Goal, read_goal
from biasband.signoff.sampling_run import Keep, Run, run
from biasband.signoff.spread_study import Sampling, SpreadStudy
from biasband.signoff.study import check_sampling, design
from biasband.stage import Stage
from biasband.values.choosing import Design
from biasband.variation.causes import causes
from biasband.variation.corners import Corners, corners
from biasband.variation.evaluation import cut_off_current
from biasband.variation.rss import Interval, rss

Watch = Callable[[str, int], AbstractContextManager[Callable[[float], None]]]
"""Shows what is being done, for how many boards (0: none), and is told the share that is done."""

MOST = 10**18
"""More boards than this have no numbers of their own."""

MOST_UNTIL = 2**24
"""Boards at which a run with a goal gives up, unless the caller says otherwise."""


def spread(
    stage: Stage,
    *,
    boards: int | None = None,
    seed: int = 1,
    sampling: Sampling = "plain",
    until: str | None = None,
    executor: Executor | None = None,
    cluster: str | None = None,
    keep: Keep | None = None,
    watch: Watch = lambda doing, boards: nullcontext(lambda done: None),
    notice: Callable[[str], None] = lambda text: None,
) -> SpreadStudy:
    """Sample boards of a stage, its missing values designed first, at every point of use.

    `until` ("yield ± 0.1 %", "2 digits") stops the run when so much is known, `boards` being the most
    it may take. Work is done by `executor`, by the scheduler at `cluster`, or by all cores of this
    machine where there is much of it: the result is the same bytes. `keep` is handed every block
    of boards, in order, which keeps the work in this process. A KeyboardInterrupt ends the run with what
    it has by then.

    Raises UsageError for boards or a seed that cannot be sampled with, a goal that cannot be read, or a
    cluster that cannot be reached; PhysicallyImpossible where the target cannot be met.
    """
    check_sampling(BOARDS if boards is None else boards, seed, most=MOST)
    if sampling not in get_args(Sampling):
        raise UsageError(f"sampling: one of {', '.join(get_args(Sampling))}; read {sampling!r}")
    if keep is not None and (executor is not None or cluster is not None):
        raise UsageError("keep: boards are handed over in this process, without an executor or a cluster")
    goal = None if until is None else read_goal(until, boards_per_batch=batch_size(stage))
    if goal is not None and sampling != "plain":
        raise UsageError("--until: judged on plain boards only, not on quasi-random ones")
    asked = boards or (MOST_UNTIL if goal else BOARDS)
    with watch("choosing values", 0) as progress:
        chosen = design(stage, progress=progress)
    prepared = _prepare(chosen.stage, sampling, asked, seed)
    job = prepared.job
    with (
        crew(0 if keep else job.source.boards, cluster=cluster, executor=executor) as hands,
        watch(f"sampling {job.source.boards} boards", job.source.boards) as progress,
    ):
        found = run(job, hands, goal=goal, keep=keep, progress=progress, notice=notice)
    with watch("looking for causes", 0):
        return _study(chosen, prepared, found, asked=asked, goal=goal)


@dataclass(frozen=True)
class _Prepared:
    """A job, and what its corners and limits are."""

    job: Job
    corners: Corners
    limits: tuple[HeldLimit, ...]
    rss: Mapping[str, Interval]


def _prepare(stage: Stage, sampling: Sampling, boards: int, seed: int) -> _Prepared:
    measures, cut_off = looked_into(stage), cut_off_current(stage)
    found = corners(stage, measures, cut_off=cut_off)
    limits = required_limits(stage.requirements, words(stage), nominal(stage, measures).values)
    points = points_met(stage, found, measures)
    summed = rss(stage, measures, cut_off=cut_off, points=points)
    names = dict.fromkeys(limit.measure.name for limit in limits)
    source: Source = (
        Plain(boards, seed, batch_size(stage))
        if sampling == "plain"
        else Scrambled.of(stage, boards=boards, seed=seed)
    )
    job = Job(
        stage=stage,
        scales={name: Scale(each.low.value, each.high.value) for name, each in found.ranges.items()},
        bounds=(
            *(limit.as_bound for limit in limits),
            *(Bound(name, summed[name].low, summed[name].high, required=False) for name in names),
        ),
        points=points,
        source=source,
        seed=seed,
        cut_off=cut_off,
    )
    return _Prepared(job, found, limits, summed)


def _study(chosen: Design, prepared: _Prepared, found: Run, *, asked: int, goal: Goal | None) -> SpreadStudy:
    """What the boards tell, together with what the corners do."""
    job, stage = prepared.job, prepared.job.stage
    total = merged(iter(found.tallies))
    wide = _widened(prepared, total)
    plain = isinstance(job.source, Plain)
    looked = _looked_for_causes(prepared, wide, total)
    return SpreadStudy(
        design=chosen,
        job=job,
        asked=asked,
        goal=goal,
        ending="interrupted" if looked is None else found.ending,
        tallies=found.tallies,
        estimates=from_plain(total, job.scales, boards_per_batch=batch_size(stage))
        if plain
        else from_scramblings(found.tallies, job.scales),
        limits=prepared.limits,
        corners=wide.corners,
        outside=wide.outside,
        rss=prepared.rss,
        causes=causes(stage, wide.corners.ranges, job.measures, cut_off=job.cut_off),
        shares={} if looked is None else looked.shares,
        beyond=() if looked is None else looked.beyond,
    )


@dataclass(frozen=True)
class _Looked:
    """What takes time when the boards are there."""

    shares: Mapping[str, VarianceCauses]
    beyond: tuple[Beyond, ...]


def _looked_for_causes(prepared: _Prepared, wide: Extended, total: Tally) -> _Looked | None:
    """Look for causes and rare failures; None where the user has had enough, the boards being safe."""
    job, stage, limits = prepared.job, prepared.job.stage, prepared.limits
    failures = (total.boards - total.held[: len(limits), 0]).tolist()
    try:
        return _Looked(
            variance_causes(stage, job.measures, job.points, seed=job.seed, cut_off=job.cut_off),
            beyond(stage, limits, wide.corners, job.points, failures, seed=job.seed, cut_off=job.cut_off),
        )
    except KeyboardInterrupt:
        return None


def _widened(prepared: _Prepared, total: Tally) -> Extended:
    """The corners, moved to any board that lies outside of them."""
    job, stage = prepared.job, prepared.job.stage
    lowest, highest = PLACES.index("lowest_in_use"), PLACES.index("highest_in_use")
    farthest = {
        name: Farthest(
            float(total.lowest[row, lowest]), float(total.highest[row, highest]),
            int(total.lowest_board[row, lowest]), int(total.highest_board[row, highest]),
        )
        for row, name in enumerate(job.scales)
        if total.solved[row].all()
    }  # fmt: skip
    return extended(
        stage, prepared.corners, job.measures, job.points, farthest,
        lambda board: coordinates_from(stage, job.source.board(numbers(stage), board)), cut_off=job.cut_off,
    )  # fmt: skip
