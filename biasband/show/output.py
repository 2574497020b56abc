"""The two streams of the program: results on standard output, everything else on standard error."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator, Sequence

from biasband.show.spelling import Spelling


def deliver(text: str) -> None:
    """Write a result; a reader that has left (`| head`) is no reason to complain."""
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except BrokenPipeError:
        # What is still in the buffer would be written, and fail again, when Python leaves.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def complain(text: str) -> None:
    """Write a message for people, line by line, on standard error."""
    spelling = Spelling(sys.stderr.encoding or "ascii")
    for line in text.split("\n"):
        sys.stderr.write(spelling(line) + "\n")


def watched(paths: Sequence[str], *, doing: str) -> Iterator[str]:
    """Go through files; if standard error is a terminal, show there how far that is."""
    if not sys.stderr.isatty():
        yield from paths
        return
    from rich.console import Console
    from rich.markup import escape
    from rich.progress import track

    console = Console(stderr=True)
    if len(paths) > 1:
        yield from track(paths, doing, console=console, transient=True)
        return
    for path in paths:
        with console.status(escape(f"{doing} {path}"), spinner="line"):
            yield path
