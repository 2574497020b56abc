"""What came of each of several stage files."""

from __future__ import annotations

from dataclasses import dataclass

from biasband.errors import BiasbandError
from biasband.signoff import study
from biasband.signoff.intake import Additions, take_in
from biasband.signoff.study import Review
from biasband.values.joint import Progress


@dataclass(frozen=True)
class Attempt:
    """A stage file that was to be reviewed: its review, or (None) the problem that stood in the way."""

    path: str
    review: Review | None
    problem: str = ""


def attempt(path: str, added: Additions, *, boards: int, seed: int, progress: Progress) -> Attempt:
    """Review a stage file with what the caller adds; a problem that does not name the file gets its name."""
    try:
        return Attempt(path, study.review(take_in(path, added), boards=boards, seed=seed, progress=progress))
    except BiasbandError as error:
        problem = str(error)
        return Attempt(path, None, problem if path in problem else f"{path}: {problem}")
