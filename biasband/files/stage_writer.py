"""Writes a stage file again with the values of its parts frozen, comments and order kept."""

from __future__ import annotations

import os
import re
import tomllib
from collections.abc import Callable, Mapping
from pathlib import PurePath
from typing import Any

import tomlkit
from tomlkit.exceptions import TOMLKitError

from biasband.errors import BiasbandError, UsageError
from biasband.files.capacitor_sections import CAPACITOR_TABLES
from biasband.files.named_files import DERATING, PART, STOCK
from biasband.files.series_folder import SeriesTables
from biasband.files.stage_file import read_stage


def frozen_text(
    path: str | os.PathLike[str],
    values: Mapping[str, str],
    *,
    new_path: str | os.PathLike[str] | None = None,
    tables: SeriesTables | None = None,
) -> str:
    """Return the text of a stage file with `value = "…"` set for each resistor and capacitor in `values`.

    A tolerance behind the old value ("3k3 ± 1 %") stays behind the new one. Where the text is meant
    for a `new_path` in another folder, transistor.file, resistors.stock and derating.file are rewritten
    so that they are found from there. `tables` are those that the stage is read with.
    Raises: what `read_stage` raises; UsageError where the stage has no part of a name;
    BiasbandError where the layout of the file is beyond rewriting.
    """
    source = os.fspath(path)
    stage = read_stage(source, tables=tables)
    known = [part.name for part in stage.resistors] + [part.name for part in stage.capacitors]
    unknown = [name for name in values if name not in known]
    if unknown:
        raise UsageError(f"{source} has no part {', '.join(unknown)}; allowed: {', '.join(known)}")
    with open(source, encoding="utf-8-sig", newline="") as file:
        text = file.read()
    target = source if new_path is None else os.fspath(new_path)

    def edit(data: Any) -> None:
        _freeze(data, values)
        for section, key in (PART, STOCK, DERATING):
            _point_to_file(data.get(section, {}), key, os.path.dirname(source), os.path.dirname(target))

    if (written := _rewritten(text, edit)) is None:
        by_hand = ", ".join(f"{name} {value}" for name, value in values.items())
        raise BiasbandError(f"{source}: this layout cannot be rewritten; set the values by hand: {by_hand}")
    return written


def _rewritten(text: str, edit: Callable[[Any], None]) -> str | None:
    """The text with its data edited; None where it would then not say what was meant.

    A sign-off rests on this text, and tomlkit loses its way in tables that are written in pieces
    far apart, so what was written is read again and compared.
    """
    wanted = tomllib.loads(text)
    edit(wanted)
    try:
        document = tomlkit.parse(text)
        edit(document)
        written = tomlkit.dumps(document)
        return written if tomllib.loads(written) == wanted else None
    except (TOMLKitError, ValueError):
        return None


def write_new(path: str | os.PathLike[str], text: str) -> None:
    """Write a new file; an existing one is never overwritten.

    Raises: UsageError where there is something at the path already, or it cannot be written.
    """
    try:
        with open(path, "x", encoding="utf-8", newline="") as file:
            file.write(text)
    except FileExistsError:
        raise UsageError(f"{path} exists already and was left as it is: choose a new name") from None
    except FileNotFoundError:
        raise UsageError(f"{path}: there is no such folder: make it first") from None
    except (OSError, ValueError) as error:  # ValueError: a NUL in the path
        reason = getattr(error, "strerror", None) or error
        raise UsageError(f"{path} cannot be written: {reason}") from None


def _freeze(data: Any, values: Mapping[str, str]) -> None:
    for name, value in values.items():
        section = "capacitors" if name in CAPACITOR_TABLES else "resistors"
        own = data.setdefault(section, {}).setdefault(CAPACITOR_TABLES.get(name, name), {})
        tolerance = re.search(r"\s*(±|\+/[-\u2212]).*", str(own.get("value", "")))
        own["value"] = value + (tolerance[0] if tolerance else "")


def _point_to_file(table: Any, key: str, old_folder: str, new_folder: str) -> None:
    """Rewrite the name of a file, relative to a stage file, for a stage file in another folder."""
    file = table.get(key)
    if file is None or os.path.isabs(file) or os.path.realpath(old_folder) == os.path.realpath(new_folder):
        return
    relative = os.path.relpath(os.path.join(old_folder, file), new_folder or os.curdir)
    table[key] = PurePath(relative).as_posix()
