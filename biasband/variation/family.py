"""A family of stages that differ in the values of their resistors only, so that they share one box."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.scenarios import Array
from biasband.stage import Stage
from biasband.variation.contributors import Axis, axes, columns


@dataclass(frozen=True)
class Family:
    """F members: one of the stages, and the values [Ω] of all as `R1.value`, (F,) each."""

    stage: Stage
    box: tuple[Axis, ...]
    size: int
    values: Mapping[str, Array]

    @classmethod
    def of(cls, stages: Sequence[Stage]) -> Family:
        """The family of these stages, every resistor valued, which agree in all but the values."""
        first, names = stages[0], [resistor.name for resistor in stages[0].resistors]
        values = {f"{name}.value": np.array([s.resistor(name).value for s in stages]) for name in names}
        return cls(first, axes(first), len(stages), values)

    def columns(self, points: Array, member: NDArray[np.intp]) -> dict[str, Array]:
        """M points of the box, shape (M, K), each for the member in `member` (M,), as coordinates."""
        chosen = {name: ohms[member] for name, ohms in self.values.items()}
        return {**columns(self.box, points), **chosen}
