"""A report is shown at any width, in any encoding, with and without colour."""

import io
import re
import sys
from dataclasses import replace
from itertools import pairwise

import pytest
from rich.cells import cell_len

from biasband.show.cautions import CAUTIONS
from biasband.show.layout import lines_of
from biasband.show.report import corners_report, design_report, review_report, snap_report
from biasband.show.screen import show
from biasband.show.spelling import Spelling
from biasband.show.table import Table
from biasband.signoff.snapping import snap_texts
from tests.show.reviews import EVERY, FAILING, HIVE, reviewed


def reports(name):
    review = reviewed(name)
    evidence, words = review.evidence, review.looked_into
    return (
        review_report(review),
        design_report(review.design),
        corners_report(review.design, evidence.corners, words),
        snap_report(snap_texts(["5k", "472"], pair=True)),
    )


def shown(review, width=80, spelling=None):
    lines = lines_of(review_report(review), width=width, spelling=spelling or Spelling())
    return [line.plain for line in lines]


@pytest.mark.parametrize("encoding", ["utf-8", "ascii"])
@pytest.mark.parametrize("width", [80, 120])
@pytest.mark.parametrize("name", EVERY)
def test_no_line_is_wider_than_the_screen_and_nothing_is_cut_off(name, width, encoding):
    for report in reports(name):
        for line in lines_of(report, width=width, spelling=Spelling(encoding)):
            assert cell_len(line.plain) <= width
            assert "…" not in line.plain and "..." not in line.plain
            assert line.plain == line.plain.rstrip()


@pytest.mark.parametrize("width", [40, 80, 120])
@pytest.mark.parametrize("name", EVERY)
def test_every_cell_of_every_table_is_on_the_screen(name, width):
    for report in reports(name):
        text = " ".join(line.plain for line in lines_of(report, width=width, spelling=Spelling()))
        words = " ".join(text.split())
        for table in (block for block in report if isinstance(block, Table)):
            assert all(cell in words for row in table.rows for cell in row.cells)


@pytest.mark.parametrize("name", EVERY)
def test_numbers_keep_their_units_on_the_line(name):
    for width in (80, 120):
        lines = shown(reviewed(name), width)
        for line, following in pairwise(lines):
            parted = re.search(r"[0-9]$", line) and re.match(
                r"\s*(?:[mµnk]?[VAWΩ]|%|°C)(?:[ ,.)]|$)", following
            )
            assert not parted, (line, following)


@pytest.mark.parametrize("name", EVERY)
def test_ascii_output_holds_ascii_only(name):
    text = "\n".join(shown(reviewed(name), spelling=Spelling("ascii")))
    assert text.isascii()
    assert "?" not in text  # every sign of ours has a spelling
    assert "kohm" in text and ">= " in text and "---" in text


def test_reviewer_finds_everything_in_order():
    text = "\n".join(shown(reviewed(HIVE)))
    order = [
        "Hive-monitor", "HM-014, revision B", "values: 4 chosen in this run: freeze before ordering",
        "seed 1", "Derating profile half-power", "Parts to buy", "Nominal point: active",
        "Margins, smallest first", "worst: ", "All requirements together", "RSS takes contributors",
        "PASS: 2 requirements", "Cautions",
    ]  # fmt: skip
    positions = [text.index(part) for part in order]
    assert positions == sorted(positions)


def test_verdict_comes_with_its_reasons():
    review = reviewed(FAILING)
    lines = shown(review)
    verdict = lines.index(review.verdict.line)
    assert lines[verdict + 1 :][: len(review.verdict.because)] == [
        f"  {text}" for text in review.verdict.because
    ]


def test_warnings_stand_before_the_verdict():
    review = replace(reviewed(HIVE), warnings=("first warning", "second warning"))
    lines = shown(review)
    start = lines.index("Warnings")
    assert lines[start + 1 : start + 3] == ["  first warning", "  second warning"]
    assert start < lines.index(review.verdict.line)
    assert "Warnings" not in shown(replace(review, warnings=()))


def test_every_report_on_a_stage_ends_with_the_cautions():
    for report in reports(HIVE)[:3]:
        text = " ".join(line.plain for line in lines_of(report, width=400, spelling=Spelling()))
        assert all(caution in text for caution in CAUTIONS)
    assert any("60 V" in caution and "mains" in caution for caution in CAUTIONS)


def test_markup_and_control_characters_of_the_user_stay_text():
    review = reviewed(HIVE)
    first = replace(review.rows[0], id="[bold]R", reason="[/red]\x1b[2J")
    rows = (first, *review.rows[1:])
    stage = replace(review.stage, title="[red]Hive[/red] \x1b]0;x\x07", designed_by=":bee:")
    design = replace(review.design, stage=stage)
    text = "\n".join(shown(replace(review, stage=stage, design=design, rows=rows)))
    for kept in ("[red]Hive[/red]", "[bold]R collector_voltage", "reason: [/red]", ":bee:"):
        assert kept in text
    assert "\x1b" not in text and "\x07" not in text


@pytest.mark.parametrize("title", ["蜂" * 90, "ö" * 200, "a b " * 60, "\n\n", " "])
def test_odd_title_keeps_the_width(title):
    review = reviewed(HIVE)
    design = replace(review.design, stage=replace(review.stage, title=title))
    assert all(cell_len(line) <= 80 for line in shown(replace(review, design=design)))


class Terminal(io.StringIO):
    encoding = "utf-8"

    def isatty(self) -> bool:
        return True


@pytest.fixture
def environment(monkeypatch):
    for name in (
        "NO_COLOR",
        "FORCE_COLOR",
        "TTY_COMPATIBLE",
        "TTY_INTERACTIVE",
        "COLORTERM",
        "COLUMNS",
        "LINES",
    ):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("TERM", "xterm-256color")
    return monkeypatch


def printed(monkeypatch, stream):
    monkeypatch.setattr(sys, "stdout", stream)
    show(review_report(reviewed(FAILING)))
    return stream.getvalue()


def test_terminal_gets_colours(environment):
    assert "\x1b[1;31mFAIL\x1b[0m" in printed(environment, Terminal())  # SGR 1: bold, 31: red (ECMA-48)


def test_no_color_leaves_the_words_and_no_colour(environment):
    environment.setenv("NO_COLOR", "1")
    text = printed(environment, Terminal())
    assert not re.search(r"\x1b\[[0-9;]*[34][0-9]", text)  # SGR 30 to 49: the colours (ECMA-48)
    assert "FAIL" in text and "pass" in text


def test_what_is_no_terminal_gets_plain_text_80_wide(environment):
    stream = io.StringIO()
    text = printed(environment, stream)
    assert "\x1b" not in text
    assert max(map(cell_len, text.splitlines())) <= 80


def test_columns_decides_the_width(environment):
    environment.setenv("COLUMNS", "120")
    widest = max(map(cell_len, printed(environment, io.StringIO()).splitlines()))
    assert 80 < widest <= 120
    environment.setenv("COLUMNS", "400")
    assert max(map(cell_len, printed(environment, io.StringIO()).splitlines())) <= 120


@pytest.mark.parametrize("columns", ["0", "1", "19", "-5", "wide"])
def test_odd_columns_still_show_the_report(environment, columns):
    environment.setenv("COLUMNS", columns)
    text = printed(environment, io.StringIO())
    assert "FAIL" in text


@pytest.mark.parametrize("encoding", ["ascii", "latin-1"])
def test_stream_of_a_small_encoding_is_written_without_an_error(environment, encoding):
    raw = io.BytesIO()
    stream = io.TextIOWrapper(raw, encoding=encoding)
    environment.setattr(sys, "stdout", stream)
    show(review_report(reviewed(HIVE)))
    assert b"180 kohm" in raw.getvalue() and b"degC" in raw.getvalue()
