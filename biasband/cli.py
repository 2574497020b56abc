"""The command line: arguments in, exit status out.

Results go to standard output, everything else to standard error. Exit status: 0 pass, 1 fail or
inconclusive, 2 bad input or usage. What computes and what shows is imported by the command that
needs it, so that `--help` is instant.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Annotated, Any, ParamSpec

import typer

from biasband.constants import BOARDS, MOST_BOARDS, VERSION
from biasband.errors import BiasbandError, UsageError

if TYPE_CHECKING:
    from biasband.parts.series import Snap
    from biasband.show.summary import Attempt
    from biasband.show.table import Report
    from biasband.values.choosing import Design

PASSED, NOT_PASSED, BAD_INPUT, INTERRUPTED = 0, 1, 2, 130

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
NewFile = Annotated[
    str | None, typer.Option("--write", metavar="FILE", help="A new stage file with the values frozen.")
]
Resistances = Annotated[list[str], typer.Argument(metavar="VALUE...", help='Such as 4k7 or "130 ohm".')]
SeriesName = Annotated[str, typer.Option("--series", help="A preferred series, E3 to E192.")]
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
def review(stages: StageFiles, json: AsJson = False, boards: BoardCount = BOARDS, seed: Seed = 1) -> int:
    """Hold stages against what varies: parts, margins, verdict. Of several, one line each."""
    from biasband.show import export, report
    from biasband.show.output import watched

    paths = _stage_files(stages)
    attempts = [_attempt(path, boards, seed) for path in watched(paths, doing="reviewing")]
    for attempt in attempts:
        _complain(attempt.problem)
    first = attempts[0].review
    if paths != stages or len(paths) > 1:
        _put(json, lambda: export.summary_json(attempts), lambda: report.summary_report(attempts))
    elif first is not None:
        _put(json, lambda: export.review_json(first), lambda: report.review_report(first))
    return max(map(_status_of, attempts))


@command
def design(stage: StageFile, json: AsJson = False, write: NewFile = None) -> int:
    """Show ideal values with their formulas and the preferred parts; write the stage with them frozen."""
    from biasband.files.stage_file import read_stage
    from biasband.show import export, report
    from biasband.signoff import study

    result = study.design(read_stage(stage))
    if write is not None:
        _write_frozen(stage, result, write)
    _put(json, lambda: export.design_json(result), lambda: report.design_report(result))
    return PASSED


@command
def snap(values: Resistances, series: SeriesName = "E24", json: AsJson = False) -> int:
    """Find the preferred values nearest to resistances, and their codes."""
    from biasband.show import export, report

    snaps = _snapped(values, series)
    _put(json, lambda: export.snap_json(snaps), lambda: report.snap_report(snaps))
    return PASSED


@command
def corners(stage: StageFile, json: AsJson = False) -> int:
    """Evaluate every corner: the extremes of each quantity, and where they are."""
    from biasband.files.stage_file import read_stage
    from biasband.show import export, report
    from biasband.signoff import study

    found = study.corners(read_stage(stage))
    words = study.words(found.design.stage)
    _put(
        json,
        lambda: export.corners_json(found.design, found.corners, words),
        lambda: report.corners_report(found.design, found.corners, words),
    )
    return PASSED


@command
def spread(stage: StageFile, json: AsJson = False, boards: BoardCount = BOARDS, seed: Seed = 1) -> int:
    """Sample boards, each at every point of use: mean, deviation and quantiles of each quantity."""
    from biasband.files.stage_file import read_stage
    from biasband.show import export, report
    from biasband.show.output import busy
    from biasband.signoff import study

    with busy(f"sampling {boards} boards"):
        drawn = study.spread(read_stage(stage), boards=boards, seed=seed)
    words = study.words(drawn.design.stage)
    _put(
        json,
        lambda: export.spread_json(drawn.design, drawn.boards),
        lambda: report.spread_report(drawn.design, drawn.boards, words),
    )
    return PASSED


def _put(json: bool, as_data: Callable[[], Any], as_report: Callable[[], Report]) -> None:
    """Print a result in the form that was asked for."""
    from biasband.show.export import as_text
    from biasband.show.output import deliver
    from biasband.show.screen import show

    if json:
        deliver(as_text(as_data()))
    else:
        show(as_report())


def _attempt(path: str, boards: int, seed: int) -> Attempt:
    from biasband.files.stage_file import read_stage
    from biasband.show.summary import Attempt
    from biasband.signoff import study

    try:
        return Attempt(path, study.review(read_stage(path), boards=boards, seed=seed))
    except BiasbandError as error:
        return Attempt(path, None, str(error))


def _status_of(attempt: Attempt) -> int:
    if attempt.review is None:
        return BAD_INPUT
    return PASSED if attempt.review.verdict.outcome == "pass" else NOT_PASSED


def _stage_files(names: Sequence[str]) -> list[str]:
    """The files themselves, and the stage files of folders; what is left out is named."""
    from biasband.files.stage_folder import stage_files

    found = [stage_files(name) for name in names]
    for path in (path for files in found for path in files.left_out):
        _complain(f"{path}: left out, it has no [stage] section")
    return [path for files in found for path in files.stages]


def _snapped(values: Sequence[str], series: str) -> list[Snap]:
    """Snap every value; all faults are reported at once."""
    from biasband.files.series_files import load_series
    from biasband.parts.series import nearest
    from biasband.quantity import Kind, parse

    preferred = load_series(series)
    snaps, faults = [], []
    for text in values:
        try:
            snaps.append(nearest(preferred, parse(text, Kind.RESISTANCE)))
        except BiasbandError as error:
            faults.append(str(error))
    if faults:
        raise UsageError("\n".join(dict.fromkeys(faults)))
    return snaps


def _write_frozen(path: str, result: Design, new_path: str) -> None:
    from biasband.files.stage_writer import frozen_text, write_new
    from biasband.quantity import Kind, format_exact

    values = {part.name: format_exact(part.value, Kind.RESISTANCE) for part in result.parts}
    write_new(new_path, frozen_text(path, values, new_path=new_path))
    _complain(f"{new_path}: written, {len(values)} values frozen")


def _show_version(asked: bool) -> None:
    if asked:
        typer.echo(f"biasband {VERSION}")
        raise typer.Exit(PASSED)


@app.callback()
def every_command(
    version: Annotated[
        bool, typer.Option("--version", is_eager=True, callback=_show_version, help="Show the version.")
    ] = False,
) -> None:
    """What stands before the command."""


def main() -> None:
    """Run the command line."""
    app(prog_name="biasband")
