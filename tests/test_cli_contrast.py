"""`biasband contrast` at the command line: exit statuses, streams, options, and bad input."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from typer.testing import CliRunner

from biasband import cli
from biasband.signoff import contrasting

SAMPLES = Path(__file__).parents[1] / "samples"
QUICK = """
[stage]
title = "Contrast test"
topology = "divider"
polarity = "npn"

[supply]
voltage = "12 V ± 5 %"

[ambient]
min = "0 degC"
max = "50 degC"

[transistor]
gain = { min = 100, typ = 160, max = 300 }
test_current = "1 mA"
base_emitter_voltage = { min = "0.6 V", typ = "0.65 V", max = "0.7 V" }
leakage = "10 nA"
thermal_resistance = "250 K/W"
saturation_voltage = "0.2 V"

[target]
collector_current = "1 mA"

[resistors]
tolerance = "1 %"
snapping = "nearest"

[[require]]
id = "Q-1"
quantity = "collector_voltage"
at_least = "4 V"
at_most = "10 V"
"""
FROZEN = QUICK.replace('[target]\ncollector_current = "1 mA"\n', "").replace('snapping = "nearest"\n', "")
FROZEN = FROZEN.replace(
    "[[require]]",
    'R1.value = "100k"\nR2.value = "18k"\nRC.value = "5k1"\nRE.value = "1k"\n\n[[require]]',
)


def run(*arguments):
    """Run in this process; any exception but leaving with a status is a defect."""
    result = CliRunner().invoke(cli.app, ["contrast", *map(str, arguments)], catch_exceptions=False)
    assert "Traceback" not in result.output
    return result


@pytest.fixture
def quick(tmp_path):
    """A stage with free values that are snapped without a search."""
    path = tmp_path / "stage.toml"
    path.write_text(QUICK, encoding="utf-8")
    return path


def changed(path, old, new, text=QUICK):
    """The stage with a piece of its text changed."""
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")
    return path


def test_topologies_stand_side_by_side(quick):
    result = run(quick)
    assert (result.exit_code, result.stderr) == (0, "")
    for part in (
        "The same target in 5 topologies",
        "collector-feedback",
        "no yields required",
        "itself moves by",
    ):
        assert part in result.stdout
    # The lesson: a base resistor alone follows the gain, and fails; the divider does not.
    assert "divider             pass" in result.stdout and "base-resistor       FAIL" in result.stdout


def test_json_goes_to_standard_output(quick):
    result = run(quick, "--json", "--boards", "300", "--seed", "5")
    assert (result.exit_code, result.stderr) == (0, "")
    data = json.loads(result.stdout)
    assert (data["boards"], data["seed"]) == (300, 5)
    followed = {each["topology"]: each["steadiness"]["followed"]
                for each in data["topologies"] if each["verdict"]}  # fmt: skip
    assert followed["base-resistor"] > 0.9 and followed["divider"] < 0.3
    assert run(quick, "--json", "--boards", "300", "--seed", "5").stdout == result.stdout


def test_status_is_1_where_no_topology_passes(tmp_path):
    path = changed(tmp_path / "s.toml", 'at_least = "4 V"\nat_most = "10 V"', "at_least = 200")
    path = changed(path, '"collector_voltage"', '"voltage_gain"', path.read_text())
    result = run(path)
    assert result.exit_code == 1 and "None of 5 topologies passes" in result.stdout


def test_stage_with_all_values_lends_its_nominal_point(tmp_path):
    path = tmp_path / "frozen.toml"
    path.write_text(FROZEN, encoding="utf-8")
    result = run(path)
    assert result.exit_code == 0 and "lent by the nominal point" in result.stdout
    assert "R1 100 kΩ, R2 18 kΩ, RC 5.1 kΩ, RE 1 kΩ" in result.stdout


@pytest.mark.parametrize(
    ("old", "new", "reason"),
    [('"5k1"', '"51k"', "it is saturated"), ('"18k"', '"100 ohm"', "it is cut off")],
)
def test_stage_that_cannot_lend_a_target_is_status_2(tmp_path, old, new, reason):
    result = run(changed(tmp_path / "useless.toml", old, new, FROZEN))
    assert (result.exit_code, result.stdout) == (2, "")
    assert "useless.toml: target: missing, and the nominal point cannot lend one" in result.stderr
    assert reason in result.stderr


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (("--boards", "0"), ["--boards"]),
        (("--boards", "many"), ["--boards"]),
        (("--seed", "-1"), ["--seed"]),
        (("--stock", "none.csv"), ["none.csv"]),
        (("--tables", "nowhere"), ["nowhere"]),
        (("--keep", "RC"), ["--keep: not NAME=VALUE"]),
        (("--keep", "RQ=1k"), ["RQ"]),
    ],
)
def test_bad_input_is_status_2_with_the_reason(quick, options, words):
    result = run(quick, *options)
    assert (result.exit_code, result.stdout) == (2, "")
    assert all(word in result.stderr for word in words)


def test_stage_file_that_is_not_there_is_status_2():
    result = run("nowhere.toml")
    assert result.exit_code == 2 and "nowhere.toml" in result.stderr


def test_stage_that_cannot_exist_is_status_2(tmp_path):
    path = changed(tmp_path / "s.toml", '"12 V ± 5 %"', '"0.5 V ± 5 %"')
    result = run(path)
    assert result.exit_code == 2 and "cannot turn on a base-emitter junction" in result.stderr


def test_stock_list_is_what_values_are_chosen_from(quick):
    found = json.loads(run(quick, "--stock", SAMPLES / "parts" / "invented_drawer.csv", "--json").stdout)
    built = [each for each in found["topologies"] if each["verdict"]]
    assert built and all(part["stock"] for each in built for part in each["parts"].values())
    assert any(each["path"].endswith("invented_drawer.csv") for each in found["files"])


def test_value_that_is_kept_stays_in_its_own_topology(quick):
    found = json.loads(run(quick, "--keep", "RC=4k7", "--json").stdout)["topologies"]
    parts = {each["topology"]: each["parts"] for each in found if each["verdict"]}
    assert parts["divider"]["RC"]["value"] == 4700.0 and parts["divider"]["RC"]["kept"] is True
    assert not any(parts[name]["RC"]["kept"] for name in ("base-resistor", "collector-feedback"))


def test_interruption_is_status_130(quick, monkeypatch):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(contrasting, "steadiness", interrupted)
    result = run(quick)
    assert (result.exit_code, result.stdout) == (130, "")  # 128 + SIGINT, as shells count


def test_help_names_the_options():
    result = CliRunner().invoke(cli.app, ["contrast", "--help"], env={"COLUMNS": "200"})
    assert result.exit_code == 0
    for option in ("--json", "--boards", "--seed", "--tables", "--stock", "--keep"):
        assert option in result.stdout
