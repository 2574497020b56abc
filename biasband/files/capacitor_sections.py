"""Turns [capacitors] and its sub-tables into the capacitors that the signal section couples."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from typing import Any

from biasband.constants import REFERENCE_TEMPERATURE
from biasband.coupling import BYPASS, INPUT, OUTPUT
from biasband.files.ledger import Ledger, nearest, shown
from biasband.files.stage_models import SERIES, CapacitorSection, CapacitorsSection
from biasband.files.toml_lines import KeyPath
from biasband.files.validation import check_section
from biasband.stage import Capacitor, Limits, Signal

CAPACITOR_TABLES: Mapping[str, str] = {INPUT: "input", OUTPUT: "output", BYPASS: "bypass"}
"""The table of [capacitors] that each capacitor has."""

_NOTHING_TO_COUPLE = {
    OUTPUT: ("there is no load to couple", 'give [signal] a load, as in "47k"'),
    BYPASS: ("nothing is bypassed", "bypassed = true in [signal]"),
}

_SECTION = "capacitors"


@dataclass(frozen=True, kw_only=True)
class Surroundings:
    """What the rest of the stage file means for its capacitors.

    `signal` is None where there is no such section, or a faulty one: `has_signal` tells which.
    """

    signal: Signal | None
    has_signal: bool
    ambient: Limits | None
    series: Collection[str]


def read_capacitors(table: object, around: Surroundings, ledger: Ledger) -> tuple[Capacitor, ...]:
    """Read the capacitors of a stage, none where neither they nor a lowest frequency are given.

    `table` is None without a [capacitors] section. Their faults are in the ledger.
    """
    if table is not None and not isinstance(table, dict):
        ledger.add((_SECTION,), "not a table", read=shown(table), allowed='a table: "[capacitors]"')
        return ()
    if table is not None and not around.has_signal:
        ledger.add((_SECTION,), "there is no [signal] section: nothing for them to couple")
    tables = {key: each for key, each in (table or {}).items() if key not in CapacitorsSection.model_fields}
    rest = {key: each for key, each in (table or {}).items() if key not in tables}
    words = {SERIES: around.series}
    defaults = check_section(CapacitorsSection, rest, (_SECTION,), ledger, words=words)
    own = {key: _read_own(key, each, around, ledger) for key, each in tables.items()}
    signal = around.signal
    if signal is None or (table is None and signal.lowest_frequency is None):
        return ()
    _check_values(signal, tables, own, ledger)
    return tuple(
        _capacitor(name, own.get(CAPACITOR_TABLES[name]), defaults, around.ambient)
        for name in signal.capacitors
    )


def _read_own(key: str, table: object, around: Surroundings, ledger: Ledger) -> CapacitorSection | None:
    path: KeyPath = (_SECTION, key)
    name = next((name for name, known in CAPACITOR_TABLES.items() if known == key), None)
    if name is None:
        known = (*CAPACITOR_TABLES.values(), *CapacitorsSection.model_fields)
        allowed = ", ".join(CAPACITOR_TABLES.values())
        ledger.add(path, "no such capacitor", allowed=allowed, hint=nearest(key, known))
    elif around.signal is not None and name not in around.signal.capacitors:
        problem, hint = _NOTHING_TO_COUPLE[name]
        ledger.add(path, problem, hint=hint)
    if not isinstance(table, dict):
        if name is not None:
            hint = f'write [capacitors.{key}] with value = "10 µF"'
            ledger.add(path, "not a table", read=shown(table), hint=hint)
        return None
    section = check_section(CapacitorSection, table, path, ledger, words={SERIES: around.series})
    toleranced = section is not None and section.value is not None and section.value.tolerance is not None
    if section is not None and toleranced and section.tolerance is not None:
        problem = 'given twice: "value" has a tolerance of its own'
        ledger.add((*path, "tolerance"), problem, allowed="one of the two")
    return section


def _check_values(
    signal: Signal, tables: Mapping[str, object], own: Mapping[str, CapacitorSection | None], ledger: Ledger
) -> None:
    """Note every capacitor that nothing gives a value; a faulty table was noted already."""
    if signal.lowest_frequency is not None:
        return
    for key in (CAPACITOR_TABLES[name] for name in signal.capacitors):
        section = own.get(key)
        if (key in tables and section is None) or (section is not None and section.value is not None):
            continue
        problem = "no value, and no lowest_frequency in [signal] to choose one for"
        ledger.add((_SECTION, key, "value"), problem, allowed='a value, or lowest_frequency = "50 Hz"')


def _capacitor(
    name: str, own: CapacitorSection | None, defaults: CapacitorsSection | None, ambient: Limits | None
) -> Capacitor:
    given: dict[str, Any] = {}
    for section in (defaults, own):
        given |= {} if section is None else {key: value for key, value in section if value is not None}
    value = given.pop("value", None)
    if value is not None and value.tolerance is not None:
        given["tolerance"] = value.tolerance
    return Capacitor(
        name=name,
        value=None if value is None else value.value,
        tolerance_stated="tolerance" in given,
        temperature_distance=_furthest(ambient),
        **given,
    )


def _furthest(ambient: Limits | None) -> float:
    """How far the ambient range goes from 25 °C [K]: there the class has changed as much as it may."""
    ends = () if ambient is None else (ambient.low, ambient.high)
    return max((abs(end - REFERENCE_TEMPERATURE) for end in ends), default=0.0)
