"""Writes new files that were asked for beside a report, and says that they are written."""

from __future__ import annotations

from collections.abc import Sequence

from biasband.files.series_folder import load_tables
from biasband.files.stage_writer import frozen_text, write_new
from biasband.show.output import complain
from biasband.show.parts_csv import parts_csv
from biasband.signoff.parts_list import PartLine, capacitors_list, exact_values
from biasband.values.choosing import Design


def write_frozen(path: str, design: Design, new_path: str, tables: str | None) -> None:
    """Write the stage of a file with the values of its design frozen; `tables` are those it is read with.

    Raises UsageError where the new file is there already or cannot be written.
    """
    values = exact_values(design)
    write_new(new_path, frozen_text(path, values, new_path=new_path, tables=load_tables(tables)))
    complain(f"{new_path}: written, {_count(values, 'value')} frozen")


def write_parts(path: str, lines: Sequence[PartLine], design: Design) -> None:
    """Write the parts list of a design, its capacitors behind its resistors.

    Raises UsageError where the new file is there already or cannot be written.
    """
    capacitors = capacitors_list(design)
    write_new(path, parts_csv(lines, capacitors))
    complain(f"{path}: written, {_count([*lines, *capacitors], 'kind')} of part")


def _count(things: Sequence[object] | dict[str, str], word: str) -> str:
    return f"{len(things)} {word}{'' if len(things) == 1 else 's'}"
