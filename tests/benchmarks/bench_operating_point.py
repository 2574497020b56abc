"""What a million boards cost, as ratios: run `python tests/benchmarks/bench_operating_point.py`.

The unit of time is one pass of `np.exp` over a million in-cache values on the same machine, so that
the figures travel. Goals: at most 60 passes without self-heating, 150 with it, and the memory of a
chunk, not of the million.
"""

from __future__ import annotations

import time
import tracemalloc
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy import optimize

from biasband.circuit.junction import Laws, flow, laws
from biasband.circuit.network import condense, rails
from biasband.circuit.operating_point import OperatingPoint, solve
from biasband.circuit.scenarios import Scenarios
from biasband.circuit.topology import TOPOLOGIES, wire
from biasband.stage import Limits, Transistor

Vector = NDArray[np.float64]

BOARDS = 1_000_000
SCALAR_BOARDS = 200
IN_CACHE = 4096
REPEATS = 3

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


def shortest(task: Callable[[], object]) -> float:
    """The shortest of a few runs [s]: what the machine does when nobody disturbs it."""
    times = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        task()
        times.append(time.perf_counter() - start)
    return min(times)


def exponential_pass() -> None:
    """One pass of `np.exp` over a million values that stay in the cache."""
    values = np.linspace(-1.0, 1.0, IN_CACHE)
    for _ in range(BOARDS // IN_CACHE):
        np.exp(values)


def residual(v: Vector, law: Laws, open_: Vector, Z: Vector) -> Vector:
    """Both port equations of one board [V]."""
    at = flow(law, v[0], v[1])
    return np.asarray(v - open_ + Z @ np.array([at.base, at.collector], dtype=float).ravel())


def scalar_loop(scenarios: Scenarios) -> Vector:
    """Collector currents [A] one by one with scipy's general root finder, as one would write it first."""
    currents = []
    for row in range(len(scenarios)):
        one = scenarios.part(np.array([row]))
        ports = condense(WIRING, one.resistances, rails("npn", one))
        law = laws(
            COOL,
            gain=one.gain,
            base_emitter_at_25=one.base_emitter_voltage,
            leakage_at_25=one.leakage,
            temperature=one.temperature,
        )
        open_ = np.array([ports.open_be, ports.open_bc], dtype=float).ravel()
        Z = np.array([[ports.z11, ports.z12], [ports.z21, ports.z22]], dtype=float).reshape(2, 2)

        found = optimize.root(residual, np.array([0.62, -4.0]), (law, open_, Z), tol=1e-10)
        currents.append(float(np.ravel(flow(law, found.x[0], found.x[1]).collector)[0]))
    return np.array(currents)


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
    unit, scenarios = shortest(exponential_pass), boards(BOARDS)
    for name, transistor, goal in (("without self-heating", COOL, 60), ("with self-heating", WARM, 150)):
        seconds = shortest(lambda part=transistor: solve(WIRING, part, "npn", scenarios))  # type: ignore[misc]
        megabytes = peak_memory(transistor, scenarios) / 2**20
        print(f"{name}: {seconds / unit:.0f} passes of np.exp (goal: at most {goal}), "
              f"peak memory beyond inputs and result {megabytes:.1f} MiB")  # fmt: skip
    few = boards(SCALAR_BOARDS)
    loop = shortest(lambda: scalar_loop(few)) / SCALAR_BOARDS
    own = shortest(lambda: solve(WIRING, COOL, "npn", scenarios)) / BOARDS
    same = np.abs(scalar_loop(few) / solve(WIRING, COOL, "npn", few).collector_current - 1.0).max()
    print(
        f"against a loop of scipy.optimize.root: {loop / own:.0f} times faster (currents agree to {same:.0e})"
    )


if __name__ == "__main__":
    main()
