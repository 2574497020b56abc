"""Collects the faults of one reading, each with the file and line it stands in."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

from biasband.errors import Fault
from biasband.files.toml_file import TomlFile
from biasband.files.toml_lines import KeyPath, line_of

_LONGEST_SHOWN = 60
_LONGEST_INTEGER = 200
"""[bits] Python refuses to write out integers of thousands of digits."""


class Ledger:
    """The faults found so far in a stage file and in the files that it names."""

    def __init__(self, stage_file: TomlFile, part_file: TomlFile | None = None) -> None:
        self.stage_file = stage_file
        self.part_file = part_file
        self._faults: dict[Fault, None] = {}

    def add(
        self, path: KeyPath, problem: str, *, read: str = "", allowed: str = "", hint: str = ""
    ) -> None:
        """Note a fault at a key path of the stage; it is placed in the file that holds the key."""
        file, place = self._held_by(path)
        line = line_of(file.lines, place)
        self._faults[Fault(file.path, line, key_text(place), problem, read, allowed, hint)] = None

    def extend(self, faults: Iterable[Fault]) -> None:
        """Note faults that know their place already."""
        self._faults.update(dict.fromkeys(faults))

    @property
    def faults(self) -> tuple[Fault, ...]:
        """Every fault once: the stage file's first, each file's from top to bottom."""
        here = self.stage_file.path
        return tuple(
            sorted(self._faults, key=lambda fault: (fault.file != here, fault.file, fault.line or 0))
        )

    def _held_by(self, path: KeyPath) -> tuple[TomlFile, KeyPath]:
        part = self.part_file
        if part is None or path[0] != "transistor" or path[:2] in self.stage_file.lines:
            return self.stage_file, path
        return (part, path[1:]) if path[1:2] and path[1] in part.data else (self.stage_file, path)


def key_text(path: KeyPath) -> str:
    """Write a key path for people: "require[2].at_least" is in the second requirement."""
    text = "".join(f"[{key + 1}]" if isinstance(key, int) else f".{key}" for key in path)
    return text.removeprefix(".")


def shown(value: object) -> str:
    """Write what was read, short enough for a message."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return "an array"
    if isinstance(value, int) and value.bit_length() > _LONGEST_INTEGER:
        return "a huge integer"
    text = repr(value) if isinstance(value, (str, int, float)) else str(value)
    return text if len(text) <= _LONGEST_SHOWN else text[:_LONGEST_SHOWN] + "…"


def nearest(read: str, known: Iterable[str]) -> str:
    """Suggest the known word that a misspelled one may stand for; empty where none is near."""
    by_lower = {word.lower(): word for word in known}
    close = difflib.get_close_matches(read[:_LONGEST_SHOWN].lower(), by_lower, n=1)
    return f'did you mean "{by_lower[close[0]]}"?' if close else ""
