"""Rare failures: how likely a board fails a limit, where none of many drawn boards does.

First the failing places are looked for (failing_places.py), then fresh boards are drawn mostly there
(proposal.py) and each failure is weighted by how much likelier it was made than it is: importance
sampling. Whatever the search found, the estimate has no bias; what is left to chance is its error.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from biasband.boards.draws import coordinates_from, numbers
from biasband.boards.failing_places import Failing, Slack, drawn, failing_places, named
from biasband.boards.in_use import in_use
from biasband.boards.intervals import Between, yield_interval
from biasband.boards.proposal import Proposal
from biasband.boards.tilted_box import parts
from biasband.circuit.quantities import Quantity
from biasband.circuit.scenarios import Array
from biasband.errors import UsageError
from biasband.stage import Stage
from biasband.variation.points_of_use import PointOfUse

DRAWS = 2**15
"""Boards of the estimate: a few thousand effective failures, so an error of a few per cent."""

FEWEST = 100.0
"""Effective failures behind a figure: an error of a tenth, and an interval that is nearly right."""

_AT_ODDS = 3.0
"""Beyond this factor, what the search found and what was drawn do not go together, and draws missed
failures: the search's own figures have errors of a third."""

_TWO_SIDED = 1.959964
"""The 97.5 % point of the normal distribution."""


@dataclass(frozen=True)
class Rare:
    """The probability that a board fails, with its error, and what it rests on.

    `interval` is two-sided 95 %. `effective_sample_size` is Kish's, (Σw)²/Σw² over the failing draws
    ("Survey Sampling", 1965, memory). `draws` counts the boards of the estimate, `unsolved` those of
    them that did not solve and count as failing, `solved` all boards that were solved, the search's too.
    Where not `resolved`, too few failures stand behind the probability to print it, and only the
    interval's upper end holds.
    """

    probability: float
    standard_error: float
    interval: Between
    effective_sample_size: float
    draws: int
    unsolved: int
    solved: int
    resolved: bool
    weighted: bool


def rare(slack: Slack, names: Sequence[str], *, seed: int, draws: int = DRAWS) -> Rare:
    """Estimate the probability that the slack of a board is negative or NaN.

    Numbers are independent and uniform. The draws are fresh, so the estimate has no bias whatever the search
    found; but a region of failures that the search missed is met by one draw in ten at random, which is next
    to never. Where fewer than `FEWEST` effective failures were drawn, or those drawn are at odds with those
    the search found, plain draws take their place, and their interval (Clopper–Pearson) is what can be said.
    Raises UsageError without a name, or with fewer draws than `FEWEST`.
    Source: Hesterberg, "Weighted average importance sampling and defensive mixture distributions",
    Technometrics 37 (1995).
    """
    if not names or draws < FEWEST:
        raise UsageError(f"rare: at least one number and {FEWEST:g} draws; read {len(names)} and {draws}")
    found = failing_places(slack, names, seed=seed)
    if len(found.places):
        proposal = Proposal.around([found.places[rows] for rows in parts(found.places)])
        drawing = _draw(slack, names, proposal, "rare estimate", draws=draws, seed=seed)
        if drawing.effective >= FEWEST and not _missed(found, drawing, proposal):
            p, error = drawing.probability, drawing.standard_error
            return _record(drawing, _interval(p, error), found.solved + draws, weighted=True)
    plain = _draw(slack, names, Proposal.plain(len(names)), "rare plain", draws=draws, seed=seed)
    solved = found.solved + draws + (draws if len(found.places) else 0)
    return _record(plain, yield_interval(plain.weights.size, draws), solved, weighted=False)


@dataclass(frozen=True)
class _Drawing:
    """The weights w of those of N drawn boards that failed, and what they come to."""

    weights: Array
    draws: int
    unsolved: int

    @property
    def probability(self) -> float:
        """`p = Σw/N`."""
        return float(np.sum(self.weights)) / self.draws

    @property
    def standard_error(self) -> float:
        """`s² = (Σw²/N − p²)/(N − 1)`; rather too large, each piece having its share of draws exactly."""
        variance = float(np.sum(self.weights**2)) / self.draws - self.probability**2
        return float(np.sqrt(max(variance, 0.0) / (self.draws - 1)))

    @property
    def effective(self) -> float:
        """Kish's effective sample size of the failures, `(Σw)²/Σw²`."""
        return float(np.sum(self.weights) ** 2 / np.sum(self.weights**2)) if self.weights.size else 0.0


def _draw(
    slack: Slack, names: Sequence[str], proposal: Proposal, purpose: str, *, draws: int, seed: int
) -> _Drawing:
    places = proposal.draw(drawn(purpose, names, slice(0, draws), seed=seed))
    distance = slack(named(names, places))
    failing = ~(distance >= 0.0)
    return _Drawing(proposal.weights(places)[failing], draws, int(np.sum(np.isnan(distance))))


def _missed(found: Failing, drawing: _Drawing, proposal: Proposal) -> bool:
    """Whether failures were found that were hardly drawn: too few of them, or such as have a great weight.

    Places found lie evenly among the failures, drawn ones by 1/w: so the mean of w there is Σw²/Σw here.
    """
    w = drawing.weights
    heavy = np.mean(proposal.weights(found.places)) > _AT_ODDS * np.sum(w**2) / np.sum(w)
    return bool(heavy or found.probability > _AT_ODDS * drawing.probability)


def _record(drawing: _Drawing, interval: Between, solved: int, *, weighted: bool) -> Rare:
    return Rare(
        probability=drawing.probability,
        standard_error=drawing.standard_error,
        interval=interval,
        effective_sample_size=drawing.effective,
        draws=drawing.draws,
        unsolved=drawing.unsolved,
        solved=solved,
        resolved=drawing.effective >= FEWEST,
        weighted=weighted,
    )


def _interval(probability: float, error: float) -> Between:
    """`p·e^{±1.96·s/p}`: the logarithm is nearer to normal, and a probability not below 0 (delta method)."""
    factor = float(np.exp(_TWO_SIDED * error / probability))
    return Between(probability / factor, min(probability * factor, 1.0))


def rare_failures(
    stage: Stage,
    measure: Quantity,
    limit: float,
    points: Sequence[PointOfUse],
    *,
    lower: bool,
    seed: int,
    cut_off: float,
    draws: int = DRAWS,
) -> Rare:
    """Estimate the probability that a board fails a limit at any of the points of use.

    `limit` [SI] has the measure's own sign (a gain of −100 is judged by magnitude: the caller turns it);
    `lower` says that it is a lower one, which the board's lowest in use must reach, else its highest
    must stay below. Boards are drawn as a spread draws them, each from a batch of its own.
    """

    measures = {measure.name: measure}

    def slack(uniforms: Mapping[str, Array]) -> Array:
        board = coordinates_from(stage, uniforms)
        met = in_use(stage, board, measures, points, cut_off=cut_off)
        _, lowest, highest = met.values[measure.name]
        return np.asarray(lowest - limit if lower else limit - highest)

    return rare(slack, [number.name for number in numbers(stage)], seed=seed, draws=draws)
