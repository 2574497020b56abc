"""Jobs: the same bytes however a run is cut up and whoever works on it, in memory that does not grow."""

from __future__ import annotations

import multiprocessing
import pickle
import tracemalloc
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from dataclasses import replace
from functools import cache, reduce
from math import nan

import numpy as np
import pytest
from scipy import stats
from variation.stages import (
    ROOM,
    coupled,
    ideal,
    limits,
    running_away,
    some,
    stage,
    with_resistor,
    with_resistors,
)

from biasband.boards import streams
from biasband.boards.draws import coordinates
from biasband.boards.in_use import PLACES
from biasband.boards.job import Job, merged, moments
from biasband.boards.quasi import Scrambled
from biasband.boards.running import in_order
from biasband.boards.streams import Plain, Source
from biasband.boards.summary import summary
from biasband.boards.tally import Bound, Scale, Tally
from biasband.circuit.operating_point import Region
from biasband.stage import Distribution, Limits, Stage
from biasband.variation.contributors import RIPPLE, TEMPERATURE, Coordinates
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current, evaluate
from biasband.variation.points_of_use import points_of_use
from boards.tallies import differences

MEASURES = ("collector_voltage", "transistor_power", "resistor_power.RC")
COUNT = 400


def job_of(of: Stage, source: Source, *names: str, bounds: tuple[Bound, ...] = (), **scales: Scale) -> Job:
    """A job whose measures are counted between their corner limits, unless told otherwise."""
    if set(names) - set(scales):
        ranges = corners(of, some(of, *names), cut_off=cut_off_current(of)).ranges
        scales = {name: Scale(ranges[name].low.value, ranges[name].high.value) for name in names} | scales
    scales = {name: scales[name] for name in names}
    return Job(of, scales, bounds, points_of_use(of), source, seed=1, cut_off=cut_off_current(of))


def done(job: Job) -> Tally:
    """A job done task after task."""
    return merged(map(job.work, range(job.source.tasks)))


def small(block: int, sequence: int) -> None:
    """Small blocks and tasks, in this process."""
    streams.BLOCK, streams.SEQUENCE = block, sequence


@cache
def awkward(sampling: str) -> Job:
    """A job with everything that makes merging hard: NaN boards, boards beyond the scale, NaN corners.

    Two boards in three run away at 70 °C.
    """
    of = running_away(Limits(low=ROOM, nominal=ROOM, high=343.15))
    of = with_resistors(of, tolerance=0.05)
    names = ("collector_current", "collector_voltage", "base_voltage", "resistor_power.RB", "supply_current")
    scales = {
        "collector_current": Scale(5e-4, 8e-4), "collector_voltage": Scale(nan, nan),
        "base_voltage": Scale(0.64, 0.64), "resistor_power.RB": Scale(1e-30, 2e-30),
        "supply_current": Scale(0.0, 1.0),
    }  # fmt: skip
    bounds = (Bound("collector_current", high=1.5e-3), Bound("collector_voltage", low=19.9))
    source = Plain(COUNT, seed=1) if sampling == "plain" else Scrambled.of(of, boards=COUNT, seed=1)
    return job_of(of, source, *names, bounds=bounds, **scales)


@cache
def ordinary(sampling: str, boards: int = COUNT) -> Job:
    """A job on a stage where everything varies, some of it by batch, with two limits."""
    of = replace(coupled(), boards_per_batch=7)
    of = with_resistor(of, "RC", distribution=Distribution(name="batch", within_batch=0.002))
    source = (
        Plain(boards, seed=1, batch_size=7)
        if sampling == "plain"
        else Scrambled.of(of, boards=boards, seed=1)
    )
    bounds = (Bound("collector_voltage", low=5.0), Bound("transistor_power", high=5.2e-3, required=False))
    return job_of(of, source, *MEASURES, bounds=bounds)


JOBS = {
    "ordinary, plain": lambda: ordinary("plain"),
    "ordinary, quasi-random": lambda: ordinary("quasi-random"),
    "awkward, plain": lambda: awkward("plain"),
    "awkward, quasi-random": lambda: awkward("quasi-random"),
}


@cache
def by_task(name: str) -> tuple[Tally, ...]:
    """The tallies of a job's tasks, with blocks and tasks as they are: one for plain boards."""
    job = JOBS[name]()
    return tuple(map(job.work, range(job.source.tasks)))


@cache
def whole(name: str) -> Tally:
    """A job's tally with blocks and tasks as they are."""
    return merged(iter(by_task(name)))


@pytest.fixture
def cut(monkeypatch):
    """Sets the boards of a block and of a task, for this test."""

    def to(block: int, sequence: int) -> None:
        monkeypatch.setattr(streams, "BLOCK", block)
        monkeypatch.setattr(streams, "SEQUENCE", sequence)

    return to


def test_awkward_job_is_awkward():
    found = whole("awkward, plain")
    assert 0 < found.solved[0, 2] < found.boards  # some run away when hot
    assert found.regions[Region.RUNAWAY] > 0
    assert found.bins[0, 2, -1] > 0  # beyond the scale
    assert found.sums[3, 0] > 2**63  # far beyond it
    assert 0 < found.held[-1, 0] < found.held[-1, 1] < found.boards


@pytest.mark.parametrize("block, sequence", [(400, 400), (64, 64), (64, 256), (31, 100), (133, 399)])
@pytest.mark.parametrize("name", ["ordinary, plain", "awkward, plain"])
def test_boards_of_a_block_and_of_a_task_do_not_matter(cut, name, block, sequence):
    expected = whole(name)
    cut(block, sequence)
    job = JOBS[name]()
    assert job.source.tasks == -(-COUNT // sequence)
    assert differences(done(job), expected) == []


@pytest.mark.parametrize("name", JOBS)
def test_order_and_grouping_of_tasks_do_not_matter(cut, name):
    expected, tallies = whole(name), by_task(name)
    if name.endswith("plain"):
        cut(64, 64)
        job = JOBS[name]()
        tallies = [job.work(task) for task in range(job.source.tasks)]
    assert len(tallies) > 5
    random = np.random.default_rng(1)
    for _ in range(5):
        pieces = [tallies[k] for k in random.permutation(len(tallies))]
        assert differences(reduce(Tally.merged, pieces), expected) == []
        middle = len(pieces) // 3
        halves = [reduce(Tally.merged, part) for part in (pieces[:middle], pieces[middle:])]
        assert differences(halves[1].merged(halves[0]), expected) == []


@pytest.mark.parametrize("name", JOBS)
def test_threads_do_not_matter(cut, name):
    expected = whole(name)
    cut(64, 128)
    job = JOBS[name]()
    with ThreadPoolExecutor(3) as threads:
        found = merged(in_order(job.work, job.source.tasks, executor=threads, ahead=6))
    assert differences(found, expected) == []


@pytest.fixture(scope="module")
def processes():
    """Two processes that begin with nothing of this one, as on another machine, with tasks of 128 boards."""
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(2, mp_context=context, initializer=small, initargs=(64, 128)) as pool:
        yield pool


@pytest.mark.parametrize("name", JOBS)
def test_two_processes_give_the_bytes_of_one(cut, processes, name):
    expected = whole(name)
    cut(64, 128)
    job = JOBS[name]()
    found = merged(in_order(job.work, job.source.tasks, executor=processes, ahead=4))
    assert differences(found, expected) == []


@pytest.mark.parametrize("name", JOBS)
def test_job_and_tally_travel(name):
    job, tally = JOBS[name](), whole(name)
    assert repr(pickle.loads(pickle.dumps(job))) == repr(job)  # NaN does not equal itself
    assert differences(pickle.loads(pickle.dumps(tally)), tally) == []


def test_every_block_is_kept_in_order_and_counted_all_the_same(cut):
    cut(64, 256)
    job, blocks = ordinary("plain"), []
    found = job.work(0, keep=blocks.append)
    assert [block.first for block in blocks] == [0, 64, 128, 192]
    assert differences(found, job.work(0)) == []


def test_seed_changes_the_boards():
    job = ordinary("plain")
    other = replace(job, source=replace(job.source, seed=2))
    assert "sums" in differences(done(other), whole("ordinary, plain"))


def test_longer_run_begins_with_the_boards_of_a_shorter_one(cut):
    cut(64, 128)
    few, many = (ordinary("plain", boards) for boards in (256, 1000))
    assert differences(merged(map(many.work, range(2))), done(few)) == []


# --- what is counted ----------------------------------------------------------------------------------


def every_board(job: Job) -> dict[str, np.ndarray]:
    """The values of all boards in use by measure, (3, N)."""
    blocks = [block.found.values for task in range(job.source.tasks) for block in job.solved(task)]
    return {name: np.concatenate([block[name] for block in blocks], axis=1) for name in job.scales}


def test_values_in_use_are_the_lowest_and_the_highest_of_all_points():
    job = ordinary("plain", 50)
    block = next(job.solved(0))
    met = [
        evaluate(job.stage, {**block.drawn, **point.coordinates}, job.measures, cut_off=0.0)
        for point in job.points
    ]
    lows = {name: [each.low[name] for each in met] for name in MEASURES}
    highs = {name: [each.high[name] for each in met] for name in MEASURES}
    assert np.any(lows["collector_voltage"][1] < highs["collector_voltage"][1])  # ripple moves it
    for name, found in block.found.values.items():
        assert np.array_equal(found, [lows[name][0], np.min(lows[name], axis=0), np.max(highs[name], axis=0)])


def test_figures_are_numpy_s_over_every_board(cut):
    cut(64, 256)
    job = ordinary("plain")
    values, total = every_board(job), done(job)
    for row, (name, scale) in enumerate(job.scales.items()):
        for place in range(len(PLACES)):
            found, expected = summary(total, scale, row, place), values[name][place]
            # Half a step for the mean, √½ of one for the deviation, a bin for quantiles (test_summary).
            assert found.mean == pytest.approx(np.mean(expected), abs=scale.step)
            assert found.sd == pytest.approx(np.std(expected, ddof=1), abs=scale.step)
            assert found.quantile(0.1) == pytest.approx(np.quantile(expected, 0.1), abs=scale.bin_width)
            assert (found.lowest, found.highest) == (expected.min(), expected.max())
            assert total.lowest_board[row, place] == np.argmin(expected)
            assert total.highest_board[row, place] == np.argmax(expected)


@pytest.mark.parametrize("name", ["ordinary, plain", "awkward, plain"])
def test_held_counts_are_those_of_a_loop_over_boards(cut, name):
    cut(32, 64)
    job, boards = JOBS[name](), 70
    measures = {bound.measure: job.measures[bound.measure] for bound in job.bounds}
    moment = moments(job.stage, slice(0, boards), seed=job.seed)

    def held(drawn: Coordinates, points: list[Coordinates]) -> list[bool]:
        """Whether one board holds each limit at these points, and all that are required."""
        found = [evaluate(job.stage, {**drawn, **point}, measures, cut_off=0.0) for point in points]
        each = [
            all(low <= one.low[name][0] and one.high[name][0] <= high for one in found)
            for name, low, high in ((bound.measure, bound.low, bound.high) for bound in job.bounds)
        ]
        return [*each, all(yes for yes, bound in zip(each, job.bounds, strict=True) if bound.required)]

    expected = np.zeros((3, 2), dtype=int)
    for board in range(boards):
        drawn = coordinates(job.stage, slice(board, board + 1), seed=1)
        now = {axis: values[board : board + 1] for axis, values in moment.items()}
        expected[:, 0] += held(drawn, [point.coordinates for point in job.points])
        expected[:, 1] += held(drawn, [now])
    assert np.all(expected[-1] > 0)
    assert np.all(expected[-1] < boards)
    assert done(replace(job, source=replace(job.source, boards=boards))).held.tolist() == expected.tolist()


def test_share_of_boards_is_less_than_the_share_of_time():
    # By hand: I_C = h_FE·(V − 0.7 V)/470 kΩ, V from 17 to 19 V in use, at most 100·17.8 V/470 kΩ. With
    # h_FE = 100 that is V up to 18.5 V: three quarters of the time, and no board always.
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(100.0), limits(17.0, 18.0, 19.0))
    bounds, count = (Bound("collector_current", high=100.0 * 17.8 / 470e3),), 4000
    held = done(job_of(of, Plain(count, seed=1), "collector_current", bounds=bounds)).held
    assert held[:, 0].tolist() == [0, 0]
    # A share of 4000 moments: √(p(1 − p)/N) = 0.007; four of them.
    assert held[0, 1] / count == pytest.approx(0.75, abs=4 * 0.007)


def test_share_of_boards_and_of_time_where_every_board_has_its_own_gain():
    # The same with h_FE from 90 to 110, half of them on each side of 100, evenly in the logarithm. Always:
    # where h_FE·18.3 V is at most 100·17.8 V. Now and then: V up to 0.7 V + 1780 V/h_FE, of the range of 2 V.
    of = stage(
        "base-resistor",
        {"RB": 470e3, "RC": 2.2e3},
        ideal(limits(90.0, 100.0, 110.0)),
        limits(17.0, 18.0, 19.0),
    )
    bounds, count = (Bound("collector_current", high=100.0 * 17.8 / 470e3),), 4000
    held = done(job_of(of, Plain(count, seed=1), "collector_current", bounds=bounds)).held
    below = np.exp(np.linspace(np.log(90.0), np.log(100.0), 100_001))
    gain = np.concatenate([below, np.exp(np.linspace(np.log(100.0), np.log(110.0), 100_001))])
    boards = np.mean(gain * 18.3 <= 1780.0)
    time = np.mean(np.clip((0.7 + 1780.0 / gain - 17.0) / 2.0, 0.0, 1.0))
    assert time - boards > 0.15  # far more than chance
    # A share of 4000: √(p(1 − p)/N) is 0.008 at most; four of them.
    assert (held[0] / count).tolist() == pytest.approx([boards, time], abs=4 * 0.008)


def test_board_is_held_at_a_moment_wherever_it_is_held_always():
    held = whole("ordinary, plain").held
    assert np.all(held[:, 0] <= held[:, 1])
    assert held[0].tolist() == held[-1].tolist()  # the other limit is not required


def test_without_limits_no_moment_is_solved(monkeypatch):
    monkeypatch.setattr("biasband.boards.job.moments", None)
    assert done(job_of(coupled(), Plain(10, seed=1), "base_voltage")).held.tolist() == [[10, 10]]


# --- random moments in use ----------------------------------------------------------------------------


def test_moments_are_uniform_between_the_limits_and_ripple_swings_like_a_sine():
    drawn = moments(coupled(), slice(0, 20_000), seed=1)
    assert set(drawn) == {"supply", "ripple", "temperature"}
    for name, values in drawn.items():
        assert values.min() >= -1.0 and values.max() <= 1.0
        law = stats.arcsine(-1.0, 2.0) if name == RIPPLE else stats.uniform(-1.0, 2.0)
        # Kolmogorov–Smirnov with a fixed seed; a wrong shape gives 1e-30 and less.
        assert stats.kstest(values, law.cdf).pvalue > 1e-3, name
        # 1/3 and 1/2; a variance of N such draws strays by less than √(2/N) = 1 %; five of them.
        assert np.var(values) == pytest.approx(law.var(), rel=5 * np.sqrt(2 / 20_000))


def test_moments_have_nothing_to_do_with_the_boards():
    of = replace(coupled(), supply=replace(coupled().supply, varies="by board"))
    drawn = {**coordinates(of, slice(0, 4000), seed=1)}
    drawn |= {f"moment {name}": values for name, values in moments(coupled(), slice(0, 4000), seed=1).items()}
    assert {"supply", "moment supply"} <= set(drawn)
    matrix = np.corrcoef(np.stack(list(drawn.values())))
    # Independent streams of 4000: 1/√4000 = 0.016; five of them.
    assert np.abs(matrix - np.eye(len(drawn))).max() < 5 / np.sqrt(4000)


def test_moment_of_a_board_does_not_depend_on_the_rows_around_it():
    all_, some_ = (moments(coupled(), slice(start, 100), seed=3)[TEMPERATURE] for start in (0, 37))
    assert all_[37:].tobytes() == some_.tobytes()


# --- boards in common ---------------------------------------------------------------------------------


@pytest.mark.parametrize("sampling", ["plain", "quasi-random"])
def test_two_designs_are_compared_on_the_same_boards(sampling):
    one = coupled()
    other = replace(with_resistor(one, "RC", value=4.3e3), title="with a larger R_C")
    source = {
        "plain": lambda of: Plain(512, 1),
        "quasi-random": lambda of: Scrambled.of(of, boards=512, seed=1),
    }
    jobs = [job_of(of, source[sampling](of), "collector_voltage") for of in (one, other)]
    for first, second in zip(*(job.solved(0) for job in jobs), strict=True):
        assert {name: x.tobytes() for name, x in first.drawn.items()} == {
            name: x.tobytes() for name, x in second.drawn.items()
        }
        both = [block.found.values["collector_voltage"][0] for block in (first, second)]
        assert np.corrcoef(both)[0, 1] > 0.9  # boards of their own would show 0 ± 0.04 or ± 0.18 (512, 32)


# --- memory -------------------------------------------------------------------------------------------


def peak_of(job: Job) -> int:
    """The most bytes at once that a job's task takes."""
    tracemalloc.start()
    try:
        job.work(0)
        return tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()


def test_memory_of_a_run_is_that_of_a_block_and_of_a_tally(cut):
    block = 1024
    cut(block, 64 * block)
    jobs = {blocks: ordinary("plain", blocks * block) for blocks in (1, 16, 32)}
    one = next(jobs[1].solved(0))
    jobs[1].work(0)  # everything is imported and cached by now
    peaks = {blocks: peak_of(job) for blocks, job in jobs.items()}
    # While a block is solved, nothing is there of those before it but the tally, which is as large for one.
    small_things = 60_000  # bytes: records, iterators, Python's own numbers
    assert peaks[16] - peaks[1] < small_things
    assert abs(peaks[32] - peaks[16]) < small_things
    # That says something: the values of a single block, had they been kept, would be more than that.
    assert sum(x.nbytes for x in one.found.values.values()) > 1.2 * small_things
