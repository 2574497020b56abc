"""The operating point: junctions and network solved together, for all scenarios at once.

In chunks that stay in the cache: one equation where the transistor is active (active.py), Newton's
method on both junction voltages where it is not (newton.py), self-heating around both (heat.py). An
element that does not converge is NaN with a status beside it, never an exception.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from biasband.circuit import heat, ideal
from biasband.circuit.active import RESIDUAL
from biasband.circuit.network import condense, rails
from biasband.circuit.scenarios import Array, Scenarios, chunks
from biasband.circuit.solution import Status, Trial
from biasband.circuit.topology import Wiring
from biasband.stage import AnyTransistor, IdealTransistor, Polarity

CHUNK = 24576
"""Scenarios solved in one go: some twenty arrays of 192 KiB, which stay in the cache (measured)."""

_RUNAWAY, _UNSOLVED = np.int8(Status.RUNAWAY), np.int8(Status.UNSOLVED)


@dataclass(frozen=True, kw_only=True)
class OperatingPoint:
    """N solved scenarios in the transistor's frame: positive in conduction for both polarities.

    Junction voltages [V], currents [A], junction temperature [K] and `status`; all of shape (N,).
    NaN where not SOLVED.
    """

    base_emitter: Array
    base_collector: Array
    base_current: Array
    collector_current: Array
    junction_temperature: Array
    status: NDArray[np.int8]

    @cached_property
    def collector_emitter(self) -> Array:
        """V_CE [V]."""
        return self.base_emitter - self.base_collector

    @cached_property
    def emitter_current(self) -> Array:
        """I_E = I_B + I_C [A]."""
        return self.base_current + self.collector_current

    @cached_property
    def power(self) -> Array:
        """V_CE·I_C + V_BE·I_B [W]."""
        return self.collector_emitter * self.collector_current + self.base_emitter * self.base_current


class Region(IntEnum):
    """Where a scenario stands; the last two are no operating points."""

    ACTIVE = 0
    SATURATED = 1
    CUT_OFF = 2
    RUNAWAY = 3
    UNSOLVED = 4


def regions(point: OperatingPoint, *, saturation_voltage: float, cut_off_current: float) -> NDArray[np.int8]:
    """The Region of every scenario, shape (N,).

    Saturated: V_CE at or below `saturation_voltage` [V], as exactly as voltages are solved. Cut off:
    I_C below `cut_off_current` [A]; what is both is called saturated.
    """
    region = np.full(point.status.shape, Region.ACTIVE, dtype=np.int8)
    region[point.collector_current < cut_off_current] = Region.CUT_OFF
    with np.errstate(invalid="ignore"):
        region[point.collector_emitter <= saturation_voltage + RESIDUAL] = Region.SATURATED
    region[point.status == _RUNAWAY] = Region.RUNAWAY
    region[point.status == _UNSOLVED] = Region.UNSOLVED
    return region


def solve(
    wiring: Wiring, transistor: AnyTransistor, polarity: Polarity, scenarios: Scenarios
) -> OperatingPoint:
    """Solve a wired stage in N scenarios.

    Solved means that both junction voltages satisfy the network to 1e-9 V and, with a thermal
    resistance, that the junction temperature moves less than 1e-6 K. Peak memory beyond the result
    is that of one chunk. Worked case: an ideal transistor, β 50, V_BE 0.7 V, 12 V, RB 240 k, RC 2.2 k
    has I_B 47.083 µA, I_C 2.3542 mA, V_C 6.8208 V (Boylestad & Nashelsky, ex. 4.1).
    """
    count = len(scenarios)
    heated = bool(transistor.thermal_resistance)
    rows_out = np.empty((5 if heated else 4, count))
    status = np.empty(count, dtype=np.int8)
    for rows in chunks(count, CHUNK):
        trial = _solve_chunk(wiring, transistor, polarity, scenarios.part(rows))
        for row, values in zip(rows_out, trial.rows(), strict=False):
            row[rows] = values
        status[rows] = trial.status
    failed = status != Status.SOLVED
    if failed.any():
        rows_out[:, failed] = np.nan
    ambient = np.broadcast_to(np.asarray(scenarios.temperature, dtype=float), count)
    T_j = rows_out[4] if heated else np.where(failed, np.nan, ambient) if failed.any() else ambient
    return OperatingPoint(
        base_emitter=rows_out[0],
        base_collector=rows_out[1],
        base_current=rows_out[2],
        collector_current=rows_out[3],
        junction_temperature=T_j,
        status=status,
    )


def _solve_chunk(wiring: Wiring, transistor: AnyTransistor, polarity: Polarity, part: Scenarios) -> Trial:
    ports = condense(wiring, part.resistances).ports(rails(polarity, part))
    if isinstance(transistor, IdealTransistor):
        return ideal.solve(ports, transistor, part)
    with np.errstate(all="ignore"):
        return heat.settle(ports, transistor, part)
