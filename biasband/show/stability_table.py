"""The table of stability: factors at the nominal point beside what was measured over each range."""

from __future__ import annotations

import math

from biasband.circuit.operating_point import Region
from biasband.quantity import Kind
from biasband.show.prose import contributor
from biasband.show.table import NOT_KNOWN, REGION_WORDS, Column, Row, Table, computed, figure
from biasband.variation.contributors import BASE_EMITTER, GAIN, LEAKAGE, TEMPERATURE
from biasband.variation.finite_change import FiniteChange, Stability

STABILITY_COLUMNS = (
    Column("I_C against", "left"),
    Column("from"),
    Column("to"),
    Column("factor"),
    Column("by factor"),
    Column("measured"),
)

_SHORT = 3
_FACTORS = {LEAKAGE: "S(I_CO)", BASE_EMITTER: "S(V_BE)", GAIN: "S(β)"}
_KINDS = {
    LEAKAGE: Kind.CURRENT,
    BASE_EMITTER: Kind.VOLTAGE,
    GAIN: Kind.NUMBER,
    TEMPERATURE: Kind.TEMPERATURE,
}


def stability_table(stability: Stability) -> Table:
    """The stability factors at the nominal point beside what was measured over each range."""
    rows = tuple(_stability_row(change) for change in stability.changes)
    beta = NOT_KNOWN if math.isnan(stability.beta) else f"{stability.beta:.4g}"
    notes = (
        f"Factors: dI_C/dI_CO, dI_C/dV_BE, dI_C/dβ at the nominal point, exact (β+1) form, β {beta}, V_BE "
        "taken as constant; by factor: what they make of the way from one end to the other.",
        "Measured: both ends solved in full, all else nominal; h_FE takes β along in its ratio.",
    )
    return Table("Stability of the collector current", STABILITY_COLUMNS, rows, notes)


def _stability_row(change: FiniteChange) -> Row:
    low, high = (figure(end, _KINDS[change.name]) for end in (change.low, change.high))
    below = (
        []
        if change.region is Region.ACTIVE
        else [f"one end is no active point: {REGION_WORDS[change.region]}"]
    )
    if change.name == LEAKAGE:
        below.insert(0, f"I_CBO at {figure(change.temperature, Kind.TEMPERATURE)}, the hottest ambient")
    return Row(
        (
            contributor(change.name),
            low,
            high,
            _factor(change),
            computed(change.by_factor, Kind.CURRENT, digits=_SHORT),
            computed(change.measured, Kind.CURRENT, digits=_SHORT),
        ),
        tuple(below),
    )


def _factor(change: FiniteChange) -> str:
    if change.name not in _FACTORS:
        return ""
    if math.isnan(change.factor):
        return f"{_FACTORS[change.name]} {NOT_KNOWN}"
    kind = Kind.NUMBER if change.name == LEAKAGE else Kind.CURRENT
    per = "/V" if change.name == BASE_EMITTER else ""
    return f"{_FACTORS[change.name]} {computed(change.factor, kind)}{per}"
