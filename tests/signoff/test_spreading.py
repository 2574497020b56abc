"""A spread: the boards of a review, tallied; however many, however divided, and when to stop."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from boards.tallies import differences
from variation.stages import coupled, ideal, limits, real, stage, with_resistor

import biasband as bb
from biasband.boards import streams
from biasband.boards.job import Job
from biasband.errors import UsageError
from biasband.signoff import sampling_run, spreading
from biasband.signoff.spread_study import SpreadStudy
from biasband.signoff.study import Review, review
from biasband.stage import Requirement, Stage
from biasband.variation import corners as cornering

SAMPLES = Path(__file__).parents[2] / "samples"
BOARDS = 2048


@pytest.fixture(scope="module")
def failing() -> Stage:
    """A sample of which a third of the boards fails."""
    return bb.design(bb.read_stage(SAMPLES / "workshop_intercom_fails.toml")).stage


@pytest.fixture(scope="module")
def study(failing: Stage) -> SpreadStudy:
    return bb.spread(failing, boards=BOARDS, seed=7)


@pytest.fixture(scope="module")
def reviewed(failing: Stage) -> Review:
    return review(failing, boards=BOARDS, seed=7)


def plainly(**more: object) -> Stage:
    """A quick stage with one requirement: an ideal transistor, h_FE 50 to 200, nothing else varies."""
    of = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, ideal(limits(50.0, 100.0, 200.0)), 18.0)
    wanted = Requirement(id="R-1", quantity="collector_voltage", at_least=4.0)
    return replace(of, requirements=(wanted,), **more)


def test_yields_are_those_of_the_review_of_the_same_boards(study, reviewed):
    by_limit = {(row.quantity, row.side): row for row in reviewed.rows if not row.standing}
    assert len(study.limits) == len(by_limit) == 3
    for limit, held in zip(study.limits, study.yields, strict=True):
        row = by_limit[limit.quantity, limit.side]
        assert (held.boards, held.bound) == (row.yield_held, row.yield_low)
    assert study.joint_yield.boards == reviewed.joint_yield < 0.7


def test_figures_are_those_of_the_review_of_the_same_boards(study, reviewed):
    for name, found in reviewed.spread.items():
        for place in ("nominal_use", "lowest_in_use", "highest_in_use"):
            ours, theirs = getattr(study.estimates[name], place), getattr(found, place)
            step = study.job.scales[name].step
            # A value is counted to half a step, and so is their mean; the deviation of rounding is less.
            assert ours.mean.value == pytest.approx(theirs.mean, abs=0.5 * step + 1e-15), name
            assert ours.sd == pytest.approx(theirs.sd, rel=1e-6, abs=step), name
            for share, quantile in ours.quantiles.items():
                # A bin, which is what the resolution states.
                assert abs(quantile.value - theirs.quantile(share)) <= ours.resolution + 1e-15, name
            assert (ours.lowest, ours.highest) == (theirs.lowest, theirs.highest)


def test_intervals_hold_what_many_more_boards_show(failing, study):
    many = bb.spread(failing, boards=32 * BOARDS, seed=8)
    means, quantiles = [], []
    for name in ("collector_voltage", "symmetric_peak_swing", "supply_current"):
        for place in ("nominal_use", "lowest_in_use", "highest_in_use"):
            few, sure = (getattr(each.estimates[name], place) for each in (study, many))
            means.append(few.mean.interval.low <= sure.mean.value <= few.mean.interval.high)
            middle = few.quantiles[0.5].interval
            quantiles.append(middle.low <= sure.quantiles[0.5].value <= middle.high)
    # Nine 95 % intervals each, far from independent: a wrong kind of interval misses most of them.
    assert sum(means) >= 7
    assert sum(quantiles) >= 7


def test_time_is_more_forgiving_than_boards(study):
    # A board that fails only on hot days holds a limit most of the time (physics: "Three methods").
    assert all(held.time > held.boards for held in study.yields)
    assert study.joint_yield.time > study.joint_yield.boards + 0.1


def test_quasi_random_boards_give_the_same_figures_with_less_error(failing, study):
    quasi = bb.spread(failing, boards=BOARDS, seed=7, sampling="quasi-random")
    many = bb.spread(failing, boards=64 * BOARDS, seed=9)
    assert (quasi.boards, len(quasi.tallies)) == (BOARDS, 16)
    for name in ("collector_voltage", "supply_current"):
        evenly, plain, sure = (each.estimates[name].nominal_use.mean for each in (quasi, study, many))
        widths = [each.interval.high - each.interval.low for each in (evenly, plain)]
        assert widths[0] < 0.2 * widths[1]
        slack = 0.5 * (sure.interval.high - sure.interval.low)
        assert evenly.interval.low - slack <= sure.value <= evenly.interval.high + slack


def test_yield_of_quasi_random_boards_has_no_interval(failing):
    quasi = bb.spread(failing, boards=64, sampling="quasi-random")
    assert all(np.isnan([each.bound, each.interval.low]).all() for each in quasi.yields)


@pytest.mark.parametrize("sampling", ["plain", "quasi-random"])
def test_result_is_the_same_bytes_by_threads(monkeypatch, sampling):
    monkeypatch.setattr(streams, "SEQUENCE", 512)
    of = plainly()
    alone = bb.spread(of, boards=BOARDS, sampling=sampling)
    with ThreadPoolExecutor(3) as three:
        together = bb.spread(of, boards=BOARDS, sampling=sampling, executor=three)
    assert differences(alone.total, together.total) == []
    assert repr(alone.estimates) == repr(together.estimates)  # an ideal transistor has no gain: NaN
    assert repr(alone.shares) == repr(together.shares)


def test_two_designs_are_compared_on_the_same_draws():
    # Twice RC on the same boards: V_CC − V_C doubles on every one of them, so that the sd doubles exactly.
    of = plainly()
    twice = replace(with_resistor(of, "RC", value=1.1e3), requirements=())
    found = (bb.spread(each, boards=512).estimates["collector_voltage"] for each in (of, twice))
    one, other = (each.nominal_use for each in found)
    # Sums are in steps of 2^-19 of half the corner limits' distance; a deviation is some 0.3 of that.
    assert one.sd == pytest.approx(2.0 * other.sd, rel=1e-5)


def test_yield_goal_stops_as_soon_as_it_is_known(monkeypatch):
    monkeypatch.setattr(streams, "SEQUENCE", 256)
    found = bb.spread(plainly(), until="yield ± 3 %", boards=100_000)
    held = found.joint_yield
    assert found.ending == "good enough"
    assert max(held.interval.high - held.boards, held.boards - held.interval.low) <= 0.03
    before = found.boards - 256
    assert found.boards % 256 == 0 and before > 0
    # One sequence fewer did not suffice: at a yield p that takes about 1.96²·p(1 − p)/0.03² boards.
    p = held.boards
    assert 0.8 * 1.96**2 * p * (1 - p) / 0.03**2 < found.boards < 1.3 * 1.96**2 * p * (1 - p) / 0.03**2 + 512


def test_digits_goal_leaves_the_digits_steady(monkeypatch):
    monkeypatch.setattr(streams, "SEQUENCE", 38_000)  # 37 038 at least (JCGM 101:2008, 7.9.4 b)
    of = plainly()
    one, other = (bb.spread(of, until="1 digit", seed=seed, boards=400_000) for seed in (1, 2))
    assert {one.ending, other.ending} == {"good enough"}
    assert one.boards >= 4 * 38_000  # fewer sequences are steady by luck
    here, there = (each.estimates["collector_voltage"].nominal_use for each in (one, other))
    # One digit of a deviation of some 3.8 V is 0.5 V (JCGM 101:2008, 7.9.2); both are off by as much at most.
    assert here.sd == pytest.approx(there.sd, abs=1.0)
    assert here.mean.value == pytest.approx(there.mean.value, abs=1.0)


def test_goal_that_is_out_of_reach_is_said_to_be():
    found = bb.spread(plainly(), until="yield ± 0.001 %", boards=512)
    assert (found.ending, found.boards, found.asked) == ("not good enough", 512, 512)


def test_short_sequences_say_nothing_of_digits():
    found = bb.spread(plainly(), until="1 digit", boards=30_000)
    assert (found.ending, found.boards) == ("not good enough", 30_000)


def test_digits_are_refused_where_boards_come_in_batches():
    with pytest.raises(UsageError, match="batches"):
        bb.spread(bb.read_stage(SAMPLES / "ice_warner.toml"), until="1 digit")


def test_kept_boards_stay_in_this_process():
    with ThreadPoolExecutor(1) as one, pytest.raises(UsageError, match="keep"):
        bb.spread(plainly(), boards=64, executor=one, keep=lambda stage, block: None)


def test_unknown_sampling_is_refused():
    with pytest.raises(UsageError, match="one of plain, quasi-random; read 'even'"):
        bb.spread(plainly(), boards=64, sampling="even")


@pytest.mark.parametrize(
    "text",
    ["yield", "yield ± 0.1", "yield ± 0 %", "yield ± 60 %", "3 digits", "yield ± soon", "", "mean ± 1 %"],
)
def test_goal_that_cannot_be_read_is_refused(text):
    with pytest.raises(UsageError, match="--until"):
        bb.spread(plainly(), until=text)


def test_goal_is_for_plain_boards_only():
    with pytest.raises(UsageError, match="plain boards only"):
        bb.spread(plainly(), until="1 digit", sampling="quasi-random")


def test_interrupted_run_gives_what_it_has(monkeypatch):
    monkeypatch.setattr(streams, "SEQUENCE", 256)
    done: list[float] = []

    def impatient(share: float) -> None:
        done.append(share)
        if len(done) == 3:
            raise KeyboardInterrupt

    found = bb.spread(plainly(), boards=2560, watch=watching(impatient))
    assert (found.ending, found.boards, found.job.source.boards) == ("interrupted", 768, 2560)
    whole = bb.spread(plainly(), boards=768)
    assert differences(found.total, whole.total) == []


def test_scramblings_that_are_behind_when_interrupted_are_left_out(monkeypatch):
    monkeypatch.setattr("biasband.boards.quasi.STRETCH", 16)
    done: list[float] = []

    def impatient(share: float) -> None:
        done.append(share)
        if len(done) == 20:  # a stretch of every scrambling, and another one of four
            raise KeyboardInterrupt

    found = bb.spread(plainly(), boards=1024, sampling="quasi-random", watch=watching(impatient))
    assert [tally.boards for tally in found.tallies] == [32] * 4


def test_interruption_before_any_board_is_one(monkeypatch):
    def tired(job: Job, task: int) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(Job, "work", tired)
    with pytest.raises(KeyboardInterrupt):
        bb.spread(plainly(), boards=64)


def test_boards_survive_an_interrupted_search_for_causes(monkeypatch):
    def tired(*args: object, **more: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(spreading, "variance_causes", tired)
    found = bb.spread(plainly(), boards=64)
    assert (found.ending, found.boards, dict(found.shares), found.beyond) == ("interrupted", 64, {}, ())


def watching(told: object) -> spreading.Watch:
    """A watch that hands the progress of sampling to a function."""
    from contextlib import nullcontext

    return lambda doing, boards: nullcontext(told if boards else lambda done: None)


def test_long_run_says_first_how_long_it_takes(monkeypatch):
    monkeypatch.setattr(sampling_run, "LONG", 0.0)
    said: list[str] = []
    bb.spread(plainly(), boards=64, notice=said.append)
    assert len(said) == 1
    assert said[0].startswith("64 boards at about ") and "Ctrl-C" in said[0]


@pytest.mark.parametrize(
    ("seconds", "said"),
    [
        (1.2, "1 second"), (89.0, "89 seconds"), (90.0, "2 minutes"), (7200.0, "2 hours"), (3e6, "35 days"),
        (1e9, "32 years"),
    ],
)
def test_durations_are_said_as_one_says_them(seconds, said):
    assert sampling_run.duration(seconds) == f"about {said}"


def test_board_that_the_corners_missed_moves_them(monkeypatch):
    monkeypatch.setattr(cornering, "search", lambda family, climbs, measures, *, cut_off: climbs)
    monkeypatch.setattr(cornering, "polish", lambda family, climbs, measures, *, cut_off: climbs)
    found = bb.spread(plainly(), boards=512)
    missed = {each.measure: each for each in found.outside}
    top = found.estimates["transistor_power"].highest_in_use.highest
    assert missed["transistor_power"].value == top == found.corners.ranges["transistor_power"].high.value
    assert any("transistor_power: sampled board" in text for text in found.warnings)


def test_stage_without_requirements_has_no_limits():
    found = bb.spread(replace(plainly(), requirements=()), boards=64)
    assert (found.limits, found.yields, found.beyond, dict(found.inside_rss)) == ((), (), (), {})


def test_rare_failures_are_looked_for_where_a_corner_fails_and_no_board_does():
    # h_FE uniform in its logarithm on either side of 100; V_C = 18 − 2.2k·h_FE·(17.3/470k) is below the limit
    # for the top share p of the upper half only: p/2 of all boards, exactly.
    p = 2e-4
    worst = 100.0 * 2.0 ** (1.0 - p)
    limit = 18.0 - 2.2e3 * worst * 17.3 / 470e3
    wanted = Requirement(id="R-1", quantity="collector_voltage", at_least=limit)
    found = bb.spread(replace(plainly(), requirements=(wanted,)), boards=256, seed=1)
    (rare,) = found.beyond
    assert (rare.standing, rare.failures) == ("rare", 0)
    assert rare.rare.resolved
    # Four standard errors, of which the search asks one in ten at most.
    assert rare.rare.probability == pytest.approx(p / 2, abs=4.0 * rare.rare.standard_error)


def test_warnings_of_the_stage_come_with_the_spread():
    lonely = with_resistor(coupled(), "RC", group="array", tracking=3e-5)
    assert any("group array has one member" in text for text in bb.spread(lonely, boards=64).warnings)


def test_table_has_every_figure_with_its_interval(study):
    table = study.table
    row = table.loc[("collector_voltage", "lowest_in_use")]
    found = study.estimates["collector_voltage"].lowest_in_use
    assert row["mean"] == found.mean.value and row["mean_low"] == found.mean.interval.low
    assert row["p0.135_high"] == found.quantiles[0.00135].interval.high


def test_batches_count_in_every_interval():
    of = bb.read_stage(SAMPLES / "ice_warner.toml")
    found = bb.spread(of, boards=BOARDS)
    assert found.boards_per_batch > 1
    alone = replace(found, job=replace(found.job, source=replace(found.job.source, batch_size=1)))
    assert found.yields[0].bound < alone.yields[0].bound


def kept_blocks(of: Stage, **more: object) -> Iterator[object]:
    blocks: list[object] = []
    bb.spread(of, keep=lambda stage, block: blocks.append(block), **more)
    yield from blocks


def test_every_block_is_handed_on_in_order(monkeypatch):
    monkeypatch.setattr(streams, "SEQUENCE", 256)
    monkeypatch.setattr(streams, "BLOCK", 100)
    firsts = [block.first for block in kept_blocks(plainly(), boards=600)]
    assert firsts == [0, 100, 200, 256, 356, 456, 512]


def test_real_transistor_spreads_too():
    of = stage("divider", {"R1": 68e3, "R2": 13e3, "RC": 3.9e3, "RE": 820.0}, real(), limits(8.1, 9.0, 9.9))
    found = bb.spread(of, boards=64)
    assert found.total.regions[0] == 64 * len(found.job.points)
