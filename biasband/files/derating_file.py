"""Reads a derating profile of the user's own: a TOML text → `Derating`, or every fault at once."""

from __future__ import annotations

import os
from dataclasses import replace

from biasband.errors import BadlyWritten
from biasband.files.ledger import Ledger
from biasband.files.stage_models import DeratingFile, OriginTable
from biasband.files.text_file import refuse
from biasband.files.toml_file import read_toml
from biasband.files.validation import check_section
from biasband.parts.derating import FIGURES, PROFILES
from biasband.stage import Derating


def read_derating_file(path: str | os.PathLike[str]) -> Derating:
    """Read a derating profile.

    `name` is compulsory. Factors are above 0 and at most 1; what is left out is not derated. The
    [origin] table says, by key, where a figure comes from.

    Raises: BadlyWritten with every fault: file, line, key, what was read, what is allowed.
    """
    file = read_toml(path)
    if not file.data:
        refuse(file.path, "an empty file", line=1, allowed=f"name, {', '.join(FIGURES)}, origin")
    ledger = Ledger(file)
    section = check_section(DeratingFile, file.data, (), ledger)
    table = check_section(OriginTable, file.data.get("origin", {}), ("origin",), ledger)
    _check_name(file.data.get("name"), ledger)
    origins = {} if table is None else {key: text for key, text in table if text}
    for key in origins:
        if key not in file.data:
            ledger.add(("origin", key), f'the origin of a figure that is not there: "{key}" is not given')
    if section is None or ledger.faults:
        # What is missing is missing from the first line on: a fault without a line is the whole file's.
        raise BadlyWritten(tuple(replace(fault, line=fault.line or 1) for fault in ledger.faults))
    figures = section.model_dump(exclude={"origin"}, exclude_none=True)
    return Derating(**figures, origins=origins, file=file.record)


def _check_name(name: object, ledger: Ledger) -> None:
    if not isinstance(name, str):
        return
    if not name.strip():
        ledger.add(("name",), "an empty name", allowed="what the report calls the profile")
    elif name.strip() in PROFILES:
        problem = f'"{name.strip()}" is one of biasband\'s own profiles'
        ledger.add(("name",), problem, allowed="another name")
