"""Boards beyond the corner limits: found, said, and the limits moved to them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from variation.stages import coupled, ideal, limits, some, stage

from biasband.boards.draws import coordinates
from biasband.boards.in_use import in_use
from biasband.boards.outside import Farthest, extended
from biasband.margins.holding import hold, looked_into
from biasband.stage import Requirement
from biasband.variation import corners as cornering
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current
from biasband.variation.points_of_use import points_of_use


def peaked():
    """A stage whose highest power lies inside the box: (18/2)²/2200 = 36.8 mW near h_FE 110."""
    return stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 100.0, 200.0)), 18.0)


@pytest.fixture
def blind(monkeypatch):
    """Corners that are not searched inside: what the vertices give is all."""
    monkeypatch.setattr(cornering, "search", lambda family, climbs, measures, *, cut_off: climbs)
    monkeypatch.setattr(cornering, "polish", lambda family, climbs, measures, *, cut_off: climbs)


def test_limit_that_the_search_missed_is_moved_to_the_worst_board(blind):
    of = replace(peaked(), requirements=(Requirement(id="R-1", quantity="transistor_power", at_most=0.0365),))
    held = hold(of, looked_into(of), boards=2000, seed=1)
    missed = [each for each in held.evidence.outside if each.measure == "transistor_power"]
    board, top = missed[0].board, held.evidence.boards.spread["transistor_power"].highest_in_use
    assert missed[0].value == top.highest == top.values[board]
    high = held.evidence.corners.ranges["transistor_power"].high
    assert high.interior and high.value == top.highest
    assert high.at["gain"] == pytest.approx(112.0, rel=0.05)  # half of 18 V stands there; a flat top
    row = next(row for row in held.rows if row.id == "R-1")
    assert row.corners == high.value
    assert row.verdict == "fail"  # at the vertices alone, 33.2 mW at most, it would have passed


def test_nothing_is_moved_where_every_board_lies_inside():
    of = peaked()
    assert hold(of, looked_into(of), boards=2000, seed=1).evidence.outside == ()


@pytest.mark.parametrize("side", ["low", "high"])
def test_board_is_placed_on_the_axes_where_its_parts_are(side):
    of, name = coupled(), "collector_voltage"
    measures, cut_off = some(of, name), cut_off_current(of)
    points, found = points_of_use(of), corners(of, measures, cut_off=cut_off)
    drawn = coordinates(of, slice(0, 500), seed=1)
    _, lowest, highest = in_use(of, drawn, measures, points, cut_off=cut_off).values[name]
    low, high = int(np.argmin(lowest)), int(np.argmax(highest))
    # Corners as if the search had ended at nominal, so that these boards lie outside.
    narrow = replace(found.ranges[name], **{side: replace(getattr(found.ranges[name], side), value=4.5)})
    wide = extended(
        of,
        replace(found, ranges={name: narrow}),
        measures,
        points,
        {name: Farthest(float(lowest[low]), float(highest[high]), low, high)},
        lambda board: {key: x[board : board + 1] for key, x in drawn.items()},
        cut_off=cut_off,
    )
    extreme = getattr(wide.corners.ranges[name], side)
    assert [each.board for each in wide.outside] == [low if side == "low" else high]
    assert set(extreme.coordinates) == set(found.ranges[name].low.coordinates)
    again = cornering.evaluate(
        of, {axis: np.array([x]) for axis, x in extreme.coordinates.items()}, measures, cut_off=cut_off
    )
    value = float(getattr(again, side)[name][0])
    # Between its limits a part is placed linearly in its whole, which is not quite linear: 1e-5 of the volts.
    assert value == pytest.approx(extreme.value, abs=1e-4)
