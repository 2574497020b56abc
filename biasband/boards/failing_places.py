"""Failing places: where in the cube of uniform numbers boards fail, however rarely.

Subset simulation: of a population drawn anywhere, the tenth with the least slack are the parents of
the next, which walks about but never above their slack, and so on until a tenth fails. It finds
the failures and a first figure of how rare they are; rare.py judges by draws of its own.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.boards.proposal import Proposal
from biasband.boards.streams import Number, plain
from biasband.boards.tilted_box import normal_scores, parts
from biasband.circuit.scenarios import Array

Slack = Callable[[Mapping[str, Array]], Array]
"""Distances to a limit (N,) of boards with these uniform numbers in [0, 1], (N,) each by name.

Negative fails; NaN is not solved, and counts as failing.
"""

PARENTS, STEPS = 800, 9
"""So many of a population are parents of the next, and each goes as many steps: ρ = 1/(1 + 9) = 0.1."""

_MOST_LEVELS = 12
"""Failures down to about one in 1e13 are followed, in 2^17 boards with those of the estimate."""

_FIRST_WIDTH, _ACCEPTANCE = 0.6, 0.44
"""Of short steps: the first, in deviations of the walker's part, and the share of them to be taken."""


@dataclass(frozen=True)
class Failing:
    """Failing places (M, K), a column for each name; none where none was found.

    `probability` is what subset simulation makes of it, 0 where none was found; `solved` counts the
    boards that were solved for it.
    """

    places: Array
    probability: float
    solved: int


@dataclass(frozen=True)
class _Walkers:
    """Boards at places (N, K) of the cube, and their slack (N,), −inf where not solved."""

    places: Array
    slack: Array

    def at(self, rows: NDArray[np.intp] | NDArray[np.bool_]) -> _Walkers:
        return _Walkers(self.places[rows], self.slack[rows])

    def moved(self, taken: NDArray[np.bool_], tried: _Walkers) -> _Walkers:
        """The walkers after those steps that were taken."""
        places = np.where(taken[:, None], tried.places, self.places)
        return _Walkers(places, np.where(taken, tried.slack, self.slack))


def drawn(purpose: str, names: Sequence[str], rows: slice, *, seed: int) -> Array:
    """Random numbers in [0, 1) of the boards at `rows`, (N, K); each name and purpose has its own stream."""
    numbers = [Number(f"{purpose}: {name}") for name in names]
    return np.stack([*plain(numbers, rows, seed=seed).values()], axis=1)


def named(names: Sequence[str], places: Array) -> dict[str, Array]:
    """Places of the cube, (N, K), as uniform numbers by name."""
    return {name: places[:, k] for k, name in enumerate(names)}


def failing_places(slack: Slack, names: Sequence[str], *, seed: int) -> Failing:
    """Find places where boards fail, from level to level.

    Finds several regions at once, each as long as about one in forty of every population lies on
    the way to it; one that no smaller slack leads to is missed.
    Source: Au & Beck, "Estimation of small failure probabilities in high dimensions by subset
    simulation", Probabilistic Engineering Mechanics 16 (2001).
    """
    descent, share, last = _Descent(slack, tuple(names), seed), 1.0, np.inf
    walkers = descent.start()
    for _ in range(_MOST_LEVELS):
        parents = walkers.at(np.argsort(walkers.slack, kind="stable")[:PARENTS])
        level = float(parents.slack[-1])
        if not 0.0 <= level < last:
            break
        walkers, last, share = descent.walk(parents, level), level, share / (1 + STEPS)
    failing = walkers.slack < 0.0
    return Failing(walkers.places[failing], share * float(np.mean(failing)), descent.solved)


@dataclass
class _Descent:
    """The walks of one search; its random numbers go on where those of the last walk ended.

    Every walk keeps boards of any slack up to the level as likely as they are. Short steps, as wide as
    the parts that parents lie in, follow any shape; leaps anywhere keep the regions in proportion.
    Source: Papaioannou, Betz, Zwirglmaier & Straub, "MCMC algorithms for subset simulation",
    Probabilistic Engineering Mechanics 41 (2015), for short steps; for leaps Tierney, "Markov chains for
    exploring posterior distributions", Annals of Statistics 22 (1994): the independence chain.
    """

    slack: Slack
    names: tuple[str, ...]
    seed: int
    solved: int = 0
    width: float = _FIRST_WIDTH

    def start(self) -> _Walkers:
        """A population anywhere in the cube."""
        return self._solve(self._random(PARENTS * (1 + STEPS)))

    def walk(self, parents: _Walkers, level: float) -> _Walkers:
        """The next population: the parents, and where each step led them, never above the level."""
        population = [parents, *self._steps(parents, level)]
        places, slack = ([getattr(each, name) for each in population] for name in ("places", "slack"))
        return _Walkers(np.concatenate(places), np.concatenate(slack))

    def _steps(self, walkers: _Walkers, level: float) -> Iterator[_Walkers]:
        divided = [*parts(walkers.places)]
        leaps = Proposal.around([walkers.places[rows] for rows in divided])
        spread = _spread(walkers.places, divided)
        for step in range(STEPS):
            walkers = self._leap(walkers, leaps, level) if step % 2 else self._step(walkers, spread, level)
            yield walkers

    def _step(self, walkers: _Walkers, spread: Array, level: float) -> _Walkers:
        """A short step in normal scores: `z' = √(1 − σ²)·z + σ·ξ`."""
        from scipy.special import ndtr

        sigma = np.minimum(self.width * spread, 1.0)
        kept = np.sqrt(1.0 - sigma**2) * normal_scores(walkers.places)
        tried = self._solve(ndtr(kept + sigma * normal_scores(self._random(len(spread)))))
        taken = tried.slack <= level
        self.width *= float(np.exp(np.mean(taken) - _ACCEPTANCE))
        return walkers.moved(taken, tried)

    def _leap(self, walkers: _Walkers, leaps: Proposal, level: float) -> _Walkers:
        """A leap to a place of the proposal, taken with probability `min(1, w'/w)`."""
        count = len(walkers.slack)
        rows = slice(self.solved, self.solved + count)
        chance = drawn("rare search", ["leap", "order"], rows, seed=self.seed)
        tried = self._solve(leaps.draw(self._random(count))[np.argsort(chance[:, 1])])
        likely = chance[:, 0] * leaps.weights(walkers.places) <= leaps.weights(tried.places)
        return walkers.moved(likely & (tried.slack <= level), tried)

    def _random(self, count: int) -> Array:
        rows = slice(self.solved, self.solved + count)
        return drawn("rare search number", self.names, rows, seed=self.seed)

    def _solve(self, places: Array) -> _Walkers:
        self.solved += len(places)
        slack = self.slack(named(self.names, places))
        return _Walkers(places, np.where(np.isnan(slack), -np.inf, slack))


def _spread(places: Array, divided: Sequence[NDArray[np.intp]]) -> Array:
    """How far the places of each one's own part lie apart, in normal scores, (N, K)."""
    scores = normal_scores(places)
    spread = np.empty_like(scores)
    for rows in divided:
        spread[rows] = np.std(scores[rows], axis=0)
    return spread
