"""The bar: one line on a terminal, late, gone when the work is done."""

from __future__ import annotations

import re
import sys
import time

import pytest
from terminal import Terminal

from biasband.show import output, progress_bar

STEERING = re.compile(r"\x1b\[[0-9;?]*[A-Za-z]")


def on_terminal(monkeypatch, patience=0.0):
    """Standard error as a terminal of 80 columns; not a fixture, as pytest sets sys.stderr after those."""
    for name in ("NO_COLOR", "TTY_COMPATIBLE", "TTY_INTERACTIVE"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("TERM", "xterm-256color")
    monkeypatch.setenv("COLUMNS", "80")
    monkeypatch.setattr(progress_bar, "PATIENCE", patience)
    terminal = Terminal()
    monkeypatch.setattr(sys, "stderr", terminal)
    return terminal


def wait_for(terminal, text):
    """Until the bar has drawn something; it draws ten times a second."""
    deadline = time.monotonic() + 20.0
    while text not in terminal.text and time.monotonic() < deadline:
        time.sleep(0.02)
    assert text in terminal.text


def test_work_that_is_done_at_once_shows_no_bar(monkeypatch):
    terminal = on_terminal(monkeypatch, patience=60.0)
    with output.bar("sampling 9 boards", 9) as progress:
        progress(0.5)
    assert terminal.text == ""


def test_bar_appears_after_a_second():
    assert progress_bar.PATIENCE == 1.0  # formats.md, "Commands": on work over a second


def test_long_work_shows_speed_and_time_left_on_one_line_and_leaves_none_of_it(monkeypatch):
    terminal = on_terminal(monkeypatch)
    with output.bar("sampling 1000000000000 boards", 10**12) as progress:
        wait_for(terminal, "sampling 1000000000000 boards")
        progress(1e-7)
        wait_for(terminal, " left")
        line = STEERING.sub("", terminal.text).rpartition("\r")[2]
        assert re.search(r"sampling 1000000000000 boards .* [0-9]+ boards/s, about [0-9]+ \w+ left *$", line)
    plain = STEERING.sub("", terminal.text)
    assert max(map(len, re.split(r"[\r\n]", plain))) <= 76  # room for ^C in 80 columns
    assert plain.count("\n") == 1  # rich ends its line and goes up again to clear it
    assert terminal.text.rstrip().endswith("\x1b[1A\x1b[2K")


def test_long_name_gives_way_to_bar_and_time_left(monkeypatch):
    terminal = on_terminal(monkeypatch)
    with output.bar("reviewing " + "very/" * 40 + "long.toml") as progress:
        progress(0.5)
        wait_for(terminal, "seconds left")
    plain = STEERING.sub("", terminal.text)
    assert max(map(len, re.split(r"[\r\n]", plain))) <= 76 and "…" in plain and "━" in plain


def test_message_during_the_work_stays_above_the_bar(monkeypatch):
    terminal = on_terminal(monkeypatch)
    with output.bar("sampling 9 boards", 9):
        wait_for(terminal, "sampling 9 boards")
        output.complain("9 boards at about 3 a second")
    assert "9 boards at about 3 a second\n" in STEERING.sub("", terminal.text)


def test_name_in_brackets_is_no_markup(monkeypatch):
    terminal = on_terminal(monkeypatch)
    with output.bar("reviewing [red].toml"):
        wait_for(terminal, "reviewing [red].toml")


@pytest.mark.parametrize(
    ("done", "boards", "seconds", "told"),
    [
        (0.0, 1000, 2.0, ""),
        (0.25, 1000, 10.0, "25 boards/s, about 30 seconds left"),  # 250 boards in 10 s, 750 to come
        (0.25, 0, 10.0, "about 30 seconds left"),
        (1e-6, 10**12, 10.0, "100000 boards/s, about 116 days left"),  # 10^7 s = 115.7 days
        (1.0, 1000, 10.0, "100 boards/s, about 0 seconds left"),
    ],
)
def test_pace_is_speed_and_time_left(done, boards, seconds, told):
    assert progress_bar.pace(done, boards, seconds) == told


def test_no_bar_off_a_terminal(capsys):
    with output.bar("sampling 9 boards", 9) as progress:
        progress(0.5)
    assert capsys.readouterr().err == ""
