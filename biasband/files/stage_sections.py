"""Turns checked sections into records: defaults filled in, alternatives resolved, limits made.

Each function takes the raw table and returns the record, or None where the table has faults, which
are then in the ledger.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

from biasband.constants import REFERENCE_TEMPERATURE
from biasband.files.distribution_keys import figure_distribution, leakage_distribution, supply_distribution
from biasband.files.figures import SupplyOver
from biasband.files.ledger import Ledger
from biasband.files.stage_models import (
    AmbientSection,
    GainRange,
    SignalSection,
    SupplySection,
    TargetSection,
    TransistorSection,
    VoltageRange,
)
from biasband.files.toml_lines import KeyPath
from biasband.files.validation import check_companions, check_section
from biasband.stage import Limits, Signal, Supply, Target, Transistor


def read_supply(table: object, ledger: Ledger, *, name: str = "supply") -> Supply | None:
    """Read [supply] or [negative_supply]: a voltage with its tolerance, or min, nominal and max."""
    path: KeyPath = (name,)
    check_companions("supply", table, path, ledger)
    section = check_section(SupplySection, table, path, ledger)
    if section is None:
        return None
    voltage = _supply_limits(section, path, ledger)
    peak = section.ripple_peak or (section.ripple_peak_to_peak or 0.0) / 2
    if voltage is None:
        return None
    voltage = replace(voltage, distribution=supply_distribution(section, voltage, path, ledger))
    return Supply(voltage=voltage, ripple_peak=peak, varies=section.varies)


def read_negative_supply(table: object, ledger: Ledger) -> Supply | None:
    """Read [negative_supply], which takes no ripple of its own."""
    for key in ("ripple_peak", "ripple_peak_to_peak"):
        if isinstance(table, dict) and key in table:
            problem = "ripple on the negative supply is not modelled"
            ledger.add(("negative_supply", key), problem, hint="widen its limits instead")
    return read_supply(table, ledger, name="negative_supply")


def _supply_limits(section: SupplySection, path: KeyPath, ledger: Ledger) -> Limits | None:
    if section.min is not None and section.max is not None:
        return _between(section.min, section.nominal, section.max)
    if section.voltage is None:
        if section.model_fields_set.isdisjoint(("min", "nominal", "max", "tolerance")):
            ledger.add((*path, "voltage"), "missing", allowed="voltage, or min and max")
        return None
    value, tolerance = section.voltage.value, section.voltage.tolerance
    if tolerance is not None and section.tolerance is not None:
        problem = 'given twice: "voltage" has a tolerance of its own'
        ledger.add((*path, "tolerance"), problem, allowed="one of the two")
    tolerance = section.tolerance if tolerance is None else tolerance
    if tolerance is None:
        return Limits.exactly(value, stated=False)
    ends = (value * (1 - tolerance), value * (1 + tolerance))
    return Limits(low=min(ends), nominal=value, high=max(ends))


def _between(low: float, typical: float | None, high: float, *, geometric: bool = False) -> Limits:
    """Limits with the typical value as the nominal one, else with the mean of the limits."""
    if typical is not None:
        return Limits(low=low, nominal=typical, high=high)
    mean = math.sqrt(low * high) if geometric else (low + high) / 2
    return Limits(low=low, nominal=mean, high=high)


def read_ambient(table: object, ledger: Ledger) -> Limits | None:
    """Read [ambient]; it is stated where it has limits, and nominal is 25 °C unless given."""
    check_companions("ambient", table, ("ambient",), ledger)
    section = check_section(AmbientSection, table, ("ambient",), ledger)
    if section is None:
        return None
    nominal = REFERENCE_TEMPERATURE if section.nominal is None else section.nominal
    if section.min is None or section.max is None:
        return Limits.exactly(nominal, stated=False)
    return Limits(low=section.min, nominal=nominal, high=section.max)


def read_transistor(table: object, ledger: Ledger) -> Transistor | None:
    """Read [transistor], once the keys of the file that it names are among its own."""
    check_companions("transistor", table, ("transistor",), ledger)
    section = check_section(TransistorSection, table, ("transistor",), ledger)
    if section is None or (section.early_voltage is not None and section.test_voltage is None):
        return None
    drawn = ("gain", "base_emitter_voltage", "leakage_distribution")
    given = _given(section, "type", "base_emitter_drift", *drawn)
    if section.base_emitter_drift is not None:
        bandgap = section.base_emitter_drift == "bandgap"
        given["base_emitter_drift"] = None if bandgap else section.base_emitter_drift
    return Transistor(
        label=section.type or "",
        gain=_figure_limits("gain", section.gain, ledger),
        base_emitter_voltage=_figure_limits("base_emitter_voltage", section.base_emitter_voltage, ledger),
        leakage_distribution=leakage_distribution(section, ledger),
        **given,
    )


def _figure_limits(key: str, figure: float | GainRange | VoltageRange, ledger: Ledger) -> Limits:
    if not isinstance(figure, (GainRange, VoltageRange)):
        return Limits.exactly(figure, stated=False)
    limits = _between(figure.min, figure.typ, figure.max, geometric=isinstance(figure, GainRange))
    drawn = figure_distribution(figure, limits, ("transistor", key), ledger)
    return replace(limits, distribution=drawn)


def read_target(table: object, ledger: Ledger) -> Target | None:
    """Read [target]."""
    section = check_section(TargetSection, table, ("target",), ledger)
    if section is None:
        return None
    given = _given(section, "emitter_voltage")
    if isinstance(section.emitter_voltage, SupplyOver):
        given["supply_over"] = section.emitter_voltage.divisor
    else:
        given["emitter_voltage"] = section.emitter_voltage
    return Target(**given)


def read_signal(table: object, ledger: Ledger) -> Signal | None:
    """Read [signal]."""
    section = check_section(SignalSection, table, ("signal",), ledger)
    return None if section is None else Signal(**_given(section))


def _given(
    section: TransistorSection | TargetSection | SignalSection, *apart: str
) -> dict[str, Any]:
    """The values that a section gives, without those that are `apart`: the rest keep their defaults."""
    return {key: value for key, value in section if value is not None and key not in apart}
