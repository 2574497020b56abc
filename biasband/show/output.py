"""The two streams of the program: results on standard output, everything else on standard error."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager

from biasband.errors import UsageError
from biasband.show.spelling import Spelling

Progress = Callable[[float], None]
"""Told the share of the work that is done."""


def deliver(text: str) -> None:
    """Write a result; a reader that has left (`| head`) is no reason to complain.

    Raises: UsageError where standard output cannot be written, as on a full disk.
    """
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except BrokenPipeError:
        # What is still in the buffer would be written, and fail again, when Python leaves.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except OSError as error:
        raise UsageError(f"standard output cannot be written: {error.strerror}") from None


def complain(text: str) -> None:
    """Write a message for people on standard error, line by line; an empty one is none."""
    spelling = Spelling(sys.stderr.encoding or "ascii")
    for line in text.split("\n") if text else ():
        sys.stderr.write(spelling(line) + "\n")


@contextmanager
def bar(doing: str, boards: int = 0) -> Iterator[Progress]:
    """Show on standard error, if that is a terminal, how far something is; told the share that is done.

    Work that is done at once shows none. Of `boards` it shows how many are done in a second.
    """
    if not sys.stderr.isatty():
        yield lambda done: None
        return
    from biasband.show.progress_bar import late_bar

    spelling = Spelling(sys.stderr.encoding or "ascii")
    with late_bar(spelling(doing), boards) as progress:
        yield progress


def watched(paths: Sequence[str], *, doing: str) -> Iterator[tuple[str, Progress]]:
    """Go through files, each with a bar of its own."""
    for place, path in enumerate(paths, start=1):
        counted = f" ({place} of {len(paths)})" if len(paths) > 1 else ""
        with bar(f"{doing} {path}{counted}") as progress:
            yield path, progress
