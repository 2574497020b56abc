"""The command line: arguments in, exit status out.

Results go to standard output, everything else to standard error. Exit status: 0 pass, 1 fail or
inconclusive, 2 bad input or usage. What computes and what shows is imported by the command that
needs it, so that `--help` is instant.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from contextlib import nullcontext
from typing import TYPE_CHECKING, Annotated, Any

import typer

from biasband.arguments import (
    AsJson,
    BoardCount,
    Cluster,
    Coldest,
    DrawsFile,
    Hottest,
    Kept,
    ManyBoards,
    NewFile,
    PartsFile,
    Points,
    Resistances,
    Sampling,
    Seed,
    SeriesName,
    StageFile,
    StageFiles,
    StockList,
    Tables,
    Until,
)
from biasband.constants import BOARDS, VERSION
from biasband.entrance import BAD_INPUT, INTERRUPTED, NOT_PASSED, PASSED, app, command, complain
from biasband.errors import UsageError

if TYPE_CHECKING:
    from biasband.show.summary import Attempt
    from biasband.show.table import Report
    from biasband.signoff.intake import Additions
    from biasband.stage import Stage

_ENDINGS = {
    "complete": PASSED, "good enough": PASSED, "not good enough": NOT_PASSED, "interrupted": INTERRUPTED
}  # fmt: skip
"""The status of a run of boards by how it ended."""

@command
def review(
    stages: StageFiles,
    json: AsJson = False,
    boards: BoardCount = BOARDS,
    seed: Seed = 1,
    parts: PartsFile = None,
    tables: Tables = None,
    stock: StockList = None,
    keep: Kept = None,
) -> int:
    """Hold stages against what varies: parts, margins, verdict. Of several, one line each."""
    from biasband.files.new_files import check_new
    from biasband.show import export, report
    from biasband.show.output import watched
    from biasband.show.summary import attempt
    from biasband.show.writing import write_parts

    paths = _stage_files(stages)
    if parts is not None and len(paths) > 1:
        raise UsageError(f"--parts: the parts list of one stage; read {len(paths)} stages")
    check_new({"--parts": parts})
    added = _added(tables, stock, keep)
    attempts = [
        attempt(path, added, boards=boards, seed=seed, progress=progress)
        for path, progress in watched(paths, doing="reviewing")
    ]
    for each in attempts:
        complain(each.problem)
    first = attempts[0].review
    if parts is not None and first is not None:
        write_parts(parts, first.parts_list, first.design)
    if paths != stages or len(paths) > 1:
        _put(json, lambda: export.summary_json(attempts), lambda: report.summary_report(attempts))
    elif first is not None:
        _put(json, lambda: export.review_json(first), lambda: report.review_report(first))
    return max(map(_status_of, attempts))


@command
def design(
    stage: StageFile,
    json: AsJson = False,
    write: NewFile = None,
    parts: PartsFile = None,
    tables: Tables = None,
    stock: StockList = None,
    keep: Kept = None,
) -> int:
    """Show ideal values with their formulas and the preferred parts; write the stage with them frozen."""
    from biasband.files.new_files import check_new
    from biasband.show import export, report
    from biasband.show.output import bar
    from biasband.show.writing import write_frozen, write_parts
    from biasband.signoff import study
    from biasband.signoff.parts_list import parts_list

    check_new({"--write": write, "--parts": parts})
    with bar("choosing values") as progress:
        result = study.design(_read(stage, tables, stock, keep), progress=progress)
    if write is not None:
        write_frozen(stage, result, write, tables)
    if parts is not None:
        write_parts(parts, parts_list(result, {}), result)
    _put(json, lambda: export.design_json(result), lambda: report.design_report(result))
    return PASSED


@command
def snap(
    values: Resistances,
    series: SeriesName = None,
    tables: Tables = None,
    stock: StockList = None,
    pair: Annotated[bool, typer.Option("--pair", help="Pairs in series and parallel, too.")] = False,
    tolerance: Annotated[
        str | None, typer.Option("--tolerance", help='That of the parts, such as "1 %"; else the usual one.')
    ] = None,
    mark: Annotated[bool, typer.Option("--mark", help="Read what can be a mark as one: 472 is 4k7.")] = False,
    json: AsJson = False,
) -> int:
    """Find the preferred values nearest to resistances; read codes and marks of parts."""
    from biasband.show import export, report
    from biasband.signoff.options import tolerance_option
    from biasband.signoff.snapping import snap_texts

    share = tolerance_option(tolerance)
    found = snap_texts(
        values, series=series, tables=tables, stock=stock, tolerance=share, as_marks=mark, pair=pair
    )
    _put(json, lambda: export.snap_json(found), lambda: report.snap_report(found))
    return PASSED


@command
def corners(
    stage: StageFile,
    json: AsJson = False,
    tables: Tables = None,
    stock: StockList = None,
    keep: Kept = None,
) -> int:
    """Evaluate every corner: the extremes of each quantity, and where they are."""
    from biasband.margins.holding import looked_into
    from biasband.show import export, report
    from biasband.show.output import bar
    from biasband.signoff import study

    with bar("looking into every corner") as progress:
        found = study.corners(_read(stage, tables, stock, keep), progress=progress)
    vocabulary = looked_into(found.design.stage)
    _put(
        json,
        lambda: export.corners_json(found.design, found.corners, vocabulary),
        lambda: report.corners_report(found.design, found.corners, vocabulary),
    )
    return PASSED


@command
def spread(
    stage: StageFile,
    json: AsJson = False,
    boards: ManyBoards = None,
    seed: Seed = 1,
    sampling: Sampling = "plain",
    until: Until = None,
    save: DrawsFile = None,
    cluster: Cluster = None,
    tables: Tables = None,
    stock: StockList = None,
    keep: Kept = None,
) -> int:
    """Sample boards, each at every point of use: how far each quantity spreads, yields, and the causes."""
    from biasband.show import report, spread_json
    from biasband.show.draws_file import check_save, draws_file
    from biasband.show.output import bar
    from biasband.signoff import spreading
    from biasband.signoff.options import boards_option

    most = boards_option(boards) or (BOARDS if until is None else spreading.MOST_UNTIL)
    check_save(save, boards=most, cluster=cluster)
    read = _read(stage, tables, stock, keep)
    with nullcontext() if save is None else draws_file(save, boards=most) as draws:
        found = spreading.spread(
            read, boards=most, seed=seed, sampling=sampling, until=until, cluster=cluster,
            keep=draws.keep if draws else None, watch=bar, notice=complain,
        )  # fmt: skip
        if draws:
            draws.settle(found.boards, partial=found.ending == "interrupted")
    _put(json, lambda: spread_json.spread_json(found), lambda: report.spread_report(found))
    return max(_ENDINGS[found.ending], BAD_INPUT if draws and draws.failed else PASSED)


@command
def drift(
    stage: StageFile,
    json: AsJson = False,
    coldest: Coldest = None,
    hottest: Hottest = None,
    points: Points = None,
    tables: Tables = None,
    stock: StockList = None,
    keep: Kept = None,
) -> int:
    """Sweep the ambient temperature: nominal and worst case, slopes, where limits first fail."""
    from biasband.show import export, report
    from biasband.show.output import bar
    from biasband.signoff import drifting

    with bar("sweeping the ambient temperature") as progress:
        read = _read(stage, tables, stock, keep)
        found = drifting.drift(read, coldest=coldest, hottest=hottest, points=points, progress=progress)
    _put(json, lambda: export.drift_json(found), lambda: report.drift_report(found))
    return PASSED


@command
def contrast(
    stage: StageFile,
    json: AsJson = False,
    boards: BoardCount = BOARDS,
    seed: Seed = 1,
    tables: Tables = None,
    stock: StockList = None,
    keep: Kept = None,
) -> int:
    """Design the same target in every topology, snap each by its worst case, and lay them side by side."""
    from biasband.show import contrast_json, report
    from biasband.show.output import bar
    from biasband.signoff import contrasting

    with bar("designing every topology") as progress:
        read = _read(stage, tables, stock, keep)
        found = contrasting.contrast(read, boards=boards, seed=seed, progress=progress)
    _put(json, lambda: contrast_json.contrast_json(found), lambda: report.contrast_report(found))
    return PASSED if found.passing else NOT_PASSED


def _put(json: bool, as_data: Callable[[], Any], as_report: Callable[[], Report]) -> None:
    """Print a result in the form that was asked for."""
    from biasband.show.export import as_text
    from biasband.show.output import deliver
    from biasband.show.screen import show

    if json:
        deliver(as_text(as_data()))
    else:
        show(as_report())


def _read(path: str, tables: str | None, stock: str | None, keep: Sequence[str] | None) -> Stage:
    """Read a stage file and what the command line adds to it."""
    from biasband.signoff.intake import take_in

    return take_in(path, _added(tables, stock, keep))


def _added(tables: str | None, stock: str | None, keep: Sequence[str] | None) -> Additions:
    """Read what the command line adds to stage files."""
    from biasband.signoff.intake import additions
    from biasband.signoff.options import keep_option

    return additions(tables=tables, stock=stock, keep=keep_option(keep))


def _status_of(attempt: Attempt) -> int:
    if attempt.review is None:
        return BAD_INPUT
    return PASSED if attempt.review.verdict.outcome == "pass" else NOT_PASSED


def _stage_files(names: Sequence[str]) -> list[str]:
    """The files themselves, and the stage files of folders; what is left out is named."""
    from biasband.files.stage_folder import stage_files

    found = [stage_files(name) for name in names]
    for path in (path for files in found for path in files.left_out):
        complain(f"{path}: left out, it has no [stage] section")
    return [path for files in found for path in files.stages]


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
