"""Standing checks: what every stage is held to in every corner, without asking."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from biasband.circuit.quantities import Quantity, vocabulary
from biasband.circuit.reading import Reading, read
from biasband.circuit.scenarios import Values
from biasband.circuit.topology import Node
from biasband.margins.records import Evidence, Margin, Side, share
from biasband.parts.derating import PROFILES, Profile, derated_rating
from biasband.quantity import Kind
from biasband.stage import Resistor, Stage
from biasband.variation.contributors import axes, realise

_PREFIX = "check "


@dataclass(frozen=True)
class Check:
    """A standing check: a value that must stay on one side of a limit, both per scenario."""

    name: str
    side: Side
    value: Quantity
    limit: Callable[[Reading], Values]

    @property
    def slack(self) -> Quantity:
        """The distance from the value to its limit, negative beyond it, as a measure."""
        sign = 1.0 if self.side == "at_least" else -1.0
        return Quantity(
            _PREFIX + self.name, self.value.kind, lambda r: sign * (self.value.read(r) - self.limit(r))
        )


@dataclass(frozen=True)
class NotMade:
    """A check that was not made, and the stage file's key whose absence is the reason."""

    check: str
    missing: str


@dataclass(frozen=True)
class Standing:
    """The standing checks of a stage: those made, and those that no limit was given for."""

    made: tuple[Check, ...]
    not_made: tuple[NotMade, ...]

    @property
    def measures(self) -> Mapping[str, Quantity]:
        """The slack of every check made, as measures for the corners."""
        return {check.slack.name: check.slack for check in self.made}


def standing_checks(stage: Stage, *, cut_off: float) -> Standing:
    """Collect the standing checks of a stage; `cut_off` [A] is the current below which it is cut off."""
    found = list(_checks(stage, PROFILES[stage.derating], cut_off))
    made = tuple(check for check in found if isinstance(check, Check))
    return Standing(made, tuple(check for check in found if isinstance(check, NotMade)))


def _checks(stage: Stage, profile: Profile, cut_off: float) -> Iterator[Check | NotMade]:
    words = vocabulary(tuple(r.name for r in stage.resistors))
    transistor = stage.transistor
    yield _made_if(
        transistor.saturation_voltage, "saturation", "transistor.saturation_voltage",
        lambda volts: Check("saturation", "at_least", words["collector_emitter_voltage"], lambda r: volts),
    )  # fmt: skip
    yield Check("cut_off", "at_least", words["collector_current"], lambda r: cut_off)
    yield _made_if(
        transistor.max_power, "transistor_power", "transistor.max_power",
        lambda watts: Check("transistor_power", "at_most", words["transistor_power"], _power_limit(stage, profile, watts)),
    )  # fmt: skip
    yield _made_if(
        transistor.max_collector_emitter, "supply_voltage", "transistor.max_collector_emitter",
        lambda volts: Check("supply_voltage", "at_most", _RAIL_TO_RAIL, lambda r: profile.supply_voltage * volts),
    )  # fmt: skip
    yield _made_if(
        transistor.max_current, "collector_current", "transistor.max_current",
        lambda amps: Check("collector_current", "at_most", words["collector_current"], lambda r: profile.current * amps),
    )  # fmt: skip
    yield _junction_check(stage, profile, words)
    if stage.signal is not None and stage.signal.bypassed:
        yield _made_if(
            transistor.max_emitter_base, "emitter_base_voltage", "transistor.max_emitter_base",
            lambda volts: Check("emitter_base_voltage", "at_most", _HELD_UP, lambda r: profile.emitter_base_voltage * volts),
        )  # fmt: skip
    for resistor in stage.resistors:
        yield _resistor_check(resistor, profile, words)


def _made_if(
    limit: float | None, name: str, key: str, make: Callable[[float], Check]
) -> Check | NotMade:
    return NotMade(name, key) if limit is None else make(limit)


def _power_limit(stage: Stage, profile: Profile, max_power: float) -> Callable[[Reading], Values]:
    """Factor × min(P_tot, (T_j max − T_a)/R_θJA); P_tot alone where either is not stated."""
    transistor = stage.transistor
    hottest, per_watt = transistor.max_junction, transistor.thermal_resistance
    if hottest is None or not per_watt:
        return lambda r: profile.transistor_power * max_power
    return lambda r: profile.transistor_power * np.minimum(
        max_power, (hottest - r.scenarios.temperature) / per_watt
    )


def _junction_check(stage: Stage, profile: Profile, words: Mapping[str, Quantity]) -> Check | NotMade:
    if stage.transistor.thermal_resistance is None:
        return NotMade("junction_temperature", "transistor.thermal_resistance")
    return _made_if(
        stage.transistor.max_junction, "junction_temperature", "transistor.max_junction",
        lambda kelvin: Check(
            "junction_temperature", "at_most", words["junction_temperature"], lambda r: profile.junction_limit(kelvin)
        ),
    )  # fmt: skip


def _resistor_check(resistor: Resistor, profile: Profile, words: Mapping[str, Quantity]) -> Check | NotMade:
    name = f"resistor_power.{resistor.name}"

    def limit(rating: float) -> Callable[[Reading], Values]:
        return lambda r: profile.resistor_power * derated_rating(
            rating, r.scenarios.temperature, derate_from=resistor.derate_from, derate_to=resistor.derate_to
        )

    return _made_if(
        resistor.power_rating, name, f"resistors.{resistor.name}.power_rating",
        lambda watts: Check(name, "at_most", words[name], limit(watts)),
    )  # fmt: skip


_RAIL_TO_RAIL = Quantity(
    "supply_voltage", Kind.VOLTAGE, lambda r: r.rails[Node.COLLECTOR_RAIL] - r.rails[Node.EMITTER_RAIL]
)
"""The highest supply, rail to rail: what the transistor sees when it is cut off."""

_HELD_UP = Quantity(
    "emitter_base_voltage", Kind.VOLTAGE, lambda r: r.volts(Node.EMITTER) - r.rails[Node.EMITTER_RAIL]
)
"""What the bypass capacitor holds between emitter and base when the supply is switched off."""


def check_margins(stage: Stage, checks: Sequence[Check], evidence: Evidence) -> tuple[Margin, ...]:
    """A row for every check made, its value and limit as they stand at its worst corner."""
    worst = [evidence.corners.ranges[check.slack.name].low for check in checks]
    box = axes(stage)
    rows = [{axis.name: axis.nominal for axis in box}, *(extreme.coordinates for extreme in worst)]
    reading = read(stage, realise(stage, {axis.name: np.array([row[axis.name] for row in rows]) for axis in box}))
    return tuple(
        _check_margin(check, reading, row, evidence) for row, check in enumerate(checks, start=1)
    )


def _check_margin(check: Check, reading: Reading, row: int, evidence: Evidence) -> Margin:
    name = check.slack.name
    extreme = evidence.corners.ranges[name].low
    count = reading.point.status.shape
    value = np.broadcast_to(check.value.read(reading), count)
    limit = np.broadcast_to(check.limit(reading), count)
    slack = np.broadcast_to(check.slack.read(reading), count)
    here = min(row, count[0] - 1)
    return Margin(
        id="", quantity=check.name, kind=check.value.kind, limit=float(limit[here]), side=check.side,
        judged_by="corners", nominal=float(value[0]), corners=float(value[here]), margin=extreme.value,
        margin_share=share(extreme.value, float(slack[0])), passes_at_corners=extreme.value >= 0.0,
        worst=replace(extreme, value=float(value[here])), causes=evidence.causes[name].low, standing=True,
    )  # fmt: skip
