"""The draws themselves, in a new file: a row per board.

Columns, in SI units: `board`, its number from 0; each draw's coordinate from −1 to +1
(`R1.tolerance.coordinate`); each contributor's value at nominal use (`R1`, `gain`); each quantity at
its three places (`collector_voltage.lowest_in_use`), NaN where it was not solved.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np

from biasband.boards.in_use import PLACES
from biasband.boards.job import SolvedBlock
from biasband.errors import UsageError
from biasband.files.growing_file import GrowingFile
from biasband.files.new_files import check_new
from biasband.show.draws_formats import FORMATS, ArrayRows, Columns
from biasband.show.output import complain
from biasband.stage import Stage
from biasband.variation.contributors import realise


def check_save(path: str | None, *, boards: int, cluster: str | None) -> None:
    """Check what stands behind --save before anything is computed.

    Raises UsageError for what `check_new` finds; for another ending, more boards than the format takes
    and draws that would be made elsewhere.
    """
    check_new({"--save": path})
    problems = [] if path is None else [*_problems(path, boards, cluster)]
    if problems:
        raise UsageError("\n".join(f"--save: {problem}" for problem in problems))


def _problems(path: str, boards: int, cluster: str | None) -> Iterator[str]:
    if _ending(path) not in FORMATS:
        yield f"a file that ends in {' or '.join(FORMATS)}; read {path}"
    if _ending(path) == ".npz" and boards > ArrayRows.most:
        most = f"from 1 to {ArrayRows.most} --boards, which are held in memory"
        yield f"{path}: .npz takes {most}; read {boards} (.csv takes any number)"
    if cluster is not None:
        yield "draws are kept where they are made: in this process, without --cluster"


def _ending(path: str) -> str:
    return os.path.splitext(path)[1].lower()


@contextmanager
def draws_file(path: str, *, boards: int) -> Iterator[DrawsFile]:
    """Open a new file for draws, of `boards` boards at most; an interruption leaves it with those so far.

    Raises UsageError where it cannot be made.
    """
    draws = DrawsFile(path, boards)
    try:
        yield draws
    except KeyboardInterrupt:
        draws.settle(partial=True)
        raise
    finally:
        draws.discard()


class DrawsFile:
    """A new file of draws; what goes wrong with it is said at once, and the run goes on (then `failed`)."""

    def __init__(self, path: str, boards: int) -> None:
        self.failed = False
        self._file = GrowingFile(path)
        self._rows = FORMATS[_ending(path)](self._file.stream)
        self._asked, self._kept, self._settled = boards, 0, False

    def keep(self, stage: Stage, block: SolvedBlock) -> None:
        """Write the boards of a block, which is the next one."""
        if self.failed:
            return
        try:
            found = columns(stage, block)
            self._rows.add(found)
            if self._kept == 0:
                self._say_if_too_large(len(found["board"]))
            self._kept += len(found["board"])
        except OSError as error:
            self._fail(f"cannot be written: {error.strerror}; what there was of it is taken away")

    def settle(self, boards: int | None = None, *, partial: bool) -> None:
        """Give the file its name; it holds the first `boards` boards, else all that were kept."""
        boards = self._kept if boards is None else boards
        if self.failed or self._settled or not boards:
            return
        try:
            self._rows.finish(boards)
            self._file.finish()
        except FileExistsError:
            self._fail(f"was made by another meanwhile and was left as it is; see {self._file.part}")
        except OSError as error:
            self._fail(f"cannot be written: {error.strerror}; what there was of it is taken away")
        else:
            self._settled = True
            told = f", a part of the {self._asked} that were asked for" if partial else ""
            complain(f"{self._file.path}: written, {boards} boards{told}")

    def discard(self) -> None:
        """Take away what has no name yet."""
        self._file.discard()

    def _fail(self, problem: str) -> None:
        self.failed = True
        self._file.discard()
        complain(f"--save: {self._file.path} {problem}")

    def _say_if_too_large(self, boards: int) -> None:
        """A disk that will be full in an hour is better known now."""
        size = self._file.stream.tell() / boards * self._asked
        free = shutil.disk_usage(os.path.dirname(self._file.path) or os.curdir).free
        if size > free:
            gigabytes = f"{size / 1e9:.1f} GB, and there are {free / 1e9:.1f} GB free"
            complain(f"{self._file.path}: may take {gigabytes}")


def columns(stage: Stage, block: SolvedBlock) -> Columns:
    """The columns of some boards by name, (B,) each; the stage has its values."""
    count = np.shape(next(iter(block.drawn.values())))[0]
    found = {
        "board": np.arange(block.first, block.first + count),
        **{f"{name}.coordinate": drawn for name, drawn in block.drawn.items()},
        **realise(stage, block.drawn).named(),
    }
    for name, rows in block.found.values.items():
        found |= {f"{name}.{place}": row for place, row in zip(PLACES, rows, strict=True)}
    return {name: np.broadcast_to(column, (count,)) for name, column in found.items()}
