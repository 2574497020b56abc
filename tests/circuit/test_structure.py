"""Structural zeros and ones: skipped, and never a different answer."""

from __future__ import annotations

import operator

import numpy as np
import pytest

from biasband.circuit.scenarios import Values
from biasband.circuit.structure import is_zero, minus, plus, times

ENTRIES: tuple[Values, ...] = (0.0, 1.0, -2.5, np.array([0.0, 1.0, 3.0]), np.array([1.0, 1.0, 1.0]))


@pytest.mark.parametrize("entry", ENTRIES, ids=str)
@pytest.mark.parametrize("other", ENTRIES, ids=str)
def test_answer_is_that_of_plain_arithmetic(entry: Values, other: Values) -> None:
    for skipping, plain in ((times, operator.mul), (plus, operator.add), (minus, operator.sub)):
        assert np.array_equal(skipping(entry, other) + np.zeros(3), plain(entry, other) + np.zeros(3))


def test_nothing_is_calculated_with_a_structural_zero_or_one() -> None:
    column = np.array([2.0, 3.0])
    for found in (times(column, 1.0), times(1.0, column), plus(column, 0.0), plus(0.0, column)):
        assert found is column
    assert minus(column, 0.0) is column
    assert is_zero(times(column, 0.0))
    assert is_zero(times(0.0, column))


def test_array_of_zeros_is_no_structural_zero() -> None:
    # Else a scenario's value would depend on what its neighbours happen to be.
    assert not is_zero(np.zeros(3))
    assert np.shape(times(np.zeros(3), 2.0)) == (3,)
