"""The command line: arguments in, exit status out, and never a traceback for bad input."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
import time
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from terminal import Terminal
from typer.testing import CliRunner

from biasband import cli
from biasband.files.stage_file import read_stage
from biasband.signoff import study

ROOT = Path(__file__).parents[1]
SAMPLES = ROOT / "samples"
HIVE, FAILING = SAMPLES / "hive_microphone.toml", SAMPLES / "workshop_intercom_fails.toml"
TEXT = Path(__file__).with_name("files").joinpath("hive_microphone.toml").read_text(encoding="utf-8")
FEW = ("--boards", "1200")
"""Enough to show a yield of 99.73 %, which takes ln 0.05 / ln 0.9973 = 1109 boards."""


def run(*arguments):
    """Run in this process; any exception but leaving with a status is a defect."""
    result = CliRunner().invoke(cli.app, [str(each) for each in arguments], catch_exceptions=False)
    assert "Traceback" not in result.output
    return result


def start(*arguments, **environment):
    """Run as a program of its own."""
    return subprocess.run(
        [sys.executable, *arguments],
        cwd=ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT), **environment},
        capture_output=True,
        stdin=subprocess.DEVNULL,
        check=False,
    )


@pytest.fixture
def stage_path(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_text(TEXT, encoding="utf-8")
    return path


# Exit statuses and the two streams (formats.md, "Commands").


def test_review_of_a_passing_stage_is_status_0():
    result = run("review", HIVE, *FEW)
    assert (result.exit_code, result.stderr) == (0, "")
    assert "PASS: 2 requirements" in result.stdout


def test_review_of_a_failing_stage_is_status_1():
    result = run("review", FAILING, *FEW)
    assert (result.exit_code, result.stderr) == (1, "")
    assert "FAIL: 2 of 2 requirements fail, 0 of 8 standing checks fail" in result.stdout


def test_inconclusive_review_is_status_1(stage_path):
    stage_path.write_text(TEXT.replace('"9 V ± 10 %"', '"9 V"'), encoding="utf-8")
    result = run("review", stage_path, *FEW)
    assert result.exit_code == 1
    assert "INCONCLUSIVE" in result.stdout and "supply tolerance" in " ".join(result.stdout.split())


def test_json_is_all_that_stands_on_standard_output():
    result = run("review", HIVE, *FEW, "--seed", 7, "--json")
    found = json.loads(result.stdout)
    assert (found["verdict"], found["boards"], found["seed"]) == ("pass", 1200, 7)
    assert (result.exit_code, result.stderr) == (0, "")


def test_seed_changes_the_boards_and_nothing_else():
    first, second = (
        json.loads(run("review", HIVE, *FEW, "--seed", seed, "--json").stdout) for seed in (1, 2)
    )
    assert first["spread"] != second["spread"]
    assert first["corners"] == second["corners"] and first["rss"] == second["rss"]


def test_defaults_are_those_of_the_python_api():
    found = json.loads(run("spread", HIVE, "--json").stdout)
    assert (found["boards"], found["seed"]) == (study.BOARDS, 1)


# Several stages.


def test_several_stages_give_a_line_each_and_the_worst_status():
    result = run("review", HIVE, FAILING, *FEW)
    assert result.exit_code == 1
    lines = result.stdout.splitlines()
    assert len([line for line in lines if ".toml" in line]) == 2
    assert any(line.startswith("pass") for line in lines) and any(line.startswith("FAIL") for line in lines)


def test_faulty_stage_among_several_is_named_and_the_others_are_reviewed():
    result = run("review", "nowhere.toml", HIVE, "nowhere_else.toml", *FEW)
    assert result.exit_code == 2
    assert "nowhere.toml: no such file" in result.stderr and "nowhere_else.toml: no such" in result.stderr
    assert "pass" in result.stdout and "bad input" in result.stdout


def test_json_of_several_stages_is_a_list_in_their_order():
    result = run("review", HIVE, "nowhere.toml", *FEW, "--json")
    good, bad = json.loads(result.stdout)
    assert good["verdict"] == "pass"
    assert any("no such file" in line for line in bad["error"])


def test_folder_stands_for_its_stage_files(tmp_path):
    (tmp_path / "b.toml").write_text(TEXT, encoding="utf-8")
    (tmp_path / "a.toml").write_text(TEXT, encoding="utf-8")
    (tmp_path / "notes.txt").write_text("no stage", encoding="utf-8")
    (tmp_path / "part.toml").write_text("gain = 100", encoding="utf-8")
    (tmp_path / "folder.toml").mkdir()
    result = run("review", tmp_path, *FEW)
    assert result.exit_code == 0
    shown = "".join(result.stdout.split())  # a long temporary folder breaks the lines anywhere
    assert re.findall(r"(\w+)\.toml", shown) == ["a", "b"]
    assert "part.toml: left out" in result.stderr and "folder.toml: left out" in result.stderr


def test_faulty_toml_in_a_folder_is_bad_input_not_left_out(tmp_path):
    (tmp_path / "good.toml").write_text(TEXT, encoding="utf-8")
    (tmp_path / "bad.toml").write_text("[stage", encoding="utf-8")
    result = run("review", tmp_path, *FEW)
    assert result.exit_code == 2
    assert "bad.toml:1: not TOML" in result.stderr and "pass" in result.stdout


@pytest.mark.parametrize("part", [True, False])
def test_folder_without_stage_files_is_bad_input(tmp_path, part):
    if part:
        (tmp_path / "part.toml").write_text("gain = 100", encoding="utf-8")
    result = run("review", tmp_path)
    assert (result.exit_code, result.stdout) == (2, "")
    assert "a folder without stage files" in result.stderr


# The other commands.


def test_design_shows_formulas_and_is_status_0(stage_path):
    result = run("design", stage_path)
    assert result.exit_code == 0
    assert "hand: V_B / I = 2.8 V / 38.46 µA = 72.8 kΩ, I = 10 times I_B" in result.stdout


def test_design_writes_a_stage_with_the_values_frozen(stage_path, tmp_path):
    new = tmp_path / "frozen.toml"
    result = run("design", stage_path, "--write", new, "--json")
    assert result.exit_code == 0 and "4 values frozen" in result.stderr
    values = {name: part["value"] for name, part in json.loads(result.stdout)["parts"].items()}
    assert {r.name: r.value for r in read_stage(new).resistors} == values
    assert "values: 4 frozen\n" in run("review", new, *FEW).stdout


def test_design_never_overwrites(stage_path):
    before = stage_path.read_bytes()
    result = run("design", stage_path, "--write", stage_path)
    assert (result.exit_code, result.stdout) == (2, "")
    assert "exists already" in result.stderr
    assert stage_path.read_bytes() == before


def test_snap_finds_the_preferred_value():
    # IEC 60063, E12: √(4.7·5.6) = 5.13, so 5.0 goes to 4.7 and 5.2 to 5.6.
    found = json.loads(run("snap", "5k", "5.2 kohm", "--series", "E12", "--json").stdout)
    assert [(each["chosen"], each["code"]) for each in found] == [(4700.0, "4K7"), (5600.0, "5K6")]


def test_snap_reports_every_faulty_value():
    result = run("snap", "4k7", "5,1k", "4k7x", "0")
    assert (result.exit_code, result.stdout) == (2, "")
    for problem in ("a comma", '"k7x" is no unit', "above 0"):
        assert problem in result.stderr


def test_snap_knows_its_series():
    result = run("snap", "4k7", "--series", "E7")
    assert result.exit_code == 2
    assert "'E7'" in result.stderr and "E24" in result.stderr


@pytest.mark.parametrize("command", ["corners", "spread"])
def test_analysis_in_depth_is_status_0_whatever_the_verdict(command):
    result = run(command, FAILING, *(FEW if command == "spread" else ()))
    assert (result.exit_code, result.stderr) == (0, "")
    assert "collector_voltage" in result.stdout


def test_json_of_the_corners_is_that_of_the_review():
    whole = json.loads(run("review", HIVE, *FEW, "--json").stdout)
    assert json.loads(run("corners", HIVE, "--json").stdout)["corners"] == whole["corners"]


# Bad input (issue 2, "Bad input that must be tried").

SUPPLY = TEXT[TEXT.index("[supply]") : TEXT.index("[ambient]")]
FAULTY = {
    "empty": ("", "stage: missing"),
    "not TOML": ("this is not TOML", ":1: not TOML"),
    "wrong type": (TEXT.replace('max_power = "440 mW"', "max_power = true"), "transistor.max_power: neither"),
    "missing section": (TEXT.replace(SUPPLY, ""), "supply: missing"),
    "unknown topology": (TEXT.replace('"divider"  ', '"bridge"  '), "stage.topology: unknown"),
    "key one letter off": (
        TEXT.replace("collector_cur", "colector_cur"),
        'did you mean "collector_current"?',
    ),
    "min above max": (TEXT.replace("min = 165", "min = 500"), "transistor.gain.min"),
    "negative resistance": (TEXT.replace('"3k3"', '"-3k3"'), "resistors.RC.value: not above 0 ohm"),
    "zero supply": (TEXT.replace('"9 V ± 10 %"', '"0 V ± 10 %"'), "supply.voltage"),
    "tolerance below 0": (TEXT.replace('tolerance = "1 %"', 'tolerance = "-1 %"'), "resistors.tolerance"),
    "tolerance 100 %": (TEXT.replace('tolerance = "1 %"', 'tolerance = "100 %"'), "resistors.tolerance"),
    "gain 0": (TEXT.replace("min = 165", "min = 0"), "transistor.gain.min: not above 0"),
    "supply below V_BE": (TEXT.replace('"9 V ± 10 %"', '"0.5 V ± 1 %"'), "cannot turn on"),
    "target that saturates": (TEXT.replace('"mid-swing"', '"0.1 V"'), "V_CE(sat)"),
    "emitter above supply": (TEXT.replace('"supply / 9"', '"12 V"'), "target.emitter_voltage"),
    "2-million-ohm RC": (TEXT.replace('"3k3"', '"2M"'), "1 mA through RC 2 MΩ would need the collector at"),
    "below 0 K": (TEXT.replace('"-10 degC"', '"-300 degC"'), "ambient.min: below 0 K"),
    "nominal ambient outside": (TEXT.replace('"25 degC"', '"80 degC"'), "ambient: the nominal value"),
    "unknown quantity": (TEXT.replace('"collector_voltage"', '"colector_voltage"'), "unknown quantity"),
    "at_least above at_most": (TEXT.replace('"7 V"', '"2 V"'), "require[1].at_least"),
    "binary": (b"\x7fELF\0\0\1", "a binary file"),
    "10 MB": (b"# x\n" * 2_500_000, "too large"),
    "not UTF-8": (b"title = '\xff'", "not UTF-8"),
}


@pytest.mark.parametrize("command", ["review", "design", "corners", "spread"])
@pytest.mark.parametrize("name", FAULTY)
def test_bad_stage_file_is_status_2_and_says_what_is_wrong(name, command, stage_path):
    content, message = FAULTY[name]
    assert content != TEXT
    stage_path.write_bytes(content if isinstance(content, bytes) else content.encode())
    result = run(command, stage_path)
    assert (result.exit_code, result.stdout) == (2, "")
    assert message in result.stderr and str(stage_path) in result.stderr


def test_all_faults_are_shown_at_once(stage_path):
    faulty = TEXT.replace("min = 165", "min = 0").replace('"3k3"', '"-3k3"').replace('"npn"', '"nnp"')
    stage_path.write_text(faulty, encoding="utf-8")
    stderr = run("review", stage_path).stderr
    assert all(part in stderr for part in ("stage.polarity", "transistor.gain.min", "resistors.RC.value"))


@pytest.mark.parametrize("command", ["review", "design", "corners", "spread"])
def test_missing_file_is_status_2(command):
    result = run(command, "nowhere.toml")
    assert (result.exit_code, result.stdout) == (2, "")
    assert "nowhere.toml: no such file" in result.stderr


@pytest.mark.parametrize("command", ["design", "corners", "spread"])
def test_folder_where_a_file_is_wanted_is_status_2(command, tmp_path):
    result = run(command, tmp_path)
    assert result.exit_code == 2
    assert "a directory, not a file" in result.stderr


@pytest.mark.parametrize(
    "arguments",
    [
        (), ("frob",), ("review",), ("review", HIVE, "--boards", "0"), ("review", HIVE, "--boards", "-1"),
        ("review", HIVE, "--boards", "many"), ("review", HIVE, "--boards", "1000000000000"),
        ("spread", HIVE, "--boards", "0"), ("review", HIVE, "--seed", "-1"),
        ("corners", HIVE, "--boards", "9"), ("design", HIVE, HIVE), ("snap",), ("review", HIVE, "--frob"),
    ],
)  # fmt: skip
def test_wrong_usage_is_status_2(arguments):
    assert run(*arguments).exit_code == 2


def test_message_cannot_carry_control_characters(stage_path):
    stage_path.write_text(TEXT.replace('"npn"', '"\\u001b[31mnpn"'), encoding="utf-8")
    result = run("review", stage_path)
    assert result.exit_code == 2 and "polarity" in result.stderr
    assert "\x1b" not in result.stderr


@pytest.mark.parametrize("name", ["a\x1b[31m.toml", "a\nb.toml", "\udcff.toml", "[red].toml", "x\0y.toml"])
def test_odd_file_name_is_status_2(name):
    result = run("review", name)
    assert (result.exit_code, result.stdout) == (2, "")
    assert "\x1b" not in result.stderr


LINES = TEXT.splitlines()
ODD = st.one_of(
    st.text(max_size=30),
    st.sampled_from(['"1e300 V"', "1e-300", "nan", "-inf", "[]", "{}", '"5 %"', '"2M"', "true", "1e9", "-1"]),
    st.floats().map(repr),
)


@settings(deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(line=st.integers(0, len(LINES) - 1), odd=ODD, keep_key=st.booleans(), command=st.sampled_from(
    [("review", "--boards", "16"), ("design",), ("spread", "--boards", "16", "--json")]
))  # fmt: skip
def test_no_odd_text_in_a_stage_file_gives_a_traceback(stage_path, line, odd, keep_key, command):
    key, equals, _ = LINES[line].partition("=")
    changed = f"{key}{equals} {odd}" if keep_key and equals else odd
    text = "\n".join([*LINES[:line], changed, *LINES[line + 1 :]])
    stage_path.write_bytes(text.encode("utf-8", "surrogatepass"))
    name, *options = command
    result = run(name, stage_path, *options)
    assert result.exit_code in (0, 1, 2)
    assert (result.exit_code == 2) is (result.stdout == "")


@settings(deadline=None, max_examples=50)
@given(values=st.lists(st.text(max_size=12), min_size=1, max_size=3))
def test_no_odd_value_to_snap_gives_a_traceback(values):
    assert run("snap", "--", *values).exit_code in (0, 2)


# As a program of its own.


def test_help_is_instant():
    help_then_modules = "app(['--help'], standalone_mode=False); print(*sys.modules)"
    program = start("-c", f"import sys; from biasband.cli import app; {help_then_modules}")
    assert program.returncode == 0, program.stderr
    loaded = set(program.stdout.decode().split())
    assert b"review" in program.stdout
    assert not loaded & {"pandas", "scipy.stats", "scipy.optimize", "matplotlib", "rich", "tomlkit"}


def test_commands_have_a_help_of_their_own():
    for command in ("review", "design", "snap", "corners", "spread"):
        result = run(command, "--help")
        assert result.exit_code == 0 and "--json" in result.stdout


def test_version_is_told():
    program = start("-m", "biasband", "--version")
    assert program.returncode == 0
    assert program.stdout.startswith(b"biasband ")


@pytest.mark.parametrize("encoding", ["ascii", "latin-1"])
def test_program_writes_to_a_small_encoding(encoding):
    program = start("-m", "biasband", "review", str(HIVE), *FEW, PYTHONIOENCODING=encoding, COLUMNS="80")
    assert (program.returncode, program.stderr) == (0, b"")
    assert b"180 kohm" in program.stdout
    assert max(map(len, program.stdout.splitlines())) <= 80


def test_reader_that_leaves_early_sees_no_traceback():
    with subprocess.Popen(
        [sys.executable, "-m", "biasband", "review", str(FAILING), *FEW],
        cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE,
    ) as program:  # fmt: skip
        assert program.stdout is not None and program.stderr is not None
        program.stdout.close()
        assert program.stderr.read() == b""
    assert program.returncode == 1  # the verdict's own: the reader has seen enough


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no device that is always full")
def test_full_disk_is_said_without_a_traceback():
    with open("/dev/full", "wb") as full:
        program = subprocess.run(
            [sys.executable, "-m", "biasband", "snap", "5k"],
            cwd=ROOT, stdout=full, stderr=subprocess.PIPE, check=False,
        )  # fmt: skip
    assert program.returncode == 2
    assert b"standard output cannot be written" in program.stderr and b"Traceback" not in program.stderr


def test_interrupt_leaves_without_a_traceback(monkeypatch):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(study, "review", interrupted)
    result = run("review", HIVE)
    assert (result.exit_code, result.stdout) == (130, "")  # 128 + SIGINT, as shells count


@pytest.mark.parametrize("paths", [[HIVE], [HIVE, FAILING]])
def test_progress_goes_to_a_terminal_on_standard_error_only(monkeypatch, paths):
    from biasband.show import output, progress_bar

    monkeypatch.setattr(progress_bar, "PATIENCE", 0.0)
    for name in ("NO_COLOR", "TTY_COMPATIBLE", "TTY_INTERACTIVE"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("TERM", "xterm-256color")
    terminal = Terminal()
    monkeypatch.setattr(sys, "stderr", terminal)
    seen = []
    for path, progress in output.watched([str(path) for path in paths], doing="reviewing"):
        progress(0.5)
        seen.append(path)
        deadline = time.monotonic() + 20.0
        while f"reviewing {path}"[:30] not in terminal.text and time.monotonic() < deadline:
            time.sleep(0.02)
    assert seen == list(map(str, paths))
    assert "reviewing" in terminal.text
