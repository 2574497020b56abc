"""`biasband drift` at the command line: exit statuses, streams, options, and bad input."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from typer.testing import CliRunner

from biasband import cli

SAMPLES = Path(__file__).parents[1] / "samples"
GAUGE = SAMPLES / "river_gauge.toml"
FROZEN = """
[stage]
title = "Drift test"
topology = "divider"
polarity = "npn"

[supply]
voltage = "18 V"

[transistor]
gain = { min = 80, typ = 100, max = 120 }
test_current = "3 mA"
base_emitter_voltage = "0.7 V"

[resistors]
tolerance = "1 %"
R1.value = "33k"
R2.value = "12k"
RC.value = "1k2"
RE.value = "1k"
"""
AMBIENT = '\n[ambient]\nmin = "0 degC"\nmax = "60 degC"\n'


def run(*arguments):
    """Run in this process; any exception but leaving with a status is a defect."""
    result = CliRunner().invoke(cli.app, ["drift", *map(str, arguments)], catch_exceptions=False)
    assert "Traceback" not in result.output
    return result


@pytest.fixture
def frozen(tmp_path):
    """A stage whose values are all given, without a target and without an ambient."""
    path = tmp_path / "stage.toml"
    path.write_text(FROZEN, encoding="utf-8")
    return path


@pytest.fixture
def warm(tmp_path):
    """The same in an ambient range."""
    path = tmp_path / "warm.toml"
    path.write_text(FROZEN + AMBIENT, encoding="utf-8")
    return path


def test_sample_drifts_over_its_own_ambient():
    result = run(GAUGE, "--points", 3)
    assert (result.exit_code, result.stderr) == (0, "")
    assert "ambient -20 °C to 60 °C in steps of 40.0 K; nominal ambient 15 °C" in result.stdout
    for part in ("emitter_voltage: ", "output_resistance: ", "●", "G-1 emitter_voltage", "S(I_CO)"):
        assert part in result.stdout


def test_options_set_the_sweep(warm):
    result = run(warm, "--from", "-40 degC", "--to", "85 degC", "--points", 6, "--json")
    assert (result.exit_code, result.stderr) == (0, "")
    data = json.loads(result.stdout)
    assert data["temperatures"] == pytest.approx([233.15, 258.15, 283.15, 298.15, 308.15, 333.15, 358.15])
    assert list(data["drift"]) == ["collector_voltage", "collector_current", "symmetric_peak_swing"]
    assert data["nominal_ambient"] == data["start"] == 298.15
    assert set(data) >= {"stage", "files", "biasband", "parts", "regions", "limits", "stability", "warnings"}


def test_stage_with_all_values_and_no_target_drifts(warm):
    data = json.loads(run(warm, "--points", 2, "--json").stdout)
    # Bell, Electronic Devices and Circuits, ex. 5-17: S(I_CO) 9.01 for this divider (the slip mended).
    assert data["stability"]["changes"]["leakage"]["factor"] == pytest.approx(9.01, abs=0.005)
    assert data["parts"]["R1"]["chosen"] is False


def test_stage_without_an_ambient_is_refused_unless_both_ends_are_given(frozen):
    for options in ((), ("--from", "0 degC"), ("--to", "80 degC")):
        result = run(frozen, *options)
        assert (result.exit_code, result.stdout) == (2, "")
        assert "no ambient range to sweep" in result.stderr
    assert run(frozen, "--from", "0 degC", "--to", "80 degC", "--points", 2).exit_code == 0


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (("--from", "85 degC", "--to", "-40 degC"), ["85 °C: not below -40 °C"]),
        (("--from", "149 K"), ["from (coldest): outside what can be computed; read -124.15 °C"]),
        (("--to", "251 degC"), ["to (hottest): outside what can be computed; read 251 °C"]),
        (("--points", "1"), ["points: a whole number from 2 to 501; read 1"]),
        (("--points", "-3"), ["read -3"]),
        (("--points", "many"), ["--points"]),
        (("--from", "cold"), ["from (coldest): not a figure; read 'cold'"]),
        (("--from", "-40"), ["from (coldest): no unit"]),
        (("--from", "-300 degC"), ["below 0 K"]),
        (("--from", ""), ["from (coldest): not a figure"]),
        (("--from", "1", "--to", "2 m", "--points", "0"), ["from (coldest)", "to (hottest)", "points"]),
        (("--keep", "RC"), ["--keep: not NAME=VALUE"]),
        (("--keep", "RC=3k3"), ["RC"]),
        (("--stock", "none.csv"), ["none.csv"]),
        (("--tables", "nowhere"), ["nowhere"]),
    ],
)
def test_bad_input_is_status_2_with_the_reason(warm, options, words):
    result = run(warm, *options)
    assert (result.exit_code, result.stdout) == (2, "")
    assert all(word in result.stderr for word in words)


def test_stage_file_that_is_not_there_is_status_2():
    result = run("nowhere.toml")
    assert result.exit_code == 2 and "nowhere.toml" in result.stderr


def test_value_is_kept_for_a_sweep():
    data = json.loads(run(GAUGE, "--points", 2, "--keep", "RE=1k21", "--json").stdout)
    assert data["parts"]["RE"]["value"] == 1210.0 and data["parts"]["RE"]["kept"] is True


def test_runaway_inside_the_sweep_is_a_result_and_no_error(tmp_path):
    path = tmp_path / "hot.toml"
    heated = FROZEN.replace('test_current = "3 mA"', 'test_current = "3 mA"\nleakage = "1 uA"')
    heated = heated.replace("[resistors]", 'thermal_resistance = "500 K/W"\n\n[resistors]')
    heated = heated.replace('"33k"', '"330k"').replace('"12k"', '"120k"').replace('"1k"', '"10 ohm"')
    heated = heated.replace('"1k2"', '"10 ohm"').replace('"1 %"', '"0 %"')
    path.write_text(heated + AMBIENT, encoding="utf-8")
    result = run(path, "--to", "120 degC", "--points", 4)
    assert result.exit_code == 0
    assert "n/a" in result.stdout and "thermal runaway" in result.stdout


def test_help_names_the_options():
    result = CliRunner().invoke(cli.app, ["drift", "--help"], env={"COLUMNS": "200"})
    assert result.exit_code == 0
    for option in ("--from", "--to", "--points", "--json", "--tables", "--stock", "--keep"):
        assert option in result.stdout
