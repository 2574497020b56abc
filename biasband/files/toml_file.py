"""Reads one TOML file from disk: its data, its lines and its fingerprint, or one clear fault."""

from __future__ import annotations

import hashlib
import os
import re
import stat
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, NoReturn

from biasband.errors import BadlyWritten, Fault
from biasband.files.toml_lines import KeyPath, key_lines
from biasband.stage import FileRecord

LARGEST_FILE = 1_000_000
"""[bytes] A stage file has a few thousand; a larger one is some other file."""

LONGEST_LINE = 10_000
"""[characters] The parser's time grows with the square of a dotted key's length."""


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
    name = os.fspath(path)
    content = _read_bytes(name)
    text = _decoded(name, content)
    return TomlFile(
        path=name,
        data=_parsed(name, text),
        lines=key_lines(text),
        record=FileRecord(path=name, sha256=hashlib.sha256(content).hexdigest()),
    )


def _refuse(path: str, problem: str, *, line: int | None = None, allowed: str = "") -> NoReturn:
    raise BadlyWritten((Fault(path, line, "", problem, allowed=allowed),)) from None


def _read_bytes(path: str) -> bytes:
    try:
        mode = os.stat(path).st_mode
        content = b""
        if stat.S_ISREG(mode):
            with open(path, "rb") as file:
                content = file.read(LARGEST_FILE + 1)
    except FileNotFoundError:
        _refuse(path, "no such file")
    except (OSError, ValueError) as error:  # ValueError: a NUL in the path
        _refuse(path, f"cannot be read: {getattr(error, 'strerror', None) or error}")
    if not stat.S_ISREG(mode):
        _refuse(path, "a directory, not a file" if stat.S_ISDIR(mode) else "not a regular file")
    if len(content) > LARGEST_FILE:
        _refuse(path, "too large for a stage file", allowed=f"{LARGEST_FILE // 1000} kB at most")
    return content


def _decoded(path: str, content: bytes) -> str:
    if b"\0" in content:
        _refuse(path, "a binary file", allowed="a TOML text")
    try:
        text = content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        _refuse(path, "not UTF-8 text", line=line, allowed="a TOML text, saved as UTF-8")
    for number, line_text in enumerate(text.split("\n"), start=1):
        if len(line_text) > LONGEST_LINE:
            _refuse(path, "a line too long", line=number, allowed=f"{LONGEST_LINE} characters at most")
    return text


def _parsed(path: str, text: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except RecursionError:
        _refuse(path, "not TOML: nested too deeply")
    except ValueError as error:  # TOMLDecodeError, or a number or date beyond what Python reads
        message = str(error)
        place = re.search(r"\(at line ([0-9]+), column [0-9]+\)$", message)
        end = text.count("\n") + 1 if message.endswith("(at end of document)") else None
        _refuse(path, f"not TOML: {message}", line=int(place[1]) if place else end)
