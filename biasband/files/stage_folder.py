"""A file or a folder that was named on the command line, as the stage files it stands for."""

from __future__ import annotations

import os
from dataclasses import dataclass

from biasband.errors import BiasbandError, UsageError
from biasband.files.toml_file import read_toml


@dataclass(frozen=True)
class StageFiles:
    """Paths of stage files, and of the TOML files that were left out as none."""

    stages: tuple[str, ...]
    left_out: tuple[str, ...] = ()


def stage_files(path: str) -> StageFiles:
    """The file itself, or the stage files of a folder, by name.

    Raises UsageError for a folder that cannot be read or holds no stage file.
    """
    if not os.path.isdir(path):
        return StageFiles((path,))
    try:
        found = [os.path.join(path, name) for name in sorted(os.listdir(path)) if name.endswith(".toml")]
    except OSError as error:
        raise UsageError(f"{path}: cannot be read: {error.strerror}") from None
    others = [name for name in found if os.path.isdir(name) or _is_other_toml(name)]
    if stages := [name for name in found if name not in others]:
        return StageFiles(tuple(stages), tuple(others))
    raise UsageError(f"{path}: a folder without stage files; needed: files *.toml with a [stage] section")


def _is_other_toml(path: str) -> bool:
    """Whether a file is sound TOML without [stage]; a faulty one is kept, so that its faults show."""
    try:
        return "stage" not in read_toml(path).data
    except BiasbandError:
        return False
