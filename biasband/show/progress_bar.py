"""A bar for work that takes its time: what is being done, how far it is, how fast and how long it will be."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from threading import Timer

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn
from rich.table import Column
from rich.text import Text

from biasband.signoff.sampling_run import duration

PATIENCE = 1.0
"""[s] Work that is done by then shows no bar."""

_LEFT_FREE = 4
"""Columns of the terminal: it shows the ^C of Ctrl-C behind the bar, and must not break the line for it."""

_LONGEST_BAR = 40

_FOR_PACE = 40
"""Columns that a long name leaves to the bar and the pace."""


@contextmanager
def late_bar(doing: str, boards: int) -> Iterator[Callable[[float], None]]:
    """Show a bar on standard error, a terminal, once the work has taken a while; gone when it is done."""
    console = Console(stderr=True)
    console.width = max(console.width - _LEFT_FREE, 1)
    shown = Progress(*_columns(console.width), console=console, transient=True)
    task = shown.add_task(Text(doing).markup, total=None, pace="")
    started = time.monotonic()

    def progress(done: float) -> None:
        told = pace(done, boards, time.monotonic() - started)
        shown.update(task, completed=done, total=1.0, pace=told)

    late = Timer(PATIENCE, shown.start)
    late.daemon = True
    late.start()
    try:
        yield progress
    finally:
        late.cancel()
        try:
            late.join()
        finally:
            if shown.live.is_started:
                shown.stop()


def _columns(width: int) -> tuple[TextColumn, BarColumn, TextColumn]:
    """What is being done gives way where the line is too short for all."""
    name = Column(no_wrap=True, overflow="ellipsis", max_width=max(width - _FOR_PACE, 1))
    return (
        TextColumn("{task.description}", table_column=name),
        BarColumn(bar_width=None, table_column=Column(max_width=_LONGEST_BAR)),
        TextColumn("{task.fields[pace]}", table_column=Column(no_wrap=True)),
    )


def pace(done: float, boards: int, seconds: float) -> str:
    """How fast it goes and how long it will take, after so many seconds; nothing before a share is done."""
    if not (0.0 < done and 0.0 < seconds):
        return ""
    left = f"{duration(seconds * (1.0 - done) / done)} left"
    return f"{boards * done / seconds:.0f} boards/s, {left}" if boards else left
