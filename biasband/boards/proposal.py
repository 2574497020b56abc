"""Proposals: densities on the cube of uniform numbers that draw most boards where boards fail.

A proposal is a mixture of pieces, one of which is the whole cube, so that no board is impossible and
no weight is above one over that piece's share.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.boards.tilted_box import Piece
from biasband.circuit.scenarios import Array

DEFENSIVE = 0.1
"""The share of draws from the whole cube: Hesterberg 1995 advises 0.1 to 0.5."""


@dataclass(frozen=True)
class Proposal:
    """A mixture of pieces, each with its share of the draws; the shares sum to 1."""

    pieces: tuple[Piece, ...]
    shares: tuple[float, ...]

    @classmethod
    def plain(cls, axes: int) -> Proposal:
        """No preference: the whole cube."""
        return cls((Piece.whole(axes),), (1.0,))

    @classmethod
    def around(cls, found: Sequence[Array]) -> Proposal:
        """The proposal for places in parts (M, K): a piece for each, and the whole cube."""
        count = sum(map(len, found))
        pieces = (Piece.whole(found[0].shape[1]), *map(Piece.around, found))
        return cls(pieces, (DEFENSIVE, *((1.0 - DEFENSIVE) * len(part) / count for part in found)))

    def draw(self, uniforms: Array) -> Array:
        """Places from uniform numbers, (N, K) both: the first rows from the first piece, and so on."""
        ends = np.cumsum(self._counts(len(uniforms)))[:-1]
        rows = np.split(uniforms, ends)
        return np.concatenate([p.draw(own) for p, own in zip(self.pieces, rows, strict=True)])

    def weights(self, places: Array) -> Array:
        """One over the density that drew these N places, shape (N,): at most 1/(share of the whole cube).

        Source: the balance heuristic of Veach & Guibas, "Optimally combining sampling techniques for
        Monte Carlo rendering", SIGGRAPH 1995; Owen & Zhou, "Safe and effective importance sampling", 2000.
        """
        count = len(places)
        density = np.zeros(count)
        for piece, own in zip(self.pieces, self._counts(count), strict=True):
            density += own / count * np.exp(piece.log_density(places))
        return 1.0 / density

    def _counts(self, draws: int) -> NDArray[np.intp]:
        """How many of the draws each piece makes."""
        ends = np.rint(np.cumsum(self.shares) * draws).astype(np.intp)
        return np.asarray(np.diff(ends, prepend=0))
