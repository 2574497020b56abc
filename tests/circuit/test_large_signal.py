"""The large signal: swings that are there and no larger, and distortion against closed forms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import iv

from biasband.circuit.large_signal import CANNOT, LargeSignal, distortion
from biasband.circuit.reading import Reading, read
from biasband.circuit.topology import Node
from biasband.stage import Signal
from circuit.stages import Case, ideal, real, together, value

BYPASSED = Signal(bypassed=True)
STIFF = replace(BYPASSED, load=10e3)
DIVIDER = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE": 1e3}
PARTLY = {"R1": 68e3, "R2": 13e3, "RC": 3.3e3, "RE1": 220.0, "RE2": 820.0}

CASES = {
    "divider, bypassed, into a load": Case(
        topology="divider", resistances=DIVIDER, supply=9.0, transistor=real(), signal=STIFF
    ),
    "divider, emitter in two": Case(
        topology="divider", resistances=PARTLY, supply=9.0, transistor=real(early_voltage=70.0),
        signal=replace(STIFF, source_resistance=600.0),
    ),
    "divider, nothing bypassed, saturates first": Case(
        topology="divider", resistances={**DIVIDER, "RC": 4.7e3}, supply=9.0, transistor=real(),
        signal=Signal(load=47e3),
    ),
    "base resistor": Case(
        topology="base-resistor", resistances={"RB": 1.5e6, "RC": 3.3e3}, supply=9.0, transistor=real(),
        signal=Signal(load=10e3),
    ),
    "split supply": Case(
        topology="split-supply", resistances={"RB": 47e3, "RC": 4.7e3, "RE": 8.2e3}, supply=9.0,
        negative_supply=-9.0, transistor=real(), signal=STIFF,
    ),
    "follower": Case(
        topology="follower", resistances={"R1": 33e3, "R2": 47e3, "RE": 1.2e3}, supply=9.0, transistor=real(),
        signal=Signal(load=1e3, source_resistance=600.0),
    ),
}  # fmt: skip


def mirrored(case: Case) -> Case:
    """The PNP stage that is the mirror image: in a split supply the rails change places too."""
    if case.topology != "split-supply":
        return replace(case, polarity="pnp")
    rails = {"supply": -case.negative_supply, "negative_supply": -case.supply}
    return replace(case, polarity="pnp", **rails)


def at_output(reading: Reading, displacement: float) -> tuple[float, float]:
    """(I_C, V_CE) where a stiffly driven base moves the output so far [V, transistor's frame].

    Raises ValueError where no drive does.
    """
    large = LargeSignal.of(reading)
    rest, source = float(large.rest[0]), large.rails[Node.SOURCE]

    def off(emf: float) -> float:
        return float(large.moved(emf)[0]) - displacement

    toward = np.sign(displacement) * (1.0 if reading.wiring.output is Node.EMITTER else -1.0)
    # The first drive that goes far enough: past saturation the output turns back.
    drives = toward * np.concatenate([[0.0], np.geomspace(1e-4, 30.0, 400)])
    moved = np.array([off(float(emf)) for emf in drives])
    beyond = np.flatnonzero(np.sign(moved) == np.sign(displacement))
    if not beyond.size:
        raise ValueError(f"the output does not move by {displacement} V from {rest} V, source at {source}")
    emf = brentq(off, drives[beyond[0] - 1], drives[beyond[0]], xtol=1e-13)
    bias = large.bias(emf)
    assert bias.solved[0]
    return float(bias.I_C[0]), float(bias.V_BE[0] - bias.V_BC[0])


def driven(case: Case) -> Reading:
    """The case with a source of no resistance: physics.md 6 moves the base."""
    return replace(case, signal=replace(case.signal or Signal(), source_resistance=0.0)).reading()


def violated(reading: Reading, displacement: float, saturation_voltage: float) -> bool:
    """Whether the output cannot stand there: no drive, too little current, or saturated."""
    try:
        I_C, V_CE = at_output(reading, displacement)
    except ValueError:
        return True
    return not (I_C > 0.005 * float(reading.quiet.collector_current[0]) and V_CE > saturation_voltage)


@pytest.mark.parametrize("polarity", ["npn", "pnp"])
@pytest.mark.parametrize("name", CASES)
def test_swing_is_there_at_99_percent_and_not_at_101(name: str, polarity: str) -> None:
    """The large-signal check of the swing: both ends stand at ±99 %, one of them does not at ±101 %."""
    case = CASES[name] if polarity == "npn" else mirrored(CASES[name])
    reading, saturated = driven(case), case.stage.saturation_voltage
    swing = value(reading, "symmetric_peak_swing")
    assert not violated(reading, 0.99 * swing, saturated)
    assert not violated(reading, -0.99 * swing, saturated)
    assert violated(reading, 1.01 * swing, saturated) or violated(reading, -1.01 * swing, saturated)


def exponential(supply: float = 30.0) -> Case:
    """A stage whose collector current is I_S·e^{v/V_T}: no Early effect, hardly a base current.

    The supply is high enough that cut-off limits, so that the clipping swing is I_C·RC.
    """
    return Case(
        topology="divider", resistances={"R1": 28e3, "R2": 2e3, "RC": 3.3e3, "RE": 1.3e3}, supply=supply,
        transistor=real(gain=1e7), signal=BYPASSED,
    )  # fmt: skip


def bessel(depth: float) -> float:
    """THD of e^{x·cos}, up to the ninth harmonic, where sinh(x) = depth: I_n(x)/I_1(x).

    Source: e^{x·cos θ} = I_0(x) + 2·Σ I_n(x)·cos(nθ), Abramowitz & Stegun 9.6.34.
    """
    x = float(np.arcsinh(depth))
    return float(np.sqrt(sum(iv(n, x) ** 2 for n in range(2, 10))) / iv(1, x))


@pytest.mark.parametrize("depth", [0.05, 0.3, 0.7, 1.0])
def test_stiffly_driven_exponential_has_bessel_s_harmonics(depth: float) -> None:
    reading = exponential().reading()
    full = float(reading.quiet.collector_current[0]) * 3.3e3
    # Five steps of false position on a curve this smooth leave some 1e-4 of the swing.
    assert distortion(reading, depth * full)[0] == pytest.approx(bessel(depth), rel=1e-3)


def test_bypassed_stage_at_its_clipping_swing_has_around_20_percent() -> None:
    """physics.md section 6; e^{x·cos} with sinh x = 1 has 21.6 %."""
    reading = exponential().reading()
    clipping = value(reading, "symmetric_peak_swing")
    assert distortion(reading, clipping)[0] == pytest.approx(bessel(1.0), rel=1e-3)
    assert 0.19 < bessel(1.0) < 0.22


def test_small_swing_distorts_by_its_depth_over_four() -> None:
    """The second harmonic of an exponential is x/4 of the first for small x (common practice)."""
    reading = exponential().reading()
    full = float(reading.quiet.collector_current[0]) * 3.3e3
    assert distortion(reading, 0.01 * full)[0] == pytest.approx(0.0025, rel=2e-3)  # next term: x²


@pytest.mark.parametrize("name", CASES)
def test_small_signal_gain_is_the_slope_of_the_transfer_curve(name: str) -> None:
    reading = CASES[name].reading()
    large, h = LargeSignal.of(reading), 1e-5
    slope = (large.moved(h) - large.moved(-h)) / (2.0 * h)
    # A source without resistance has 1 mΩ here; the third-order term is (h/V_T)²/6.
    assert slope[0] == pytest.approx(value(reading, "voltage_gain"), rel=1e-5)


@pytest.mark.parametrize("name", CASES)
def test_nothing_moves_without_a_drive(name: str) -> None:
    reading = CASES[name].reading()
    # Two solves with residuals of 1e-9 V, times the gain.
    assert LargeSignal.of(reading).moved(0.0)[0] == pytest.approx(0.0, abs=1e-6)


def test_emitter_resistance_that_is_not_bypassed_takes_distortion_away() -> None:
    bypassed = CASES["divider, bypassed, into a load"]
    free = replace(bypassed, signal=Signal(load=10e3))
    swing = 0.5
    with_feedback, without = distortion(free.reading(), swing)[0], distortion(bypassed.reading(), swing)[0]
    # At the same swing the feedback divides the second harmonic by 1 + g_m·RE, some 30 here.
    assert 0.0 < with_feedback < 0.05 * without


@pytest.mark.parametrize("name", CASES)
def test_pnp_mirrors_npn(name: str) -> None:
    case = CASES[name]
    npn, pnp = case.reading(), mirrored(case).reading()
    swing = 0.5 * value(npn, "symmetric_peak_swing")
    assert distortion(pnp, swing)[0] == pytest.approx(distortion(npn, swing)[0], rel=1e-5)


def test_all_at_once_is_one_by_one() -> None:
    cases = [replace(CASES["divider, emitter in two"], supply=volts) for volts in (7.0, 9.0, 12.0)]
    at_once = distortion(read(cases[0].stage, together(cases)), 1.0)
    alone = [float(distortion(case.reading(), 1.0)[0]) for case in cases]
    # Each takes its own steps; only the rounding of solves to 1e-9 V is left.
    assert at_once == pytest.approx(alone, rel=1e-6)


def test_swing_that_the_stage_cannot_make_is_all_distortion() -> None:
    reading = CASES["divider, bypassed, into a load"].reading()
    assert distortion(reading, 8.0)[0] == CANNOT


def test_ideal_transistor_and_unsolved_scenarios_have_no_distortion() -> None:
    textbook = replace(CASES["base resistor"], transistor=ideal(100.0))
    assert np.isnan(distortion(textbook.reading(), 1.0)[0])
    unsolved = replace(CASES["base resistor"], supply=float("nan"))
    assert np.isnan(distortion(unsolved.reading(), 1.0)[0])
