"""Runs a job: tallies come in until all boards are there, enough is known, or the user has had enough."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from typing import Literal

from biasband.boards.job import Job, SolvedBlock
from biasband.boards.running import in_order
from biasband.boards.tally import Tally
from biasband.signoff.crew import Crew
from biasband.signoff.goals import Goal
from biasband.stage import Stage

Ending = Literal["complete", "good enough", "not good enough", "interrupted"]
Keep = Callable[[Stage, SolvedBlock], None]
"""Is handed the stage, its values chosen, and every block of boards, in order."""

LONG = 60.0
"""[s] A run that will take longer says so first."""

_TASKS_IN_HAND = 2
"""Per worker, so that none waits."""


@dataclass(frozen=True)
class Run:
    """How a run ended, and its tallies: one of all boards, of quasi-random ones one for each scrambling."""

    tallies: tuple[Tally, ...]
    ending: Ending


def run(
    job: Job,
    hands: Crew,
    *,
    goal: Goal | None,
    keep: Keep | None,
    progress: Callable[[float], None],
    notice: Callable[[str], None],
) -> Run:
    """Do the tasks of a job; `notice` is told before a long run how long it will take.

    A KeyboardInterrupt ends it with the tallies so far, of which there must be one.
    """
    work = job.work if keep is None else partial(job.work, keep=partial(keep, job.stage))
    results = in_order(work, job.source.tasks, executor=hands.executor, ahead=_TASKS_IN_HAND * hands.workers)
    tallies: list[Tally] = []
    started = time.monotonic()
    try:
        for task, each in enumerate(results):
            _add(tallies, each, job.source.group(task))
            done = sum(tally.boards for tally in tallies)
            progress(done / job.source.boards)
            if goal is not None and goal.met(job, tallies[0], each):
                return Run(tuple(tallies), "good enough")
            if done == each.boards:
                _say_how_long(job, each, time.monotonic() - started, hands, notice)
    except KeyboardInterrupt:
        if not tallies:
            raise
        return Run(_whole(tallies), "interrupted")
    finally:
        results.close()
    return Run(tuple(tallies), "complete" if goal is None else "not good enough")


def _add(tallies: list[Tally], each: Tally, group: int) -> None:
    if group < len(tallies):
        tallies[group] = tallies[group].merged(each)
    else:
        tallies.append(each)


def _whole(tallies: list[Tally]) -> tuple[Tally, ...]:
    """The tallies that are as large as any: a part of a scrambling is no estimate like the others."""
    most = max(tally.boards for tally in tallies)
    return tuple(tally for tally in tallies if tally.boards == most)


def _say_how_long(
    job: Job, first: Tally, seconds: float, hands: Crew, notice: Callable[[str], None]
) -> None:
    """An estimate from the first task; while it was done every other worker did one too."""
    rate = first.boards * hands.workers / max(seconds, 1e-9)
    left = job.source.boards / rate
    if left > LONG:
        boards = f"{job.source.boards} boards at about {rate:.0f} a second"
        notice(f"{boards}: {duration(left)}; Ctrl-C ends it with the result so far")


def duration(seconds: float) -> str:
    """A time as one says it: "about 12 minutes", "about 43 days"."""
    for unit, length in (("year", 31_557_600.0), ("day", 86400.0), ("hour", 3600.0), ("minute", 60.0)):
        if seconds >= 1.5 * length:
            return f"about {seconds / length:.0f} {unit}s"
    return f"about {seconds:.0f} second{'' if round(seconds) == 1 else 's'}"
