"""What the joint choice of values costs, as ratios: run `python tests/benchmarks/bench_choice.py`.

The unit is one self-heated operating-point solve, as `bench_operating_point.py` measures it, a million
at a time. Goals: four free resistors in E24, 3 steps either way (2401 sets), at most 2.5 million solves;
in E96, 5 steps either way (14 641 sets), at most 4 million.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from bench_operating_point import BOARDS, WARM, WIRING, boards
from clock import Task, shortest_each

from biasband.circuit.operating_point import solve
from biasband.files.series_files import load_all
from biasband.files.stage_file import read_stage
from biasband.stage import Stage
from biasband.values.choosing import choose
from biasband.variation.contributors import axes

SAMPLE = Path(__file__).parent.parent.parent / "samples" / "hive_microphone.toml"
REPEATS = 5


def searched(stage: Stage, series: str, steps: int) -> Stage:
    """The stage with every resistor free in a series, looked for so many steps either way."""
    resistors = tuple(replace(r, series=series, search_steps=steps) for r in stage.resistors)
    return replace(stage, resistors=resistors)


def main() -> None:
    """Print the ratios."""
    stage, scenarios = read_stage(SAMPLE), boards(BOARDS)
    cases = {"E24": (searched(stage, "E24", 3), 2.5), "E96": (searched(stage, "E96", 5), 4.0)}
    for name, (of, goal) in tuple(cases.items()):
        cases[f"{name}, no requirements"] = replace(of, requirements=()), goal
    tasks: dict[str, Task] = {"solve": lambda: solve(WIRING, WARM, "npn", scenarios)}
    for name, (of, _) in cases.items():
        tasks[name] = lambda of=of: choose(of, load_all())  # type: ignore[misc]
    seconds = shortest_each(tasks, repeats=REPEATS)
    for name, (of, goal) in cases.items():
        found, cost = choose(of, load_all()).contest, seconds[name] / seconds["solve"]
        sets = 0 if found is None else found.sets
        print(
            f"{name}: {sets} sets, {len(axes(stage))} contributors, {seconds[name]:.1f} s, as much as "
            f"{cost:.1f} million self-heated solves (goal: at most {goal} million)"
        )


if __name__ == "__main__":
    main()
