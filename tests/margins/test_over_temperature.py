"""Where a limit first fails: found between the points of a walk, not on them."""

from __future__ import annotations

import math
from collections.abc import Callable

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from biasband.circuit.operating_point import Region
from biasband.circuit.quantities import Quantity
from biasband.margins.checks import standing_checks
from biasband.margins.limits import HeldLimit, held_limits
from biasband.margins.over_temperature import EXACT, Failure, Seen, first_failure
from biasband.quantity import Kind
from biasband.stage import Requirement
from biasband.variation.corners import Corners, Extreme, Range
from tests.variation.stages import coupled, words

NAN = math.nan


def walk_of(margin: Callable[[float], float], temperatures: list[float]) -> list[Seen]:
    """What is seen of a margin at the temperatures."""
    return [Seen(T, margin(T)) for T in temperatures]


def no_look(temperature: float) -> Seen:
    """Nothing may be asked between the points."""
    raise AssertionError(f"looked at {temperature}")


def all_solved(inner: float, outer: float) -> float:
    """Nothing may be asked about lost operating points."""
    raise AssertionError(f"asked from {inner} to {outer}")


@settings(deadline=None)  # the first search loads scipy.optimize
@given(root=st.floats(301.0, 349.0), bend=st.floats(0.1, 3.0))
def test_crossing_is_found_off_the_grid_to_a_ten_thousandth_of_a_kelvin(root: float, bend: float) -> None:
    def margin(T: float) -> float:
        return math.copysign(abs(root - T) ** bend, root - T)

    found = first_failure(
        walk_of(margin, [300.0, 310.0, 330.0, 350.0]), lambda T: Seen(T, margin(T)), all_solved
    )
    assert found.ending == "fails"
    assert found.temperature == pytest.approx(root, abs=2 * EXACT)


def test_walk_downwards_finds_the_first_one_from_its_start() -> None:
    def margin(T: float) -> float:
        return (T - 283.3) * (T - 261.7)  # negative between the two

    found = first_failure(
        walk_of(margin, [300.0, 290.0, 280.0, 270.0, 260.0]), lambda T: Seen(T, margin(T)), all_solved
    )
    assert found.ending == "fails"
    assert found.temperature == pytest.approx(283.3, abs=2 * EXACT)


def test_what_fails_and_holds_again_within_a_step_is_not_seen() -> None:
    found = first_failure(walk_of(lambda T: (T - 304.0) * (T - 306.0), [300.0, 310.0]), no_look, all_solved)
    assert found.ending == "holds" and math.isnan(found.temperature)


def test_limit_that_is_just_met_holds() -> None:
    assert first_failure(walk_of(lambda T: 0.0, [300.0, 310.0]), no_look, all_solved).ending == "holds"


def test_limit_just_met_at_a_point_and_then_not_fails_there() -> None:
    found = first_failure(
        walk_of(lambda T: 300.0 - T, [300.0, 310.0]), lambda T: Seen(T, 300.0 - T), all_solved
    )
    assert found == Failure("fails", pytest.approx(300.0, abs=2 * EXACT))


def test_failing_start_is_said_at_once() -> None:
    found = first_failure([Seen(298.15, -0.1), Seen(310.0, 1.0)], no_look, all_solved)
    assert found == Failure("fails at start", 298.15)


@pytest.mark.parametrize(("region", "ending"), [(Region.RUNAWAY, "runaway"), (Region.UNSOLVED, "unsolved")])
def test_start_without_an_operating_point_is_named(region: Region, ending: str) -> None:
    assert first_failure([Seen(298.15, NAN, region)], no_look, all_solved) == Failure(ending, 298.15)


def test_margin_that_is_not_known_is_no_pass_and_no_fail() -> None:
    assert first_failure([Seen(298.15, NAN), Seen(310.0, NAN)], no_look, all_solved).ending == "not known"

    def look(T: float) -> Seen:
        return Seen(T, 1.0 if T < 305.0 else NAN)

    found = first_failure([look(300.0), look(310.0)], look, all_solved)
    assert found.ending == "not known"
    assert found.temperature == pytest.approx(305.0, abs=2 * EXACT)


def test_walk_of_one_point_is_none() -> None:
    assert first_failure([Seen(298.15, 1.0)], no_look, all_solved).ending == "not swept"


@pytest.mark.parametrize("onset", [302.0, 309.99])
def test_onset_of_runaway_is_the_failure_of_a_limit_that_holds_up_to_it(onset: float) -> None:
    def look(T: float) -> Seen:
        return Seen(T, 5.0) if T < onset else Seen(T, NAN, Region.RUNAWAY)

    found = first_failure([look(300.0), look(310.0)], look, lambda inner, outer: onset - EXACT)
    assert found == Failure("runaway", onset - EXACT)


def test_limit_crossed_on_the_way_to_runaway_fails_before_it() -> None:
    def look(T: float) -> Seen:
        return Seen(T, 304.0 - T) if T < 308.0 else Seen(T, NAN, Region.RUNAWAY)

    asked: list[tuple[float, float]] = []

    def last_point(inner: float, outer: float) -> float:
        asked.append((inner, outer))
        return 308.0 - EXACT

    found = first_failure([look(T) for T in (300.0, 303.0, 310.0)], look, last_point)
    assert found.ending == "fails"
    assert found.temperature == pytest.approx(304.0, abs=2 * EXACT)
    assert asked == [(303.0, 310.0)]


# --- limits as the worst case meets them -------------------------------------------------------------


def extreme(value: float) -> Extreme:
    """An extreme somewhere."""
    return Extreme(value, {}, {}, interior=False)


def found(name: str, low: float, high: float, **regions: int) -> Corners:
    """Corners with one range."""
    counted = {Region[region]: count for region, count in regions.items()} or {Region.ACTIVE: 2}
    return Corners({name: Range(extreme(low), extreme(high))}, 2, counted, {})


def held(requirement: Requirement, nominal: float) -> list[HeldLimit]:
    """The limits of one requirement, on the vocabulary of a divider."""
    of = coupled()
    standing = standing_checks(of, cut_off=1e-6)
    limits = held_limits([requirement], standing, words(of), {requirement.quantity: nominal})
    return [limit for limit in limits if not limit.standing]


def test_each_limit_is_held_against_its_own_end_of_the_range() -> None:
    wanted = Requirement(id="R-1", quantity="collector_voltage", at_least=3.0, at_most=7.0)
    at_least, at_most = held(wanted, 5.0)
    corners = found("collector_voltage", 2.5, 6.0)
    assert at_least.margin(corners) == -0.5
    assert at_most.margin(corners) == 1.0
    assert (at_least.side, at_least.limit, at_most.side, at_most.limit) == ("at_least", 3.0, "at_most", 7.0)


@pytest.mark.parametrize(
    ("nominal", "low", "high", "margins"),
    # |gain| from 80 to 140 against 100 and 150: short by 20, 10 to spare; whatever its sign.
    [(-110.0, -140.0, -80.0, [-20.0, 10.0]), (110.0, 80.0, 140.0, [-20.0, 10.0])],
)
def test_inverting_gain_is_held_by_its_magnitude(
    nominal: float, low: float, high: float, margins: list[float]
) -> None:
    wanted = Requirement(id="R-1", quantity="voltage_gain", at_least=100.0, at_most=150.0)
    limits = held(wanted, nominal)
    assert [limit.margin(found("voltage_gain", low, high)) for limit in limits] == margins
    assert [limit.limit for limit in limits] == [100.0, 150.0]


@pytest.mark.parametrize("region", ["RUNAWAY", "UNSOLVED"])
def test_no_worst_case_is_known_where_a_corner_is_no_operating_point(region: str) -> None:
    wanted = Requirement(id="R-1", quantity="collector_current", at_most=1.0)
    corners = found("collector_current", 1e-3, 2e-3, ACTIVE=1, **{region: 1})
    assert math.isnan(held(wanted, 1e-3)[0].margin(corners))


def test_saturated_corner_has_a_worst_case() -> None:
    wanted = Requirement(id="R-1", quantity="collector_current", at_most=1.0)
    corners = found("collector_current", 0.25, 0.5, ACTIVE=1, SATURATED=1)
    assert held(wanted, 1e-3)[0].margin(corners) == 0.5


def test_every_check_made_is_held_by_its_slack() -> None:
    of = coupled()
    standing = standing_checks(of, cut_off=1e-6)
    limits = held_limits([], standing, words(of), {})
    assert [limit.quantity for limit in limits] == [check.name for check in standing.made]
    assert all(limit.standing and math.isnan(limit.limit) for limit in limits)
    slack: Quantity = limits[0].measure
    assert limits[0].margin(found(slack.name, -0.25, 3.0)) == -0.25
    assert limits[0].kind is Kind.VOLTAGE
