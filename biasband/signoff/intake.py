"""Takes a stage in: its file, and what the caller adds to it for this run."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass, replace

from biasband.errors import BiasbandError, UsageError
from biasband.files import stage_file
from biasband.files.series_files import load_all
from biasband.files.series_folder import SeriesTables, load_tables
from biasband.files.stock_file import read_stock
from biasband.parts.series import Series
from biasband.quantity import Kind, parse
from biasband.stage import Stage, Stock
from biasband.values.keeping import keep as kept

AnyPath = str | os.PathLike[str]


@dataclass(frozen=True, kw_only=True)
class Additions:
    """What a caller adds to stage files: series, a stock list before their own, values to keep [Ω]."""

    tables: SeriesTables
    stock: Stock | None
    keep: Mapping[str, float]


def additions(
    *, tables: AnyPath | None = None, stock: AnyPath | None = None, keep: Mapping[str, str] | None = None
) -> Additions:
    """Read what a caller adds, once for any number of stages; the arguments are those of `read_stage`.

    Raises BadlyWritten with every fault of the files; UsageError for a folder without tables, or values to
    keep that are no resistances.
    """
    return Additions(
        tables=load_tables(tables),
        stock=None if stock is None else read_stock(stock),
        keep=_values(keep or {}),
    )


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
    return take_in(path, additions(tables=tables, stock=stock, keep=keep))


def take_in(path: AnyPath, added: Additions) -> Stage:
    """Read a stage file together with what the caller adds; raises what `read_stage` does."""
    stage = stage_file.read_stage(path, tables=added.tables)
    if added.stock is not None:
        stage = _with_stock(stage, added.stock)
    if not added.keep:
        return stage
    try:
        return kept(stage, added.keep, known_series(stage))
    except UsageError as error:
        raise UsageError("\n".join(f"{os.fspath(path)}: {line}" for line in str(error).split("\n"))) from None


def known_series(stage: Stage) -> Mapping[str, Series]:
    """Every series that a stage may name, by name: biasband's own and the user's."""
    return {**load_all(), **{series.name: series for series in stage.own_series}}


def _with_stock(stage: Stage, stock: Stock) -> Stage:
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
