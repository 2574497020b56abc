"""Running tasks: in this process or by any executor, results in the order of the tasks.

An executor is anything with the interface of `concurrent.futures.Executor`: threads, processes, a cluster.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Generator
from concurrent.futures import Executor, Future
from typing import TypeVar

Result = TypeVar("Result")


def in_order(
    work: Callable[[int], Result], tasks: int, *, executor: Executor | None = None, ahead: int = 1
) -> Generator[Result, None, None]:
    """Do tasks 0, 1, 2 …; an executor has `ahead` of them in hand, and what is not wanted is taken back."""
    if executor is None:
        yield from map(work, range(tasks))
        return
    waiting: deque[Future[Result]] = deque()
    try:
        for task in range(tasks):
            waiting.append(executor.submit(work, task))
            if len(waiting) >= ahead:
                yield _oldest(waiting)
        while waiting:
            yield _oldest(waiting)
    finally:
        for each in waiting:
            each.cancel()


def _oldest(waiting: deque[Future[Result]]) -> Result:
    """Wait for the oldest; it is among those taken back until it is there."""
    result = waiting[0].result()
    waiting.popleft()
    return result
