"""The command `spread`: goals, draws that are saved, interruptions, and input that will not do."""

from __future__ import annotations

import csv
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from typer.testing import CliRunner

from biasband import cli
from biasband.boards import quasi
from biasband.boards.draws import coordinates
from biasband.boards.in_use import PLACES
from biasband.boards.job import Job
from biasband.boards.sampling import sample
from biasband.boards.streams import SEQUENCE
from biasband.files.stage_file import read_stage
from biasband.margins.holding import looked_into, points_met
from biasband.signoff import study
from biasband.variation.corners import corners
from biasband.variation.evaluation import cut_off_current

ROOT = Path(__file__).parents[1]
TEXT = Path(__file__).with_name("files").joinpath("hive_microphone.toml").read_text(encoding="utf-8")
VALUES = {"R1": "130k", "R2": "56k", "RE": "1k6"}
FROZEN = TEXT.replace(
    "[[require]]", "".join(f'[resistors.{n}]\nvalue = "{v}"\n' for n, v in VALUES.items()) + "[[require]]", 1
)
"""Every value given: nothing to choose, so that a run is quick."""

FEW = ("--boards", "600")


def run(*arguments):
    """Run in this process; any exception but leaving with a status is a defect."""
    result = CliRunner().invoke(cli.app, ["spread", *map(str, arguments)], catch_exceptions=False)
    assert "Traceback" not in result.output
    return result


def begin(*arguments, **options):
    """Begin a program of its own, in a group of processes of its own, as a terminal does."""
    return subprocess.Popen(
        [sys.executable, "-m", "biasband", "spread", *map(str, arguments)],
        cwd=ROOT, env={**os.environ, "PYTHONPATH": os.pathsep.join([str(ROOT), *sys.path])},
        stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        encoding="utf-8", start_new_session=True, **options,
    )  # fmt: skip


@pytest.fixture
def stage(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_text(FROZEN, encoding="utf-8")
    return path


# How many boards, from where, until when.


def test_boards_as_a_power_are_that_many(stage):
    assert json.loads(run(stage, "--boards", "2^9", "--json").stdout)["boards"] == 512


@pytest.mark.parametrize("text", ["0", "-5", "many", "1.5"])
def test_number_of_boards_that_will_not_do_is_told_what_will(stage, text):
    result = run(stage, "--boards", text)
    assert (result.exit_code, result.stdout) == (2, "")
    assert (
        f"--boards: a whole number from 1 to 10^18, as in 100000, 1e6 or 2^20; read {text!r}" in result.stderr
    )


def test_quasi_random_boards_are_rounded_up_and_both_numbers_are_told(stage):
    # 16 scramblings, a power of two in each: 330 / 16 = 20.6, so 32 in each, 512.
    options = ("--sampling", "quasi-random", "--boards", "330")
    found = json.loads(run(stage, *options, "--json").stdout)
    assert (found["sampling"], found["boards"], found["asked"]) == ("quasi-random", 512, 330)
    shown = " ".join(run(stage, *options).stdout.split())
    assert "512 boards" in shown and "rounded up from 330" in shown


def test_more_quasi_random_boards_than_there_are_points_are_refused_at_once(stage):
    result = run(stage, "--sampling", "quasi-random", "--boards", "10^12")
    assert (result.exit_code, result.stdout) == (2, "")
    assert "boards: from 1 to 17179869184 quasi-random ones; read 1000000000000" in result.stderr  # 16·2^30


def test_run_that_knows_enough_is_status_0(stage):
    # Any yield is known to ±40 % by 600 boards: at worst ±1.96·√(0.25/600) = ±4 %.
    result = run(stage, *FEW, "--until", "yield ± 40 %", "--json")
    found = json.loads(result.stdout)
    assert (result.exit_code, found["ending"], found["until"]) == (0, "good enough", "yield ± 40 %")


def test_run_that_cannot_know_enough_is_status_1_and_still_shown(stage):
    # However many of 600 boards hold, their interval is wider than ±0.01 %: 1 − 0.025^(1/600) is 0.61 %.
    result = run(stage, *FEW, "--until", "yield +/- 0.01 %", "--json")
    found = json.loads(result.stdout)
    assert (result.exit_code, found["ending"], found["boards"]) == (1, "not good enough", 600)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("--until", "nonsense"), "--until: read 'nonsense'; allowed: \"yield ± 0.1 %\""),
        (("--until", "yield ± 90 %"), "above 0 and below 50 %"),
        (("--until", "yield"), "--until: read 'yield'"),
        (("--until", "2 digits", "--sampling", "quasi-random"), "on plain boards only"),
        (("--sampling", "fair"), "'fair' is not one of 'plain', 'quasi-random'"),
        (("--cluster", "nonsense"), "--cluster"),
        (("--save", "no/such/draws.csv"), "there is no such folder"),
        (("--save", "draws.txt"), "--save: a file that ends in .csv or .npz; read draws.txt"),
        (("--save", ""), "the name of a new file is missing"),
        (
            ("--save", "x.npz", "--boards", "2e6"),
            "from 1 to 1048576 --boards, which are held in memory",
        ),
        (("--save", "x.npz", "--until", "2 digits"), "read 16777216"),
        (("--save", "x.csv", "--cluster", "tcp://127.0.0.1:9"), "without --cluster"),
    ],
)
def test_bad_option_is_status_2_and_says_what_is_allowed(stage, monkeypatch, tmp_path, arguments, message):
    monkeypatch.chdir(tmp_path)
    result = run(stage, *arguments)
    assert (result.exit_code, result.stdout) == (2, "")
    assert message in " ".join(result.stderr.split())
    assert os.listdir(tmp_path) == ["stage.toml"]


def test_cluster_that_nobody_answers_for_is_status_2(stage):
    pytest.importorskip("distributed")
    result = run(stage, *FEW, "--cluster", "tcp://127.0.0.1:9")  # the port "discard": nobody listens there
    assert (result.exit_code, result.stdout) == (2, "")
    assert "tcp://127.0.0.1:9" in result.stderr


FAULTY = {
    "hollow wider than the tolerance": (
        ('tolerance = "1 %"', 'tolerance = "1 %"\ndistribution = "hollow"\nhollow_within = "2 %"'),
        "hollow_within: not below the tolerance of R1",
    ),
    "tracking wider than the tempco": (
        ('life_drift = "0.5 %"', 'life_drift = "0.5 %"\ngroup = "A"\ntracking = "300 ppm/K"'),
        "tracking: above the tempco of R1",
    ),
}


@pytest.mark.parametrize("name", FAULTY)
def test_bad_spread_of_a_part_is_status_2_and_says_where(stage, name):
    (old, new), message = FAULTY[name]
    stage.write_text(FROZEN.replace(old, new, 1), encoding="utf-8")
    result = run(stage, *FEW)
    assert (result.exit_code, result.stdout) == (2, "")
    assert message in result.stderr and str(stage) in result.stderr


def test_gain_that_does_not_vary_is_no_contributor_and_no_fault(stage):
    found = []
    for gain in ("min = 165, typ = 260, max = 410", "min = 260, typ = 260, max = 260"):
        stage.write_text(FROZEN.replace("min = 165, typ = 260, max = 410", gain), encoding="utf-8")
        found.append(json.loads(run(stage, *FEW, "--json").stdout)["causes"]["collector_voltage"]["low"])
    assert ["gain" in causes for causes in found] == [True, False]


@pytest.mark.parametrize("sampling", ["plain", "quasi-random"])
@pytest.mark.parametrize("boards", ["1", "2"])
def test_hardly_any_boards_are_shown_for_what_they_are(stage, sampling, boards):
    result = run(stage, "--boards", boards, "--sampling", sampling)
    assert result.exit_code == 0 and "collector_voltage" in result.stdout


# Draws that are saved.


def expected(path, boards):
    """What `sampling.sample`, which the review uses, gives for these boards, and the coordinates it draws."""
    stage = study.design(read_stage(path)).stage
    measures, cut_off = looked_into(stage), cut_off_current(stage)
    points = points_met(stage, corners(stage, measures, cut_off=cut_off), measures)
    found = sample(stage, measures, points, boards=boards, seed=3, cut_off=cut_off).spread
    values = {
        f"{name}.{place}": getattr(each, place).values for name, each in found.items() for place in PLACES
    }
    drawn = coordinates(stage, slice(0, boards), seed=3)
    return {**values, **{f"{name}.coordinate": column for name, column in drawn.items()}}


def load_csv(path):
    with open(path, encoding="utf-8", newline="") as file:
        names = next(csv.reader(file))
        return dict(zip(names, np.loadtxt(file, delimiter=",").T, strict=True))


def load_npz(path):
    with np.load(path) as arrays:
        return dict(arrays)


@pytest.mark.parametrize(("name", "load"), [("draws.csv", load_csv), ("draws.NPZ", load_npz)])
def test_saved_draws_read_back_to_the_digit(stage, tmp_path, name, load):
    path = tmp_path / name
    result = run(stage, *FEW, "--seed", 3, "--save", path)
    assert (result.exit_code, result.stderr) == (0, f"{path}: written, 600 boards\n")
    found = load(path)
    assert found["board"].tolist() == list(range(600))
    for column, values in expected(stage, 600).items():
        np.testing.assert_array_equal(found[column], values, err_msg=column)


def test_saved_contributors_are_what_the_coordinates_make_of_them(stage, tmp_path):
    path = tmp_path / "draws.csv"
    run(stage, *FEW, "--save", path)
    found = load_csv(path)
    # physics.md, section 4, at the reference temperature: R·(1 + t·x_t)·(1 + d·x_d); RC has 0.5 %, R1 1 %.
    for name, value, tolerance in (("R1", 130e3, 0.01), ("RC", 3300.0, 0.005)):
        made, aged = (found[f"{name}.{what}.coordinate"] for what in ("tolerance", "life_drift"))
        by_hand = value * (1.0 + tolerance * made) * (1.0 + 0.005 * aged)
        np.testing.assert_allclose(found[name], by_hand, rtol=1e-14)  # a few roundings in 2^-53
    # h_FE is linear in ln h_FE on each side of its typical value: 165, 260, 410.
    x = found["gain.coordinate"]
    by_hand = 260.0 * np.where(x < 0.0, 260.0 / 165.0, 410.0 / 260.0) ** x
    np.testing.assert_allclose(found["gain"], by_hand, rtol=1e-13)  # exp and ln, a few 2^-53 each
    assert set(found["supply"]) == {9.0} and set(found["temperature"]) == {298.15}  # 25 °C


def test_saving_changes_nothing_of_the_result(stage, tmp_path):
    with_file = run(stage, *FEW, "--json", "--save", tmp_path / "draws.csv")
    assert with_file.stdout == run(stage, *FEW, "--json").stdout


def test_saved_draws_are_never_written_over_another_file(stage, tmp_path):
    path = tmp_path / "draws.csv"
    path.write_text("mine", encoding="utf-8")
    result = run(stage, *FEW, "--save", path)
    assert (result.exit_code, result.stdout) == (2, "")
    assert "exists already and was left as it is" in result.stderr and path.read_text() == "mine"


def test_file_made_meanwhile_stays_and_the_draws_are_kept_beside_it(stage, tmp_path, monkeypatch):
    path, solved = tmp_path / "draws.csv", Job.solved

    def meanwhile(job, task):
        path.write_text("mine", encoding="utf-8")
        yield from solved(job, task)

    monkeypatch.setattr(Job, "solved", meanwhile)
    result = run(stage, *FEW, "--save", path)
    (kept,) = tmp_path.glob("*.part")
    assert result.exit_code == 2 and "collector_voltage" in result.stdout
    assert path.read_text() == "mine" and f"see {kept}" in result.stderr
    assert len(kept.read_text().splitlines()) == 601


@pytest.mark.parametrize("ending", [".csv", ".npz"])
def test_full_disk_is_said_and_the_result_is_shown(stage, tmp_path, ending):
    resource = pytest.importorskip("resource")  # a file that may not grow: what a full disk is, everywhere
    path = tmp_path / f"draws{ending}"
    program = begin(
        stage, *FEW, "--save", path,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (100_000, 100_000)),
    )  # fmt: skip
    shown, said = program.communicate(timeout=120)
    assert program.returncode == 2 and "collector_voltage" in shown
    assert said == f"--save: {path} cannot be written: File too large; what there was of it is taken away\n"
    assert os.listdir(tmp_path) == ["stage.toml"]


def test_disk_that_will_not_hold_the_file_is_said_before_it_is_full(stage, tmp_path, monkeypatch):
    monkeypatch.setattr(shutil, "disk_usage", lambda path: SimpleNamespace(free=1e5))
    result = run(stage, *FEW, "--save", tmp_path / "draws.csv")
    assert "draws.csv: may take 0.0 GB, and there are 0.0 GB free" in result.stderr
    assert result.exit_code == 0


# Interruptions.


def interrupted_after(monkeypatch, blocks):
    """Interrupt the run when it goes on after so many blocks."""
    left, solved = iter(range(blocks)), Job.solved

    def until(job, task):
        for block in solved(job, task):
            if next(left, None) is None:
                raise KeyboardInterrupt
            yield block

    monkeypatch.setattr(Job, "solved", until)


QUASI = ("--sampling", "quasi-random", "--boards", "64")
"""Tasks of four boards each, so that a run can be interrupted between two."""


def test_interrupted_run_gives_what_it_has_and_is_status_130(stage, monkeypatch):
    interrupted_after(monkeypatch, 3)
    result = run(stage, *QUASI, "--json")
    found = json.loads(result.stdout)
    assert result.exit_code == 130  # 128 + SIGINT, as shells count
    assert (found["ending"], found["boards"], found["asked"]) == ("interrupted", 12, 64)


def test_interrupted_report_says_first_that_it_is_partial(stage, monkeypatch):
    interrupted_after(monkeypatch, 1)
    result = run(stage, *QUASI)
    assert result.exit_code == 130
    assert result.stdout.startswith("PARTIAL") and "4 of 64 boards" in result.stdout.splitlines()[0]


def test_interruption_before_anything_is_there_is_status_130(stage, monkeypatch):
    interrupted_after(monkeypatch, 0)
    result = run(stage, *QUASI)
    assert (result.exit_code, result.stdout, result.stderr) == (130, "", "")


def test_interruption_that_python_wraps_is_one_all_the_same(stage, monkeypatch):
    def wrapped(*_, **__):
        raise RuntimeError("Error calling __set_name__") from KeyboardInterrupt()

    monkeypatch.setattr(Job, "solved", wrapped)
    assert run(stage, *QUASI).exit_code == 130


@pytest.mark.parametrize(("name", "load"), [("draws.csv", load_csv), ("draws.npz", load_npz)])
def test_interrupted_run_keeps_the_draws_of_its_result(stage, tmp_path, monkeypatch, name, load):
    interrupted_after(monkeypatch, 3)
    path = tmp_path / name
    result = run(stage, *QUASI, "--save", path)
    assert result.exit_code == 130
    assert f"{path}: written, 12 boards, a part of the 64 that were asked for" in result.stderr
    assert load(path)["board"].tolist() == list(range(12))
    assert sorted(os.listdir(tmp_path)) == [name, "stage.toml"]


def test_file_has_the_boards_that_the_report_counts_and_no_more(stage, tmp_path, monkeypatch):
    monkeypatch.setattr(quasi, "BLOCK", 2)  # two blocks in a task of four boards
    interrupted_after(monkeypatch, 5)
    result = run(stage, *QUASI, "--json", "--save", tmp_path / "draws.csv")
    assert json.loads(result.stdout)["boards"] == 8
    assert load_csv(tmp_path / "draws.csv")["board"].tolist() == list(range(8))


def test_interruption_before_the_first_result_keeps_the_draws_so_far(stage, tmp_path, monkeypatch):
    monkeypatch.setattr(quasi, "BLOCK", 2)
    interrupted_after(monkeypatch, 1)
    result = run(stage, *QUASI, "--save", tmp_path / "draws.csv")
    assert (result.exit_code, result.stdout) == (130, "")
    assert load_csv(tmp_path / "draws.csv")["board"].tolist() == [0, 1]


def test_interruption_before_the_first_block_leaves_no_file(stage, tmp_path, monkeypatch):
    interrupted_after(monkeypatch, 0)
    assert run(stage, *QUASI, "--save", tmp_path / "draws.csv").exit_code == 130
    assert os.listdir(tmp_path) == ["stage.toml"]


def alone(group):
    """Whether a group of processes is empty by now, or within some seconds."""
    for _ in range(50):
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return True
        time.sleep(0.1)
    return False


def told(program, word):
    """The first line on standard error with a word."""
    return next((line for line in program.stderr if word in line), "")


@pytest.mark.skipif(os.name != "posix", reason="signals as a terminal sends them")
def test_endless_run_says_how_long_it_takes_and_an_interruption_ends_all_of_it(stage):
    program = begin(stage, "--boards", "10^12", "--json")
    assert "1000000000000 boards at about" in told(program, "Ctrl-C ends it with the result so far")
    os.killpg(program.pid, signal.SIGINT)
    shown, said = program.communicate(timeout=120)
    found = json.loads(shown)
    assert (program.returncode, said, found["ending"]) == (130, "", "interrupted")
    assert found["boards"] % SEQUENCE == 0 and found["boards"] > 0
    assert alone(program.pid)


@pytest.mark.skipif(os.name != "posix", reason="signals as a terminal sends them")
def test_interrupted_saving_leaves_whole_lines(stage, tmp_path):
    path = tmp_path / "draws.csv"
    program = begin(stage, "--boards", "1e6", "--sampling", "quasi-random", "--save", path)
    for _ in range(600):
        if any(part.stat().st_size for part in tmp_path.glob("*.part")):
            break
        time.sleep(0.1)
    time.sleep(0.5)
    os.killpg(program.pid, signal.SIGINT)
    _, said = program.communicate(timeout=120)
    assert program.returncode == 130 and "boards, a part of the 1000000 that were asked for" in said
    assert "Traceback" not in said and alone(program.pid)
    lines = path.read_text().splitlines()
    assert (len(lines) - 1) % quasi.BLOCK == 0 and len({line.count(",") for line in lines}) == 1
