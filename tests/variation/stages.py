"""Stages that vary, for the tests of variation, margins and the published cases; all invented."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from hypothesis import strategies as st

from biasband.circuit.quantities import Quantity, vocabulary
from biasband.stage import (
    AnyTransistor,
    Distribution,
    IdealTransistor,
    Limits,
    Resistor,
    Signal,
    Stage,
    Supply,
    Transistor,
)

ROOM = 298.15
"""25 °C."""


def limits(low: float, nominal: float, high: float) -> Limits:
    """Limits with a typical value."""
    return Limits(low=low, nominal=nominal, high=high)


def ideal(gain: Limits | float, base_emitter_voltage: Limits | float = 0.7, **more: Any) -> IdealTransistor:
    """A textbook transistor whose figures may vary; V_CE(sat) is 0 unless given."""
    as_limits = [x if isinstance(x, Limits) else Limits.exactly(x) for x in (gain, base_emitter_voltage)]
    figures = {"saturation_voltage": 0.0, **more}
    return IdealTransistor(gain=as_limits[0], base_emitter_voltage=as_limits[1], **figures)


def real(**more: Any) -> Transistor:
    """An invented small-signal transistor with the full set of limits."""
    figures: dict[str, Any] = {
        "gain": limits(165.0, 260.0, 410.0),
        "base_emitter_voltage": limits(0.57, 0.64, 0.72),
        "test_current": 1.5e-3,
        "test_voltage": 6.0,
        "early_voltage": 70.0,
        "saturation_voltage": 0.3,
        **more,
    }
    return Transistor(**figures)


def stage(
    topology: str,
    ohms: dict[str, float],
    transistor: AnyTransistor,
    supply: Supply | Limits | float,
    *,
    resistor: dict[str, Any] | None = None,
    **more: Any,
) -> Stage:
    """A stage; `resistor` holds what all its resistors have in common."""
    if not isinstance(supply, Supply):
        supply = Supply(voltage=supply if isinstance(supply, Limits) else Limits.exactly(supply))
    resistors = tuple(Resistor(name=name, value=value, **(resistor or {})) for name, value in ohms.items())
    return Stage(
        **{
            "title": "test",
            "topology": topology,
            "polarity": "npn",
            "supply": supply,
            "transistor": transistor,
            "resistors": resistors,
            **more,
        }
    )


def with_resistor(of: Stage, name: str, **changes: Any) -> Stage:
    """The stage with one resistor changed."""
    changed = tuple(replace(r, **changes) if r.name == name else r for r in of.resistors)
    return replace(of, resistors=changed)


def with_resistors(of: Stage, **changes: Any) -> Stage:
    """The stage with all resistors changed alike."""
    return replace(of, resistors=tuple(replace(r, **changes) for r in of.resistors))


def words(of: Stage) -> dict[str, Quantity]:
    """The vocabulary of a stage."""
    return dict(vocabulary(tuple(r.name for r in of.resistors)))


def some(of: Stage, *names: str) -> dict[str, Quantity]:
    """Some quantities of a stage's vocabulary."""
    known = words(of)
    return {name: known[name] for name in names}


def coupled() -> Stage:
    """A bypassed divider with a load, ripple, ambient limits, leakage and self-heating: everything varies."""
    return stage(
        "divider",
        {"R1": 68e3, "R2": 13e3, "RC": 3900.0, "RE": 820.0},
        real(leakage=40e-9, thermal_resistance=280.0),
        Supply(voltage=limits(8.1, 9.0, 9.9), ripple_peak=0.05),
        resistor={"tolerance": 0.01, "tempco": 1e-4, "life_drift": 0.005},
        ambient=limits(263.15, ROOM, 323.15),
        signal=Signal(load=47e3, source_resistance=600.0, bypassed=True),
    )


def running_away(ambient: Limits | None = None) -> Stage:
    """A stage that leakage drives into thermal runaway at 85 °C, and that is cold without it."""
    leaky = real(
        gain=Limits.exactly(260.0),
        base_emitter_voltage=Limits.exactly(0.64),
        leakage=0.1e-6,
        thermal_resistance=500.0,
    )
    hot = Limits.exactly(358.15) if ambient is None else ambient
    return stage("base-resistor", {"RB": 10e6, "RC": 100.0}, leaky, 20.0, ambient=hot)


def distributions(tolerance: float) -> list[Distribution]:
    """Every distribution that a resistor's tolerance can have."""
    plain = [Distribution(name=name) for name in ("uniform", "normal", "triangular", "sine")]
    within = [0.0, 0.3 * tolerance, tolerance]
    batches = [Distribution(name="batch", within_batch=part) for part in within]
    hollow = [Distribution(name="hollow", hollow_within=0.2 * tolerance)] if tolerance else []
    return [*plain, *batches, *hollow]


_ORDINARY = {
    "base-resistor": ({"RB": 1.2e6, "RC": 3.9e3}, {"RB": 910e3, "RC": 3.3e3, "RE": 330.0}),
    "collector-feedback": ({"RB": 470e3, "RC": 3.9e3}, {"RB": 82e3, "R2": 43e3, "RC": 3.6e3, "RE": 1e3}),
    "divider": (
        {"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE": 820.0},
        {"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE1": 100.0, "RE2": 720.0},
    ),
    "split-supply": ({"RB": 100e3, "RC": 4.7e3, "RE": 8.2e3},),
    "follower": ({"R1": 68e3, "R2": 91e3, "RE": 3e3},),
}
"""Resistors that bias the invented transistor at about a milliampere from 9 V (±9 V)."""


_DRAWN_GAIN = [Distribution(), Distribution(name="sine"), Distribution(name="batch", within_batch=0.2)]


@st.composite
def varying_stages(draw: st.DrawFn) -> Stage:
    """Any stage that varies: groups, a supply by board, hot and leaky ones, some that saturate."""
    topology = draw(st.sampled_from(sorted(_ORDINARY)))
    polarity = draw(st.sampled_from(["npn", "pnp"]))
    volts = draw(st.sampled_from([Limits.exactly(9.0), limits(8.1, 9.0, 9.9), limits(8.5, 9.0, 9.3)]))
    varies = draw(st.sampled_from(["in use", "by board"]))
    negative = Supply(voltage=Limits(low=-9.9, nominal=-9.0, high=-8.1), varies=varies)
    tempco = draw(st.sampled_from([0.0, 1e-4, 4e-4]))
    grouped = {"group": "reel", "tracking": 0.3 * tempco} if draw(st.booleans()) else {}
    tolerance = draw(st.sampled_from([0.0, 0.01, 0.05]))
    resistor = {
        "tolerance": tolerance,
        "distribution": draw(st.sampled_from(distributions(tolerance))),
        "life_drift": draw(st.sampled_from([0.0, 0.01])),
        "tempco": tempco,
        **grouped,
    }
    transistor = real(
        gain=replace(limits(165.0, 260.0, 410.0), distribution=draw(st.sampled_from(_DRAWN_GAIN))),
        leakage=draw(st.sampled_from([0.0, 40e-9, 500e-9])),
        thermal_resistance=draw(st.sampled_from([None, 280.0])),
        base_emitter_drift=draw(st.sampled_from([-2e-3, None])),
    )
    ambient = draw(
        st.sampled_from([Limits.exactly(ROOM), limits(263.15, ROOM, 323.15), limits(233.15, ROOM, 358.15)])
    )
    load = draw(st.sampled_from([None, 10e3]))
    signal = Signal(load=load, source_resistance=600.0, bypassed=draw(st.booleans()))
    return stage(
        topology,
        draw(st.sampled_from(_ORDINARY[topology])),
        transistor,
        Supply(voltage=volts, ripple_peak=draw(st.sampled_from([0.0, 0.05])), varies=varies),
        resistor=resistor,
        negative_supply=negative if topology == "split-supply" else None,
        polarity=polarity,
        ambient=ambient,
        boards_per_batch=7,
        signal=draw(st.sampled_from([None, signal])),
    )
