"""The report of a spread: its figures are the study's, at 80 and 120 columns, in any encoding."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from rich.cells import cell_len

from biasband.boards.intervals import Between
from biasband.boards.monotone import Monotone
from biasband.boards.outside import Outside
from biasband.boards.pick_freeze import Share, VarianceShares
from biasband.boards.rare import Rare
from biasband.boards.sampling import QUANTILES
from biasband.boards.variance import VarianceCauses
from biasband.circuit.operating_point import Region
from biasband.quantity import Kind, parse
from biasband.show.cause_tables import cause_tables
from biasband.show.cautions import CAUTIONS
from biasband.show.histogram import over_cells
from biasband.show.layout import lines_of
from biasband.show.report import spread_report
from biasband.show.spelling import Spelling
from biasband.show.spread_pictures import histograms
from biasband.show.spread_tables import estimate_tables
from biasband.show.table import Table
from biasband.show.yield_table import rss_passage, yield_table
from biasband.signoff.goals import read_goal
from biasband.signoff.spread_study import SpreadStudy
from biasband.variation.causes import Causes
from biasband.variation.rss import Interval
from tests.show.reviews import BOARDS, FAILING, HIVE
from tests.show.spreads import inverting, spread_of, unrequired
from tests.show.test_tables import FOUR_DIGITS, THREE_DIGITS

BATCHES = "ice_warner"
NAN = math.nan


def shown(of: SpreadStudy, width: int = 80, encoding: str = "utf-8") -> list[str]:
    return [line.plain for line in lines_of(spread_report(of), width=width, spelling=Spelling(encoding))]


def text(of: SpreadStudy) -> str:
    """The report without its lines."""
    return " ".join(line.strip() for line in shown(of, 400))


def with_regions(of: SpreadStudy, **counts: int) -> SpreadStudy:
    """The same with some scenarios in other regions."""
    regions = of.total.regions.copy()
    for name, count in counts.items():
        regions[Region[name]] += count
    return replace(of, tallies=(replace(of.total, regions=regions),))


@pytest.mark.parametrize("encoding", ["utf-8", "ascii"])
@pytest.mark.parametrize("width", [20, 60, 80, 120])
def test_report_keeps_the_width_and_the_encoding(width: int, encoding: str) -> None:
    quasi = spread_of(FAILING, "quasi-random", 2000)
    for of in (spread_of(HIVE), spread_of(FAILING), spread_of(BATCHES), quasi, inverting(), unrequired()):
        lines = shown(of, width, encoding)
        assert all(cell_len(line) <= width for line in lines)
        assert encoding == "utf-8" or ("".join(lines).isascii() and "?" not in "".join(lines))


def test_report_reads_from_the_run_over_yields_and_causes_to_the_cautions() -> None:
    lines = text(replace(spread_of(FAILING), outside=(Outside("collector_voltage", 7, 11.0, 10.0),)))
    order = [
        "Workshop intercom", "WI-001", "values: ", "Sampled", "Yield", "Boards by collector_voltage",
        "Boards by symmetric_peak_swing", "At nominal use", "Each board's lowest in use",
        "Each board's highest in use", "Causes: L-1 collector_voltage ≥ 3 V", "Beyond the draws",
        "RSS takes contributors", "Warnings", "sampled board 7 reaches 11 V, beyond the corner limit 10 V",
        CAUTIONS[0],
    ]  # fmt: skip
    positions = [lines.index(part) for part in order]
    assert positions == sorted(positions)


def test_run_says_what_was_sampled() -> None:
    assert f"{BOARDS} boards, seed 1, each solved at 5 points of use" in text(spread_of(HIVE))
    assert "plain: each board drawn at random" in text(spread_of(HIVE))
    assert "run complete" in text(spread_of(HIVE))
    # 2048 boards, 200 to a batch: ten whole ones and a part of another.
    assert "2048 boards in 11 batches" in text(spread_of(BATCHES))
    # 16 scramblings of 128 points are the next after 2000: 16 · 64 = 1024 are too few.
    quasi = text(spread_of(FAILING, "quasi-random", 2000))
    assert "16 scramblings of 2^7 points, rounded up from 2000 boards" in quasi


def test_partial_run_says_so_before_all_else() -> None:
    of = spread_of(HIVE)
    lots = replace(of, ending="interrupted", job=replace(of.job, source=replace(of.job.source, boards=10**6)))
    assert shown(lots)[0] == "PARTIAL: interrupted after 2048 of 1000000 boards"
    assert "PARTIAL" not in text(of)


def test_goal_is_named_with_what_became_of_it() -> None:
    of = replace(spread_of(HIVE), goal=read_goal("yield ± 0.1 %"), ending="good enough")
    assert "stopped when good enough: yield ± 0.1 %, after 2048 boards" in text(of)
    missed = replace(of, ending="not good enough")
    assert "GOAL NOT REACHED within 2048 boards: yield ± 0.1 %" in text(missed)
    digits = replace(of, goal=read_goal("2 digits"))
    assert "good enough: 2 digits (JCGM 101:2008, 7.9.4), after 2048 boards" in text(digits)


def test_scenarios_without_a_point_are_said_loudly() -> None:
    lines = shown(with_regions(spread_of(FAILING), UNSOLVED=3, RUNAWAY=2), 120)
    # 2048 boards at 5 points, and the five of this test.
    assert lines[0] == "THERMAL RUNAWAY: 2 of 10245 sampled scenarios ran away thermally"
    assert "INCONCLUSIVE: 3 of 10245 sampled scenarios were not solved" in lines
    assert "at least 98.000 %: INCONCLUSIVE" in text(with_regions(spread_of(FAILING), UNSOLVED=3))


def yields(of: SpreadStudy) -> Table:
    (table,) = yield_table(of)
    assert isinstance(table, Table)
    return table


def test_yields_are_those_of_the_study() -> None:
    of = spread_of(FAILING)
    rows = yields(of).rows
    assert [row.cells[:2] for row in rows] == [
        ("L-1 collector_voltage", "≥ 3 V"), ("L-1 collector_voltage", "≤ 9 V"),
        ("L-2 symmetric_peak_swing", "≥ 2 V"), ("all of them", ""),
    ]  # fmt: skip
    for row, held in zip(rows, (*of.yields, of.joint_yield), strict=True):
        found = [100.0 * x for x in (held.boards, held.interval.low, held.bound, held.time)]
        boards, interval, bound, time = row.cells[2:]
        low, high = (float(end.removesuffix(" %")) for end in interval.split(" to "))
        read = [float(boards.split()[0]), low, float(bound.split()[0]), float(time.split()[0])]
        # Rounded down to a thousandth of a per cent, the upper end up.
        assert all(0.0 <= value - cell < 0.001 for value, cell in zip(found, read, strict=True))
        assert 0.0 <= high - 100.0 * held.interval.high < 0.001
    assert rows[2].below == ("judged by yield, at least 98.000 %: FAIL",)
    assert yields(spread_of(HIVE)).rows[2].below == ("judged by yield, at least 99.730 %: pass",)


def test_quasi_random_yields_are_informative_only() -> None:
    table = yields(spread_of(FAILING, "quasi-random", 2000))
    assert [column.heading for column in table.columns] == ["limit on", "limit", "boards", "time"]
    assert any("Informative only: a yield is judged on plain draws" in note for note in table.notes)
    assert table.rows[2].below == ("judged by yield, at least 98.000 %: not on quasi-random boards",)


def test_yields_of_batches_say_that_they_count_in_them() -> None:
    assert any("counted in batches" in note for note in yields(spread_of(BATCHES)).notes)
    assert not any("counted in batches" in note for note in yields(spread_of(HIVE)).notes)


def test_stage_without_requirements_shows_its_output() -> None:
    lines = text(unrequired())
    assert "no requirements, so there are no yields" in lines
    assert "Boards by collector_voltage: no limits" in lines
    assert "Causes: collector_voltage, lowest in use" in lines
    assert not {"Yield", "Beyond the draws"} & set(shown(unrequired(), 120))
    assert "RSS takes" not in lines


@pytest.mark.parametrize("made", [lambda: spread_of(FAILING), inverting], ids=["failing", "inverting"])
def test_boards_of_the_histograms_are_those_that_fail_and_hold(made: Callable[[], SpreadStudy]) -> None:
    of = made()
    for picture in histograms(of):
        for panel in picture.panels:
            cells = over_cells(panel, picture.bounds, (-500.0, 500.0), 60)
            limits = [k for k, limit in enumerate(of.limits) if limit.bound == panel.bound.value]  # type: ignore[union-attr]
            failing = BOARDS - round(of.yields[limits[0]].boards * BOARDS)
            assert cells.beyond.sum() == failing and cells.holding.sum() == BOARDS - failing


def test_magnitude_of_what_inverts_is_drawn_below_zero() -> None:
    (picture,) = histograms(inverting())
    assert [(bound.value, bound.lower) for bound in picture.bounds] == [(-1000.0, True), (-87.0, False)]
    assert [panel.label for panel in picture.panels] == ["lowest in use", "highest in use"]
    assert any("stage inverts" in note for note in picture.notes)
    assert any("limits beyond the picture: -1000" in note for note in picture.notes)
    assert yields(inverting()).rows[0].cells[:2] == ("G voltage_gain (inverting)", "≥ 87")


def test_estimates_are_those_of_the_study() -> None:
    of = spread_of(HIVE)
    tables = estimate_tables(of)
    assert [table.title for table in tables] == [
        "At nominal use", "Each board's lowest in use", "Each board's highest in use",
    ]  # fmt: skip
    found = of.estimates["collector_voltage"].lowest_in_use
    name, mean, sd, *quantiles, intervals = tables[1].rows[0].cells
    assert name == "collector_voltage"
    read = [parse(cell, Kind.VOLTAGE) for cell in (mean, *quantiles)]
    wanted = [found.mean.value, *(found.quantiles[share].value for share in QUANTILES)]
    assert read == pytest.approx(wanted, rel=FOUR_DIGITS)
    assert parse(sd, Kind.VOLTAGE) == pytest.approx(found.sd, rel=THREE_DIGITS)
    widths = dict(re.fullmatch(r"(.+?) ([+−]?\d\S* \S?V)", part).groups() for part in intervals.split(", "))  # type: ignore[union-attr]
    median = found.quantiles[0.5]
    half = max(median.value - median.interval.low, median.interval.high - median.value)
    two_digits = 0.05  # half a unit in the second digit, at worst of 1.0
    assert parse(widths["50 %"], Kind.VOLTAGE) == pytest.approx(half, rel=two_digits)
    half = found.mean.interval.high - found.mean.value
    assert parse(widths["mean"], Kind.VOLTAGE) == pytest.approx(half, rel=two_digits)
    # Of 2048 boards no rank lies below the 0.135 % quantile: 0.99865^2048 = 6.3 % is more than 2.5 %.
    assert widths["0.135 %"].startswith("+") and widths["99.865 %"].startswith("−")


def test_bins_are_said_where_they_matter_most() -> None:
    notes = " ".join(estimate_tables(spread_of(HIVE))[-1].notes)
    assert "counted in 4096 bins between the corner limits" in notes
    # Self-heating spreads the junction by some hundredths of a kelvin about an ambient that spans 60 K.
    assert "matters most for junction_temperature: 0.015 K" in notes
    assert "Student's t over the 16 scramblings" in " ".join(
        estimate_tables(spread_of(FAILING, "quasi-random", 2000))[-1].notes
    )


def causes_of(worst: dict[str, float], first: dict[str, float], total: dict[str, float]) -> list[Table]:
    """The tables of the hive's causes, its lower limits' side with these shares."""
    of = spread_of(HIVE)
    kinds = [{name: Share(value, 0.001) for name, value in kind.items()} for kind in (first, total, total)]
    shares = VarianceShares(1.0, *kinds, boards=4096, unsolved=0)
    name = "collector_voltage"
    changed = replace(
        of,
        causes={**of.causes, name: Causes(low=worst, high={})},
        shares={
            **of.shares,
            name: VarianceCauses(shares, shares, replace(shares, first={}, total={}, shapley={})),
        },
    )
    return list(cause_tables(changed))


def test_both_lists_of_causes_stand_side_by_side() -> None:
    worst = {"supply": 0.6, "R1": 0.25, "gain": 0.005, "RC": 0.002}
    first = {"gain": 0.55, "R1": 0.3, "RC": 0.001}
    table = causes_of(worst, first, {"gain": 0.7, "R1": 0.3004, "RC": 0.004})[0]
    assert [row.cells for row in table.rows] == [
        ("supply", "60 %", "in use", "", "", ""),
        ("R1", "25 %", "30 %", "30 %", "30 %", ""),
        ("h_FE", "0 %", "70 %", "55 %", "70 %", "15 %"),
    ]
    assert table.notes[0] == "1 more with less than 1 % in either list."


def test_interaction_that_is_not_there_has_no_column() -> None:
    first = {"gain": 0.7, "R1": 0.3}
    table = causes_of({"gain": 0.5, "R1": 0.5}, first, first)[0]
    assert [column.heading for column in table.columns] == [
        "contributor", "worst case", "variance", "alone", "total",
    ]  # fmt: skip


def test_side_without_causes_says_so() -> None:
    notes = causes_of({"gain": 1.0}, {"gain": 1.0}, {"gain": 1.0})[1].notes
    assert notes == (
        "Nothing that varies moves it towards this side.",
        "There is no variance between boards.",
    )


def test_errors_of_shares_show_where_they_would_be_seen() -> None:
    of = spread_of(HIVE)
    wide = {"gain": Share(0.5, 0.02), "R1": Share(0.5, 0.0049)}
    shares = VarianceShares(1.0, wide, wide, wide, boards=4096, unsolved=12)
    changed = replace(of, shares={**of.shares, "collector_voltage": VarianceCauses(shares, shares, shares)})
    table = cause_tables(changed)[0]
    cells = {row.cells[0]: row.cells[2] for row in table.rows}
    assert (cells["h_FE"], cells["R1"]) == ("50 % ±4", "50 %")
    assert "12 of 4096 boards did not solve: variance is that of the others." in table.notes


def test_what_members_share_is_told_apart() -> None:
    tables = cause_tables(spread_of(BATCHES))
    assert any("Members of a group are correlated" in note for note in tables[-1].notes)
    assert not any("Members of a group" in note for note in cause_tables(spread_of(HIVE))[-1].notes)


FEW = Rare(
    probability=12.5e-6, standard_error=0.6e-6, interval=Between(11.4e-6, 13.7e-6),
    effective_sample_size=840.4, draws=32768, unsolved=0, solved=50000, resolved=True, weighted=True,
)  # fmt: skip


def beyond(rare: Rare) -> str:
    of = spread_of(HIVE)
    return text(replace(of, beyond=(replace(of.beyond[0], standing="rare", monotone=None, rare=rare),)))


def test_rare_failures_come_with_their_error_and_what_stands_behind_them() -> None:
    assert (
        "R-1 collector_voltage ≥ 3 V: some corner fails, of 2048 boards none: 12.5 ppm (standard error "
        "4.8 %; 95 %: 11.4 ppm to 13.7 ppm), importance sampling, 840 effective failures of 32768 draws"
    ) in beyond(FEW)


def test_rare_failures_that_are_not_resolved_are_an_upper_end() -> None:
    said = beyond(replace(FEW, resolved=False, effective_sample_size=3.0, unsolved=7))
    assert "below 13.7 ppm (95 %), too few for a figure" in said
    assert "7 of them not solved and counted as failing" in said
    assert "12.5 ppm" not in said


def test_what_was_looked_for_is_said_and_zero_claimed_only_where_monotone() -> None:
    of = spread_of(HIVE)
    held = f"all {of.corners.count} corners and the located interior extremes hold"
    claimed = [each for each in of.beyond if each.standing == "none"]
    assert f"no failure exists that was looked for: {held}; zero claimed" in text(
        replace(of, beyond=tuple(claimed))
    )
    other = [each for each in of.beyond if each.standing == "none found"]
    said = text(replace(of, beyond=tuple(other)))
    assert f"{held}; not proved between them" in said and "zero claimed" not in said


def test_seen_failures_are_counted() -> None:
    of = spread_of(FAILING)
    failing = BOARDS - round(of.yields[0].boards * BOARDS)
    assert f"L-1 collector_voltage ≥ 3 V: failures are in the draws: {failing} of 2048 boards" in text(of)
    unknown = replace(of.beyond[0], standing="not known")
    assert "not known: a corner has no value" in text(replace(of, beyond=(unknown,)))


def with_inside(inside: int) -> SpreadStudy:
    """The hive with so many boards inside the RSS interval of its collector voltage."""
    of = spread_of(HIVE)
    held = of.total.held.copy()
    held[len(of.limits), 0] = inside
    return replace(of, tallies=(replace(of.total, held=np.array(held)),))


def rss_said(of: SpreadStudy) -> str:
    (passage,) = rss_passage(of)
    assert not isinstance(passage, Table)
    return passage.sentences[0]  # type: ignore[union-attr]


def test_rss_is_contradicted_where_the_interval_ends_below_what_it_assumes() -> None:
    # Clopper-Pearson for 2048 boards (scipy.stats.beta.ppf(0.975, k + 1, n - k), worked out apart): of 11
    # outside the upper end is 99.7316 %, of 12 it is 99.6969 %; 3σ holds 99.73 %.
    assert "collector_voltage" not in rss_said(with_inside(2048 - 11)).partition("contradicted")[2]
    against = rss_said(with_inside(2048 - 12)).partition("RSS is contradicted: ")[2]
    assert "99.73 % would be inside" in against and "collector_voltage 99.697 %" in against


def test_rss_without_an_interval_contradicts_nothing() -> None:
    of = with_inside(0)
    lost = replace(of, rss={**of.rss, "collector_voltage": Interval(NAN, NAN)})
    assert "collector_voltage n/a" in rss_said(lost)
    assert "collector_voltage" not in rss_said(lost).partition("contradicted")[2]


def test_rss_is_not_judged_on_quasi_random_boards() -> None:
    assert "contradicted" in rss_said(spread_of(FAILING))
    assert "contradicted" not in rss_said(spread_of(FAILING, "quasi-random", 2000))


def test_claim_says_how_often_was_looked_or_why_it_is_not_proved() -> None:
    of = spread_of(HIVE)
    held = replace(of.beyond[0], standing="none", monotone=Monotone(True, 312, 0, None))
    assert "since collector_voltage was monotone along all that differs between boards, wherever" in text(
        replace(of, beyond=(held,))
    )
    bent = replace(held, standing="none found", monotone=Monotone(False, 312, 4, "gain"))
    said = text(replace(of, beyond=(bent,)))
    assert (
        "not proved between them: collector_voltage turns along h_FE, 4 of 312 places were not solved" in said
    )
