"""Tallies compared to the byte, and boards in use made of plain arrays, for the tests of the engine."""

from __future__ import annotations

from dataclasses import fields

import numpy as np

from biasband.boards.in_use import InUse
from biasband.boards.tally import Tally
from biasband.circuit.operating_point import Region


def differences(one: Tally, other: Tally) -> list[str]:
    """The fields in which two tallies differ by a single byte; sums of any size are compared as numbers."""
    names = [each.name for each in fields(Tally)]
    return [name for name in names if not _alike(getattr(one, name), getattr(other, name))]


def _alike(one: object, other: object) -> bool:
    if not isinstance(one, np.ndarray):
        return one == other
    assert isinstance(other, np.ndarray)
    if one.dtype != other.dtype or one.shape != other.shape:
        return False
    return one.tolist() == other.tolist() if one.dtype == object else one.tobytes() == other.tobytes()


def size(of: Tally) -> int:
    """The bytes of a tally's arrays."""
    return sum(value.nbytes for value in vars(of).values() if isinstance(value, np.ndarray))


def shown(**values: np.ndarray) -> InUse:
    """Boards in use that showed these values, by measure: (3, B), or (B,) for all three places."""
    places = {name: np.broadcast_to(each, (3, np.shape(each)[-1])) for name, each in values.items()}
    count = next(iter(places.values())).shape[1]
    regions = np.zeros(len(Region), dtype=np.int64)
    regions[0] = count
    return InUse(places, regions)
