"""What came of each of several stage files."""

from __future__ import annotations

from dataclasses import dataclass

from biasband.signoff.study import Review


@dataclass(frozen=True)
class Attempt:
    """A stage file that was to be reviewed: its review, or (None) the problem that stood in the way."""

    path: str
    review: Review | None
    problem: str = ""
