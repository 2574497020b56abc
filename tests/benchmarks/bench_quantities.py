"""What reading all quantities costs beside the solve: run `python tests/benchmarks/bench_quantities.py`.

The unit is that of `bench_operating_point.py`, a pass of `np.exp` over as many in-cache values. Goal: with
draws and summaries, 250 passes in all, of which the quantities should take no more than about 60.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

from bench_operating_point import BOARDS, exponential_pass
from clock import Task, shortest_each

from biasband.boards.draws import coordinates
from biasband.circuit.quantities import vocabulary
from biasband.circuit.reading import read
from biasband.circuit.scenarios import Scenarios
from biasband.files.stage_file import read_stage
from biasband.margins.holding import looked_into
from biasband.signoff import study
from biasband.stage import Stage
from biasband.variation.contributors import Coordinates, realise
from biasband.variation.evaluation import evaluate
from biasband.variation.points_of_use import points_of_use

SAMPLE = Path(__file__).parent.parent.parent / "samples" / "hive_microphone.toml"
CHUNK, REPEATS = 16384, 200


@dataclass(frozen=True)
class Case:
    """A stage and its boards at a point of use."""

    stage: Stage
    x: Coordinates

    @property
    def scenarios(self) -> Scenarios:
        """The boards' values."""
        return realise(self.stage, self.x)

    def tasks(self, name: str) -> dict[str, Task]:
        """What is timed: to realise; to solve as well; to read all quantities on top of both."""
        measures, scenarios = looked_into(self.stage), self.scenarios
        return {
            f"{name}, realise": lambda: self.scenarios,
            f"{name}, solve": lambda: read(self.stage, scenarios),
            f"{name}, all": lambda: evaluate(self.stage, self.x, measures, cut_off=1e-5),
        }


def case(stage: Stage) -> Case:
    """A chunk of boards in the heat, without ripple: that is another solve, and no reading."""
    quiet = replace(stage, supply=replace(stage.supply, ripple_peak=0.0))
    hot = points_of_use(quiet)[-1]
    return Case(quiet, {**coordinates(quiet, slice(0, CHUNK), seed=1), **hot.coordinates})


def each_quantity(of: Case) -> dict[str, Task]:
    """Every quantity alone, from a reading that nothing was read of yet."""
    reading = read(of.stage, of.scenarios)
    names = tuple(resistor.name for resistor in of.stage.resistors)
    rows = {name: row for name, row in vocabulary(names).items() if not row.costly}
    return {name: partial(lambda row: row.read(replace(reading)), row) for name, row in rows.items()}


def main() -> None:
    """Print the ratios."""
    stage = study.design(read_stage(SAMPLE)).stage
    cases = {"without [signal]": case(replace(stage, signal=None)), "with [signal]": case(stage)}
    tasks: dict[str, Task] = {"np.exp": exponential_pass}
    for name, of in cases.items():
        tasks |= of.tasks(name)
    seconds = shortest_each(tasks | each_quantity(cases["with [signal]"]), repeats=REPEATS)
    one_pass = seconds.pop("np.exp") * CHUNK / BOARDS
    passes = {name: taken / one_pass for name, taken in seconds.items()}
    for name in cases:
        realised, solved, everything = (passes[f"{name}, {what}"] for what in ("realise", "solve", "all"))
        print(
            f"divider {name}: realise {realised:.0f}, solve {solved:.0f}, all quantities and regions "
            f"{everything - realised - solved:.0f}, together {everything:.0f} passes of np.exp"
        )
    alone = sorted((name for name in passes if name not in tasks), key=lambda name: -passes[name])
    print("alone, with [signal]:", ", ".join(f"{name} {passes[name]:.1f}" for name in alone))


if __name__ == "__main__":
    main()
