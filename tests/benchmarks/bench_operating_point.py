"""What a million boards cost, as ratios: run `python tests/benchmarks/bench_operating_point.py`.

The unit of time is one pass of `np.exp` over a million in-cache values on the same machine, so that
the figures travel. Goals: at most 60 passes without self-heating, 150 with it, and the memory of a
chunk, not of the million.
"""

from __future__ import annotations

import tracemalloc
from dataclasses import replace
from math import exp

import numpy as np
from clock import Task, shortest, shortest_each
from numpy.typing import NDArray
from scipy import optimize

from biasband.circuit.operating_point import OperatingPoint, solve
from biasband.circuit.scenarios import Scenarios
from biasband.circuit.topology import TOPOLOGIES, wire
from biasband.stage import Limits, Transistor

Vector = NDArray[np.float64]

BOARDS = 1_000_000
SCALAR_BOARDS = 200
IN_CACHE = 4096
REPEATS = 20

WIRING = wire(TOPOLOGIES["divider"], ("R1", "R2", "RC", "RE"))
COOL = Transistor(
    gain=Limits.exactly(260.0),
    base_emitter_voltage=Limits.exactly(0.64),
    test_current=1.5e-3,
    test_voltage=6.0,
    early_voltage=70.0,
    leakage=40e-9,
)
WARM = replace(COOL, thermal_resistance=280.0)


def boards(count: int) -> Scenarios:
    """Boards of an invented divider at one point of use: hot, the supply low, the ripple at its peak."""
    rng = np.random.default_rng(1)

    def within(low: float, high: float) -> Vector:
        return rng.uniform(low, high, count)

    nominal = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3}
    return Scenarios(
        resistances={name: ohms * within(0.95, 1.05) for name, ohms in nominal.items()},
        gain=np.exp(within(np.log(165.0), np.log(410.0))),
        base_emitter_voltage=within(0.57, 0.72),
        leakage=within(0.0, 40e-9),
        supply=8.1,
        ripple=-0.05,
        negative_supply=0.0,
        temperature=323.15,
    )


def exponential_pass() -> None:
    """One pass of `np.exp` over a million values that stay in the cache."""
    values = np.linspace(-1.0, 1.0, IN_CACHE)
    for _ in range(BOARDS // IN_CACHE):
        np.exp(values)


def collector_current_alone(scenarios: Scenarios, row: int, *, heat: float) -> float:
    """Collector current [A] of one board, as one would write it first: three nodes and T_j by scipy.

    `heat` is the thermal resistance [K/W].
    """
    one = scenarios.part(np.array([row]))
    R1, R2, RC, RE = (float(np.ravel(one.resistances[name])[0]) for name in ("R1", "R2", "RC", "RE"))
    h_FE, vbe_25, leakage = (
        float(np.ravel(values)[0]) for values in (one.gain, one.base_emitter_voltage, one.leakage)
    )
    T_a, T0, V_CC = float(np.ravel(one.temperature)[0]), 298.15, float(np.ravel(one.supply + one.ripple)[0])
    early = 1.0 + (6.0 - vbe_25) / 70.0

    def currents(V_BE: float, V_BC: float, T: float) -> tuple[float, float]:
        V_T = 1.380649e-23 / 1.602176634e-19 * T
        I_S = 1.5e-3 / early * exp(-(vbe_25 - 2e-3 * (T - T0)) / V_T)
        beta, I_CBO = h_FE / early * (T / T0) ** (5e-3 * T0), leakage * 2.0 ** ((T - T0) / 10.0)
        forward, reverse = exp(min(V_BE / V_T, 60.0)), exp(min(V_BC / V_T, 60.0))
        back = I_S / 4.0 * (reverse - 1.0)
        I_C = I_S * (forward - reverse) * (1.0 - V_BC / 70.0) - back + I_CBO
        return I_S / beta * (forward - 1.0) + back - I_CBO, I_C

    def residual(unknown: Vector) -> Vector:
        V_B, V_C, V_E, T = unknown.tolist()
        I_B, I_C = currents(V_B - V_E, V_B - V_C, T)
        base = (V_CC - V_B) / R1 - V_B / R2 - I_B
        power = (V_C - V_E) * I_C + (V_B - V_E) * I_B
        return np.array(
            [base * R2, V_CC - V_C - I_C * RC, V_E - (I_B + I_C) * RE, T - T_a - heat * power]
        )

    found = optimize.root(residual, np.array([1.4, 5.0, 0.8, T_a]), tol=1e-10).x.tolist()
    V_B, V_C, V_E, T = found
    return currents(V_B - V_E, V_B - V_C, T)[1]


def scalar_loop(scenarios: Scenarios, *, heat: float) -> Vector:
    """Collector currents [A], one board after the other."""
    return np.array([collector_current_alone(scenarios, row, heat=heat) for row in range(len(scenarios))])


def peak_memory(transistor: Transistor, scenarios: Scenarios) -> float:
    """Peak memory [bytes] of a solve beyond its inputs and its result."""
    tracemalloc.start()
    before = tracemalloc.get_traced_memory()[0]
    point: OperatingPoint = solve(WIRING, transistor, "npn", scenarios)
    after, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert len(point.status) == len(scenarios)
    return peak - before - (after - before)


def main() -> None:
    """Print the ratios."""
    scenarios = boards(BOARDS)
    tasks: dict[str, Task] = {
        "np.exp": exponential_pass,
        "cool": lambda: solve(WIRING, COOL, "npn", scenarios),
        "warm": lambda: solve(WIRING, WARM, "npn", scenarios),
    }
    seconds = shortest_each(tasks, repeats=REPEATS)
    for name, transistor, goal in (("cool", COOL, 60), ("warm", WARM, 150)):
        passes = seconds[name] / seconds["np.exp"]
        megabytes = peak_memory(transistor, scenarios) / 2**20
        print(f"{name}: {passes:.0f} passes of np.exp (goal: at most {goal}), "
              f"peak memory beyond inputs and result {megabytes:.1f} MiB")  # fmt: skip
    few = boards(SCALAR_BOARDS)
    for name, transistor in (("cool", COOL), ("warm", WARM)):
        heat = transistor.thermal_resistance or 0.0
        loop = shortest(lambda heat=heat: scalar_loop(few, heat=heat), repeats=3) / SCALAR_BOARDS  # type: ignore[misc]
        own = solve(WIRING, transistor, "npn", few).collector_current
        same = np.abs(scalar_loop(few, heat=heat) / own - 1.0).max()
        print(
            f"{name}, against a loop of scipy.optimize.root on the same equations: "
            f"{loop / seconds[name] * BOARDS:.0f} times the throughput (currents agree to {same:.0e})"
        )


if __name__ == "__main__":
    main()
