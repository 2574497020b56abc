"""The report of a contrast: what a reader finds, at 80 and 120 columns, in any encoding, and as JSON."""

from __future__ import annotations

import json
import math
import re
from dataclasses import replace
from functools import cache
from pathlib import Path

import pytest
from rich.cells import cell_len

from biasband.circuit.operating_point import Region
from biasband.files.stage_file import read_stage
from biasband.quantity import Kind, parse
from biasband.show.contrast_json import contrast_json
from biasband.show.contrast_table import (
    CONTRAST_COLUMNS,
    contrast_table,
    contrast_warnings,
    lesson,
    outcome,
    target_text,
    yields_on,
)
from biasband.show.export import as_text
from biasband.show.layout import lines_of
from biasband.show.report import contrast_report
from biasband.show.spelling import Spelling
from biasband.show.table import Table
from biasband.signoff.contrasting import Contrast, Contrasted, contrast
from biasband.stage import Capacitor
from tests.show.reviews import BOARDS, FAILING, HIVE, SAMPLES
from tests.show.test_tables import cells

FROZEN = "ice_warner"
"""A sample without a target, all values given."""

THREE_DIGITS = 5e-3 * 1.001
"""Half a unit in the third digit, at worst of 1.00; and a little for the reading back."""


@cache
def found(name: str) -> Contrast:
    """The contrast of a sample."""
    return contrast(read_stage(Path(SAMPLES) / f"{name}.toml"), boards=BOARDS)


def shown(of: Contrast, width: int = 80, encoding: str = "utf-8") -> list[str]:
    """The report as lines."""
    laid = lines_of(contrast_report(of), width=width, spelling=Spelling(encoding))
    return [line.plain for line in laid]


def tried(of: Contrast) -> list[Contrasted]:
    """The rows with a trial."""
    return [row for row in of.rows if row.trial is not None]


def below(table: Table, of: Contrast, topology: str) -> str:
    """What stands below a topology's row."""
    return "\n".join(table.rows[[row.topology for row in of.rows].index(topology)].below)


def passing_only(of: Contrast, *names: str) -> Contrast:
    """The same where no other topologies pass."""

    def failed(row: Contrasted) -> Contrasted:
        if row.trial is None or row.topology in names:
            return row
        verdict = replace(row.trial.verdict, outcome="fail")
        return replace(row, trial=replace(row.trial, verdict=verdict))

    return replace(of, rows=tuple(map(failed, of.rows)))


@pytest.mark.parametrize("width", [20, 40, 60, 80, 120])
@pytest.mark.parametrize("encoding", ["utf-8", "ascii"])
def test_report_keeps_the_width_and_the_encoding(width: int, encoding: str) -> None:
    for name in (HIVE, FAILING, FROZEN):
        lines = shown(found(name), width, encoding)
        assert all(cell_len(line) <= width for line in lines)
        assert encoding == "utf-8" or ("".join(lines).isascii() and "?" not in "".join(lines))


@pytest.mark.parametrize(("width", "beside"), [(80, 8), (120, 10)])
def test_spare_columns_stand_beside_the_others_where_there_is_room(width: int, beside: int) -> None:
    lines = shown(found(HIVE), width)
    headings = [column.heading for column in CONTRAST_COLUMNS]
    heading = next(line for line in lines if line.startswith("topology "))
    assert heading.split("  ")[0] == "topology"
    assert [part.strip() for part in re.split(r" {2,}", heading.strip())] == headings[:beside]
    moved = [line for line in lines if re.match(r" {4}I_C .* to .*, V_out .* to ", line)]
    assert len(moved) == (len(tried(found(HIVE))) if beside == 8 else 0)


def test_reader_finds_everything_in_order() -> None:
    text = "\n".join(shown(found(HIVE)))
    order = [
        "Hive-monitor", "yields on 2048 boards of each", "Held against", "target: collector current 1 mA",
        "The same target in 5 topologies", "divider  ", "base-resistor  ", "collector-feedback  ",
        "split-supply", "follower  ", "share:", "Over h_FE and ambient alone", "itself moves by",
        "3 of 5 topologies pass", "passes without R-1", "Cautions",
    ]  # fmt: skip
    places = [text.index(part) for part in order]
    assert places == sorted(places)


@pytest.mark.parametrize("name", [HIVE, FAILING, FROZEN])
def test_rows_hold_the_figures(name: str) -> None:
    of = found(name)
    table = contrast_table(replace(of, rows=tuple(tried(of))))
    trials = [row.trial for row in tried(of) if row.trial is not None]
    kinds = {"supply": Kind.CURRENT, "gain": Kind.NUMBER, "swing": Kind.VOLTAGE, "I_C ratio": Kind.NUMBER}
    expected = {
        "supply": [t.nominal.values["supply_current"] for t in trials],
        "gain": [t.nominal.values["voltage_gain"] for t in trials],
        "swing": [t.swing for t in trials],
        "I_C ratio": [t.steadiness.current_ratio for t in trials],
    }
    for heading, kind in kinds.items():
        read = [parse(text, kind) for text in cells(table, heading)]
        assert read == pytest.approx(expected[heading], rel=THREE_DIGITS)
    assert cells(table, "parts") == [str(len(t.design.parts)) for t in trials]
    assert cells(table, "verdict") == [
        t.verdict.outcome if t.verdict.outcome == "pass" else t.verdict.outcome.upper() for t in trials
    ]
    for heading, quantity, kind in (("I_C", "collector_current", Kind.CURRENT), ("V_out", "", Kind.VOLTAGE)):
        for text, t in zip(cells(table, heading), trials, strict=True):
            range_ = t.steadiness.ranges[quantity or f"{t.steadiness.output}_voltage"]
            ends = [parse(end, kind) for end in text.split(" to ")]
            assert ends == pytest.approx([range_.low.value, range_.high.value], rel=THREE_DIGITS)


def test_row_without_a_trial_gives_the_reason() -> None:
    row = contrast_table(found(HIVE)).rows[3]
    assert row.cells[:2] == ("split-supply", "no stage") and set(row.cells[2:]) == {""}
    assert row.below == ("needs a negative supply, and the stage has none",)


def test_what_stands_below_a_row_comes_from_its_figures() -> None:
    of = found(HIVE)
    table = contrast_table(of)
    follower = below(table, of, "follower")
    assert "R1 75 kΩ, R2 120 kΩ, RE 5.1 kΩ" in follower
    assert "left out: R-1 collector_voltage, the output is the emitter" in follower
    assert "RE is not bypassed" in follower and "against it" not in follower
    rival = next(row.trial for row in of.rows if row.topology == "follower")
    assert rival is not None
    assert f"largest swing ({rival.swing:.2f} V)" in follower
    assert "against it: R-1 collector_voltage ≤ 7 V: fails by corners" in below(table, of, "base-resistor")
    assert "fewest parts (2)" in below(table, of, "collector-feedback")
    divider = below(table, of, "divider")
    assert "smallest margin: R-1 collector_voltage ≤ 7 V" in divider and "largest gain (124)" in divider


def test_places_behind_the_first_are_named() -> None:
    of = found(HIVE)
    first, *others = of.rows
    strength = first.strengths[0]
    for place, words in ((2, "second in largest gain (124)"), (3, "third in"), (4, "4th in")):
        changed = replace(first, strengths=(replace(strength, place=place),))
        table = contrast_table(replace(of, rows=(changed, *others)))
        assert f"for it: {words}" in below(table, of, "divider")


def test_the_only_one_that_passes_needs_no_other_reason() -> None:
    of = passing_only(found(HIVE), "divider")
    table = contrast_table(of)
    assert "for it: the only one that passes" in below(table, of, "divider")
    assert "only one" not in below(table, of, "follower")
    assert outcome(of).title == "1 of 5 topologies passes: divider"
    assert not any(note.startswith("for it:") for note in table.notes)


def test_that_none_passes_is_said() -> None:
    of = passing_only(found(HIVE))
    assert (outcome(of).title, outcome(of).tone) == ("None of 5 topologies passes", "fail")
    assert "None passes: what each is best at is among all." in contrast_table(of).notes
    assert outcome(found(HIVE)).tone == "pass"


def test_lesson_names_the_factor_of_every_topology_the_steadiest_first() -> None:
    of = found(HIVE)
    moved, followed = lesson(of)
    ratios = {row.topology: row.trial.steadiness.current_ratio for row in tried(of) if row.trial}
    read = re.findall(r"([0-9.]+) in ([a-z-]+)", moved)
    assert [name for _, name in read] == sorted(ratios, key=lambda name: ratios[name])
    assert [float(factor) for factor, _ in read] == pytest.approx(sorted(ratios.values()), rel=THREE_DIGITS)
    assert [name for _, name in read][-1] == "base-resistor"
    shares = {name: float(share) for share, name in re.findall(r"([0-9]+) % in ([a-z-]+)", followed)}
    for row in tried(of):
        assert row.trial is not None
        # Whole per cent.
        assert shares[row.topology] == pytest.approx(100.0 * row.trial.steadiness.followed, abs=0.5001)


def test_lesson_without_a_spread_of_the_gain_names_the_factors_alone() -> None:
    assert len(lesson(_with_steadiness(found(HIVE), moving=False))) == 1


def _with_steadiness(of: Contrast, *, missing: Region | None = None, moving: bool = True) -> Contrast:
    """The same with ranges that are not known, or with a gain that stands still."""

    def changed(row: Contrasted) -> Contrasted:
        if row.trial is None:
            return row
        there = row.trial.steadiness
        gain = there.ranges["gain"]
        ranges = there.ranges if moving else {**there.ranges, "gain": replace(gain, high=gain.low)}
        return replace(
            row, trial=replace(row.trial, steadiness=replace(there, ranges=ranges, missing=missing))
        )

    return replace(of, rows=tuple(map(changed, of.rows)))


def test_range_that_is_not_known_says_why_and_is_null_in_json() -> None:
    of = _with_steadiness(found(HIVE), missing=Region.RUNAWAY)
    table = contrast_table(of)
    assert cells(table, "I_C ratio")[0] == "n/a" and cells(table, "I_C")[0] == "runaway"
    assert lesson(of) == ()
    assert contrast_json(of)["topologies"][0]["steadiness"]["current_ratio"] is None
    assert not any("Over h_FE" in line for line in shown(of))


def test_warning_of_some_names_them_and_one_of_all_does_not() -> None:
    of = found(HIVE)
    assert contrast_warnings(of) == ()

    def warned(row: Contrasted) -> Contrasted:
        if row.trial is None:
            return row
        more = ("its own",) if row.topology in ("divider", "follower") else ()
        return replace(row, trial=replace(row.trial, warnings=("of all", *more)))

    of = replace(of, rows=tuple(map(warned, of.rows)))
    assert contrast_warnings(of) == ("of all", "divider, follower: its own")
    assert "Warnings" in shown(of)


def test_target_that_was_lent_and_capacitors_left_out_are_said() -> None:
    lent = found(FROZEN)
    assert target_text(lent).endswith("output 6.648 V, lent by the nominal point")
    assert target_text(found(HIVE)).endswith("output mid-swing")
    signal = replace(lent.stage.signal, load=None, bypassed=False)
    with_one = replace(lent.stage, signal=signal, capacitors=(Capacitor(name="C_in", value=1e-6),))
    said = "Capacitors are left out"
    assert any(said in note for note in contrast_table(replace(lent, stage=with_one)).notes)
    assert not any(said in note for note in contrast_table(lent).notes)


def test_boards_are_named_only_where_they_are_drawn() -> None:
    assert yields_on(found(HIVE)).startswith("yields on 2048 boards of each, seed 1, biasband ")
    assert yields_on(found(FROZEN)).startswith("no yields required, biasband ")


@pytest.mark.parametrize("name", [HIVE, FROZEN])
def test_json_holds_the_same_and_reads_back(name: str) -> None:
    of = found(name)
    data = json.loads(as_text(contrast_json(of)))
    assert data["passing"] == [row.topology for row in of.passing]
    assert data["target"]["lent"] is of.lent and data["boards"] == BOARDS
    assert data["lesson"] == list(lesson(of))
    for row, each in zip(of.rows, data["topologies"], strict=True):
        assert each["topology"] == row.topology and each["left_out"] == [vars(left) for left in row.left_out]
        if row.trial is None:
            assert each["verdict"] is None and each["problem"] == row.problem and "parts" not in each
            continue
        assert each["verdict"] == row.trial.verdict.outcome and each["problem"] is None
        assert {name: part["value"] for name, part in each["parts"].items()} == {
            part.name: part.value for part in row.trial.design.parts
        }
        assert each["figures"]["swing"] == row.trial.swing
        assert each["steadiness"]["followed"] == row.trial.steadiness.followed
        assert [m["margin"] for m in each["margins"]] == [
            None if math.isnan(m.margin) else m.margin for m in row.trial.held.rows
        ]
        assert [s["figure"] for s in each["strengths"]] == [s.merit.figure for s in row.strengths]
