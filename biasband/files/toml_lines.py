"""Finds the line of every table and key in a TOML text, since tomllib keeps no positions.

The text is taken to be valid TOML: the parser has read it before. A key inside an inline table or
array is found at the line of the key that holds it.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_left
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

KeyPath = tuple[str | int, ...]
"""Where a value stands: keys, and 0-based positions in arrays: ("require", 0, "at_least")."""

_DEEPEST = 6
"""No key of ours lies deeper; a key of thousands of parts must not cost time."""

_KEY = r"""(?:[A-Za-z0-9_-]+|"(?:\\.|[^"\\\n])*"|'[^'\n]*')"""
_DOTTED = rf"{_KEY}(?:[ \t]*\.[ \t]*{_KEY})*"
_GAP = re.compile(r"(?:\s|#[^\n]*)+")
_HEADER = re.compile(rf"(?P<open>\[\[?)[ \t]*(?P<keys>{_DOTTED})[ \t]*\]\]?")
_ASSIGNMENT = re.compile(rf"(?P<keys>{_DOTTED})[ \t]*=")
_VALUE_TOKEN = re.compile(
    r'"""(?:\\.|[^\\])*?"""(?:"{0,2})'
    r"|'''.*?'''(?:'{0,2})"
    r'|"(?:\\.|[^"\\\n])*"'
    r"|'[^'\n]*'"
    r"|#[^\n]*"
    r"|[\[\]{}\n]"
    r"|[^\"'#\[\]{}\n]+"
    r"|.",
    re.DOTALL,
)


@dataclass(frozen=True)
class _Statement:
    """A table header ("[" or "[[") or an assignment ("="), where it stands in the text."""

    mark: str
    keys: tuple[str, ...]
    position: int


def key_lines(text: str) -> Mapping[KeyPath, int]:
    """Map the path of every table and key of a valid TOML text to its line (1-based)."""
    ends = [match.start() for match in re.finditer("\n", text)]
    lines: dict[KeyPath, int] = {}
    counts: dict[KeyPath, int] = {}
    table: KeyPath = ()
    for statement in _statements(text):
        if statement.mark == "=":
            path = table + statement.keys
        else:
            path = table = _table_path(statement, counts)
        for length in range(1, min(len(path), _DEEPEST) + 1):
            lines.setdefault(path[:length], bisect_left(ends, statement.position) + 1)
    return lines


def line_of(lines: Mapping[KeyPath, int], path: KeyPath) -> int | None:
    """Find the line of a path, or of the nearest table or key that holds it; None where none does."""
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return None


def _table_path(statement: _Statement, counts: dict[KeyPath, int]) -> KeyPath:
    """The path that a header opens; `counts` holds how many tables each array has so far."""
    path: KeyPath = ()
    for key in statement.keys[:-1]:
        path += (key,)
        path += (counts[path] - 1,) if path in counts else ()
    path += statement.keys[-1:]
    if statement.mark == "[[":
        counts[path] = counts.get(path, 0) + 1
        path += (counts[path] - 1,)
    return path


def _statements(text: str) -> Iterator[_Statement]:
    position = 0
    while position < len(text):
        gap = _GAP.match(text, position)
        start = gap.end() if gap else position
        header = _HEADER.match(text, start)
        found = header or _ASSIGNMENT.match(text, start)
        if found:
            yield _Statement(header["open"] if header else "=", _split(found["keys"]), start)
        position = _end_of_value(text, found.end() if found else start)


def _split(dotted: str) -> tuple[str, ...]:
    return tuple(_bare(key) for key in re.findall(_KEY, dotted))


def _bare(key: str) -> str:
    return str(tomllib.loads(f"key = {key}")["key"]) if key[0] in "\"'" else key


def _end_of_value(text: str, start: int) -> int:
    """The position after the line end that closes the value at `start`."""
    depth = 0
    for token in _VALUE_TOKEN.finditer(text, start):
        match token.group():
            case "[" | "{":
                depth += 1
            case "]" | "}":
                depth -= 1
            case "\n" if depth <= 0:
                return token.end()
    return len(text)
