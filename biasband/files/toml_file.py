"""Reads one TOML file from disk: its data, its lines and its fingerprint, or one clear fault."""

from __future__ import annotations

import os
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from biasband.files.text_file import read_text, refuse
from biasband.files.toml_lines import KeyPath, key_lines
from biasband.stage import FileRecord


@dataclass(frozen=True, kw_only=True)
class TomlFile:
    """A TOML file as read; `lines` maps every key path to its line."""

    path: str
    data: Mapping[str, Any]
    lines: Mapping[KeyPath, int]
    record: FileRecord


def read_toml(path: str | os.PathLike[str]) -> TomlFile:
    """Read a TOML file (UTF-8, a byte order mark is fine, 1 MB at most).

    Raises: BadlyWritten with a single fault where there is no such file, it is not a text file, or
    it is not TOML.
    """
    file = read_text(path, wanted="a TOML text")
    data = _parsed(file.path, file.text)
    return TomlFile(path=file.path, data=data, lines=key_lines(file.text), record=file.record)


def _parsed(path: str, text: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except RecursionError:
        refuse(path, "not TOML: nested too deeply")
    except ValueError as error:  # TOMLDecodeError, or a number or date beyond what Python reads
        message = str(error)
        place = re.search(r"\(at line ([0-9]+), column [0-9]+\)$", message)
        end = text.count("\n") + 1 if message.endswith("(at end of document)") else None
        refuse(path, f"not TOML: {message}", line=int(place[1]) if place else end)
