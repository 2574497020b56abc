"""A chunk of scenarios as a problem, and its solution at a given junction temperature."""

from __future__ import annotations

from dataclasses import dataclass, fields
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from biasband.circuit.active import FIRST_STEPS, Bias, active_region
from biasband.circuit.junction import Laws, Sheet, laws, sheet
from biasband.circuit.network import Ports
from biasband.circuit.newton import newton, start
from biasband.circuit.scenarios import Array, Rows, Scenarios, Values, rows_of
from biasband.stage import Transistor

_FEW, _MANY = 4, 200
"""Newton steps on the full equations: for all, and for those that need more before giving up."""


class Status(IntEnum):
    """What became of a scenario."""

    SOLVED = 0
    RUNAWAY = 1
    UNSOLVED = 2


@dataclass(frozen=True)
class Problem:
    """One chunk of scenarios, ready to be solved at any junction temperature."""

    ports: Ports
    sheet: Sheet
    ambient: Values

    @classmethod
    def of(cls, ports: Ports, transistor: Transistor, part: Scenarios) -> Problem:
        """The problem of a chunk; the gain is spread out so that every result has shape (N,)."""
        gain = np.broadcast_to(np.asarray(part.gain, dtype=float), (len(part),))
        figures = sheet(
            transistor, gain=gain, base_emitter_voltage=part.base_emitter_voltage, leakage=part.leakage
        )
        return cls(ports, figures, part.temperature)

    def laws(self, temperature: Values) -> Laws:
        """The junction laws at a junction temperature [K]."""
        return laws(self.sheet, temperature)

    def part(self, rows: Rows) -> Problem:
        """The problem of the scenarios at `rows`."""
        return Problem(self.ports.part(rows), self.sheet.part(rows), rows_of(self.ambient, rows))


def patient(problem: Problem, temperature: Values) -> Bias:
    """Solve a chunk by the full equations at the junction temperature [K].

    Most need a few steps; those that do not are taken out and go on alone.
    """
    law = problem.laws(temperature)
    bias = newton(problem.ports, law, *start(problem.ports, law), steps=_FEW)
    left = ~bias.solved
    if left.any():
        some = problem.part(left)
        law = some.laws(rows_of(temperature, left))
        merged(bias, left, newton(some.ports, law, bias.V_BE[left], bias.V_BC[left], steps=_MANY))
    return bias


def isothermal(
    problem: Problem, temperature: Values, forward: Array | None = None, *, steps: int = FIRST_STEPS
) -> Bias:
    """Solve a chunk at the junction temperature [K]: as active, and patiently what is not.

    From a forward current [A] if one is given, in as many steps.
    """
    law = problem.laws(temperature)
    bias, _ = active_region(problem.ports, law, forward, steps=steps)
    if bias.solved.all():
        return bias
    left = ~bias.solved
    return merged(bias, left, patient(problem.part(left), rows_of(temperature, left)))


def merged(bias: Bias, rows: NDArray[np.bool_], other: Bias) -> Bias:
    """The bias with the scenarios at `rows` taken from `other`, in place."""
    for field in fields(Bias):
        getattr(bias, field.name)[rows] = getattr(other, field.name)
    return bias


@dataclass(frozen=True)
class Trial:
    """What became of a chunk: the fields of an operating point, each of shape (N,)."""

    V_BE: Array
    V_BC: Array
    I_B: Array
    I_C: Array
    T_j: Values
    status: NDArray[np.int8]

    @classmethod
    def of(cls, bias: Bias, *, T_j: Values, status: NDArray[np.int8]) -> Trial:
        """The trial that a solved bias amounts to."""
        return cls(bias.V_BE, bias.V_BC, bias.I_B, bias.I_C, T_j, status)

    def rows(self) -> tuple[Values, ...]:
        """The values in the order of the fields, status left out."""
        return tuple(getattr(self, field.name) for field in fields(self) if field.name != "status")
