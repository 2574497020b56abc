"""Turns [resistors] and its sub-tables into the resistors that the topology needs, in its order."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from typing import Any

from biasband.circuit.topology import EMITTER_PARTS, TOPOLOGIES, Topology
from biasband.files.distribution_keys import RESISTOR_KEYS, Said, check_groups, resistor_distributions
from biasband.files.ledger import Ledger, nearest, shown
from biasband.files.stage_models import (
    OF_THE_WHOLE,
    SERIES,
    ResistorDefaults,
    ResistorSection,
    ResistorsSection,
)
from biasband.files.toml_lines import KeyPath
from biasband.files.validation import check_section
from biasband.quantity import Kind, format_quantity
from biasband.stage import Resistor

EMITTER_RESISTOR = "RE"


@dataclass(frozen=True, kw_only=True)
class Needs:
    """What the rest of the stage file means for its resistors.

    `topology` None means that it is not known, so that any topology's resistors may be right.
    `series` holds the names of the preferred series that there are.
    """

    topology: Topology | None
    series: Collection[str]
    has_target: bool
    target_has_emitter_voltage: bool


def read_resistors(table: object, needs: Needs, ledger: Ledger) -> tuple[Resistor, ...]:
    """Read the resistors of a stage; their faults are in the ledger."""
    if not isinstance(table, dict):
        ledger.add(("resistors",), "not a table", read=shown(table), allowed='a table: "[resistors]"')
        return ()
    known = _known_names(needs.topology)
    tables = _own_tables(table)
    rest = {key: value for key, value in table.items() if key not in tables}
    defaults = _read_defaults(rest, known, needs, ledger)
    own = {name: _read_own(name, tables[name], known, needs, ledger) for name in tables}
    _check_emitter_parts(own, ledger)
    names = _names_present(needs, own)
    _check_values(names, own, needs, ledger)
    resistors = tuple(_resistor(name, own.get(name), defaults, ledger) for name in names)
    check_groups([Said(name, own.get(name), defaults) for name in names], resistors, ledger)
    return resistors


def _known_names(topology: Topology | None) -> tuple[str, ...]:
    topologies = TOPOLOGIES.values() if topology is None else (topology,)
    names = [name for one in topologies for name in one.resistors]
    parts = EMITTER_PARTS if EMITTER_RESISTOR in names else ()
    return tuple(dict.fromkeys([*names, *parts]))


def _own_tables(table: Mapping[str, Any]) -> dict[str, Any]:
    defaults = ResistorsSection.model_fields
    return {key: value for key, value in table.items() if isinstance(value, dict) and key not in defaults}


def _read_defaults(
    table: dict[str, Any], known: tuple[str, ...], needs: Needs, ledger: Ledger
) -> ResistorsSection | None:
    for name in [key for key in table if key in known]:
        hint = f'write [resistors.{name}] with value = "3k3"'
        ledger.add(("resistors", name), "not a table", read=shown(table.pop(name)), hint=hint)
    return check_section(ResistorsSection, table, ("resistors",), ledger, words={SERIES: needs.series})


def _read_own(
    name: str, table: object, known: tuple[str, ...], needs: Needs, ledger: Ledger
) -> ResistorSection | None:
    path: KeyPath = ("resistors", name)
    if name not in known:
        hint = nearest(name, known)
        ledger.add(path, "no such resistor", allowed=", ".join(known), hint=hint)
    section = check_section(ResistorSection, table, path, ledger, words={SERIES: needs.series})
    toleranced = section is not None and section.value is not None and section.value.tolerance is not None
    if section is not None and toleranced and section.tolerance is not None:
        problem = 'given twice: "value" has a tolerance of its own'
        ledger.add((*path, "tolerance"), problem, allowed="one of the two")
    return section


def _check_emitter_parts(own: Mapping[str, object], ledger: Ledger) -> None:
    given = [name for name in EMITTER_PARTS if name in own]
    for name in given:
        if EMITTER_RESISTOR in own:
            hint = f"{' and '.join(EMITTER_PARTS)} are {EMITTER_RESISTOR} in two parts"
            ledger.add(("resistors", name), f"given beside {EMITTER_RESISTOR}", hint=hint)
    if len(given) == 1:
        missing = next(name for name in EMITTER_PARTS if name not in given)
        ledger.add(("resistors", given[0]), f"given without {missing}", allowed="both, or neither")


def _names_present(needs: Needs, own: Mapping[str, object]) -> tuple[str, ...]:
    """The names of the stage's resistors: the compulsory ones, and the optional ones it asks for."""
    if needs.topology is None:
        return ()
    names: list[str] = []
    for name in needs.topology.resistors:
        wanted = name == EMITTER_RESISTOR and needs.target_has_emitter_voltage
        if name == EMITTER_RESISTOR and any(part in own for part in EMITTER_PARTS):
            names += EMITTER_PARTS
        elif name in needs.topology.compulsory or name in own or wanted:
            names.append(name)
    return tuple(names)


def _check_values(
    names: tuple[str, ...], own: Mapping[str, ResistorSection | None], needs: Needs, ledger: Ledger
) -> None:
    """Note every resistor that nothing gives a value; a faulty table was noted already."""
    for name in names:
        section = own.get(name)
        if (name in own and section is None) or (section is not None and section.value is not None):
            continue
        if not needs.has_target:
            problem = "no value, and no [target] to choose one for"
            ledger.add(("resistors", name, "value"), problem, allowed="a value, or a [target] section")
        elif name == EMITTER_PARTS[0] and name in own:
            problem = "missing: how much of the emitter resistor is not bypassed is for you to say"
            ledger.add(("resistors", name, "value"), problem, allowed='a resistance, as in "47R"')


def _resistor(
    name: str, own: ResistorSection | None, defaults: ResistorDefaults | None, ledger: Ledger
) -> Resistor:
    given: dict[str, Any] = {}
    for section in (defaults, own):
        given |= {} if section is None else {key: value for key, value in section if value is not None}
    given = {key: value for key, value in given.items() if key not in OF_THE_WHOLE}
    value = given.pop("value", None)
    if value is not None and value.tolerance is not None:
        given["tolerance"] = value.tolerance
    drawn = resistor_distributions(Said(name, own, defaults), given, ledger)
    given = {key: figure for key, figure in given.items() if key not in RESISTOR_KEYS} | drawn
    resistor = Resistor(
        name=name,
        value=None if value is None else value.value,
        tolerance_stated="tolerance" in given,
        **given,
    )
    _check_tracking(resistor, own, ledger)
    return resistor


def _check_tracking(resistor: Resistor, own: ResistorSection | None, ledger: Ledger) -> None:
    if resistor.tracking is None:
        by_batch = resistor.distribution.name == "batch"  # what such a group shares is its batch mean
        if resistor.group is not None and resistor.tempco > 0.0 and not by_batch:
            in_own = own is not None and own.group is not None
            path: KeyPath = ("resistors", resistor.name, "group") if in_own else ("resistors", "group")
            ledger.add(path, "a group without tracking", hint='what the members share: tracking = "30 ppm/K"')
        return
    in_own = own is not None and own.tracking is not None
    path = ("resistors", resistor.name, "tracking") if in_own else ("resistors", "tracking")
    if resistor.group is None:
        ledger.add(path, "tracking without a group", hint='name the reel or array: group = "A"')
    if resistor.tracking > resistor.tempco:
        tracking, tempco = (
            format_quantity(slope, Kind.RELATIVE_SLOPE) for slope in (resistor.tracking, resistor.tempco)
        )
        problem = f"above the tempco of {resistor.name}, of which it is a part"
        ledger.add(path, problem, read=tracking, allowed=f"{tempco} at most")
