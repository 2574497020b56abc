"""A stage file is written again with its values frozen, and nothing is overwritten."""

import os
from pathlib import Path

import pytest

from biasband.errors import BadlyWritten, BiasbandError, UsageError
from biasband.files import stage_writer
from biasband.files.stage_file import read_stage
from biasband.files.stage_writer import frozen_text, write_new

SAMPLE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
VALUES = {"R1": "62 kΩ", "R2": "13 kΩ", "RC": "3.6 kΩ", "RE": "1 kΩ"}


@pytest.fixture
def stage_path(tmp_path):
    path = tmp_path / "stage.toml"
    path.write_text(SAMPLE, encoding="utf-8")
    return path


def read_back(tmp_path: Path, text: str):
    path = tmp_path / "frozen.toml"
    path.write_bytes(text.encode())
    return read_stage(path)


def test_frozen_stage_has_the_values_and_all_else_as_it_was(stage_path, tmp_path):
    before, after = read_stage(stage_path), read_back(tmp_path, frozen_text(stage_path, VALUES))
    assert [resistor.value for resistor in after.resistors] == [62e3, 13e3, 3600.0, 1e3]
    assert after.resistor("RC").tolerance == 0.005
    for name in ("supply", "transistor", "ambient", "target", "signal", "requirements", "derating"):
        assert getattr(after, name) == getattr(before, name)


def test_comments_and_order_are_kept(stage_path):
    written = frozen_text(stage_path, {"RC": "3.6 kΩ"}).splitlines()
    kept = SAMPLE.splitlines()
    changed = [(old, new) for old, new in zip(kept, written, strict=True) if old != new]
    assert len(changed) == 1
    assert changed[0][1].startswith('value = "3.6 kΩ"')
    assert changed[0][1].endswith("# fixed by the user: not designed, not moved")


def test_tolerance_behind_the_old_value_stays_behind_the_new_one(stage_path, tmp_path):
    text = SAMPLE.replace('value = "3k3"', 'value = "3k3 ± 2 %"').replace('tolerance = "0.5 %"', "")
    stage_path.write_text(text, encoding="utf-8")
    resistor = read_back(tmp_path, frozen_text(stage_path, VALUES)).resistor("RC")
    assert (resistor.value, resistor.tolerance) == (3600.0, 0.02)


START, END = SAMPLE.index("[resistors]"), SAMPLE.index("[[require]]")
LAYOUTS = {
    "Windows line ends": SAMPLE.replace("\n", "\r\n"),
    "dotted keys": SAMPLE[:START] + '[resistors]\nRC.value = "3k3"\n' + SAMPLE[END:],
    "dotted keys at the top": 'resistors.RC.value = "3k3"\n' + SAMPLE[:START] + SAMPLE[END:],
    "inline table": SAMPLE[:START] + '[resistors]\nRC = { value = "3k3" }\n' + SAMPLE[END:],
    "inline section": 'resistors = { RC = { value = "3k3" } }\n' + SAMPLE[:START] + SAMPLE[END:],
    "empty tables": SAMPLE[:START] + "[resistors.RE]\n[resistors.RC]\n" + SAMPLE[END:],
    "no section": SAMPLE[:START] + SAMPLE[END:],
}


@pytest.mark.parametrize("layout", LAYOUTS)
def test_other_layouts_are_frozen_too(stage_path, tmp_path, layout):
    stage_path.write_bytes(LAYOUTS[layout].encode())
    after = read_back(tmp_path, frozen_text(stage_path, VALUES))
    assert [resistor.value for resistor in after.resistors] == [62e3, 13e3, 3600.0, 1e3]


@pytest.mark.parametrize("folder", ["elsewhere", "elsewhere/deep", "parts", "."])
def test_transistor_file_is_found_from_another_folder(tmp_path, folder):
    start, end = SAMPLE.index("type = "), SAMPLE.index("[target]")
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "invented.toml").write_text(SAMPLE[start:end], encoding="utf-8")
    path, new = tmp_path / "stage.toml", tmp_path / folder / "new.toml"
    new.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(SAMPLE[:start] + 'file = "parts/invented.toml"\n' + SAMPLE[end:], encoding="utf-8")
    write_new(new, frozen_text(path, VALUES, new_path=new))
    assert read_stage(new).transistor == read_stage(path).transistor


def test_value_of_an_unknown_resistor_is_refused(stage_path):
    with pytest.raises(UsageError, match="has no part R9; allowed: R1, R2, RC, RE"):
        frozen_text(stage_path, {"R9": "1 kΩ"})


def test_faulty_stage_is_refused(tmp_path):
    with pytest.raises(BadlyWritten, match="no such file"):
        frozen_text(tmp_path / "missing.toml", VALUES)


def test_layout_beyond_rewriting_is_refused_not_written_wrong(stage_path):
    apart = SAMPLE[:START] + "[resistors.RE]\n" + SAMPLE[END:] + "[resistors]\n[resistors.RC]\n"
    stage_path.write_text(apart, encoding="utf-8")
    with pytest.raises(BiasbandError, match="set the values by hand: R1 62 kΩ, R2"):
        frozen_text(stage_path, VALUES)


def test_text_that_says_something_else_is_never_returned(stage_path, monkeypatch):
    monkeypatch.setattr(stage_writer.tomlkit, "dumps", lambda document: SAMPLE)
    with pytest.raises(BiasbandError, match=r"set the values by hand: RC 3\.6 kΩ"):
        frozen_text(stage_path, {"RC": "3.6 kΩ"})


def test_existing_file_is_never_overwritten(stage_path):
    with pytest.raises(UsageError, match="exists already and was left as it is"):
        write_new(stage_path, "new")
    assert stage_path.read_text(encoding="utf-8") == SAMPLE


def test_folder_in_the_place_of_a_file_is_left(tmp_path):
    with pytest.raises(UsageError, match="exists already"):
        write_new(tmp_path, "new")


def test_missing_folder_is_told(tmp_path):
    with pytest.raises(UsageError, match="there is no such folder"):
        write_new(tmp_path / "missing" / "new.toml", "new")


@pytest.mark.parametrize("name", ["a\0b.toml", "n" * 5000])
def test_impossible_name_is_told(tmp_path, name):
    with pytest.raises(UsageError, match="cannot be written"):
        write_new(os.path.join(tmp_path, name), "new")


def test_missing_permission_is_told(tmp_path, monkeypatch):
    # The permission itself cannot be taken away where the tests run as root.
    def refuse(*_args, **_options):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("builtins.open", refuse)
    with pytest.raises(UsageError, match="cannot be written: Permission denied"):
        write_new(tmp_path / "new.toml", "new")
