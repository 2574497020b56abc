"""Reads a stage file: TOML text → `Stage`, or every fault at once.

First the text is checked against the format; only a well-written one is checked against physics.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from typing import Any

from biasband.circuit.topology import EMITTER_PARTS, TOPOLOGIES, Node, Topology
from biasband.errors import BadlyWritten, PhysicallyImpossible
from biasband.files.capacitor_sections import Surroundings, read_capacitors
from biasband.files.distribution_keys import check_batches
from biasband.files.ledger import Ledger, nearest
from biasband.files.named_files import read_derating, read_stock_list, read_transistor_and_file
from biasband.files.requirement_sections import read_requirements
from biasband.files.resistor_sections import EMITTER_RESISTOR, Needs, read_resistors
from biasband.files.series_folder import SeriesTables, load_tables
from biasband.files.stage_models import StageSection
from biasband.files.stage_rules import note_impossibilities
from biasband.files.stage_sections import (
    read_ambient,
    read_negative_supply,
    read_signal,
    read_supply,
    read_target,
)
from biasband.files.toml_file import TomlFile, read_toml
from biasband.files.validation import check_section
from biasband.stage import Resistor, Snapping, Stage

COMPULSORY_SECTIONS = ("stage", "supply", "transistor")
SECTIONS = (
    "stage", "supply", "negative_supply", "ambient", "transistor", "target", "signal", "resistors",
    "capacitors", "require", "derating",
)  # fmt: skip


def read_stage(path: str | os.PathLike[str], *, tables: SeriesTables | None = None) -> Stage:
    """Read a stage file, and the transistor's file, stock list and derating profile where it names them.

    `tables` holds the series that it may name; None means biasband's own.
    Returns: the stage in SI units, with every default filled in and every file read on record.
    Raises: BadlyWritten with every fault where the text does not follow the format; else
    PhysicallyImpossible with every reason why no such stage can exist.
    """
    file = read_toml(path)
    ledger = Ledger(file)
    stage = _read_sections(file, ledger, load_tables() if tables is None else tables)
    if stage is None or ledger.faults:
        raise BadlyWritten(ledger.faults)
    note_impossibilities(stage, ledger)
    if ledger.faults:
        raise PhysicallyImpossible(ledger.faults)
    return stage


def _read_sections(file: TomlFile, ledger: Ledger, tables: SeriesTables) -> Stage | None:
    """Read every section, so that every fault is found; None where a compulsory one is faulty."""
    data = file.data
    _check_names(data, ledger)
    topology = _topology(data)
    records = _records(file, ledger)
    resistors = read_resistors(data.get("resistors", {}), _needs(data, topology, tables), ledger)
    stock = read_stock_list(data.get("resistors"), ledger)
    _check_negative_supply(data, topology, ledger)
    _check_signal(data, topology, resistors, ledger)
    names = tuple(resistor.name for resistor in resistors) or _every_name()
    capacitors = read_capacitors(data.get("capacitors"), _around(data, records, tables), ledger)
    coupled = bool(capacitors) or ("signal" in data and "signal" not in records)
    requirements = read_requirements(data.get("require", []), names, ledger, with_capacitors=coupled)
    if any(name not in records for name in COMPULSORY_SECTIONS):
        return None
    files = [each.record for each in (file, ledger.part_file) if each is not None]
    files += [each.file for each in (stock, records.get("derating")) if each is not None and each.file]
    stage = Stage(
        **dict(records.pop("stage")),
        resistors=resistors,
        capacitors=capacitors,
        requirements=requirements,
        stock=stock,
        snapping=_snapping(data.get("resistors")),
        own_series=tables.own,
        files=(*files, *tables.files),
        **records,
    )
    check_batches(stage, ledger)
    return stage


def _around(data: Mapping[str, Any], records: Mapping[str, Any], tables: SeriesTables) -> Surroundings:
    """What the file means for the capacitors; a faulty signal section has no record."""
    return Surroundings(
        signal=records.get("signal"),
        has_signal="signal" in data,
        ambient=records.get("ambient"),
        series=tables.series,
    )


def _snapping(resistors: object) -> Snapping:
    """How values are chosen; what is no such word is noted with the other keys of [resistors]."""
    nearest = isinstance(resistors, dict) and resistors.get("snapping") == "nearest"
    return "nearest" if nearest else "margin"


def _records(file: TomlFile, ledger: Ledger) -> dict[str, Any]:
    """What each section without a rule of its own says; a section that is not there is left out."""
    readers: dict[str, Callable[[object, Ledger], object]] = {
        "stage": _read_head,
        "supply": read_supply,
        "negative_supply": read_negative_supply,
        "ambient": read_ambient,
        "transistor": read_transistor_and_file,
        "target": read_target,
        "signal": read_signal,
        "derating": read_derating,
    }
    records = {name: read(file.data[name], ledger) for name, read in readers.items() if name in file.data}
    return {name: record for name, record in records.items() if record is not None}


def _read_head(table: object, ledger: Ledger) -> StageSection | None:
    return check_section(StageSection, table, ("stage",), ledger)


def _check_names(data: Mapping[str, Any], ledger: Ledger) -> None:
    for name in COMPULSORY_SECTIONS:
        if name not in data:
            ledger.add((name,), "missing", allowed=f'a section "[{name}]"')
    for name in data:
        if name not in SECTIONS:
            hint = nearest(name, SECTIONS)
            ledger.add((name,), "unknown section", allowed=", ".join(SECTIONS), hint=hint)


def _topology(data: Mapping[str, Any]) -> Topology | None:
    """The topology, where the file names a known one, whatever else is wrong with it."""
    section = data.get("stage")
    name = section.get("topology") if isinstance(section, dict) else None
    return TOPOLOGIES.get(name) if isinstance(name, str) else None


def _needs(data: Mapping[str, Any], topology: Topology | None, tables: SeriesTables) -> Needs:
    target = data.get("target")
    return Needs(
        topology=topology,
        series=tables.series,
        has_target=target is not None,
        target_has_emitter_voltage=isinstance(target, dict) and "emitter_voltage" in target,
    )


def _every_name() -> tuple[str, ...]:
    names = [name for topology in TOPOLOGIES.values() for name in topology.resistors]
    return tuple(dict.fromkeys([*names, *EMITTER_PARTS]))


def _check_negative_supply(data: Mapping[str, Any], topology: Topology | None, ledger: Ledger) -> None:
    if topology is None or topology.split_supply == ("negative_supply" in data):
        return
    if topology.split_supply:
        ledger.add(("negative_supply",), f"missing: {topology.name} has two supplies")
    else:
        users = ", ".join(name for name, each in TOPOLOGIES.items() if each.split_supply)
        ledger.add(("negative_supply",), f"{topology.name} has one supply", hint=f"it goes with {users}")


def _check_signal(
    data: Mapping[str, Any], topology: Topology | None, resistors: tuple[Resistor, ...], ledger: Ledger
) -> None:
    """Note a target that needs [signal], and a bypass where there is nothing to bypass."""
    target, signal = data.get("target"), data.get("signal")
    if isinstance(target, dict) and target.get("collector") == "max-swing" and signal is None:
        hint = "the largest swing is the one into the load"
        ledger.add(("target", "collector"), '"max-swing" needs a [signal] section', hint=hint)
    if topology is None or not isinstance(signal, dict) or signal.get("bypassed") is not True:
        return
    if topology.output is Node.EMITTER:
        ledger.add(("signal", "bypassed"), f"a {topology.name}'s output is its emitter", allowed="false")
    elif not {resistor.name for resistor in resistors} & {EMITTER_RESISTOR, *EMITTER_PARTS}:
        ledger.add(("signal", "bypassed"), "there is no emitter resistor to bypass", allowed="false")
