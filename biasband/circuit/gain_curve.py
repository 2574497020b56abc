"""The gain curve: how h_FE follows the collector current, as a factor to its value at the test current."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from biasband.circuit.scenarios import Array, Values
from biasband.gain_curve import GainCurve

_LEAST_CURRENT = 1e-30
"""[A] Stands for any current that has no logarithm: below every point that a curve can have."""

_BEYOND = 1e-12
"""A step that is cut short at a kink ends so far beyond it, in ln I: on the next piece."""


@dataclass(frozen=True)
class Scaled:
    """A factor c to h_FE and its slope d ln c/d ln I, at currents [A] that have a logarithm."""

    factor: Values
    slope: Values
    current: Values


@dataclass(frozen=True)
class GainScaling:
    """A gain curve as straight pieces of ln c against ln I, c = h_FE(I)/h_FE(I_test).

    `kinks` are ln I of the points, ascending, shape (P,). Each piece is `height + slope·ln I`, shape
    (P + 1,): the first and the last are flat.
    """

    kinks: Array
    heights: Array
    slopes: Array

    @classmethod
    def of(cls, curve: GainCurve, *, test_current: float) -> GainScaling:
        """The pieces of a curve; the factor is one at the test current [A]."""
        kinks, levels = (np.log(column) for column in zip(*curve.points, strict=True))
        levels = levels - np.interp(np.log(test_current), kinks, levels)
        slopes = np.concatenate([[0.0], np.diff(levels) / np.diff(kinks), [0.0]])
        starts = np.concatenate([levels[:1], levels])
        return cls(kinks, starts - slopes * np.concatenate([kinks[:1], kinks]), slopes)

    def at(self, current: Values) -> Scaled:
        """The factor and its slope at collector currents [A], shape (N,) or numbers."""
        current = np.maximum(current, _LEAST_CURRENT)
        place = np.log(current)
        piece = np.searchsorted(self.kinks, place)
        slope = self.slopes[piece]
        return Scaled(np.exp(self.heights[piece] + slope * place), slope, current)

    def up_to_kink(self, here: Array, there: Array) -> Array:
        """The share of the way between two ln I that ends just beyond the first kink on it, or one.

        A Newton step that is cut there never overshoots the piece that holds the root, which it would
        where a steep piece lies between two flat ones. Source: Katzenelson, "An algorithm for solving
        nonlinear resistor networks", Bell Syst. Tech. J. 44 (1965), for piecewise-linear networks.
        """
        ends = np.concatenate([[-np.inf], self.kinks, [np.inf]])
        above = ends[np.searchsorted(self.kinks, here, side="right") + 1] + _BEYOND
        below = ends[np.searchsorted(self.kinks, here, side="left")] - _BEYOND
        ahead = np.where(there > here, above, below)
        crossed = np.where(there > here, there > ahead, there < ahead)
        return np.where(crossed, (ahead - here) / np.where(crossed, there - here, 1.0), 1.0)
