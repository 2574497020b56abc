"""Variance: which contributor is responsible for how much of what differs from board to board."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from biasband.boards.agreeing import agreeing, board_contributors
from biasband.boards.draws import coordinates_from, numbers
from biasband.boards.in_use import PLACES, in_use
from biasband.boards.pick_freeze import Board, VarianceShares, divide
from biasband.boards.quasi import SCRAMBLINGS, rounded_up
from biasband.circuit.scenarios import Array
from biasband.errors import UsageError
from biasband.stage import Stage
from biasband.variation.evaluation import Measures
from biasband.variation.points_of_use import PointOfUse

BOARDS = 8192
"""Boards of each of the two independent sets. Standard errors of shares are then about 0.01 or less
(measured; 0.03 for a swing that is the lesser of two), in about a second.
"""


@dataclass(frozen=True)
class VarianceCauses:
    """How the variance of a quantity divides: at nominal use, of each board's lowest and highest in use."""

    nominal_use: VarianceShares
    lowest_in_use: VarianceShares
    highest_in_use: VarianceShares


def variance_causes(
    stage: Stage,
    measures: Measures,
    points: Sequence[PointOfUse],
    *,
    seed: int,
    cut_off: float,
    boards: int = BOARDS,
) -> Mapping[str, VarianceCauses]:
    """Divide the variance of every quantity among the contributors that differ from board to board.

    Each contributor is a part or a figure with all that it does on a board; members of a group, which
    share a batch mean or part of a tempco, are correlated, and their Shapley shares stand. A batch mean
    differs from board to board here: the variance is that of boards of all batches. What every board
    meets in its life, temperature, supply and ripple, is no board's property and has no share: it is in
    each board's lowest and highest. The K contributors of N boards take 3K + 1 evaluations of N at each
    point; N is `boards`, rounded up to 16·2^m (each result says how many were evaluated). The same
    for the same seed. Raises UsageError for boards below 1, or where a part has no value yet.

    Source: scrambled Sobol' points, Owen, J. Complexity 14 (1998); estimators: see `pick_freeze.divide`;
    both memory.
    """

    def evaluate(board: Board) -> Array:
        found = in_use(stage, board, measures, points, cut_off=cut_off)
        return np.concatenate([found.values[name] for name in measures])

    shares = divide(
        evaluate,
        agreeing(stage),
        board_contributors(stage),
        _two_sets(stage, boards, seed),
        parts=SCRAMBLINGS,
        seed=seed,
    )
    each = len(PLACES)
    return {name: VarianceCauses(*shares[each * k : each * (k + 1)]) for k, name in enumerate(measures)}


def _two_sets(stage: Stage, boards: int, seed: int) -> tuple[Board, Board]:
    """Two independent sets of boards, one scrambling after the other: one half of the numbers each."""
    if boards < 1:
        raise UsageError(f"boards: from 1; read {boards}")
    names = [number.name for number in numbers(stage)]
    # Two boards of each scrambling at least, so that it has halves.
    each = rounded_up(max(boards, 2 * SCRAMBLINGS)) // SCRAMBLINGS
    uniforms = _scrambled(2 * len(names), each, seed)
    first, second = (dict(zip(names, half, strict=True)) for half in np.split(uniforms, 2))
    return coordinates_from(stage, first), coordinates_from(stage, second)


def _scrambled(dimensions: int, each: int, seed: int) -> Array:
    """So many Sobol' points, a power of two, in each independent scrambling, (dimensions, N)."""
    from scipy.stats import qmc

    streams = np.random.default_rng(seed).spawn(SCRAMBLINGS)
    sets = [qmc.Sobol(dimensions, scramble=True, seed=stream).random(each) for stream in streams]
    return np.concatenate(sets).T
