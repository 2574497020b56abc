"""A job: everything that a task of a run needs, in a form that travels to another process."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from biasband.boards.counting import Counter, Moment
from biasband.boards.draws import coordinates_from, numbers
from biasband.boards.in_use import InUse, in_use
from biasband.boards.streams import Block, Source, uniform
from biasband.boards.tally import Bound, Scale, Tally
from biasband.circuit.quantities import words
from biasband.stage import Stage
from biasband.variation.contributors import RIPPLE, Coordinates, use_axes
from biasband.variation.distributions import PLAIN, UNIFORM
from biasband.variation.evaluation import Measures, evaluate
from biasband.variation.points_of_use import PointOfUse


@dataclass(frozen=True)
class Job:
    """A run of boards: the stage, what is looked into and between which limits, where the boards come from.

    `scales` holds the measures by name; `bounds` are limits to count the boards that hold them; `points`
    are where every board is solved, nominal use first.
    """

    stage: Stage
    scales: Mapping[str, Scale]
    bounds: tuple[Bound, ...]
    points: tuple[PointOfUse, ...]
    source: Source
    seed: int
    cut_off: float

    @property
    def measures(self) -> Measures:
        """The measures themselves, which do not travel."""
        vocabulary = words(self.stage)
        return {name: vocabulary[name] for name in self.scales}

    def work(self, task: int, *, keep: Callable[[SolvedBlock], None] | None = None) -> Tally:
        """Tally the boards of one task; `keep` is handed every block of them, in order."""
        counter = Counter(self.scales, self.bounds)
        for block in self.solved(task):
            counter.add(block.found, first_board=block.first, moment=block.moment)
            if keep is not None:
                keep(block)
            del block  # so that the next is solved in its memory
        return counter.tally()

    def solved(self, task: int) -> Iterator[SolvedBlock]:
        """Draw and solve the boards of one task, block by block."""
        measures, taken = self.measures, numbers(self.stage)
        return (self._solved(block, measures) for block in self.source.blocks(taken, task))

    def _solved(self, block: Block, measures: Measures) -> SolvedBlock:
        drawn = coordinates_from(self.stage, block.uniforms)
        found = in_use(self.stage, drawn, measures, self.points, cut_off=self.cut_off)
        return SolvedBlock(block.first, drawn, found, self._moment(block, drawn, measures))

    def _moment(self, block: Block, drawn: Coordinates, measures: Measures) -> Moment:
        """Lowest and highest of each bounded measure where each board is at a random moment in use."""
        wanted = {bound.measure: measures[bound.measure] for bound in self.bounds}
        if not wanted:
            return {}
        count = len(next(iter(block.uniforms.values())))
        moment = moments(self.stage, slice(block.first, block.first + count), seed=self.seed)
        outcome = evaluate(self.stage, {**drawn, **moment}, wanted, cut_off=self.cut_off)
        return {name: (outcome.low[name], outcome.high[name]) for name in wanted}


@dataclass(frozen=True)
class SolvedBlock:
    """Some boards in a row, numbered from `first`: coordinates by draw, values in use and at a moment."""

    first: int
    drawn: Coordinates
    found: InUse
    moment: Moment


def merged(tallies: Iterator[Tally]) -> Tally:
    """The tally of all, of which there is one at least."""
    total = next(tallies)
    for each in tallies:
        total = total.merged(each)
    return total


def moments(stage: Stage, rows: slice, *, seed: int) -> Coordinates:
    """A random moment in use for each board: uniform within each range, ripple as a sine meets it."""
    shapes = {axis.name: PLAIN["sine"] if axis.name == RIPPLE else UNIFORM for axis in use_axes(stage)}
    return {name: shape.quantile(uniform(f"moment {name}", rows, seed)) for name, shape in shapes.items()}
