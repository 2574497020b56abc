"""Reads the files that a stage file names, relative to it: transistor, stock list, derating profile."""

from __future__ import annotations

import os
from collections.abc import Callable
from typing import TypeVar

from biasband.errors import BadlyWritten, Fault
from biasband.files.derating_file import read_derating_file
from biasband.files.ledger import Ledger, shown
from biasband.files.stage_models import DeratingSection
from biasband.files.stage_sections import read_transistor
from biasband.files.stock_file import read_stock
from biasband.files.toml_file import read_toml
from biasband.files.toml_lines import KeyPath, line_of
from biasband.files.validation import check_companions, check_section
from biasband.parts.derating import PROFILES
from biasband.stage import Derating, Stock, Transistor

PART, STOCK, DERATING = ("transistor", "file"), ("resistors", "stock"), ("derating", "file")
"""The keys that name a file."""

AnyFile = TypeVar("AnyFile")


def read_transistor_and_file(table: object, ledger: Ledger) -> Transistor | None:
    """Read [transistor] together with the file that it names; its own keys may not repeat that file's."""
    if not isinstance(table, dict) or "file" not in table:
        return read_transistor(table, ledger)
    own = {key: value for key, value in table.items() if key != "file"}
    part = _read_named(table["file"], PART, read_toml, ledger)
    if part is None:
        return None
    ledger.part_file = part
    if "file" in part.data:
        line = line_of(part.lines, ("file",))
        ledger.extend((Fault(part.path, line, "file", "a transistor's file cannot name another"),))
    for key in own:
        if key in part.data:
            problem = f"given here and in {part.path}"
            ledger.add(("transistor", key), problem, allowed="one of the two")
    from_part = {key: value for key, value in part.data.items() if key != "file"}
    return read_transistor(from_part | own, ledger)


def read_stock_list(resistors: object, ledger: Ledger) -> Stock | None:
    """Read the stock list that [resistors] names; None where it names none, or one with faults."""
    name = resistors.get("stock") if isinstance(resistors, dict) else None
    # What is not a text is noted with the other keys of [resistors].
    return _read_named(name, STOCK, read_stock, ledger) if isinstance(name, str) else None


def read_derating(table: object, ledger: Ledger) -> Derating | None:
    """Read [derating]: one of biasband's own profiles, or the one in the file that it names."""
    check_companions("derating", table, ("derating",), ledger)
    section = check_section(DeratingSection, table, ("derating",), ledger)
    name = table.get("file") if isinstance(table, dict) else None
    if isinstance(name, str):
        return _read_named(name, DERATING, read_derating_file, ledger)
    if section is None or section.profile is None:
        if section is not None:
            ledger.add(("derating", "profile"), "missing", allowed="profile, or file")
        return None
    return PROFILES[section.profile]


def _read_named(
    name: object, place: KeyPath, read: Callable[[str], AnyFile], ledger: Ledger
) -> AnyFile | None:
    """Read a file; None where that fails. What is wrong with it as a whole is a fault of the key."""
    if not isinstance(name, str):
        ledger.add(place, "not a path", read=shown(name), allowed="a path relative to the stage file")
        return None
    try:
        return read(os.path.join(os.path.dirname(ledger.stage_file.path), name))
    except BadlyWritten as error:
        for fault in error.faults:
            if fault.line is None:
                ledger.add(place, fault.problem, read=fault.file, allowed=fault.allowed)
            else:
                ledger.extend((fault,))
        return None
