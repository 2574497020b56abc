"""Results as pandas DataFrames, SI units, for notebooks and further work."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from biasband.boards.estimates import Estimates
from biasband.boards.in_use import PLACES
from biasband.margins.records import Margin
from biasband.variation.corners import Corners

if TYPE_CHECKING:
    import pandas as pd

    from biasband.circuit.scenarios import Array
    from biasband.signoff.contrasting import Contrasted
    from biasband.signoff.drifting import Drift


def margin_frame(rows: Sequence[Margin]) -> pd.DataFrame:
    """The margin table: a row per limit, in the order given."""
    import pandas as pd

    columns = (
        "id", "quantity", "limit", "side", "judged_by", "nominal", "corners", "rss", "yield_held",
        "yield_low", "margin", "margin_share", "verdict", "main_cause", "standing",
    )  # fmt: skip
    table = [{name: getattr(row, name) for name in columns} for row in rows]
    return pd.DataFrame(table, columns=list(columns))


def corner_frame(corners: Corners) -> pd.DataFrame:
    """The corner table: a row per quantity with its extremes and where each lies."""
    import pandas as pd

    return pd.DataFrame(
        {
            name: {
                "low": found.low.value,
                "high": found.high.value,
                "extreme_at": "interior" if found.interior else "corner",
                **{f"low_at.{key}": value for key, value in found.low.at.items()},
                **{f"high_at.{key}": value for key, value in found.high.at.items()},
            }
            for name, found in corners.ranges.items()
        }
    ).T.rename_axis("quantity")


def estimates_frame(estimates: Mapping[str, Estimates]) -> pd.DataFrame:
    """The spread table of a run: a row per quantity and place, every figure followed by its 95 % interval."""
    import pandas as pd

    rows = {
        (name, place): {
            **found.mean.named("mean"),
            "sd": found.sd,
            **{
                key: value
                for share, quantile in found.quantiles.items()
                for key, value in quantile.named(f"p{100 * share:g}").items()
            },
        }
        for name, each in estimates.items()
        for place, found in ((place, getattr(each, place)) for place in PLACES)
    }
    return pd.DataFrame.from_dict(rows, orient="index").rename_axis(["quantity", "place"])


def drift_frame(temperatures: Array, drifts: Mapping[str, Drift]) -> pd.DataFrame:
    """The drift table: a row per quantity and ambient temperature [K], nominal and worst case [SI]."""
    import pandas as pd

    columns = ("nominal", "low", "high")
    frames = {
        name: pd.DataFrame({column: getattr(found, column) for column in columns}, index=temperatures)
        for name, found in drifts.items()
    }
    return pd.concat(frames, names=["quantity", "temperature"])


def contrast_frame(rows: Sequence[Contrasted]) -> pd.DataFrame:
    """The contrast table: a row per topology; one that cannot be built has its problem and nothing else."""
    import pandas as pd

    table = {
        row.topology: {
            "verdict": None if row.trial is None else row.trial.verdict.outcome,
            **({} if row.trial is None else row.trial.figures),
            "problem": row.problem,
        }
        for row in rows
    }
    return pd.DataFrame.from_dict(table, orient="index").rename_axis("topology")
