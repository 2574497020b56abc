"""Pick and freeze: how much of a variance each contributor is responsible for, by Monte Carlo.

Two independent boards, and between them boards that agree with the first in some contributors and
are drawn anew in the others: half the mean square of the difference of two outputs is the variance
that is left when what they agree in is known. Every share here is made of such half squares, and no
mean is ever subtracted, so that a share of nothing comes out as nothing.

The function and the boards are the caller's: nothing here knows of a stage.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array, chunks
from biasband.errors import UsageError

Board = Mapping[str, Array]
"""N boards: figures by name, (N,) each."""

Evaluate = Callable[[Board], Array]
"""The outputs of N boards, (Q, N); what is not finite did not solve."""

Frozen = Mapping[str, NDArray[np.bool_]]
"""By contributor, on which of N boards it is held, (N,)."""

Redraw = Callable[[Frozen, Board, Board], Board]
"""The first board in what is frozen; the rest from its distribution given that, by the second's numbers."""

Held = NDArray[np.bool_]
Ranks = NDArray[np.int64]

ALIKE = 1e-10
"""Relative to the largest output: a deviation below this is the solver's rounding, no variance."""

_CHUNK = 16384
"""Boards evaluated in one go, or one part of them where that is more."""


@dataclass(frozen=True)
class Share:
    """A contributor's share of a variance, and the standard error of that estimate."""

    value: float
    standard_error: float


@dataclass(frozen=True)
class VarianceShares:
    """How a variance [SI²] divides among its contributors, largest share first.

    `first` is what knowing a contributor alone would take away (the first-order Sobol' index), `total`
    what would be left if all others were known (the total one), `shapley` a fair division of the whole,
    which adds up to one. For independent contributors first ≤ shapley ≤ total but for the errors. Empty
    where there is no variance. `boards` were evaluated to find out; `unsolved` of them had no output
    and were left out with their partners, so that the shares are those of boards that do solve.
    """

    variance: float
    first: Mapping[str, Share]
    total: Mapping[str, Share]
    shapley: Mapping[str, Share]
    boards: int
    unsolved: int

    @property
    def interaction(self) -> Mapping[str, float]:
        """Total less first: what a contributor does together with others; also below 0 where correlated."""
        return {name: total.value - self.first[name].value for name, total in self.total.items()}


def independent(owners: Mapping[str, str]) -> Redraw:
    """Make the redraw of contributors that are independent; `owners` names each figure's contributor."""

    def redraw(frozen: Frozen, board: Board, other: Board) -> Board:
        return {name: np.where(frozen[owners[name]], board[name], other[name]) for name in board}

    return redraw


def divide(
    evaluate: Evaluate,
    redraw: Redraw,
    contributors: Sequence[str],
    pair: tuple[Board, Board],
    *,
    parts: int,
    seed: int,
) -> list[VarianceShares]:
    """Divide the variance of every output among K contributors, by 3K + 1 evaluations of N boards.

    `pair` holds two independent sets of N boards, each R = `parts` independent samples of equal length,
    one after the other. With y an output of the first set and z that of boards that agree with it in S,
    `c(S) = V(E[Y|X_S]) = V − E[(y − z)²]/2` and V = E[(y − y')²]/2: first c({i})/V, total
    1 − c(all but i)/V, Shapley the mean of c(S with i) − c(S) over orders of arrival: one for each part,
    and for its second half the reverse. (With an order for each board, quasi-random numbers lose their
    worth: measured, twice the error.) Shares are quotients of means over all parts, their standard
    errors those of R parts about the quotient.

    Correlated contributors may be divided too where `redraw` draws from the conditional distribution;
    then first and total do not bound the Shapley share, and a total may be less than a first. Raises
    UsageError where there are fewer than two parts, or the boards do not make halves of them.

    Source: Jansen, Computer Physics Communications 117 (1999), both indices from half squares, in the
    arrangement of Saltelli et al., ibid. 181 (2010); Shapley shares: Owen, SIAM/ASA J. Uncertainty
    Quantification 2 (2014), Song, Nelson & Staum, ibid. 4 (2016); a walk from one board to the other:
    Goda, Reliability Engineering & System Safety 206 (2021); all memory.
    """
    names, boards = tuple(contributors), len(next(iter(pair[0].values())))
    if parts < 2 or boards % (2 * parts):
        raise UsageError(f"parts: 2 or more, in halves of {boards} boards; read {parts}")
    half = boards // (2 * parts)
    orders, found = _orders(len(names), parts, seed), []
    for taken in chunks(2 * parts, 2 * max(1, _CHUNK // (2 * half))):
        rows = slice(taken.start * half, taken.stop * half)
        board, other = ({name: x[rows] for name, x in side.items()} for side in pair)
        between = _Between(evaluate, redraw, names, board, other, taken.stop - taken.start)
        found.append(_means(between, orders[:, taken]))
    return _divided(names, found)


def _orders(count: int, parts: int, seed: int) -> Ranks:
    """When each of K contributors arrives, from 0, in each half of R parts, (K, 2R)."""
    in_order = np.tile(np.arange(count)[:, None], parts)
    ranks = np.random.default_rng(seed).permuted(in_order, axis=0)
    return np.stack([ranks, count - 1 - ranks], axis=-1).reshape(count, 2 * parts)


class _Between:
    """The boards between two sets of N, in H halves of parts; counts what it evaluates."""

    def __init__(
        self,
        evaluate: Evaluate,
        redraw: Redraw,
        names: Sequence[str],
        board: Board,
        other: Board,
        halves: int,
    ) -> None:
        self._evaluate, self._names, self._halves = evaluate, names, halves
        self._redraw, self._pair = redraw, (board, other)
        self.boards, self.unsolved = 0, np.array(0)
        self._output = self._solved(board)
        self.largest = np.fmax.reduce(np.abs(self._output), axis=1)

    def left(self, held: Held) -> Array:
        """What is left of the variance where K contributors are held or not, (K, H): half squares, (Q, H)."""
        by_board = np.repeat(held, self._output.shape[1] // self._halves, axis=1)
        found = self._solved(self._redraw(dict(zip(self._names, by_board, strict=True)), *self._pair))
        return _over(0.5 * (self._output - found) ** 2, self._halves)

    def _solved(self, board: Board) -> Array:
        """The outputs, (Q, N), NaN where they are not finite."""
        found = self._evaluate(board)
        found = np.where(np.isfinite(found), found, np.nan)
        self.boards += found.shape[1]
        self.unsolved = self.unsolved + np.sum(np.isnan(found), axis=1)
        return found


def _over(terms: Array, count: int) -> Array:
    """Means over so many equal lengths of (Q, N), what is NaN left out, (Q, count); NaN where all are."""
    apart = terms.reshape(len(terms), count, -1)
    known = np.sum(np.isfinite(apart), axis=2)
    mean = np.full(known.shape, np.nan)
    return np.asarray(np.divide(np.nansum(apart, axis=2), known, out=mean, where=known > 0))


@dataclass(frozen=True)
class _Means:
    """Means over H halves of parts: `whole`, (Q, H), and `kinds`, (3, K, Q, H); of outputs the rest, (Q,)."""

    whole: Array
    kinds: Array
    largest: Array
    unsolved: NDArray[np.int64]
    boards: int


def _means(between: _Between, ranks: Ranks) -> _Means:
    """Hold nobody, each contributor alone, all others, and one more at a time in order of arrival."""
    count, halves = ranks.shape
    whole = between.left(np.zeros(ranks.shape, dtype=bool))
    alone = [np.repeat(column[:, None], halves, axis=1) for column in np.eye(count, dtype=bool)]
    arrived = [whole, *(between.left(ranks <= last) for last in range(count - 1)), 0.0 * whole]
    taken = -np.diff(arrived, axis=0)
    first = [whole - between.left(held) for held in alone]
    total = [between.left(~held) for held in alone]
    shapley = [np.take_along_axis(taken, rank[None, None, :], axis=0)[0] for rank in ranks]
    kinds = np.reshape([*first, *total, *shapley], (3, count, *whole.shape))
    return _Means(whole, kinds, between.largest, between.unsolved, between.boards)


def _divided(names: Sequence[str], found: Sequence[_Means]) -> list[VarianceShares]:
    """Put the chunks' means together, and say for each output how its variance divides."""
    whole = _parts([means.whole for means in found])
    shares, errors = _quotients(_parts([means.kinds for means in found]), whole)
    variance = _over(whole, 1)[:, 0]
    varies = variance > (ALIKE * np.fmax.reduce([means.largest for means in found])) ** 2
    unsolved = np.sum([means.unsolved for means in found], axis=0)
    boards = sum(means.boards for means in found)
    divided = []
    for q in range(len(whole)):
        kinds = zip(shares[:, :, q], errors[:, :, q], strict=True)
        first, total, shapley = (_sorted(names, *kind) if varies[q] else {} for kind in kinds)
        divided.append(VarianceShares(float(variance[q]), first, total, shapley, boards, int(unsolved[q])))
    return divided


def _parts(halves: Sequence[Array]) -> Array:
    """Means over R parts, the last axis, from those over their halves, chunk by chunk."""
    joined = np.concatenate(halves, axis=-1)
    return np.asarray(0.5 * (joined[..., 0::2] + joined[..., 1::2]))


def _quotients(parts: Array, whole: Array) -> tuple[Array, Array]:
    """Quotients of means over R parts, the last axis, and their standard errors (linearised)."""
    known = np.isfinite(parts) & np.isfinite(whole)
    count = np.sum(known, axis=-1)
    top, bottom = np.where(known, parts, 0.0), np.where(known, whole, 0.0)
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.sum(top, axis=-1) / np.sum(bottom, axis=-1)
        off = top - share[..., None] * bottom
        deviation = np.sqrt(np.sum(off**2, axis=-1) * count / (count - 1.0))
        return np.asarray(share), np.asarray(deviation / np.sum(bottom, axis=-1))


def _sorted(names: Sequence[str], shares: Array, errors: Array) -> dict[str, Share]:
    found = {name: Share(float(shares[i]), float(errors[i])) for i, name in enumerate(names)}
    return dict(sorted(found.items(), key=lambda item: -item[1].value))
