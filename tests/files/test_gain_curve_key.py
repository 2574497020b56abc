"""`gain_curve` in [transistor] or in a transistor's own file: read, or every fault told with its place."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import pytest

from biasband.errors import BadlyWritten, Fault
from biasband.files.stage_file import read_stage
from biasband.stage import Stage, Transistor

SAMPLE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
POINTS = '[["0.1 mA", 180], ["1 mA", 240], ["10 mA", 260], ["50 mA", 150]]'


def with_curve(text: str) -> str:
    """The sample with a gain curve, on the line below [transistor]."""
    assert SAMPLE.count("\n[transistor]") == 1
    head, tail = SAMPLE.split("\n[transistor]")
    comment, rest = tail.split("\n", 1)
    return f"{head}\n[transistor]{comment}\ngain_curve = {text}\n{rest}"


def read(tmp_path: Path, text: str) -> Stage:
    """A text read as a stage file."""
    path = tmp_path / "stage.toml"
    path.write_text(text, encoding="utf-8")
    return read_stage(path)


def faults(tmp_path: Path, text: str) -> Mapping[str, Fault]:
    """The faults of a curve, by key; nothing else is wrong."""
    with pytest.raises(BadlyWritten, match="gain_curve") as caught:
        read(tmp_path, with_curve(text))
    lines = [number for number, line in enumerate(with_curve(text).split("\n"), 1) if "gain_curve" in line]
    assert {fault.line for fault in caught.value.faults} == set(lines)
    assert all(fault.file.endswith("stage.toml") for fault in caught.value.faults)
    return {fault.key: fault for fault in caught.value.faults}


def points_of(stage: Stage) -> tuple[tuple[float, float], ...]:
    """The points of a stage's curve."""
    assert isinstance(stage.transistor, Transistor) and stage.transistor.gain_curve is not None
    return stage.transistor.gain_curve.points


def test_curve_is_read_in_si(tmp_path: Path) -> None:
    expected = ((1e-4, 180.0), (1e-3, 240.0), (1e-2, 260.0), (5e-2, 150.0))
    found = points_of(read(tmp_path, with_curve(POINTS)))
    for point, wanted in zip(found, expected, strict=True):
        assert point == pytest.approx(wanted, rel=1e-15)  # the nearest double, or its neighbour


def test_curve_over_several_lines_and_with_texts_is_read(tmp_path: Path) -> None:
    text = '[\n  ["0.1 mA", "180"],  # typical\n  ["1 mA", 240.5],\n]'
    assert points_of(read(tmp_path, with_curve(text)))[1][1] == 240.5


def test_stage_without_a_curve_has_none(tmp_path: Path) -> None:
    transistor = read(tmp_path, SAMPLE).transistor
    assert isinstance(transistor, Transistor) and transistor.gain_curve is None


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('[["1 mA", 240]]', "make a curve, not 1"),
        ("[]", "make a curve, not 0"),
        ("240", "not a list of points"),
        ('"1 mA: 240"', "not a list of points"),
        ('[["2 mA", 240], ["1 mA", 200]]', "current of point 2 is not above that of point 1"),
        ('[["1 mA", 240], ["1 mA", 200]]', "current of point 2 is not above that of point 1"),
        ('[["1 mA", 100], ["2 mA", 200]]', "h_FE rises as fast as the current"),
        (f'[{", ".join(f"[{k}e-4, 100]" for k in range(1, 102))}]', "make a curve, not 101"),
    ],
)
def test_points_that_make_no_curve_are_one_fault(tmp_path: Path, text: str, words: str) -> None:
    found = faults(tmp_path, text)
    assert list(found) == ["transistor.gain_curve"]
    assert words in found["transistor.gain_curve"].problem
    assert found["transistor.gain_curve"].allowed


def test_hundred_points_are_a_curve(tmp_path: Path) -> None:
    text = f'[{", ".join(f"[{k}e-4, 100]" for k in range(1, 101))}]'
    assert len(points_of(read(tmp_path, with_curve(text)))) == 100


def test_every_bad_point_is_a_fault_of_its_own(tmp_path: Path) -> None:
    text = (
        '[["-1 mA", 240], ["2 mA", 0], ["3 V", -4], ["4 mA"], 7, {I = "5 mA"}, ["6 mA", nan], ["0 A", 100],'
        ' ["7 mA", true], ["8 mA", "lots"], ["9 mA", 100, 200], ["10 mA", 100]]'
    )
    found = faults(tmp_path, text)
    expected = {
        "[1][1]": "not above 0 A", "[2][2]": "not above 0", "[3][1]": "no unit of a current",
        "[3][2]": "not above 0", "[4]": "not a point", "[5]": "not a point", "[6]": "not a point",
        "[7][2]": "not a finite number", "[8][1]": "not above 0 A", "[9][2]": "neither a number nor a text",
        "[10][2]": "not a figure", "[11]": "not a point",
    }  # fmt: skip
    assert set(found) == {f"transistor.gain_curve{place}" for place in expected}
    for place, words in expected.items():
        fault = found[f"transistor.gain_curve{place}"]
        assert words in fault.problem, place
        assert fault.allowed, place


def test_every_fault_of_the_order_is_told(tmp_path: Path) -> None:
    found = faults(tmp_path, '[["2 mA", 240], ["1 mA", 200], ["0.5 mA", 150], ["1 mA", 900]]')
    problem = found["transistor.gain_curve"].problem
    assert all(f"point {place}" in problem for place in (2, 3, 4))


def part_text() -> str:
    """The sample's [transistor] as a file of its own, with a curve."""
    start = SAMPLE.index("\n[transistor]") + 1
    body = SAMPLE[SAMPLE.index("\n", start) + 1 : SAMPLE.index("\n[", start)]
    return f"gain_curve = {POINTS}\n{body}\n"


def stage_text(more: str = "") -> str:
    """The sample with its transistor in a file."""
    start = SAMPLE.index("\n[transistor]") + 1
    end = SAMPLE.index("\n[", start)
    return f'{SAMPLE[:start]}[transistor]\nfile = "part.toml"\n{more}{SAMPLE[end:]}'


def test_curve_is_read_from_the_transistors_own_file(tmp_path: Path) -> None:
    (tmp_path / "part.toml").write_text(part_text(), encoding="utf-8")
    assert len(points_of(read(tmp_path, stage_text()))) == 4


def test_fault_in_the_transistors_own_file_is_placed_there(tmp_path: Path) -> None:
    bad = part_text().replace('["1 mA", 240]', '["1 mA", -240]')
    (tmp_path / "part.toml").write_text(bad, encoding="utf-8")
    with pytest.raises(BadlyWritten, match="gain_curve") as caught:
        read(tmp_path, stage_text())
    (fault,) = caught.value.faults
    assert fault.file.endswith("part.toml")
    assert (fault.line, fault.key) == (1, "gain_curve[2][2]")


def test_curve_given_twice_is_refused(tmp_path: Path) -> None:
    (tmp_path / "part.toml").write_text(part_text(), encoding="utf-8")
    with pytest.raises(BadlyWritten, match=r"transistor\.gain_curve: given here and in"):
        read(tmp_path, stage_text(f"gain_curve = {POINTS}\n"))
