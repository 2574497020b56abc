"""Signal quantities against an independent nodal computation with a hybrid-π transistor.

The transistor's four conductances come from finite differences of the scalar twin's currents at the
operating point; the whole network, sources and load included, is one `numpy.linalg.solve`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from biasband.circuit.reading import Reading
from biasband.circuit.solution import Status
from biasband.stage import Signal
from circuit.stages import Case, cases, ideal, real, value
from circuit.twin import Network, Solver, junctions, network

TERMINALS = ("base", "collector", "emitter")


def conductances(case: Case, reading: Reading) -> NDArray[np.float64]:
    """[[dI_B/dV_BE, dI_B/dV_BC], [dI_C/dV_BE, dI_C/dV_BC]] by fourth-order central differences."""
    point = reading.quiet
    law, h = junctions(case, float(point.junction_temperature[0])), 2e-4

    def at(be: float, bc: float) -> NDArray[np.float64]:
        return np.array(law.currents(float(point.base_emitter[0]) + be, float(point.base_collector[0]) + bc))

    columns = []
    for be, bc in ((h, 0.0), (0.0, h)):
        near, far = at(be, bc) - at(-be, -bc), at(2 * be, 2 * bc) - at(-2 * be, -2 * bc)
        columns.append((8.0 * near - far) / (12.0 * h))
    return np.column_stack(columns)


def respond(
    wired: Network,
    y: NDArray[np.float64],
    *,
    held: Mapping[str, float],
    injected: Mapping[str, float] | None = None,
) -> dict[str, float]:
    """Node voltages of the small-signal network with some nodes held [V] and currents injected [A]."""
    nodes = list(dict.fromkeys([*TERMINALS, *(n for _, a, b in wired.branches for n in (a, b)), *held]))
    G, J = np.zeros((len(nodes), len(nodes))), np.zeros(len(nodes))
    for ohms, a, b in wired.branches:
        i, j = nodes.index(a), nodes.index(b)
        G[[i, j, i, j], [i, j, j, i]] += np.array([1.0, 1.0, -1.0, -1.0]) / ohms
    base, collector, emitter = (nodes.index(node) for node in TERMINALS)
    for row, (by_be, by_bc) in ((base, y[0]), (collector, y[1]), (emitter, -y[0] - y[1])):
        G[row, base] += by_be + by_bc
        G[row, emitter] -= by_be
        G[row, collector] -= by_bc
    for node, amps in (injected or {}).items():
        J[nodes.index(node)] += amps
    for node, volts in held.items():
        G[nodes.index(node)] = np.eye(len(nodes))[nodes.index(node)]
        J[nodes.index(node)] = volts
    return dict(zip(nodes, np.linalg.solve(G, J).tolist(), strict=True))


class Independent:
    """The answers of the nodal computation for one case."""

    def __init__(self, case: Case, reading: Reading) -> None:
        self.signal = case.signal or Signal()
        self.y = conductances(case, reading)
        self.plain = network(case)
        self.output = "emitter" if case.topology == "follower" else "collector"
        branches, ties = list(self.plain.branches), dict(self.plain.ties)
        if self.signal.bypassed:  # the capacitor lies across the emitter resistor, or across RE2
            _, _, rail = next(row for row in branches if row[1] == "emitter")
            branches = [row for row in branches if row[1] != "emitter"]
            if "RE1" in case.resistances:
                branches.append((case.resistances["RE1"], "emitter", rail))
            else:
                ties["emitter"] = rail
        self.wired = Network(branches, ties, self.plain.rails)

    def _solve(
        self, *, source: bool, load: bool, emf: float = 0.0, supply: float = 0.0, injected: str = ""
    ) -> dict[str, float]:
        branches = list(self.wired.branches)
        held = {"positive": supply, "ground": 0.0, "negative": 0.0}
        held |= {node: held[rail] for node, rail in self.wired.ties.items()}
        if load and self.signal.load is not None:
            branches.append((self.signal.load, self.output, "ground"))
        if source and self.signal.source_resistance > 0.0:
            branches.append((self.signal.source_resistance, "base", "source"))
            held["source"] = emf
        elif source:
            held["base"] = emf
        wired = Network(branches, self.wired.ties, self.wired.rails)
        return respond(wired, self.y, held=held, injected={injected: 1.0} if injected else None)

    @property
    def voltage_gain(self) -> float:
        """Output over the source's EMF."""
        return self._solve(source=True, load=True, emf=1.0)[self.output]

    @property
    def input_resistance(self) -> float:
        """Volts at the base per ampere put into it, the source taken off [Ω]."""
        return self._solve(source=False, load=True, injected="base")["base"]

    @property
    def output_resistance(self) -> float:
        """Volts at the output per ampere put into it, EMF zero, load off [Ω]."""
        return self._solve(source=True, load=False, injected=self.output)[self.output]

    @property
    def feedthrough_short(self) -> float:
        """Output over supply, capacitors short."""
        return self._solve(source=True, load=True, supply=1.0)[self.output]

    @property
    def feedthrough_open(self) -> float:
        """Output over supply, capacitors open."""
        held = {"positive": 1.0, "ground": 0.0, "negative": 0.0}
        held |= {node: held[rail] for node, rail in self.plain.ties.items()}
        return respond(self.plain, self.y, held=held)[self.output]


def assert_answers(case: Case) -> None:
    """Every signal quantity is that of the nodal computation."""
    reading = case.reading()
    expected = Independent(case, reading)
    # Finite differences good to 1e-9, which a saturated stage's cancelling conductances make 1e-6.
    for name in ("voltage_gain", "input_resistance", "output_resistance"):
        assert value(reading, name) == pytest.approx(getattr(expected, name), rel=1e-6, abs=1e-9), name
    for name in ("feedthrough_open", "feedthrough_short"):
        found = float(np.ravel(getattr(reading, name))[0])
        assert found == pytest.approx(getattr(expected, name), rel=1e-6, abs=1e-9), name


EARLY = real(early_voltage=70.0, thermal_resistance=280.0)
DIVIDER = Case(
    topology="divider",
    resistances={"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3},
    supply=9.0,
    transistor=EARLY,
)
SPLIT = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE1": 100.0, "RE2": 910.0}
SIGNALS = {
    "no signal section": None,
    "bypassed": Signal(load=47e3, source_resistance=600.0, bypassed=True),
    "not bypassed": Signal(load=47e3, source_resistance=600.0),
    "no load": Signal(source_resistance=10e3, bypassed=True),
    "no source resistance": Signal(load=10e3, bypassed=True),
}


@pytest.mark.parametrize("signal", SIGNALS)
@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("resistances", [DIVIDER.resistances, SPLIT], ids=["RE", "RE1 and RE2"])
def test_divider_answers_as_the_nodal_computation(
    signal: str, polarity: str, resistances: Mapping[str, float]
) -> None:
    fields = {"signal": SIGNALS[signal], "polarity": polarity, "resistances": resistances}
    assert_answers(Case(**{**vars(DIVIDER), **fields}))


@settings(max_examples=120, deadline=None)
@given(
    cases(),
    st.one_of(st.none(), st.floats(100.0, 1e5)),
    st.one_of(st.just(0.0), st.floats(1.0, 1e5)),
    st.booleans(),
)
def test_any_stage_answers_as_the_nodal_computation(
    case: Case, load: float | None, source_resistance: float, bypassed: bool
) -> None:
    # A bypassed follower has no output, a stage without RE nothing to bypass.
    bypassable = case.topology != "follower" and {"RE", "RE1"} & case.resistances.keys()
    signal = Signal(load=load, source_resistance=source_resistance, bypassed=bypassed and bool(bypassable))
    coupled = replace(case, signal=signal, ripple=0.0)
    assume(coupled.reading().point.status[0] == Status.SOLVED)
    assert_answers(coupled)


@settings(max_examples=60, deadline=None)
@given(cases())
def test_open_feedthrough_is_the_operating_points_own_derivative_with_the_junction_held(case: Case) -> None:
    reading = case.reading()
    assume(reading.point.status[0] == Status.SOLVED)
    T_j, h = float(reading.point.junction_temperature[0]), 1e-4
    output = "emitter" if case.topology == "follower" else "collector"
    up, down = (Solver(replace(case, supply=case.supply + step)).at(T_j).volts[output] for step in (h, -h))
    found = float(np.ravel(reading.feedthrough_open)[0])
    # Central difference over 0.2 mV, 4e-3 of V_T: curvature of 1e-5; and rounding of 1e-13 V over 2e-4 V.
    assert found == pytest.approx((up - down) / (2.0 * h), rel=2e-5, abs=1e-6)


def test_answers_are_near_the_textbook_formulas() -> None:
    # Common practice: gain −g_m·(RC ‖ load ‖ r_o), input R1 ‖ R2 ‖ r_π, g_m = I_C/V_T, r_π = β/g_m.
    case = replace(DIVIDER, signal=Signal(load=47e3, bypassed=True), transistor=real())
    g_m = case.value("collector_current") / (1.380649e-23 / 1.602176634e-19 * 298.15)
    r_pi = 260.0 / g_m
    assert case.value("voltage_gain") == pytest.approx(
        -g_m / (1 / 3.3e3 + 1 / 47e3), rel=1e-6
    )  # I_S left out
    assert case.value("input_resistance") == pytest.approx(1 / (1 / 68e3 + 1 / 13e3 + 1 / r_pi), rel=1e-6)
    assert case.value("output_resistance") == pytest.approx(3.3e3, rel=1e-6)


def test_ideal_transistor_has_no_signal_answers() -> None:
    case = replace(DIVIDER, transistor=ideal(100.0))
    for name in ("voltage_gain", "input_resistance", "output_resistance", "supply_feedthrough"):
        assert np.isnan(case.value(name)), name
