"""Shows a report on a terminal, or on whatever stands in its place."""

from __future__ import annotations

import io
import sys

from rich.console import Console
from rich.text import Text

from biasband.show.layout import lines_of
from biasband.show.output import deliver
from biasband.show.spelling import Spelling
from biasband.show.table import Report

WIDEST = 120
"""[cells] Longer lines are hard to read, however wide the terminal."""


def show(report: Report) -> None:
    """Print a report on standard output: colours on a terminal only, and none under NO_COLOR."""
    terminal = Console(file=sys.stdout)
    width, spelling = min(terminal.width, WIDEST), Spelling(sys.stdout.encoding or "ascii")
    deliver(_painted(lines_of(report, width=width, spelling=spelling), terminal))


def _painted(lines: list[Text], terminal: Console) -> str:
    """The lines with the styles that a terminal can show; not printed, so that only `deliver` writes."""
    page = io.StringIO()
    painter = Console(
        file=page,
        force_terminal=terminal.is_terminal,
        color_system=terminal.color_system,  # type: ignore[arg-type]  # rich names it by plain str here
        no_color=terminal.no_color,
        width=WIDEST,
        highlight=False,
    )
    for line in lines:
        painter.print(line, soft_wrap=True)
    return page.getvalue()
