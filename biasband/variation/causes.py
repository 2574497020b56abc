"""Causes: which contributor takes how much of the way from nominal to the worst."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import Axis, axes
from biasband.variation.corners import Extreme, Range
from biasband.variation.evaluation import Measures, evaluate


@dataclass(frozen=True)
class Causes:
    """Per contributor the share of the way nominal → extreme that is gone when it alone is nominal.

    Shares need not add up to one: contributors act together. Empty where there is no way to go.
    """

    low: Mapping[str, float]
    high: Mapping[str, float]


def causes(
    stage: Stage, ranges: Mapping[str, Range], measures: Measures, *, cut_off: float
) -> Mapping[str, Causes]:
    """Freeze each contributor at nominal, one at a time, at every measure's two extremes.

    `share = (worst − worst with it frozen) / (worst − nominal)`; the extreme is not searched anew.
    Worked case: of a sum of two equal contributors each has a share of one half.
    """
    box = axes(stage)
    ends = [(name, side) for name in ranges for side in ("low", "high")]
    points = np.stack([_frozen(box, getattr(ranges[name], side)) for name, side in ends])
    nominal = np.array([axis.nominal for axis in box])
    columns = {axis.name: np.append(points[:, :, k].ravel(), nominal[k]) for k, axis in enumerate(box)}
    outcome = evaluate(stage, columns, measures, cut_off=cut_off)
    shares: dict[tuple[str, str], Mapping[str, float]] = {}
    for row, (name, side) in enumerate(ends):
        values = getattr(outcome, side)[name]
        frozen = values[row * len(box) : (row + 1) * len(box)]
        shares[name, side] = _shares(box, getattr(ranges[name], side).value, frozen, float(values[-1]))
    return {name: Causes(shares[name, "low"], shares[name, "high"]) for name in ranges}


def _frozen(box: tuple[Axis, ...], extreme: Extreme) -> Array:
    """The extreme's point, K times, with one contributor each at nominal; shape (K, K)."""
    point = np.array([extreme.coordinates[axis.name] for axis in box])
    rows = np.tile(point, (len(box), 1))
    np.fill_diagonal(rows, [axis.nominal for axis in box])
    return rows


def _shares(box: tuple[Axis, ...], worst: float, frozen: Array, nominal: float) -> dict[str, float]:
    way = worst - nominal
    if not np.isfinite(way) or way == 0.0:
        return {}
    found = {axis.name: float((worst - value) / way) for axis, value in zip(box, frozen, strict=True)}
    return dict(sorted(found.items(), key=lambda item: -item[1] if np.isfinite(item[1]) else np.inf))
