"""Contributors: what varies, as coordinates between limits, and the scenarios they make.

Every contributor is one axis with a coordinate from −1 (low limit) over 0 (nominal) to +1 (high
limit); all methods speak in coordinates, and `realise` turns them into physical values. Between
limit and nominal the value is linear in the coordinate (h_FE: linear in ln h_FE), so that a uniform
coordinate is the maximum-entropy distribution of what a data sheet states: uniform between two
limits, and half the probability on each side of a typical value. Leakage is the exception: its
nominal value, zero, is its low limit.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from biasband.circuit.scenarios import Array, Scenarios, Values
from biasband.constants import REFERENCE_TEMPERATURE
from biasband.errors import UsageError
from biasband.stage import Capacitor, Limits, Resistor, Stage, Supply

GAIN, BASE_EMITTER, LEAKAGE = "gain", "base_emitter_voltage", "leakage"
SUPPLY, RIPPLE, NEGATIVE, TEMPERATURE = "supply", "ripple", "negative_supply", "temperature"

Coordinates = Mapping[str, Values]
"""Coordinates by name, each (N,) or one number; a name that is missing stands at nominal.

A resistor's own name moves its tolerance, drift and tempco together towards one limit; the names
of its draws (`R1.tolerance`, `R1.life_drift`, `R1.tempco`) move them one by one, the tempco with the
sign of T_a − T0. Likewise a capacitor's own name and its draws (`C_in.tolerance`, `C_in.temperature_change`).
Beside coordinates, `R1.value` [Ω] may stand in for the value that the stage gives R1, so
that many sets of values are one evaluation.
"""


@dataclass(frozen=True)
class Axis:
    """A contributor whose limits do not coincide; `nominal` is its nominal coordinate."""

    name: str
    in_use: bool
    nominal: float = 0.0


def axes(stage: Stage) -> tuple[Axis, ...]:
    """Every contributor of a stage that varies, by-board ones first."""
    return (*board_axes(stage), *use_axes(stage))


def board_axes(stage: Stage) -> tuple[Axis, ...]:
    """What differs from one board to the next and stays with it."""
    transistor = stage.transistor
    names = [resistor.name for resistor in stage.resistors if _varies(stage, resistor)]
    names += [group_axis(group) for group in _groups(stage)]
    names += [batch_axis(group) for group in batch_groups(stage)]
    names += [capacitor.name for capacitor in stage.capacitors if _changes(stage, capacitor)]
    names += [GAIN] if _spans(transistor.gain) else []
    names += [BASE_EMITTER] if _spans(transistor.base_emitter_voltage) else []
    names += [name for name, rail in _supplies(stage) if rail.varies == "by board"]
    axes = [Axis(name, in_use=False) for name in names]
    return (*axes, Axis(LEAKAGE, in_use=False, nominal=-1.0)) if transistor.leakage > 0.0 else (*axes,)


def use_axes(stage: Stage) -> tuple[Axis, ...]:
    """What every board meets in its life."""
    names = [TEMPERATURE] if _spans(stage.ambient) else []
    names += [name for name, rail in _supplies(stage) if rail.varies == "in use"]
    names += [RIPPLE] if stage.supply.ripple_peak > 0.0 else []
    return tuple(Axis(name, in_use=True) for name in names)


def columns(box: tuple[Axis, ...], points: Array) -> dict[str, Array]:
    """Points of the box, shape (M, K), as coordinates by name."""
    return {axis.name: points[:, k] for k, axis in enumerate(box)}


def group_axis(group: str) -> str:
    """The name of the contributor that is the shared tempco of a group of resistors."""
    return f"group {group}"


def batch_axis(group: str) -> str:
    """The name of the contributor that is the batch mean of a group of resistors."""
    return f"batch {group}"


def batch_groups(stage: Stage) -> list[str]:
    """The groups whose members share a batch mean that moves, in the order of their first members."""
    shared = [r.group for r in stage.resistors if r.group is not None and tolerances(r).common > 0.0]
    return list(dict.fromkeys(shared))


def _supplies(stage: Stage) -> Iterator[tuple[str, Supply]]:
    """The supplies whose limits do not coincide."""
    for name, rail in ((SUPPLY, stage.supply), (NEGATIVE, stage.negative_supply)):
        if rail is not None and _spans(rail.voltage):
            yield name, rail


def _groups(stage: Stage) -> list[str]:
    """The groups whose members share part of a tempco that matters."""
    shared = [r.group for r in stage.resistors if r.group is not None and tempcos(r).common > 0.0]
    return list(dict.fromkeys(shared)) if _warms(stage) else []


def _varies(stage: Stage, resistor: Resistor) -> bool:
    own = tempcos(resistor).own if _warms(stage) else 0.0
    return max(tolerances(resistor).own, resistor.life_drift, own) > 0.0


def _changes(stage: Stage, capacitor: Capacitor) -> bool:
    warmed = _warms(stage) and capacitor.temperature_distance > 0.0
    return capacitor.tolerance > 0.0 or (warmed and capacitor.temperature_change > 0.0)


def _warms(stage: Stage) -> bool:
    """Whether the ambient ever leaves the reference temperature."""
    return stage.ambient.low != REFERENCE_TEMPERATURE or stage.ambient.high != REFERENCE_TEMPERATURE


def _spans(limits: Limits) -> bool:
    return limits.low < limits.high


@dataclass(frozen=True)
class Split:
    """A tempco [1/K] or a tolerance, split in what a resistor has for itself and what its group shares."""

    own: float
    common: float


def tempcos(resistor: Resistor) -> Split:
    """Split a resistor's tempco: within a group only `tracking` is its own."""
    if resistor.group is None or resistor.tracking is None:
        return Split(resistor.tempco, 0.0)
    return Split(resistor.tracking, resistor.tempco - resistor.tracking)


def tolerances(resistor: Resistor) -> Split:
    """Split a resistor's tolerance: within a group drawn by batch only `within_batch` is its own."""
    within = resistor.distribution.within_batch
    if resistor.group is None or within is None:
        return Split(resistor.tolerance, 0.0)
    return Split(within, resistor.tolerance - within)


def realise(stage: Stage, x: Coordinates) -> Scenarios:
    """The scenarios at these coordinates.

    A resistor is `R·(1 + t·x_t)·(1 + d·x_d)·(1 + (own·x_c + common·x_g)·(T_a − T0))`; by its own name,
    `|T_a − T0|`, so that its low limit is R·(1−t)(1−d)(1−c·|ΔT|). In a group drawn by batch, t·x_t is
    `own·x_t + common·x_b`, x_b the batch mean's. A capacitor is `C·(1 + t·x_t)·(1 + h·x_h·|T_a − T0|/ΔT)`,
    the quotient 1 at most. Raises UsageError where a part has no value yet.
    """
    transistor = stage.transistor
    temperature = _between(stage.ambient, x.get(TEMPERATURE, 0.0))
    rise = temperature - REFERENCE_TEMPERATURE
    negative = stage.negative_supply
    return Scenarios(
        resistances={r.name: _resistance(r, x, rise) for r in stage.resistors},
        gain=_between(transistor.gain, x.get(GAIN, 0.0), logarithmic=True),
        base_emitter_voltage=_between(transistor.base_emitter_voltage, x.get(BASE_EMITTER, 0.0)),
        leakage=transistor.leakage * 0.5 * (x.get(LEAKAGE, -1.0) + 1.0),
        supply=_between(stage.supply.voltage, x.get(SUPPLY, 0.0)),
        ripple=stage.supply.ripple_peak * x.get(RIPPLE, 0.0),
        negative_supply=0.0 if negative is None else _between(negative.voltage, x.get(NEGATIVE, 0.0)),
        temperature=temperature,
        capacitances={capacitor.name: _capacitance(capacitor, x, rise) for capacitor in stage.capacitors},
    )


def _resistance(resistor: Resistor, x: Coordinates, rise: Values) -> Values:
    """A resistor [Ω] after tolerance, life drift and tempco; `value` must be chosen by now."""
    value = x.get(f"{resistor.name}.value", resistor.value)
    if value is None:
        raise UsageError(f"{resistor.name} has no value yet: design the stage first")
    tempco = tempcos(resistor)
    limit = x.get(resistor.name, 0.0)
    heat = _tempco_term(resistor.name, tempco.own, x, rise)
    if resistor.group is not None and tempco.common:
        heat = heat + _tempco_term(group_axis(resistor.group), tempco.common, x, rise)
    made = 1.0 + _made_off(resistor, x, limit)
    aged = 1.0 + resistor.life_drift * x.get(f"{resistor.name}.life_drift", limit)
    return value * made * aged * (1.0 + heat)


def _made_off(resistor: Resistor, x: Coordinates, limit: Values) -> Values:
    """How far from its value a resistor was made, as a share: its own part, and its group's batch mean."""
    split = tolerances(resistor)
    own = split.own * x.get(f"{resistor.name}.tolerance", limit)
    if resistor.group is None or not split.common:
        return own
    return own + split.common * x.get(batch_axis(resistor.group), 0.0)


def _tempco_term(name: str, tempco: float, x: Coordinates, rise: Values) -> Values:
    drawn = x.get(f"{name}.tempco")
    return tempco * np.abs(rise) * x.get(name, 0.0) if drawn is None else tempco * rise * drawn


def _capacitance(capacitor: Capacitor, x: Coordinates, rise: Values) -> Values:
    """A capacitor [F] after tolerance and temperature; `value` must be chosen by now."""
    if capacitor.value is None:
        raise UsageError(f"{capacitor.name} has no value yet: design the stage first")
    limit, distance = x.get(capacitor.name, 0.0), capacitor.temperature_distance
    made = 1.0 + capacitor.tolerance * x.get(f"{capacitor.name}.tolerance", limit)
    way = np.minimum(np.abs(rise) / distance, 1.0) if distance else 0.0
    warmed = capacitor.temperature_change * x.get(f"{capacitor.name}.temperature_change", limit)
    return capacitor.value * made * (1.0 + warmed * way)


def _between(limits: Limits, x: Values, *, logarithmic: bool = False) -> Values:
    """The value at a coordinate, exactly the limits at −1 and +1 and the nominal at 0."""
    exact = {-1.0: limits.low, 0.0: limits.nominal, 1.0: limits.high}
    if np.ndim(x) == 0 and float(x) in exact:
        return exact[float(x)]
    x = np.asarray(x, dtype=float)
    low, middle, high = (np.log(v) if logarithmic else v for v in exact.values())
    inside = middle + x * np.where(x < 0.0, middle - low, high - middle)
    value = np.asarray(np.exp(inside) if logarithmic else inside)
    for side, limit in exact.items():
        value[x == side] = limit
    return value
