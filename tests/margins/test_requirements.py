"""Requirements as margins: the sign is the verdict, by whichever method judges."""

from __future__ import annotations

from math import isnan

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from biasband.circuit.quantities import vocabulary
from biasband.margins.records import Evidence, Margin
from biasband.margins.requirements import joint_yield, requirement_margins
from biasband.stage import Requirement
from margins.evidence import QUANTITY, evidence, requirement

WORDS = vocabulary(("RB", "RC"))


def row(asked: Requirement, found: Evidence) -> Margin:
    """The one row of a requirement with one limit."""
    (only,) = requirement_margins((asked,), WORDS, found)
    return only


VOLTS = st.floats(-10.0, 10.0)


@settings(deadline=None)
@given(
    side=st.sampled_from(["at_least", "at_most"]),
    method=st.sampled_from(["corners", "rss", "yield"]),
    limit=VOLTS,
    nominal=VOLTS,
    width=st.tuples(*[st.floats(0.0, 5.0)] * 4),
    seed=st.integers(0, 9),
    required=st.sampled_from([0.5, 0.9, 0.95]),
)
def test_margin_sign_is_the_verdict(side, method, limit, nominal, width, seed, required):
    corners = (nominal - width[0], nominal + width[1])
    rss = (nominal - width[2], nominal + width[3])
    boards = np.random.default_rng(seed).uniform(*corners, 100)
    found = row(
        requirement(**{side: limit}, judged_by=method, yield_at_least=required),
        evidence(nominal=nominal, corners=corners, rss=rss, boards=boards),
    )
    # What passes, said by plain comparisons; an RSS limit outside the corners is judged at the corner.
    low, high = max(rss[0], corners[0]), min(rss[1], corners[1])
    passes = {
        ("corners", "at_least"): corners[0] >= limit,
        ("corners", "at_most"): corners[1] <= limit,
        ("rss", "at_least"): low >= limit,
        ("rss", "at_most"): high <= limit,
        ("yield", "at_least"): found.yield_low >= required,
        ("yield", "at_most"): found.yield_low >= required,
    }[method, side]
    assert (found.margin >= 0.0) is passes
    assert found.verdict == ("pass" if passes else "fail")
    held = np.mean(boards >= limit if side == "at_least" else boards <= limit)
    assert found.yield_held == pytest.approx(held, abs=1e-12)
    fails_at_nominal = nominal <= limit if side == "at_least" else nominal >= limit
    assert (found.margin_share is None) is fails_at_nominal
    if found.margin_share is not None:
        assert found.margin_share == pytest.approx(found.margin / abs(nominal - limit), rel=1e-12)


@pytest.mark.parametrize("method", ["corners", "rss", "yield"])
@pytest.mark.parametrize(("side", "limit"), [("at_least", 3.0), ("at_most", 7.0)])
def test_exactly_on_the_limit_passes(method, side, limit):
    found = row(
        requirement(**{side: limit}, judged_by=method, yield_at_least=0.9),
        evidence(nominal=5.0, corners=(3.0, 7.0), boards=([3.0] * 100, [7.0] * 100)),
    )
    assert found.margin == 0.0
    assert found.verdict == "pass"


def test_both_limits_are_two_rows():
    rows = requirement_margins(
        (requirement(at_least=3.0, at_most=7.0),), WORDS, evidence(nominal=5.0, corners=(2.5, 6.5))
    )
    assert [(r.side, r.limit, r.corners, r.margin, r.verdict) for r in rows] == [
        ("at_least", 3.0, 2.5, -0.5, "fail"),
        ("at_most", 7.0, 6.5, 0.5, "pass"),
    ]
    assert [r.main_cause for r in rows] == ["gain", "RB"]
    assert [r.worst.at["gain"] for r in rows] == [50.0, 200.0]


def test_share_is_of_the_distance_from_nominal_to_the_limit():
    found = row(requirement(at_least=3.0), evidence(nominal=5.0, corners=(3.5, 7.0)))
    assert found.margin_share == pytest.approx(0.5 / 2.0, rel=1e-12)


@pytest.mark.parametrize("nominal", [3.0, 2.9])
def test_share_is_none_where_nominal_is_on_or_beyond_the_limit(nominal):
    found = row(requirement(at_least=3.0), evidence(nominal=nominal, corners=(2.5, 7.0)))
    assert found.margin_share is None
    assert found.verdict == "fail"


def test_at_least_is_judged_on_the_lowest_in_use_and_at_most_on_the_highest():
    found = evidence(nominal=5.0, corners=(0.0, 10.0), boards=([4.0, 2.0, 4.0, 4.0], [6.0, 6.0, 8.0, 8.0]))
    low, high = requirement_margins(
        (requirement(at_least=3.0, at_most=7.0, judged_by="yield", yield_at_least=0.1),), WORDS, found
    )
    assert low.yield_held == 0.75
    assert high.yield_held == 0.5


def binomial_bound(held: int, boards: int) -> float:
    """The one-sided lower 95 % Clopper–Pearson bound, by bisection of the binomial tail."""
    from scipy.stats import binom

    low, high = 0.0, 1.0
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if binom.sf(held - 1, boards, middle) < 0.05 else (low, middle)
    return low if held else 0.0


@pytest.mark.parametrize(("boards", "required"), [(500, 0.95), (2000, 0.9973)])
def test_yield_margin_changes_its_sign_where_the_bound_falls_below_what_is_required(boards, required):
    for failures in range(40):
        values = np.linspace(3.0, 4.0, boards)
        values[:failures] = np.linspace(2.0, 2.9, failures)
        found = row(
            requirement(at_least=3.0, judged_by="yield", yield_at_least=required),
            evidence(nominal=3.5, corners=(2.0, 4.0), boards=np.random.default_rng(1).permutation(values)),
        )
        bound = binomial_bound(boards - failures, boards)
        assert found.yield_low == pytest.approx(bound, abs=1e-9)  # a bisection
        assert (found.verdict == "pass") is (bound >= required), failures


def test_too_few_boards_fail_and_say_so():
    found = row(
        requirement(at_least=3.0, judged_by="yield", yield_at_least=0.9973),
        evidence(nominal=5.0, corners=(4.0, 6.0), boards=[5.0] * 1000),  # 1108 are needed: 0.9973^N < 5 %
    )
    assert isnan(found.margin)
    assert found.verdict == "fail"
    assert any("1000 boards are too few" in note and "99.73 %" in note for note in found.notes)


def test_just_enough_boards_without_a_failure_pass():
    # 0.9973^1108 = 0.0500: the first N at which no failure shows 99.73 %.
    for boards, verdict in ((1107, "fail"), (1109, "pass")):
        found = row(
            requirement(at_least=3.0, judged_by="yield", yield_at_least=0.9973),
            evidence(nominal=5.0, corners=(4.0, 6.0), boards=[5.0] * boards),
        )
        assert found.verdict == verdict


@settings(deadline=None)
@given(
    failures=st.integers(0, 300),
    boards_per_batch=st.sampled_from([1, 7, 10, 200]),
    required=st.sampled_from([0.5, 0.9, 0.95]),
)
def test_margin_sign_is_the_verdict_where_boards_come_in_batches(failures, boards_per_batch, required):
    values = np.full(3000, 3.5)
    values[:failures] = np.linspace(2.0, 2.9, failures)
    found = row(
        requirement(at_least=3.0, judged_by="yield", yield_at_least=required),
        evidence(nominal=3.5, corners=(2.0, 4.0), boards=values, boards_per_batch=boards_per_batch),
    )
    assert (found.margin >= 0.0) is (found.verdict == "pass") is (found.yield_low >= required)
    assert found.yield_held == pytest.approx(1.0 - failures / 3000, abs=1e-12)  # boards, as ever


def test_bound_of_batches_that_are_alike_is_that_of_as_many_independent_draws():
    # 100 batches of 20 boards alike, 3 of them bad: no more is known than from 100 boards, 3 of them bad.
    batches = np.full(100, 3.5)
    batches[[4, 50, 99]] = 2.0
    found = row(
        requirement(at_least=3.0),
        evidence(
            nominal=3.5, corners=(2.0, 4.0), boards=np.repeat(batches, 20), boards_per_batch=20
        ),
    )
    assert found.yield_low == pytest.approx(binomial_bound(97, 100), abs=1e-9)  # a bisection


def test_too_few_batches_fail_and_say_so_however_many_the_boards():
    # 58 batches show no 95 %, 59 do: 0.95^59 < 5 % (Wilks).
    for batches, verdict in ((58, "fail"), (59, "pass")):
        found = row(
            requirement(at_least=3.0, judged_by="yield", yield_at_least=0.95),
            evidence(nominal=5.0, corners=(4.0, 6.0), boards=[5.0] * (100 * batches), boards_per_batch=100),
        )
        assert found.verdict == verdict
        told = [note for note in found.notes if "too few" in note]
        assert told == ([f"{100 * batches} boards in {batches} batches are too few to show a yield of 95 %"]
                        if verdict == "fail" else [])


def test_unsolved_board_is_a_failed_board():
    boards = [5.0] * 998 + [np.nan] * 2
    found = row(
        requirement(at_least=3.0, judged_by="yield", yield_at_least=0.9),
        evidence(nominal=5.0, corners=(4.0, 6.0), boards=boards),
    )
    assert found.yield_held == pytest.approx(0.998, abs=1e-12)
    few = row(
        requirement(at_least=3.0, judged_by="yield", yield_at_least=0.95),
        evidence(nominal=5.0, corners=(4.0, 6.0), boards=[5.0] * 80 + [np.nan] * 20),
    )
    assert few.verdict == "fail"


def test_pass_by_yield_that_fails_at_the_corners_is_told_apart():
    found = evidence(nominal=5.0, corners=(2.0, 8.0), boards=[5.0] * 1000)
    by_yield = row(requirement(at_least=3.0, judged_by="yield", yield_at_least=0.9), found)
    by_corners = row(requirement(at_least=3.0), found)
    assert by_yield.verdict == "pass" and by_yield.only_by_method
    assert not by_yield.passes_at_corners
    assert by_corners.verdict == "fail" and not by_corners.only_by_method


def test_rss_outside_the_corners_is_judged_at_the_corner_and_flagged():
    found = evidence(nominal=5.0, corners=(3.5, 6.5), rss=(2.5, 7.5))
    by_rss = row(requirement(at_least=3.0, judged_by="rss"), found)
    assert by_rss.margin == 0.5 and by_rss.rss == 2.5
    assert any("outside the corners" in note and "judged at the corner" in note for note in by_rss.notes)
    assert any("outside the corners" in note for note in row(requirement(at_least=3.0), found).notes)


def test_unsolved_rss_fails():
    found = evidence(nominal=5.0, corners=(3.5, 6.5), rss=(np.nan, np.nan))
    assert row(requirement(at_least=3.0, judged_by="rss"), found).verdict == "fail"


def inverting(**more):
    """Evidence on an inverting gain: −100, from −140 to −80."""
    return evidence(
        nominal=-100.0, corners=(-140.0, -80.0), rss=(-130.0, -90.0), quantity="voltage_gain",
        boards=([-140.0] * 200, [-80.0] * 200), **more,
    )  # fmt: skip


@pytest.mark.parametrize(
    ("asked", "worst", "rss", "margin"),
    [
        ({"at_least": 70.0}, 80.0, 90.0, 10.0),
        ({"at_most": 150.0}, 140.0, 130.0, 10.0),
        ({"at_most": 120.0}, 140.0, 130.0, -20.0),
    ],
)
def test_inverting_gain_is_judged_by_magnitude(asked, worst, rss, margin):
    found = row(Requirement(id="R-2", quantity="voltage_gain", **asked), inverting())
    assert (found.nominal, found.corners, found.rss, found.margin) == (100.0, worst, rss, margin)
    assert any("inverting" in note for note in found.notes)


def test_inverting_gain_by_yield_and_rss():
    for method, margin in (("yield", 10.0), ("rss", 20.0)):
        asked = Requirement(
            id="R-2", quantity="voltage_gain", at_least=70.0, judged_by=method, yield_at_least=0.9
        )
        assert row(asked, inverting()).margin == margin


def test_negative_node_voltage_is_not_judged_by_magnitude():
    found = row(requirement(at_least=-6.0), evidence(nominal=-5.0, corners=(-7.0, -3.0)))
    assert (found.corners, found.margin, found.verdict) == (-7.0, -1.0, "fail")


def test_joint_yield_is_the_share_that_holds_every_limit():
    found = evidence(
        nominal=5.0, corners=(0.0, 10.0), boards=([4.0, 2.0, 4.0, np.nan, 4.0], [6.0, 6.0, 8.0, np.nan, 6.0])
    )
    both = (requirement(at_least=3.0), requirement(at_most=7.0))
    # Board 1 falls below 3, board 2 rises above 7, board 3 did not solve.
    assert joint_yield(both, WORDS, found) == pytest.approx(2 / 5, abs=1e-12)
    assert joint_yield((), WORDS, found) == 1.0


def test_row_carries_what_the_requirement_says():
    found = row(
        requirement(at_least=3.0, judged_by="yield", yield_at_least=0.99, reason="next stage"),
        evidence(nominal=5.0, corners=(4.0, 6.0), boards=[5.0] * 1000),
    )
    assert (found.id, found.quantity, found.reason) == ("R-1", QUANTITY, "next stage")
    assert (found.judged_by, found.yield_at_least, found.standing) == ("yield", 0.99, False)
