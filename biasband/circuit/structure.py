"""Sums and products that skip what is nothing, or one, by the structure of the circuit.

A network's matrices are full of entries that are zero in every scenario, because no wire is there. They
are plain numbers, so that each is seen at a glance and costs no pass over N scenarios.
"""

from __future__ import annotations

from biasband.circuit.scenarios import Values


def is_zero(entry: Values) -> bool:
    """Whether an entry is a structural zero, not an array that happens to hold zeros."""
    return isinstance(entry, float) and entry == 0.0


def times(entry: Values, factor: Values) -> Values:
    """`entry·factor`."""
    if is_zero(entry) or _is_one(factor):
        return entry
    return factor if is_zero(factor) or _is_one(entry) else entry * factor


def plus(entry: Values, other: Values) -> Values:
    """`entry + other`."""
    if is_zero(entry):
        return other
    return entry if is_zero(other) else entry + other


def minus(entry: Values, other: Values) -> Values:
    """`entry − other`."""
    if is_zero(other):
        return entry
    return -other if is_zero(entry) else entry - other


def _is_one(entry: Values) -> bool:
    return isinstance(entry, float) and entry == 1.0
