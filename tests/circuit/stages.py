"""Builders of stages for the tests: one `Case` is one stage in one scenario."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from hypothesis import strategies as st

from biasband.circuit.quantities import vocabulary
from biasband.circuit.reading import Reading, read, wiring_of
from biasband.circuit.scenarios import Scenarios
from biasband.circuit.topology import Wiring
from biasband.stage import (
    AnyTransistor,
    IdealTransistor,
    Limits,
    Polarity,
    Resistor,
    Signal,
    Stage,
    Supply,
    Transistor,
)

TOPOLOGY_RESISTORS = {
    "base-resistor": (("RB", "RC", "RE"), ("RB", "RC")),
    "collector-feedback": (("RB", "R2", "RC", "RE"), ("RB", "RC", "RE"), ("RB", "R2", "RC"), ("RB", "RC")),
    "divider": (("R1", "R2", "RC", "RE"), ("R1", "R2", "RC", "RE1", "RE2")),
    "split-supply": (("RB", "RC", "RE"), ("RB", "RC", "RE1", "RE2")),
    "follower": (("R1", "R2", "RE"),),
}
"""Which resistors a topology can have (physics.md section 3)."""


@dataclass(frozen=True, kw_only=True)
class Case:
    """One stage in one scenario, in SI; voltages of the rails are real."""

    topology: str
    resistances: Mapping[str, float]
    supply: float
    transistor: AnyTransistor
    polarity: Polarity = "npn"
    negative_supply: float = 0.0
    ripple: float = 0.0
    temperature: float = 298.15
    leakage: float = 0.0
    signal: Signal | None = None

    @property
    def gain(self) -> float:
        """h_FE at the test point, 25 °C."""
        return self.transistor.gain.nominal

    @property
    def base_emitter_voltage(self) -> float:
        """V_BE [V] at the test current, 25 °C."""
        return self.transistor.base_emitter_voltage.nominal

    @property
    def stage(self) -> Stage:
        """The stage."""
        split = self.topology == "split-supply"
        return Stage(
            title="case",
            topology=self.topology,
            polarity=self.polarity,
            supply=Supply(voltage=Limits.exactly(self.supply), ripple_peak=abs(self.ripple)),
            negative_supply=Supply(voltage=Limits.exactly(self.negative_supply)) if split else None,
            transistor=self.transistor,
            resistors=tuple(Resistor(name=name, value=ohms) for name, ohms in self.resistances.items()),
            signal=self.signal,
        )

    @property
    def wiring(self) -> Wiring:
        """The stage's wiring."""
        return wiring_of(self.stage)

    @property
    def scenarios(self) -> Scenarios:
        """The one scenario, as arrays of shape (1,)."""
        return together([self])

    def reading(self) -> Reading:
        """The stage read in its scenario."""
        return read(self.stage, self.scenarios)

    def value(self, quantity: str) -> float:
        """One quantity of the vocabulary."""
        return value(self.reading(), quantity)


def value(reading: Reading, quantity: str) -> float:
    """The first scenario's value of a quantity."""
    row = vocabulary(tuple(reading.scenarios.resistances))[quantity]
    return float(np.ravel(row.read(reading))[0])


def together(cases: Sequence[Case]) -> Scenarios:
    """The scenarios of cases that share a stage, one row each."""

    def column(name: str) -> Any:
        return np.array([getattr(case, name) for case in cases], dtype=float)

    names = tuple(cases[0].resistances)
    return Scenarios(
        resistances={name: np.array([case.resistances[name] for case in cases]) for name in names},
        gain=column("gain"),
        base_emitter_voltage=column("base_emitter_voltage"),
        leakage=column("leakage"),
        supply=column("supply"),
        ripple=column("ripple"),
        negative_supply=column("negative_supply"),
        temperature=column("temperature"),
    )


def ideal(gain: float, base_emitter_voltage: float = 0.7) -> IdealTransistor:
    """A textbook transistor."""
    return IdealTransistor(
        gain=Limits.exactly(gain), base_emitter_voltage=Limits.exactly(base_emitter_voltage)
    )


def real(gain: float = 260.0, base_emitter_voltage: float = 0.64, **more: Any) -> Transistor:
    """An invented small-signal transistor, tested at 1.5 mA and 6 V."""
    figures: dict[str, Any] = {"test_current": 1.5e-3, "test_voltage": 6.0, **more}
    return Transistor(
        gain=Limits.exactly(gain), base_emitter_voltage=Limits.exactly(base_emitter_voltage), **figures
    )


def _between(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(low, high, allow_nan=False)


def _decades(low: float, high: float) -> st.SearchStrategy[float]:
    """Values spread evenly over decades."""
    return st.floats(np.log(low), np.log(high)).map(lambda exponent: float(np.exp(exponent)))


_RANGES = {"RB": (3e3, 3e6), "R1": (3e3, 1e6), "R2": (1e3, 3e5), "RC": (50.0, 2e6), "RE": (5.0, 5e4)}


def transistors(thermal: bool = True) -> st.SearchStrategy[Transistor]:
    """Any transistor that a stage file could describe."""
    resistance = st.one_of(st.none(), _between(50.0, 500.0)) if thermal else st.none()
    return st.builds(
        real,
        gain=_decades(10.0, 900.0),
        base_emitter_voltage=_between(0.5, 0.8),
        test_current=_decades(1e-4, 0.1),
        test_voltage=_between(1.0, 10.0),
        early_voltage=st.one_of(st.none(), _between(15.0, 200.0)),
        reverse_gain=_decades(0.2, 20.0),
        base_emitter_drift=st.sampled_from([-2e-3, -1.7e-3, None]),
        gain_drift=_between(0.0, 7e-3),
        leakage_doubling=_between(8.0, 15.0),
        thermal_resistance=resistance,
    )


@st.composite
def cases(draw: st.DrawFn, *, thermal: bool = True) -> Case:
    """Any stage of any topology and polarity: active, saturated or cut off, mild or extreme."""
    topology = draw(st.sampled_from(sorted(TOPOLOGY_RESISTORS)))
    names = draw(st.sampled_from(TOPOLOGY_RESISTORS[topology]))
    split = topology == "split-supply"
    return Case(
        topology=topology,
        polarity=draw(st.sampled_from(["npn", "pnp"])),
        resistances={name: draw(_decades(*_RANGES[name[:2]])) for name in names},
        supply=draw(_between(0.2, 40.0)),
        negative_supply=-draw(_between(1.0, 20.0)) if split else 0.0,
        ripple=draw(_between(-0.1, 0.1)),
        temperature=draw(_between(233.15, 398.15)),
        leakage=draw(st.one_of(st.just(0.0), _decades(1e-10, 1e-6))),
        transistor=draw(transistors(thermal)),
    )
