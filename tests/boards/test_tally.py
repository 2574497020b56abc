"""Tallies: whole numbers that merge to the same bytes in any order and grouping, whatever the boards show."""

from __future__ import annotations

import bisect
from functools import reduce
from math import inf, nan

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.boards.counting import Counter, Moment, tally
from biasband.boards.in_use import InUse
from biasband.boards.tally import BINS, STEPS, Bound, Scale, Tally
from biasband.circuit.operating_point import Region
from boards.tallies import differences, shown, size

SCALES = {
    "ordinary": Scale(2.0, 5.0),
    "negative": Scale(-7.0, -6.5),
    "one value": Scale(5.0, 5.0),
    "no limits": Scale(nan, nan),
    "endless": Scale(0.0, inf),
    "zero": Scale(0.0, 0.0),
}

KINDS = ("inside", "at the limits", "beyond", "far beyond", "constant", "with NaN", "all NaN", "infinite")


def values_of(kind: str, scale: Scale, count: int, random: np.random.Generator) -> np.ndarray:
    """What boards may show of a measure with these corner limits."""
    low, high = (scale.low, scale.high) if np.isfinite([scale.low, scale.high]).all() else (-1.0, 1.0)
    width = max(high - low, 1e-3)
    plain = random.uniform(low, high, count)
    step = scale.step or 1e-6
    edge = step * random.choice([0.0, 0.4, 0.49, 0.51, 0.6, 1.0], count)
    return {
        "inside": plain,
        "at the limits": np.where(random.random(count) < 0.5, low - edge, high + edge),
        "beyond": random.uniform(low - width, high + width, count),
        "far beyond": plain + width * random.choice([0.0, 1e3, 1e9, -1e15], count),
        "constant": np.full(count, 0.5 * (low + high)),
        "with NaN": np.where(random.random(count) < 0.3, nan, plain),
        "all NaN": np.full(count, nan),
        "infinite": np.where(random.random(count) < 0.3, random.choice([inf, -inf], count), plain),
    }[kind]


def part(of: InUse, rows: slice) -> InUse:
    """The boards at `rows`; a scenario for each."""
    regions = np.zeros(len(Region), dtype=np.int64)
    regions[0] = rows.stop - rows.start
    return InUse({name: values[:, rows] for name, values in of.values.items()}, regions)


@st.composite
def cut_up(draw: st.DrawFn) -> tuple[Tally, list[Tally], Tally]:
    """The tally of some boards in one piece, those of its pieces in any order, and of all added up."""
    count, seed = draw(st.integers(1, 60)), draw(st.integers(0, 2**32))
    random = np.random.default_rng(seed)
    kinds = {name: draw(st.sampled_from(KINDS)) for name in SCALES}
    found = shown(
        **{name: np.stack([values_of(kinds[name], scale, count, random) for _ in range(3)])
           for name, scale in SCALES.items()}
    )  # fmt: skip
    optional = Bound("negative", high=-6.7, required=False)
    bounds = [Bound("ordinary", low=2.5), optional, Bound("zero", 0.0, 0.5)]
    moment = {bound.measure: (found.values[bound.measure][0],) * 2 for bound in bounds}
    cuts = sorted(draw(st.sets(st.integers(1, count - 1), max_size=8))) if count > 1 else []
    rows = [slice(a, b) for a, b in zip([0, *cuts], [*cuts, count], strict=True)]

    def now(at: slice) -> Moment:
        return {name: (low[at], high[at]) for name, (low, high) in moment.items()}

    def counted(at: slice) -> Tally:
        return tally(part(found, at), SCALES, first_board=at.start, bounds=bounds, moment=now(at))

    counter = Counter(SCALES, bounds)
    for each in rows:
        counter.add(part(found, each), first_board=each.start, moment=now(each))
    pieces = draw(st.permutations([counted(each) for each in rows]))
    return counted(slice(0, count)), pieces, counter.tally()


@given(boards=cut_up(), order=st.randoms(use_true_random=False))
def test_pieces_merge_to_the_bytes_of_the_whole_in_any_order_and_grouping(boards, order):
    whole, pieces, _ = boards
    assert differences(reduce(Tally.merged, pieces), whole) == []
    while len(pieces) > 1:  # pairs anywhere: a tree of any shape
        one, other = (pieces.pop(order.randrange(len(pieces))) for _ in range(2))
        pieces.append(one.merged(other))
    assert differences(pieces[0], whole) == []


@given(boards=cut_up())
def test_pieces_added_up_one_after_the_other_are_the_bytes_of_the_whole(boards):
    whole, _, added = boards
    assert differences(added, whole) == []


def test_value_half_a_step_below_the_limit_is_counted_alike_beside_one_that_is_far_below():
    scale = Scale(-(STEPS - 1.0), STEPS - 1.0)  # a step is 1
    near, far = np.array([-(STEPS - 1.0) - 0.4]), np.array([-1e9])
    alone = [tally(shown(x=each), {"x": scale}, first_board=k) for k, each in enumerate((near, far))]
    together = tally(shown(x=np.concatenate([near, far])), {"x": scale}, first_board=0)
    assert differences(alone[0].merged(alone[1]), together) == []


def test_of_equal_extremes_the_first_board_is_kept_and_of_nothing_none():
    values = np.array([[3.0, 2.0, 4.0, 2.0, 4.0, nan], [nan] * 6, [1.0, inf, 3.0, 1.0, 3.0, -inf]])
    found = tally(shown(x=values), {"x": Scale(0.0, 5.0)}, first_board=100)
    assert found.lowest_board.tolist() == [[101, -1, 100]]  # by eye
    assert found.highest_board.tolist() == [[102, -1, 102]]
    assert found.solved.tolist() == [[5, 0, 4]]
    assert found.lowest[0, ::2].tolist() == [2.0, 1.0]
    assert np.isnan(found.lowest[0, 1])
    later = tally(shown(x=values), {"x": Scale(0.0, 5.0)}, first_board=200)
    for merged in (found.merged(later), later.merged(found)):
        assert merged.lowest_board.tolist() == found.lowest_board.tolist()
        assert merged.highest_board.tolist() == found.highest_board.tolist()


@pytest.mark.parametrize("count", [10, 2**14, 2**15], ids=str)
@pytest.mark.parametrize("farthest", [1, STEPS, 7 * STEPS, 10**9, 10**15])
def test_sums_are_exact_for_any_number_of_boards_however_far_they_lie(count, farthest):
    # Limits at ±(STEPS − 1): a step is 1, so that whole values are their own steps, and Python adds them.
    whole = np.random.default_rng(count).integers(-farthest, farthest, count, endpoint=True)
    whole[:5] = farthest
    scale = Scale(-(STEPS - 1.0), STEPS - 1.0)
    found = tally(shown(x=whole.astype(float)), {"x": scale}, first_board=0)
    assert found.sums[0].tolist() == [sum(whole.tolist())] * 3
    assert found.squares[0].tolist() == [sum(each**2 for each in whole.tolist())] * 3


def test_boards_of_a_block_all_at_the_limits_are_summed_exactly():
    # The largest sum of squares of a block: 2^14·(2^19 − 1)² = 2^52 and a little less; 2^53 would round.
    limit = STEPS - 1
    found = tally(shown(x=np.full(2**14, float(limit))), {"x": Scale(-limit, limit)}, first_board=0)
    assert found.squares[0, 0] == 2**14 * limit**2 < 2**53


@given(
    seed=st.integers(0, 2**32), kind=st.sampled_from(KINDS), name=st.sampled_from(["ordinary", "negative"])
)
def test_every_value_is_counted_in_the_bin_that_it_lies_in(seed, kind, name):
    scale = SCALES[name]
    values = values_of(kind, scale, 40, np.random.default_rng(seed))
    edges = scale.edges().tolist()
    expected = [0] * (BINS + 2)
    for value in values[np.isfinite(values)]:
        expected[bisect.bisect_right(edges, value)] += 1  # below the first edge: 0; beyond the last: BINS + 1
    assert tally(shown(x=values), {"x": scale}, first_board=0).bins[0, 0].tolist() == expected


def test_edges_lie_around_the_corner_limits_and_a_bin_width_apart():
    scale = Scale(2.0, 5.0)
    edges = scale.edges()
    assert edges.size == BINS + 1
    # Within a step and a half, 3/2^20 each, of the limits; rounding of values below 8: 2 ulp, 2e-15.
    assert 2.0 - 1.5 * 3 / 2**20 * (1 + 1e-5) <= edges[0] < 2.0
    assert 5.0 < edges[-1] <= 5.0 + 1.5 * 3 / 2**20
    assert np.diff(edges) == pytest.approx(np.full(BINS, scale.bin_width), abs=2e-15)
    assert scale.bin_width == pytest.approx(3.0 / 4096, rel=2e-6)  # STEPS − 1 for STEPS


def test_limits_themselves_lie_inside_and_a_step_beyond_does_not():
    scale = Scale(2.0, 5.0)
    assert scale.contains(2.0, 5.0)
    assert scale.contains(2.0 - 0.4 * scale.step, 5.0 + 0.4 * scale.step)
    assert not scale.contains(2.0 - 0.6 * scale.step, 5.0)
    assert not scale.contains(2.0, 5.0 + 0.6 * scale.step)
    bins = tally(shown(x=np.array([2.0, 5.0])), {"x": scale}, first_board=0).bins[0, 0]
    assert np.flatnonzero(bins).tolist() == [1, BINS]


@pytest.mark.parametrize("low, high", [(5.0, 5.0), (5.0, np.nextafter(5.0, 6.0)), (-1e-9, -1e-9)])
def test_limits_that_coincide_leave_room_for_rounding_and_for_nothing_else(low, high):
    # A billionth of 5 V is far above what a solved value is off (1e-9 V and less), and far below any spread.
    scale = Scale(low, high)
    assert scale.contains(low - 1e-10 * abs(low), high + 1e-10 * abs(low))
    assert not scale.contains(low - 1e-8 * abs(low), high)
    assert not scale.contains(low, high + 1e-8 * abs(low))


@pytest.mark.parametrize(
    "low, high", [(nan, nan), (nan, 1.0), (-inf, inf), (0.0, inf), (inf, inf), (0.0, 0.0), (0.0, 1e-310)]
)
def test_without_limits_to_count_between_only_extremes_are_known(low, high):
    scale = Scale(low, high)
    assert scale.half == 0.0
    found = tally(shown(x=np.array([1.0, nan, 1e6, -inf])), {"x": scale}, first_board=0)
    assert found.solved[0].tolist() == [2] * 3
    assert (found.lowest[0, 0], found.highest[0, 0]) == (1.0, 1e6)
    assert found.sums[0].tolist() == found.squares[0].tolist() == [0, 0, 0]


@given(seed=st.integers(0, 2**32))
def test_held_counts_are_those_of_a_loop_over_boards(seed):
    random = np.random.default_rng(seed)
    count = 30
    found, moment = {}, {}
    for name in ("x", "y"):
        low = random.integers(0, 6, count).astype(float)
        high = low + random.integers(0, 4, count)
        low[random.random(count) < 0.2] = nan
        found[name] = np.stack([low, low, high])
        moment[name] = (low, 0.5 * (low + high))
    required = [Bound("x", low=2.0), Bound("x", high=5.0), Bound("y", 1.0, 6.0)]
    bounds, scales = [*required, Bound("y", high=1.0, required=False)], dict.fromkeys("xy", Scale(0.0, 9.0))
    counted = tally(shown(**found), scales, first_board=0, bounds=bounds, moment=moment)
    expected = [[0, 0] for _ in range(5)]
    for board in range(count):
        for column in range(2):
            held = []
            for bound in bounds:
                lows, highs = found[bound.measure][1:] if column == 0 else moment[bound.measure]
                held.append(bool(bound.low <= lows[board] and highs[board] <= bound.high))
            for row, each in enumerate([*held, all(held[:3])]):
                expected[row][column] += each
    assert counted.held.tolist() == expected


def test_size_of_a_tally_does_not_depend_on_the_boards():
    random = np.random.default_rng(1)
    few, many = (
        tally(shown(x=random.uniform(2, 5, count)), {"x": SCALES["ordinary"]}, first_board=0)
        for count in (1, 2**14)
    )
    assert size(few) == size(many) == size(few.merged(many))
    # By hand: 3 places of BINS + 2 counts, seven tables of 3, one row of 2 that hold, regions: 8 bytes each.
    assert size(few) == 8 * (3 * (BINS + 2) + 7 * 3 + 2 + len(Region))
