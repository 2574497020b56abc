"""Points of use: nominal use and every combination of what a board meets in its life."""

from __future__ import annotations

from itertools import product

import pytest

from biasband.stage import Limits, Supply
from biasband.variation.points_of_use import points_of_use
from variation.stages import ROOM, limits, real, stage

SPLIT = {"RB": 100e3, "RC": 4.7e3, "RE": 8.2e3}
EXACT = Limits.exactly(9.0)
SPANS = limits(8.1, 9.0, 9.9)


def points(*, supply=EXACT, ripple=0.0, negative=False, ambient=False, varies="in use"):
    """The coordinates of the points of use of a split-supply stage."""
    made = stage(
        "split-supply",
        SPLIT,
        real(),
        Supply(voltage=supply, ripple_peak=ripple, varies=varies),
        negative_supply=Supply(voltage=limits(-9.9, -9.0, -8.1) if negative else Limits.exactly(-9.0)),
        ambient=limits(263.15, ROOM, 323.15) if ambient else Limits.exactly(ROOM),
    )
    return [dict(point.coordinates) for point in points_of_use(made)]


@pytest.mark.parametrize("supply", [EXACT, SPANS])
@pytest.mark.parametrize("ripple", [0.0, 0.05])
@pytest.mark.parametrize("negative", [False, True])
@pytest.mark.parametrize("ambient", [False, True])
def test_one_nominal_point_and_two_per_thing_that_varies(supply, ripple, negative, ambient):
    # physics.md 4: supply and ripple together; 2 × 2 with ambient, 2 × 2 × 2 with a negative supply.
    found = points(supply=supply, ripple=ripple, negative=negative, ambient=ambient)
    moving = [supply is SPANS or ripple > 0.0, negative, ambient]
    assert len(found) == 1 + (2 ** sum(moving) if any(moving) else 0)
    assert found[0] == {}


def test_full_set_is_one_and_eight_with_supply_and_ripple_together():
    found = points(supply=SPANS, ripple=0.05, negative=True, ambient=True)
    expected = [
        {"temperature": t, "negative_supply": n, "supply": s, "ripple": s}
        for t, n, s in product((-1.0, 1.0), repeat=3)
    ]
    assert sorted(map(str, map(sorted, map(dict.items, found[1:])))) == sorted(
        map(str, map(sorted, map(dict.items, expected)))
    )


def test_supply_by_board_leaves_only_its_ripple_in_use():
    found = points(supply=SPANS, ripple=0.05, varies="by board")
    assert found == [{}, {"ripple": -1.0}, {"ripple": 1.0}]
