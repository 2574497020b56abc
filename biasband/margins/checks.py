"""Standing checks: what every stage is held to in every corner, without asking.

They look at the operating point, ripple in the rails and capacitors open; what ripple does to the
output through capacitors stands in the headrooms.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from biasband.circuit.active import RESIDUAL
from biasband.circuit.quantities import Quantity, vocabulary
from biasband.circuit.reading import Reading, read
from biasband.circuit.scenarios import Values
from biasband.circuit.topology import Node
from biasband.margins.records import Evidence, Margin, Side, share
from biasband.parts.derating import derated_rating
from biasband.quantity import Kind
from biasband.stage import Derating, Resistor, Stage
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
    found = list(_checks(stage, cut_off))
    made = tuple(check for check in found if isinstance(check, Check))
    return Standing(made, tuple(check for check in found if isinstance(check, NotMade)))


def _checks(stage: Stage, cut_off: float) -> Iterator[Check | NotMade]:
    words = vocabulary(tuple(r.name for r in stage.resistors))
    sheet, profile = stage.transistor, stage.derating
    V_CE, I_C = words["collector_emitter_voltage"], words["collector_current"]
    # Above V_CE(sat) by what voltages are solved to, so that a corner on it is saturated here as there.
    yield Check("saturation", "at_least", V_CE, lambda r: stage.saturation_voltage + RESIDUAL)
    yield Check("cut_off", "at_least", I_C, lambda r: cut_off)
    yield _power_check(stage, profile, words["transistor_power"])
    yield _check(
        "supply_voltage", "at_most", _RAIL_TO_RAIL, sheet.max_collector_emitter, "max_collector_emitter",
        lambda r, rating: profile.supply_voltage * rating,
    )  # fmt: skip
    yield _check(
        "collector_current", "at_most", I_C, sheet.max_current, "max_current",
        lambda r, rating: profile.current * rating,
    )  # fmt: skip
    yield _junction_check(stage, profile, words["junction_temperature"])
    if stage.signal is not None and stage.signal.bypassed:
        yield _check(
            "emitter_base_voltage", "at_most", _HELD_UP, sheet.max_emitter_base, "max_emitter_base",
            lambda r, rating: profile.emitter_base_voltage * rating,
        )  # fmt: skip
    for resistor in stage.resistors:
        yield _resistor_check(resistor, profile, words[f"resistor_power.{resistor.name}"])


LimitOf = Callable[[Reading, float], Values]
"""The limit in every scenario, from a rating."""


def _check(
    name: str, side: Side, value: Quantity, rating: float | None, key: str, limit: LimitOf = lambda r, x: x
) -> Check | NotMade:
    """A check against a rating of the data sheet, or the reason why it is not made."""
    if rating is None:
        return NotMade(name, key if "." in key else f"transistor.{key}")
    return Check(name, side, value, lambda r: limit(r, rating))


def _power_check(stage: Stage, profile: Derating, value: Quantity) -> Check | NotMade:
    """Factor × min(P_tot, (T_j max − T_a)/R_θJA); what is not stated does not limit."""
    sheet = stage.transistor
    hottest, per_watt, max_power = sheet.max_junction, sheet.thermal_resistance, sheet.max_power
    if max_power is None and (hottest is None or not per_watt):
        return NotMade("transistor_power", "transistor.max_power")

    def limit(reading: Reading) -> Values:
        total = np.inf if max_power is None else max_power
        if hottest is None or not per_watt:
            return profile.transistor_power * total
        at_ambient = np.maximum(hottest - reading.scenarios.temperature, 0.0) / per_watt
        return profile.transistor_power * np.minimum(total, at_ambient)

    return Check("transistor_power", "at_most", value, limit)


def _junction_check(stage: Stage, profile: Derating, value: Quantity) -> Check | NotMade:
    name, sheet = "junction_temperature", stage.transistor
    if sheet.thermal_resistance is None:
        return NotMade(name, "transistor.thermal_resistance")
    return _check(
        name, "at_most", value, sheet.max_junction, "max_junction", lambda r, x: profile.junction_limit(x)
    )


def _resistor_check(resistor: Resistor, profile: Derating, value: Quantity) -> Check | NotMade:
    def limit(reading: Reading, rating: float) -> Values:
        return profile.resistor_power * derated_rating(
            rating,
            reading.scenarios.temperature,
            derate_from=resistor.derate_from,
            derate_to=resistor.derate_to,
        )

    key = f"resistors.{resistor.name}.power_rating"
    return _check(value.name, "at_most", value, resistor.power_rating, key, limit)


_RAIL_TO_RAIL = Quantity(
    "supply_voltage", Kind.VOLTAGE, lambda r: r.rails[Node.COLLECTOR_RAIL] - r.rails[Node.EMITTER_RAIL]
)
"""The highest supply, rail to rail: what the transistor sees when it is cut off."""

_HELD_UP = Quantity(
    "emitter_base_voltage", Kind.VOLTAGE, lambda r: r.volts[Node.EMITTER] - r.volts[Node.EMITTER_RAIL]
)
"""What the bypass capacitor holds between emitter and base when the supply is switched off."""


def check_margins(stage: Stage, checks: Sequence[Check], evidence: Evidence) -> tuple[Margin, ...]:
    """A row for every check made, its value and limit as they stand at its worst corner."""
    worst = [evidence.corners.ranges[check.slack.name].low for check in checks]
    box = axes(stage)
    rows = [{axis.name: axis.nominal for axis in box}, *(extreme.coordinates for extreme in worst)]
    columns = {axis.name: np.array([row[axis.name] for row in rows]) for axis in box}
    reading = read(stage, realise(stage, columns))
    return tuple(_check_margin(check, reading, row, evidence) for row, check in enumerate(checks, start=1))


def _check_margin(check: Check, reading: Reading, row: int, evidence: Evidence) -> Margin:
    name = check.slack.name
    extreme = evidence.corners.ranges[name].low
    count = reading.point.status.shape
    value = np.broadcast_to(check.value.read(reading), count)
    limit = np.broadcast_to(check.limit(reading), count)
    here = min(row, count[0] - 1)
    distance = float(value[0] - limit[here]) * (1.0 if check.side == "at_least" else -1.0)
    return Margin(
        id="", quantity=check.name, kind=check.value.kind, limit=float(limit[here]), side=check.side,
        judged_by="corners", nominal=float(value[0]), corners=float(value[here]), margin=extreme.value,
        margin_share=share(extreme.value, distance), passes_at_corners=extreme.value >= 0.0,
        worst=replace(extreme, value=float(value[here])), causes=evidence.causes[name].low, standing=True,
    )  # fmt: skip
