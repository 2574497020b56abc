"""What biasband raises: every error carries the pieces of its message."""

from __future__ import annotations

from dataclasses import dataclass


class BiasbandError(Exception):
    """Ancestor of every error that biasband raises on purpose."""


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong with an input.

    `line` is 1-based, or None where no line can be named. `key` is the dotted key path
    ("resistors.RC.value"), `read` what stood there, `allowed` what may stand there, `hint` an
    optional help such as the nearest known key.
    """

    file: str
    line: int | None
    key: str
    problem: str
    read: str = ""
    allowed: str = ""
    hint: str = ""

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        text = f"{place}: {self.key}: {self.problem}" if self.key else f"{place}: {self.problem}"
        text += f"; read {self.read}" if self.read else ""
        text += f"; allowed: {self.allowed}" if self.allowed else ""
        return text + (f" ({self.hint})" if self.hint else "")


class FaultyInput(BiasbandError, ValueError):
    """Ancestor of the two kinds of faulty input; `faults` holds every one found."""

    heading = "faulty input"

    def __init__(self, faults: tuple[Fault, ...]) -> None:
        self.faults = faults
        super().__init__("\n".join([self.heading, *(f"  {fault}" for fault in faults)]))


class BadlyWritten(FaultyInput):
    """The input does not follow the format: syntax, unknown keys, wrong units, out of range."""

    heading = "badly written:"


class PhysicallyImpossible(FaultyInput):
    """The input is well written, but no such stage can exist."""

    heading = "physically impossible:"


class QuantityError(BiasbandError, ValueError):
    """A text that is no quantity of the wanted kind."""

    def __init__(self, text: str, problem: str, allowed: str) -> None:
        self.text, self.problem, self.allowed = text, problem, allowed
        super().__init__(f"{problem}; read {text!r}; allowed: {allowed}")


class UsageError(BiasbandError, ValueError):
    """An argument outside its range, in the Python API or on the command line."""
