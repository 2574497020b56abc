"""The low corner against an independently written complex nodal matrix, closed forms and the textbook's sum.

The matrix has every node there is: the far ends of all capacitors and the point between RE1 and RE2 too.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from biasband.circuit.low_corner import gain_at, low_corner_frequency, seen_resistances
from biasband.circuit.quantities import LOW_CORNER, vocabulary
from biasband.circuit.reading import Reading, read
from biasband.circuit.solution import Status
from biasband.errors import UsageError
from biasband.quantity import Kind
from biasband.stage import Capacitor, Signal
from circuit.stages import Case, cases, ideal, real, together
from circuit.test_signal import DIVIDER, TERMINALS, conductances
from circuit.twin import network

SHORT = 1e6
"""[F] With this much a capacitor has its corner below 1 nHz: it is a short."""

FARADS = {"C_in": 2.2e-6, "C_out": 1.5e-6, "C_bypass": 68e-6}
RE, PARTS = DIVIDER.resistances, {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE1": 100.0, "RE2": 910.0}
V_T = 1.380649e-23 / 1.602176634e-19 * 298.15


def with_capacitors(case: Case, farads: Mapping[str, float]) -> Reading:
    """The case read with the capacitors that its signal couples."""
    assert case.signal is not None
    own = {name: np.array([farads[name]]) for name in case.signal.capacitors}
    return read(case.stage, replace(case.scenarios, capacitances=own))


def corner(case: Case, farads: Mapping[str, float]) -> float:
    return float(low_corner_frequency(with_capacitors(case, farads))[0])


class Matrix:
    """The small-signal network of one case with all its nodes, rails and the source's EMF eliminated."""

    def __init__(self, case: Case, reading: Reading) -> None:
        signal, plain = case.signal, network(replace(case, resistances=_one_emitter(case)))
        assert signal is not None
        self.output = "emitter" if case.topology == "follower" else "collector"
        self.y, self.ties = conductances(case, reading), dict(plain.ties)
        self.resistors = [row for row in plain.branches if row[1] != "emitter"]
        self.capacitors = [("C_in", "source", "terminal")]
        emitter = [row for row in plain.branches if row[1] == "emitter"]
        for ohms, _, rail in emitter:
            if "RE1" in case.resistances:
                between = (case.resistances["RE1"], "emitter", "between")
                self.resistors += [between, (case.resistances["RE2"], "between", rail)]
                bypassed = "between"
            else:
                self.resistors.append((ohms, "emitter", rail))
                bypassed = "emitter"
            if signal.bypassed:
                self.capacitors.append(("C_bypass", bypassed, rail))
        if signal.source_resistance > 0.0:
            self.resistors.append((signal.source_resistance, "terminal", "base"))
        else:
            self.ties["terminal"] = "base"
        if signal.load is not None:
            self.capacitors.append(("C_out", self.output, "load"))
            self.resistors.append((signal.load, "load", "ground"))
            self.output = "load"

    def solve(
        self,
        admittances: Mapping[str, complex],
        *,
        emf: float,
        injected: tuple[str, str] | None = None,
    ) -> Mapping[str, complex]:
        """Node voltages with these admittances [S]; a capacitor that has none is a short. 1 A from a to b."""
        held = {"positive": 0.0, "ground": 0.0, "negative": 0.0, "source": emf}
        rows = [(1.0 / ohms, a, b) for ohms, a, b in self.resistors]
        rows += [(admittances[name], a, b) for name, a, b in self.capacitors if name in admittances]
        shorts = [(a, b) for name, a, b in self.capacitors if name not in admittances]
        used = {node for _, *ends in (*rows, *self.capacitors) for node in ends}
        joined = _joined({*TERMINALS, *used, *held}, [*self.ties.items(), *shorts], held)
        branches = [(admittance, joined[a], joined[b]) for admittance, a, b in rows]
        nodes = list(dict.fromkeys([*held, *joined.values()]))
        Y, J = np.zeros((len(nodes), len(nodes)), dtype=complex), np.zeros(len(nodes), dtype=complex)
        for admittance, a, b in branches:
            i, j = nodes.index(a), nodes.index(b)
            for row, column, sign in ((i, i, 1), (j, j, 1), (i, j, -1), (j, i, -1)):
                Y[row, column] += sign * admittance
        b, c, e = (nodes.index(joined[node]) for node in ("base", "collector", "emitter"))
        for row, (by_be, by_bc) in ((b, self.y[0]), (c, self.y[1]), (e, -self.y[0] - self.y[1])):
            Y[row, b] += by_be + by_bc
            Y[row, e] -= by_be
            Y[row, c] -= by_bc
        for node, amperes in zip(injected or (), (1.0, -1.0), strict=False):
            J[nodes.index(joined[node])] += amperes
        for node, volts in held.items():
            Y[nodes.index(node)] = np.eye(len(nodes))[nodes.index(node)]
            J[nodes.index(node)] = volts
        volts_at = dict(zip(nodes, np.linalg.solve(Y, J).tolist(), strict=True))
        return {node: volts_at[root] for node, root in joined.items()}

    def gain(self, farads: Mapping[str, float], frequency: float) -> complex:
        """The gain at a frequency [Hz]."""
        admittances = {name: 2j * math.pi * frequency * farads[name] for name, *_ in self.capacitors}
        return self.solve(admittances, emf=1.0)[self.output]

    def midband(self) -> complex:
        """The gain with every capacitor short."""
        return self.solve({}, emf=1.0)[self.output]

    def seen(self, name: str) -> float:
        """What a capacitor sees with the others short [Ω]: volts across it per ampere through it."""
        _, a, b = next(row for row in self.capacitors if row[0] == name)
        volts = self.solve({name: 0.0}, emf=0.0, injected=(a, b))
        return (volts[a] - volts[b]).real


def _joined(
    names: Collection[str], shorts: Sequence[tuple[str, str]], held: Collection[str]
) -> Mapping[str, str]:
    """Every node's name after those that are tied or shorted have become one; held ones keep theirs."""
    joined = {name: name for name in sorted(names)}
    for a, b in shorts:
        one, other = joined[a], joined[b]
        keep, lose = (one, other) if one in held else (other, one)
        joined = {name: keep if root == lose else root for name, root in joined.items()}
    return joined


def _one_emitter(case: Case) -> Mapping[str, float]:
    """The resistances with RE1 and RE2 as one, which the matrix takes apart again."""
    ohms = dict(case.resistances)
    if "RE1" in ohms:
        ohms["RE"] = ohms.pop("RE1") + ohms.pop("RE2")
    return ohms


SIGNALS = {
    "all three": Signal(load=47e3, source_resistance=600.0, bypassed=True),
    "not bypassed": Signal(load=2.2e3, source_resistance=10e3),
    "no load": Signal(source_resistance=600.0, bypassed=True),
    "no source resistance": Signal(load=10e3, bypassed=True),
    "input alone": Signal(source_resistance=600.0),
}


@pytest.mark.parametrize("signal", SIGNALS)
@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("resistances", [RE, PARTS], ids=["RE", "RE1 and RE2"])
def test_corner_is_where_brentq_finds_it_on_the_independent_matrix(signal, polarity, resistances) -> None:
    fields = {"signal": SIGNALS[signal], "polarity": polarity, "resistances": resistances}
    case = Case(**{**vars(DIVIDER), **fields})
    matrix = Matrix(case, with_capacitors(case, FARADS))
    wanted = abs(matrix.midband()) / math.sqrt(2.0)
    found = brentq(lambda x: abs(matrix.gain(FARADS, math.exp(x))) - wanted, -2.0, 10.0, xtol=1e-12)
    # The matrix's conductances are finite differences, good to 1e-9, and the corner is found to 1e-11.
    assert corner(case, FARADS) == pytest.approx(math.exp(found), rel=1e-7)


farads = st.floats(-9.0, -2.0).map(lambda decade: 10.0**decade)


@settings(max_examples=150, deadline=None)
@given(
    cases(),
    st.one_of(st.none(), st.floats(100.0, 1e5)),
    st.one_of(st.just(0.0), st.floats(1.0, 1e5)),
    st.booleans(),
    st.tuples(farads, farads, farads),
)
def test_any_stage_has_its_gain_down_by_root_two_at_the_corner_and_not_above(
    case: Case, load: float | None, source_resistance: float, bypassed: bool, values: tuple[float, ...]
) -> None:
    bypassable = case.topology != "follower" and {"RE", "RE1"} & case.resistances.keys()
    signal = Signal(load=load, source_resistance=source_resistance, bypassed=bypassed and bool(bypassable))
    case = replace(case, signal=signal, ripple=0.0)
    own = dict(zip(("C_in", "C_out", "C_bypass"), values, strict=True))
    reading = with_capacitors(case, own)
    # A saturated transistor's conductances cancel to nothing that finite differences could show.
    assume(reading.point.status[0] == Status.SOLVED and reading.regions(0.0)[0] == 0)
    matrix, found = Matrix(case, reading), float(low_corner_frequency(reading)[0])
    short = abs(matrix.midband())
    # Finite differences: as in test_signal.py.
    assert abs(matrix.gain(own, found)) == pytest.approx(short / math.sqrt(2.0), rel=1e-5)
    for times in (1.1, 2.0, 10.0, 1e3):
        assert abs(matrix.gain(own, times * found)) > short / math.sqrt(2.0)


@settings(max_examples=60, deadline=None)
@given(cases(), st.booleans())
def test_resistance_that_a_capacitor_sees_is_volts_per_ampere_with_the_others_short(
    case: Case, bypassed: bool
) -> None:
    bypassable = case.topology != "follower" and {"RE", "RE1"} & case.resistances.keys()
    signal = Signal(load=4.7e3, source_resistance=600.0, bypassed=bypassed and bool(bypassable))
    case = replace(case, signal=signal, ripple=0.0)
    reading = with_capacitors(case, FARADS)
    assume(reading.point.status[0] == Status.SOLVED and reading.regions(0.0)[0] == 0)
    matrix, seen = Matrix(case, reading), seen_resistances(reading)
    assert set(seen) == set(signal.capacitors)
    for name, ohms in seen.items():
        # Finite differences: as in test_signal.py.
        assert float(np.ravel(ohms)[0]) == pytest.approx(matrix.seen(name), rel=1e-5), name


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("resistances", [RE, PARTS], ids=["RE", "RE1 and RE2"])
def test_divider_shows_its_capacitors_the_resistances_of_the_matrix(polarity, resistances) -> None:
    fields = {"signal": SIGNALS["all three"], "polarity": polarity, "resistances": resistances}
    case = Case(**{**vars(DIVIDER), **fields})
    reading = with_capacitors(case, FARADS)
    matrix = Matrix(case, reading)
    for name, ohms in seen_resistances(reading).items():
        assert float(np.ravel(ohms)[0]) == pytest.approx(matrix.seen(name), rel=1e-7), name  # as above


class Textbook:
    """The bypassed divider without Early effect by the textbook's formulas (common practice)."""

    def __init__(self, case: Case) -> None:
        assert case.signal is not None
        self.r_s, self.load = case.signal.source_resistance, case.signal.load or math.inf
        self.g_m = case.value("collector_current") / V_T
        self.r_pi, ohms = case.gain / self.g_m, case.resistances
        self.base = 1.0 / (1.0 / ohms["R1"] + 1.0 / ohms["R2"])
        self.beside = ohms.get("RE1", 0.0)
        self.across = ohms.get("RE2", ohms.get("RE", 0.0))
        self.gain, self.collector = case.gain, ohms["RC"]

    @property
    def at_input(self) -> float:
        base = self.r_pi + (self.gain + 1.0) * self.beside
        return self.r_s + 1.0 / (1.0 / self.base + 1.0 / base)

    @property
    def at_bypass(self) -> float:
        source = 1.0 / (1.0 / self.r_s + 1.0 / self.base)
        emitter = self.beside + (self.r_pi + source) / (self.gain + 1.0)
        return 1.0 / (1.0 / self.across + 1.0 / emitter)


PLAIN = replace(DIVIDER, transistor=real(), signal=SIGNALS["all three"])
FORMULAS = 2e-6
"""The textbook leaves out the saturation current and what the reverse junction conducts."""


@pytest.mark.parametrize("resistances", [RE, PARTS], ids=["RE", "RE1 and RE2"])
def test_one_capacitor_alone_has_its_corner_at_one_over_two_pi_r_c(resistances) -> None:
    case = replace(PLAIN, resistances=resistances)
    book = Textbook(case)
    for name, ohms in (("C_in", book.at_input), ("C_out", book.collector + book.load)):
        alone = {**dict.fromkeys(FARADS, SHORT), name: 1e-6}
        assert corner(case, alone) == pytest.approx(1.0 / (2.0 * math.pi * ohms * 1e-6), rel=FORMULAS)


@pytest.mark.parametrize("resistances", [RE, PARTS], ids=["RE", "RE1 and RE2"])
def test_bypass_alone_has_its_corner_below_the_pole_by_what_the_zero_gives_back(resistances) -> None:
    # |H|² = (ω² + ω_z²)/(ω² + ω_p²) is one half at ω² = ω_p² − 2·ω_z²; the zero is at 1/(RE·C).
    case = replace(PLAIN, resistances=resistances)
    book, c = Textbook(case), 47e-6
    pole, zero = 1.0 / (book.at_bypass * c), 1.0 / (book.across * c)
    expected = math.sqrt(pole**2 - 2.0 * zero**2) / (2.0 * math.pi)
    alone = {**dict.fromkeys(FARADS, SHORT), "C_bypass": c}
    assert corner(case, alone) == pytest.approx(expected, rel=FORMULAS)


@pytest.mark.parametrize("ratio", [1.0, 3.0, 100.0])
def test_two_coupling_capacitors_have_the_corner_of_two_poles(ratio: float) -> None:
    # Without feedback from collector to base |H|² = Π ω²/(ω² + p²): ω⁴ − (p² + q²)·ω² − p²q² = 0.
    case = replace(PLAIN, signal=SIGNALS["all three"])
    book = Textbook(case)
    p = 2.0 * math.pi * 30.0
    q = p / ratio
    at_output = book.collector + book.load
    own = {"C_in": 1.0 / (p * book.at_input), "C_out": 1.0 / (q * at_output), "C_bypass": SHORT}
    both = p**2 + q**2
    expected = math.sqrt((both + math.sqrt(both**2 + 4.0 * (p * q) ** 2)) / 2.0) / (2.0 * math.pi)
    assert corner(case, own) == pytest.approx(expected, rel=FORMULAS)


def at_own_corners(case: Case, corners: Mapping[str, float]) -> float:
    """The corner of all capacitors, each alone at these [Hz], as a share of the sum of them."""
    seen = seen_resistances(with_capacitors(case, FARADS))
    own = {k: 1.0 / (2.0 * math.pi * hertz * float(np.ravel(seen[k])[0])) for k, hertz in corners.items()}
    return corner(case, own) / sum(corners.values())


def test_sum_of_single_corners_is_near_where_one_leads_and_too_high_where_none_does() -> None:
    # Short-circuit time constants (Gray & Meyer, memory) hold while one pole leads: off by the others' share.
    assert at_own_corners(PLAIN, {"C_in": 1.0, "C_out": 1.0, "C_bypass": 100.0}) == pytest.approx(
        1.0, abs=0.02
    )
    assert at_own_corners(PLAIN, dict.fromkeys(FARADS, 20.0)) < 0.9
    # Two equal poles: (1 + x²)² = 2, ω = p/√(√2 − 1) of a sum of 2·p.
    case = replace(PLAIN, signal=SIGNALS["not bypassed"])
    equal = 1.0 / math.sqrt(math.sqrt(2.0) - 1.0) / 2.0
    assert at_own_corners(case, {"C_in": 5.0, "C_out": 5.0}) == pytest.approx(
        equal, rel=1e-4
    )  # reverse junction


def test_scaling_all_capacitors_scales_the_corner_the_other_way() -> None:
    wide = {name: 7.0 * value for name, value in FARADS.items()}
    # Frequencies are found to 1e-11.
    assert corner(PLAIN, FARADS) == pytest.approx(7.0 * corner(PLAIN, wide), rel=1e-10)


def test_shelf_of_a_bypass_that_matters_little_is_not_taken_for_the_corner() -> None:
    # RE1 1 kΩ beside a bypassed 100 Ω: with a tiny capacitor there the gain has a shelf 9 % below midband;
    # the input's pole p brings that down to 1/√2 of midband, r of the shelf, at f = p·r/√(1 − r²).
    case = replace(PLAIN, resistances={**PARTS, "RE1": 1e3, "RE2": 100.0})
    book, bare = Textbook(case), Textbook(case)
    bare.beside = 1100.0

    def into_emitter(of: Textbook) -> float:
        """Gain but for a factor that both share: the base's part of the EMF over what the emitter has."""
        path = of.r_pi + (of.gain + 1.0) * of.beside
        return (of.at_input - of.r_s) / of.at_input / path

    r = into_emitter(book) / into_emitter(bare) / math.sqrt(2.0)
    pole = 1.0 / (2.0 * math.pi * bare.at_input * 1e-6)
    found = corner(case, {"C_in": 1e-6, "C_out": SHORT, "C_bypass": 1e-12})
    assert found == pytest.approx(pole * r / math.sqrt(1.0 - r**2), rel=1e-5)  # the textbook's 2e-6, thrice


def test_neighbours_change_no_byte() -> None:
    places = [(t, v) for t in (253.0, 298.15, 360.0) for v in (3.0, 9.0, 15.0)]
    several = [replace(PLAIN, temperature=t, supply=v) for t, v in places]
    values = np.geomspace(1e-8, 1e-3, len(several))
    apart = [
        corner(case, {**FARADS, "C_in": value}) for case, value in zip(several, values.tolist(), strict=True)
    ]
    own = {**FARADS, "C_in": values}
    reading = read(PLAIN.stage, replace(together(several), capacitances=own))
    assert low_corner_frequency(reading).tolist() == apart


def test_gain_far_above_the_corner_is_that_of_midband() -> None:
    reading = with_capacitors(PLAIN, FARADS)
    # (f_c/f)² with f a million times the corner.
    assert abs(gain_at(reading, 1e8)[0]) == pytest.approx(abs(PLAIN.value("voltage_gain")), rel=1e-10)


def test_pnp_mirrors_npn() -> None:
    mirrored = Case(**{**vars(PLAIN), "polarity": "pnp"})
    assert corner(mirrored, FARADS) == pytest.approx(corner(PLAIN, FARADS), rel=1e-9)  # two solves


def test_no_capacitors_no_corner() -> None:
    assert np.isnan(low_corner_frequency(PLAIN.reading())).all()


def test_ideal_transistor_has_no_corner() -> None:
    assert math.isnan(corner(replace(PLAIN, transistor=ideal(100.0)), FARADS))


def test_unsolved_scenario_is_nan_beside_solved_ones() -> None:
    several = together([PLAIN, replace(PLAIN, supply=math.nan)])
    own = {name: np.array([value, value]) for name, value in FARADS.items()}
    found = low_corner_frequency(read(PLAIN.stage, replace(several, capacitances=own)))
    assert np.isfinite(found[0]) and np.isnan(found[1])


def test_vocabulary_has_the_corner_only_with_capacitors() -> None:
    assert LOW_CORNER not in vocabulary(("RC",))
    row = vocabulary(("RC",), with_capacitors=True)[LOW_CORNER]
    assert row.kind is Kind.FREQUENCY and row.costly
    reading = with_capacitors(PLAIN, FARADS)
    assert np.ravel(row.read(reading)).tolist() == [corner(PLAIN, FARADS)]


@pytest.mark.parametrize("names", [("C_in",), ("C_in", "C_bypass", "C_out"), (*FARADS, "X")])
def test_stage_has_all_capacitors_that_its_signal_couples_or_none(names) -> None:
    capacitors = tuple(Capacitor(name=name, value=1e-6) for name in names)
    with pytest.raises(UsageError, match="capacitors: C_in, C_out, C_bypass, or none; read C_in"):
        replace(PLAIN.stage, capacitors=capacitors)
