"""The clock of the benchmarks."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping

Task = Callable[[], object]


def shortest(task: Task, *, repeats: int) -> float:
    """The shortest of some runs [s]: what the machine does when nobody disturbs it."""
    return shortest_each({"": task}, repeats=repeats)[""]


def shortest_each(tasks: Mapping[str, Task], *, repeats: int) -> dict[str, float]:
    """The shortest run [s] of each task, taken in turns, so that a slow minute slows them all alike."""
    times: dict[str, list[float]] = {name: [] for name in tasks}
    for _ in range(repeats):
        for name, task in tasks.items():
            start = time.perf_counter()
            task()
            times[name].append(time.perf_counter() - start)
    return {name: min(taken) for name, taken in times.items()}
