"""What a spread is about: the quantities and sides that requirements are on, else the output's."""

from __future__ import annotations

from dataclasses import dataclass

from biasband.boards.estimates import Estimates, Figures
from biasband.circuit.quantities import Quantity
from biasband.circuit.topology import TOPOLOGIES, Node
from biasband.margins.limits import HeldLimit
from biasband.show.prose import limit_on, limit_text
from biasband.signoff.spread_study import SpreadStudy

_OUTPUTS = {Node.COLLECTOR: "collector_voltage", Node.EMITTER: "emitter_voltage"}


@dataclass(frozen=True)
class Focus:
    """A side of a quantity, with the limits that are on it, each with its row in `limits` of a study.

    `lower` says that the lowest in use counts.
    """

    measure: Quantity
    lower: bool
    limits: tuple[tuple[int, HeldLimit], ...] = ()

    @property
    def place(self) -> str:
        """The place of use that counts."""
        return "lowest_in_use" if self.lower else "highest_in_use"

    @property
    def words(self) -> str:
        """The place of use in words."""
        return "lowest in use" if self.lower else "highest in use"

    @property
    def title(self) -> str:
        """The limits on this side; the quantity and the place of use where there is none."""
        if not self.limits:
            return f"{self.measure.name}, {self.words}"
        return ", ".join(limit_title(limit) for _, limit in self.limits)

    @property
    def tightest(self) -> tuple[int, HeldLimit] | None:
        """The limit that the fewest boards hold."""
        side = max if self.lower else min
        return side(self.limits, key=lambda each: each[1].bound, default=None)

    def figures(self, study: SpreadStudy) -> Figures:
        """What boards showed at the place of use."""
        found: Estimates = study.estimates[self.measure.name]
        return found.lowest_in_use if self.lower else found.highest_in_use


def focuses(study: SpreadStudy) -> tuple[Focus, ...]:
    """Every side of a quantity that a limit is on, in the order of the requirements."""
    sides = dict.fromkeys((limit.measure.name, limit.lower) for limit in study.limits)
    rows = tuple(enumerate(study.limits))
    required = (tuple(row for row in rows if (row[1].measure.name, row[1].lower) == side) for side in sides)
    found = tuple(Focus(limits[0][1].measure, limits[0][1].lower, limits) for limits in required)
    return found or _main(study)


def _main(study: SpreadStudy) -> tuple[Focus, ...]:
    """Both sides of the output's voltage."""
    output = study.job.measures[_OUTPUTS[TOPOLOGIES[study.job.stage.topology].output]]
    return Focus(output, lower=True), Focus(output, lower=False)


def limit_title(limit: HeldLimit) -> str:
    """A limit with what it is on."""
    return f"{limit_label(limit)} {limit_text(limit)}"


def limit_label(limit: HeldLimit) -> str:
    """What a limit is on; one on the magnitude of what inverts says so."""
    return limit_on(limit) + (" (inverting)" if limit.bound != limit.limit else "")
