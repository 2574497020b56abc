"""The crew of a run, who do its tasks: this process, all cores of this machine, a cluster, or who is sent."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import Executor
from contextlib import contextmanager
from dataclasses import dataclass

from biasband.boards.streams import SEQUENCE
from biasband.errors import UsageError
from biasband.signoff.cluster import scheduler_at
from biasband.signoff.cores import cores, may_have_children, processes

LARGE = 2**20
"""Boards from which a run takes all cores.

Measured on two cores, the start of the processes (1 to 2 s) included: by two of them 2^19 boards went
0.75 times as fast as in this process, 2^20 boards 1.25 to 1.55 times.
"""

UNKNOWN = 32
"""Workers that an executor is taken to have which does not say: so many tasks wait at little cost."""


@dataclass(frozen=True)
class Crew:
    """Who does the tasks of a run: an executor (None: this process), and how many it does at a time."""

    executor: Executor | None
    workers: int


@contextmanager
def crew(boards: int, *, cluster: str | None = None, executor: Executor | None = None) -> Iterator[Crew]:
    """Find who does a run of so many boards, and send them home afterwards.

    An executor handed in is used as it is and stays open. `cluster` is the address of a scheduler of
    dask.distributed, "tcp://host:port". With neither, from `LARGE` boards on, all cores of this machine
    work. What is submitted must be importable by the workers, as a `Job` is.

    Raises UsageError for a cluster and an executor at once, a cluster that cannot be worked with, or
    processes that do not start; BiasbandError where workers are lost on the way and nobody can go on.
    """
    if cluster is not None and executor is not None:
        raise UsageError("cluster, executor: one of the two")
    if executor is not None:
        # There is no public word for it; both pools of the standard library have this one.
        yield Crew(executor, getattr(executor, "_max_workers", UNKNOWN))
    elif cluster is not None:
        with scheduler_at(cluster) as client:
            yield Crew(client.get_executor(pure=False), sum(client.nthreads().values()))
    elif (count := _wanted(boards)) > 1:
        with processes(count) as pool:
            yield Crew(pool, count)
    else:
        yield Crew(None, 1)


def _wanted(boards: int) -> int:
    """How many processes are worth starting: 1 stands for this one."""
    if boards < LARGE or not may_have_children():
        return 1
    return min(cores(), -(-boards // SEQUENCE))
