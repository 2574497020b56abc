"""What a spread costs, as ratios: run `python tests/benchmarks/bench_spread.py`.

The unit is one pass of `np.exp` over as many values in the cache as there are scenarios, boards times points
of use. Goals: 2^20 scenarios of a self-heated four-resistor stage, drawn, solved, all quantities read and
counted, in at most 250 passes on one core; two worker processes at least 1.7 times as fast. What a
loop over scipy.optimize.root takes for the same equations stands in `bench_operating_point.py`.
"""

from __future__ import annotations

import multiprocessing
from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

from bench_operating_point import BOARDS, exponential_pass
from clock import Task, shortest_each

from biasband.boards.job import Job, merged
from biasband.boards.running import in_order
from biasband.boards.streams import SEQUENCE, Plain
from biasband.boards.tally import Scale, Tally
from biasband.files.stage_file import read_stage
from biasband.margins.holding import looked_into
from biasband.signoff.study import design
from biasband.stage import Stage
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import points_of_use

SAMPLE = Path(__file__).parent.parent.parent / "samples" / "hive_microphone.toml"
SCENARIOS = 2**20
REPEATS = 5


def uncoupled(stage: Stage) -> Stage:
    """A stage whose capacitors and ripple are left out: one solve a scenario."""
    return replace(stage, signal=None, supply=replace(stage.supply, ripple_peak=0.0))


def job_of(stage: Stage, scenarios: int) -> Job:
    """A run of so many scenarios of a stage, everything looked into, no limits."""
    measures, cut_off, points = looked_into(stage), cut_off_current(stage), points_of_use(stage)
    found = corners(stage, measures, cut_off=cut_off)
    scales = {name: Scale(each.low.value, each.high.value) for name, each in found.ranges.items()}
    return Job(stage, scales, (), tuple(points), Plain(-(-scenarios // len(points)), 1), 1, cut_off)


def whole(job: Job, executor: Executor | None = None) -> Tally:
    """Every task of a job."""
    return merged(in_order(job.work, job.source.tasks, executor=executor, ahead=4))


def main() -> None:
    """Print the ratios."""
    stage = design(read_stage(SAMPLE)).stage
    jobs = {"plain": job_of(uncoupled(stage), SCENARIOS), "ripple coupled": job_of(stage, SCENARIOS)}
    tasks: dict[str, Task] = {"np.exp": exponential_pass}
    for name, job in jobs.items():
        tasks[name] = lambda job=job: whole(job)  # type: ignore[misc]
    seconds = shortest_each(tasks, repeats=REPEATS)
    for name, job in jobs.items():
        count = job.source.boards * len(job.points)
        passes = seconds[name] / seconds["np.exp"] * BOARDS / count
        print(f"{name}: {count} scenarios, {len(job.scales)} quantities: {passes:.0f} passes (goal: 250)")

    job = replace(jobs["plain"], source=Plain(8 * SEQUENCE, 1))
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(2, mp_context=context) as two, ThreadPoolExecutor(2) as threads:
        whole(replace(job, source=Plain(4 * SEQUENCE, 1)), two)  # started, and its code read
        seconds = shortest_each(
            {
                "one": lambda: whole(job),
                "processes": lambda: whole(job, two),
                "threads": lambda: whole(job, threads),
            },
            repeats=REPEATS,
        )
    for name in ("processes", "threads"):
        print(f"two {name}: {seconds['one'] / seconds[name]:.2f} times as fast as one (goal: 1.7)")


if __name__ == "__main__":
    main()
