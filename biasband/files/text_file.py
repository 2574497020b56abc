"""Reads one text from disk: its characters and its fingerprint, or one clear fault."""

from __future__ import annotations

import hashlib
import os
import stat
from dataclasses import dataclass
from typing import NoReturn

from biasband.errors import BadlyWritten, Fault
from biasband.stage import FileRecord

LARGEST_FILE = 1_000_000
"""[bytes] A stage file or a series table has a few thousand; a larger one is some other file."""

LONGEST_LINE = 10_000
"""[characters] The TOML parser's time grows with the square of a dotted key's length."""


@dataclass(frozen=True, kw_only=True)
class TextFile:
    """A text as read, its line ends LF or a lone CR."""

    path: str
    text: str
    record: FileRecord


def read_text(path: str | os.PathLike[str], *, wanted: str, largest: int = LARGEST_FILE) -> TextFile:
    """Read a text file (UTF-8, a byte order mark is fine, at most `largest` [bytes]).

    `wanted` says in messages what the file should be ("a TOML text").
    Raises: BadlyWritten with a single fault where there is no such file or it is not such a text.
    """
    name = os.fspath(path)
    return decoded(name, _read_bytes(name, wanted, largest), wanted=wanted)


def decoded(path: str, content: bytes, *, wanted: str) -> TextFile:
    """Take the bytes of a file as a text.

    Raises: BadlyWritten with a single fault where they are no UTF-8 text with lines of sane length.
    """
    if b"\0" in content:
        refuse(path, "a binary file", allowed=wanted)
    try:
        text = content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        refuse(path, "not UTF-8 text", line=line, allowed=f"{wanted}, saved as UTF-8")
    for number, line_text in enumerate(text.split("\n"), start=1):
        if len(line_text) > LONGEST_LINE:
            refuse(path, "a line too long", line=number, allowed=f"{LONGEST_LINE} characters at most")
    record = FileRecord(path=path, sha256=hashlib.sha256(content).hexdigest())
    return TextFile(path=path, text=text, record=record)


def refuse(path: str, problem: str, *, line: int | None = None, allowed: str = "") -> NoReturn:
    """Raise BadlyWritten with the one fault that keeps a file from being read at all."""
    raise BadlyWritten((Fault(path, line, "", problem, allowed=allowed),)) from None


def _read_bytes(path: str, wanted: str, largest: int) -> bytes:
    try:
        mode = os.stat(path).st_mode
        content = b""
        if stat.S_ISREG(mode):
            with open(path, "rb") as file:
                content = file.read(largest + 1)
    except FileNotFoundError:
        refuse(path, "no such file")
    except (OSError, ValueError) as error:  # ValueError: a NUL in the path
        refuse(path, f"cannot be read: {getattr(error, 'strerror', None) or error}")
    if not stat.S_ISREG(mode):
        refuse(path, "a directory, not a file" if stat.S_ISDIR(mode) else "not a regular file")
    if len(content) > largest:
        refuse(path, "too large", allowed=f"{wanted} of {largest / 1e6:g} MB at most")
    return content
