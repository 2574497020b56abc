"""The two streams of the program: results on standard output, everything else on standard error."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager

from biasband.errors import UsageError
from biasband.show.spelling import Spelling


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
def busy(doing: str) -> Iterator[None]:
    """Say what is being done while it is, if standard error is a terminal."""
    if not sys.stderr.isatty():
        yield
        return
    from rich.console import Console
    from rich.text import Text

    spelling = Spelling(sys.stderr.encoding or "ascii")
    with Console(stderr=True).status(Text(spelling(doing)), spinner="line"):
        yield


def watched(paths: Sequence[str], *, doing: str) -> Iterator[str]:
    """Go through files; if standard error is a terminal, show there how far that is."""
    if len(paths) > 1 and sys.stderr.isatty():
        from rich.console import Console
        from rich.progress import track

        yield from track(paths, doing, console=Console(stderr=True), transient=True)
        return
    for path in paths:
        with busy(f"{doing} {path}"):
            yield path
