"""JSON of a spread: full precision in SI, stable keys, null for what is not known."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from biasband.boards.outside import Outside
from biasband.circuit.operating_point import Region
from biasband.show.export import as_text
from biasband.show.spread_json import spread_json
from biasband.signoff.goals import read_goal
from biasband.signoff.spread_study import SpreadStudy
from biasband.variation.rss import Interval
from tests.show.reviews import BOARDS, FAILING, HIVE
from tests.show.spreads import inverting, spread_of, unrequired

TOP = {
    "stage", "files", "biasband", "seed", "boards", "boards_per_batch", "sampling", "asked", "until",
    "ending", "partial", "points_of_use", "parts", "capacitors", "spread", "yields", "joint_yield", "causes",
    "variance_shares", "beyond", "outside", "rss", "inside_rss", "warnings",
}  # fmt: skip
FIGURES = {
    "mean", "mean_low", "mean_high", "sd", "lowest", "highest", "resolution",
    *(f"{name}{end}" for name in ("p0.135", "p50", "p99.865") for end in ("", "_low", "_high")),
}  # fmt: skip


def data(of: SpreadStudy) -> dict[str, Any]:
    """What a reader of the text gets; JSON has no NaN, and as_text refuses it."""
    return json.loads(as_text(spread_json(of)))  # type: ignore[no-any-return]


@pytest.mark.parametrize("name", [HIVE, FAILING, "ice_warner"])
def test_keys_are_those_that_were_promised(name: str) -> None:
    found = data(spread_of(name))
    assert set(found) == TOP
    assert all(set(found["spread"][quantity]) == {"nominal_use", "lowest_in_use", "highest_in_use"}
               for quantity in found["spread"] if quantity != "regions")  # fmt: skip
    assert set(found["spread"]["collector_voltage"]["nominal_use"]) == FIGURES


def test_figures_are_the_studys_to_the_last_digit() -> None:
    of = spread_of(HIVE)
    found, wanted = (
        data(of)["spread"]["collector_voltage"]["highest_in_use"],
        of.estimates["collector_voltage"],
    )
    median = wanted.highest_in_use.quantiles[0.5]
    assert (found["p50"], found["p50_low"], found["p50_high"]) == (
        median.value, median.interval.low, median.interval.high,
    )  # fmt: skip
    assert (found["sd"], found["highest"]) == (wanted.highest_in_use.sd, wanted.highest_in_use.highest)
    # No rank bounds the 99.865 % quantile of 2048 boards from above: 0.99865^2048 is more than 2.5 %.
    assert found["p99.865_high"] is None and found["p99.865_low"] is not None
    assert data(of)["spread"]["regions"] == {"active": 5 * BOARDS}


def test_yields_come_with_their_limits() -> None:
    of = spread_of(FAILING)
    found = data(of)
    first, held = found["yields"][0], of.yields[0]
    assert first == {
        "id": "L-1", "quantity": "collector_voltage", "limit": 3.0, "side": "at_least", "yield": held.boards,
        "yield_interval": [held.interval.low, held.interval.high], "yield_low": held.bound, "time": held.time,
    }  # fmt: skip
    assert found["joint_yield"]["yield"] == of.joint_yield.boards < held.boards
    assert found["inside_rss"] == dict(of.inside_rss)
    assert [each["standing"] for each in found["beyond"]] == ["seen"] * 3


def test_quasi_random_yield_has_no_interval() -> None:
    found = data(spread_of(FAILING, "quasi-random", 2000))
    assert (found["sampling"], found["asked"], found["boards"]) == ("quasi-random", 2000, 2048)
    assert found["yields"][0]["yield_interval"] == [None, None]
    assert found["yields"][0]["yield_low"] is None


def test_inverting_limit_is_the_one_that_was_required() -> None:
    assert [(each["limit"], each["side"]) for each in data(inverting())["yields"]] == [
        (87.0, "at_least"), (1000.0, "at_most"),
    ]  # fmt: skip


def test_stage_without_requirements_has_no_yields() -> None:
    found = data(unrequired())
    assert (found["yields"], found["joint_yield"], found["beyond"], found["inside_rss"]) == ([], None, [], {})


def test_run_says_how_it_ended() -> None:
    of = spread_of(HIVE)
    complete = data(of)
    told = ("seed", "boards", "asked", "until", "ending", "partial", "points_of_use", "boards_per_batch")
    assert [complete[key] for key in told] == [1, BOARDS, BOARDS, None, "complete", False, 5, 1]
    stopped = data(replace(of, ending="interrupted", goal=read_goal("yield ± 0.1 %")))
    assert (stopped["ending"], stopped["partial"], stopped["until"]) == ("interrupted", True, "yield ± 0.1 %")


def test_causes_and_shares_are_the_studys() -> None:
    of = spread_of(HIVE)
    found, shares = data(of), of.shares["collector_voltage"].lowest_in_use
    assert found["causes"]["collector_voltage"]["low"] == dict(of.causes["collector_voltage"].low)
    place = found["variance_shares"]["collector_voltage"]["lowest_in_use"]
    assert set(place) == {"variance", "first", "total", "shapley", "boards", "unsolved"}
    name, share = next(iter(shares.total.items()))
    assert place["total"][name] == {"value": share.value, "standard_error": share.standard_error}


def test_boards_outside_are_listed_and_warned_of() -> None:
    found = data(replace(spread_of(HIVE), outside=(Outside("collector_voltage", 7, 9.5, 9.0),)))
    assert found["outside"] == [{"measure": "collector_voltage", "board": 7, "value": 9.5, "limit": 9.0}]
    assert any("sampled board 7 reaches 9.5 V" in warning for warning in found["warnings"])


def test_what_is_not_known_is_null() -> None:
    of = spread_of(HIVE)
    nowhere = Interval(math.nan, math.inf)
    regions = np.zeros(len(Region), dtype=np.int64)
    lost = replace(
        of, rss={**of.rss, "collector_voltage": nowhere}, tallies=(replace(of.total, regions=regions),)
    )
    found = data(lost)
    assert found["rss"]["collector_voltage"] == {"low": None, "high": None}
    assert found["inside_rss"]["collector_voltage"] is None
    assert found["spread"]["regions"] == {}
