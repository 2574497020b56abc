"""Shows a report on a terminal, or on whatever stands in its place."""

from __future__ import annotations

import sys

from rich.console import Console

from biasband.show.layout import lines_of
from biasband.show.output import deliver
from biasband.show.spelling import Spelling
from biasband.show.table import Report

WIDEST = 120
"""[cells] Longer lines are hard to read, however wide the terminal."""


def show(report: Report) -> None:
    """Print a report on standard output: colours on a terminal only, and none under NO_COLOR."""
    terminal = Console(file=sys.stdout, highlight=False, markup=False, emoji=False)
    spelling = Spelling(sys.stdout.encoding or "ascii")
    with terminal.capture() as captured:
        for line in lines_of(report, width=min(terminal.width, WIDEST), spelling=spelling):
            terminal.print(line, soft_wrap=True)
    deliver(captured.get())
