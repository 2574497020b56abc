"""What a contrast costs, as ratios: run `python tests/benchmarks/bench_contrast.py`.

The unit is one self-heated operating-point solve, as `bench_operating_point.py` measures it, a million at a
time. Goal: four free resistors in every topology at most 10 million solves.
"""

from __future__ import annotations

from pathlib import Path

from bench_operating_point import BOARDS, WARM, WIRING, boards
from clock import Task, shortest_each

from biasband.circuit.operating_point import solve
from biasband.files.stage_file import read_stage
from biasband.signoff.contrasting import contrast

SAMPLES = Path(__file__).parent.parent.parent / "samples"
NAMES = ("hive_microphone", "beacon_receiver")
GOAL = 10.0
REPEATS = 5


def main() -> None:
    """Print the ratios."""
    scenarios = boards(BOARDS)
    stages = {name: read_stage(SAMPLES / f"{name}.toml") for name in NAMES}
    tasks: dict[str, Task] = {"solve": lambda: solve(WIRING, WARM, "npn", scenarios)}
    for name, stage in stages.items():
        tasks[name] = lambda stage=stage: contrast(stage)  # type: ignore[misc]
    seconds = shortest_each(tasks, repeats=REPEATS)
    for name in NAMES:
        cost = seconds[name] / seconds["solve"]
        print(
            f"contrast of {name}: {seconds[name]:.1f} s, as much as {cost:.1f} million self-heated solves "
            f"(goal: at most {GOAL:g} million)"
        )


if __name__ == "__main__":
    main()
