"""Takes a stage in: its file, and what the caller adds to it for this run."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import replace

from biasband.errors import BiasbandError, UsageError
from biasband.files import stage_file
from biasband.files.series_files import load_all
from biasband.files.series_folder import load_tables
from biasband.files.stock_file import read_stock
from biasband.parts.series import Series
from biasband.quantity import Kind, parse
from biasband.stage import Stage
from biasband.values.keeping import keep as kept

AnyPath = str | os.PathLike[str]


def read_stage(
    path: AnyPath,
    *,
    tables: AnyPath | None = None,
    stock: AnyPath | None = None,
    keep: Mapping[str, str] | None = None,
) -> Stage:
    """Read a stage file.

    `tables` is a folder of series tables that it may name beside biasband's own, `stock` a stock list that
    takes the place of the file's own, `keep` holds values such as {"RC": "3k3"} for resistors that the
    file leaves free.

    Raises BadlyWritten with every fault of the files, else PhysicallyImpossible with every reason why no
    such stage can exist; UsageError for a folder without tables, or a value that cannot be kept.
    """
    stage = stage_file.read_stage(path, tables=load_tables(tables))
    if stock is not None:
        stage = _with_stock(stage, stock)
    values = _values(keep or {})
    return kept(stage, values, known_series(stage)) if values else stage


def known_series(stage: Stage) -> Mapping[str, Series]:
    """Every series that a stage may name, by name: biasband's own and the user's."""
    return {**load_all(), **{series.name: series for series in stage.own_series}}


def _with_stock(stage: Stage, path: AnyPath) -> Stage:
    stock = read_stock(path)
    others = (file for file in stage.files if stage.stock is None or file != stage.stock.file)
    return replace(stage, stock=stock, files=(*others, stock.file))


def _values(texts: Mapping[str, str]) -> dict[str, float]:
    """Read all values to keep; every one that is no resistance is named."""
    values, problems = {}, []
    for name, text in texts.items():
        try:
            values[name] = parse(text, Kind.RESISTANCE)
        except BiasbandError as error:
            problems.append(f"{name}: {error}")
    if problems:
        raise UsageError("\n".join(problems))
    return values
