"""Sees to it, before anything is computed, that new files can be written where they are wanted."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping

from biasband.errors import UsageError


def check_new(paths: Mapping[str, str | None]) -> None:
    """Check the paths of new files, by the option that names each; None where it was not given.

    What happens to a folder later is found out when the file is written.

    Raises: UsageError with all that is wrong: no name, something there already, no such folder, one path
    for two files.
    """
    wanted = {option: path for option, path in paths.items() if path is not None}
    problems = [f"{option}: {problem}" for option, path in wanted.items() for problem in _problems(path)]
    whose: dict[str, str] = {}
    for option, path in wanted.items():
        other = whose.setdefault(os.path.abspath(path), option)
        if other != option:
            problems.append(f"{other} and {option} name the same file, {path}")
    if problems:
        raise UsageError("\n".join(problems))


def _problems(path: str) -> Iterator[str]:
    if not path.strip():
        yield "the name of a new file is missing"
        return
    try:
        os.lstat(path)
    except FileNotFoundError:
        if not os.path.isdir(os.path.dirname(path) or os.curdir):
            yield f"{path}: there is no such folder: make it first"
        elif path.endswith(("/", os.sep)):
            yield f"{path}: a folder, not the name of a new file"
    except (OSError, ValueError) as error:  # ValueError: a NUL in the path
        yield f"{path} cannot be written: {getattr(error, 'strerror', None) or error}"
    else:
        yield f"{path} exists already and was left as it is: choose a new name"
