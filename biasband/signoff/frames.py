"""Results as pandas DataFrames, SI units, for notebooks and further work."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from biasband.margins.records import Margin
from biasband.variation.corners import Corners
from biasband.variation.sampling import QUANTILES, Spread

if TYPE_CHECKING:
    import pandas as pd

    from biasband.circuit.scenarios import Array
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


def spread_frame(spread: Mapping[str, Spread]) -> pd.DataFrame:
    """The spread table: a row per quantity and place (nominal use, lowest, highest in use)."""
    import pandas as pd

    places = ("nominal_use", "lowest_in_use", "highest_in_use")
    rows = {
        (name, place): {
            "mean": sample.mean,
            "sd": sample.sd,
            **{f"p{100 * share:g}": sample.quantile(share) for share in QUANTILES},
        }
        for name, found in spread.items()
        for place, sample in ((place, getattr(found, place)) for place in places)
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
