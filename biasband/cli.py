"""The command line: arguments in, exit status out.

Results go to standard output, everything else to standard error. Exit status: 0 pass, 1 fail or
inconclusive, 2 bad input or usage. What computes and what shows is imported by the command that
needs it, so that `--help` is instant.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import TYPE_CHECKING, Annotated, ParamSpec

import typer

from biasband.errors import BiasbandError, UsageError

if TYPE_CHECKING:
    from biasband.show.summary import Attempt

PASSED, NOT_PASSED, BAD_INPUT, INTERRUPTED = 0, 1, 2, 130
MOST_BOARDS = 2**22
"""About 2 GB of samples; more boards tell nothing more."""

app = typer.Typer(
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    no_args_is_help=True,
    help="From a hand-computed bias network to buyable parts and a signed-off margin table.",
)

StageFile = Annotated[str, typer.Argument(metavar="STAGE", help="A stage file (TOML).")]
StageFiles = Annotated[
    list[str], typer.Argument(metavar="STAGE...", help="Stage files (TOML), or folders of them.")
]
AsJson = Annotated[bool, typer.Option("--json", help="Write the result as JSON.")]
BoardCount = Annotated[
    int, typer.Option("--boards", min=1, max=MOST_BOARDS, help="How many boards are sampled.")
]
Seed = Annotated[int, typer.Option("--seed", min=0, help="Which random numbers are drawn.")]
Arguments = ParamSpec("Arguments")


def command(work: Callable[Arguments, int]) -> Callable[Arguments, int]:
    """Make a command of a function that returns an exit status; faults of the input are its status 2."""

    @functools.wraps(work)
    def guarded(*args: Arguments.args, **kwargs: Arguments.kwargs) -> None:
        raise typer.Exit(_status(lambda: work(*args, **kwargs)))

    app.command()(guarded)
    return work


def _status(work: Callable[[], int]) -> int:
    try:
        return work()
    except BiasbandError as error:
        _complain(str(error))
        return BAD_INPUT
    except KeyboardInterrupt:
        return INTERRUPTED


def _complain(text: str) -> None:
    from biasband.show.output import complain

    complain(text)


@command
def review(stages: StageFiles, json: AsJson = False, boards: BoardCount = 32768, seed: Seed = 1) -> int:
    """Hold stages against what varies: parts, margins, verdict. Of several, one line each."""
    from biasband.show.attempts import attempted, stage_files
    from biasband.show.export import attempt_json, as_text
    from biasband.show.output import deliver
    from biasband.show.report import review_report, summary_report
    from biasband.show.screen import show

    return 0


def main() -> None:
    """Run the command line."""
    app(prog_name="biasband")
