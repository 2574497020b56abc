"""The clock of the benchmarks."""

from __future__ import annotations

import time
from collections.abc import Callable


def shortest(task: Callable[[], object], *, repeats: int) -> float:
    """The shortest of some runs [s]: what the machine does when nobody disturbs it."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        task()
        times.append(time.perf_counter() - start)
    return min(times)
