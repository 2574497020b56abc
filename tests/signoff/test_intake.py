"""A stage is taken in with what the caller adds: series tables, a stock list, values to keep."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path

import pytest

import biasband as bb
from biasband.errors import BadlyWritten, UsageError
from biasband.signoff.intake import known_series, read_stage
from biasband.signoff.study import design
from biasband.stage import FileRecord

STAGE = (Path(__file__).parents[1] / "files" / "hive_microphone.toml").read_text("utf-8")
STEPPED = STAGE.replace("[resistors]", "[resistors]\nsearch_steps = 1")  # fewer sets, sooner done

Write = Callable[[str, str], Path]


@pytest.fixture
def write(tmp_path: Path) -> Write:
    """Writes a text into the folder of this test."""

    def file(name: str, text: str) -> Path:
        path = tmp_path / name
        path.parent.mkdir(exist_ok=True)
        path.write_text(text, "utf-8")
        return path

    return file


def record(path: Path) -> FileRecord:
    """What a report must say of a file: its path and what was in it."""
    return FileRecord(path=str(path), sha256=hashlib.sha256(path.read_bytes()).hexdigest())


# --- a user's own series ----------------------------------------------------------------------------


def tables(write: Write) -> Path:
    """A folder with a series OWN: 1.0, 1.7, 2.9 and 5.3 in every decade."""
    write("tables/series.csv", "series,values_per_decade,usual_tolerance_percent\nOWN,4,5\n")
    return write("tables/OWN.csv", "mantissa\n1.0\n1.7\n2.9\n5.3\n").parent


@pytest.mark.parametrize("snapping", ["margin", "nearest"])
def test_stage_of_a_user_s_series_is_designed_to_its_values(write: Write, snapping: str) -> None:
    own = STEPPED.replace('series = "E24"', f'series = "OWN"\nsnapping = "{snapping}"')
    stage = read_stage(write("own.toml", own), tables=tables(write))
    chosen = {r.name: r.value for r in design(stage).stage.resistors}
    assert chosen.pop("RC") == 3.3e3  # the file's own
    assert all(f"{value:.1e}"[:3] in ("1.0", "1.7", "2.9", "5.3") for value in chosen.values())
    assert "OWN" in known_series(stage) and "E24" in known_series(stage)
    assert bb.read_stage(write("own.toml", own), tables=tables(write)) == stage


def test_user_s_series_is_unknown_without_its_tables(write: Write) -> None:
    own = write("own.toml", STAGE.replace('series = "E24"', 'series = "OWN"'))
    with pytest.raises(BadlyWritten, match="OWN"):
        read_stage(own)
    assert "OWN" not in known_series(read_stage(write("plain.toml", STAGE)))


def test_files_of_the_tables_are_recorded(write: Write) -> None:
    path, folder = write("stage.toml", STAGE), tables(write)
    stage = read_stage(path, tables=folder)
    assert stage.files == (record(path), record(folder / "series.csv"), record(folder / "OWN.csv"))


# --- a stock list --------------------------------------------------------------------------------------


def test_stock_takes_the_place_of_the_file_s_own_among_its_files_too(write: Write) -> None:
    own = write("own.csv", "value\n1k\n")
    other = write("other.csv", "value,quantity\n1k2,3\n68k,1\n")
    path = write("stage.toml", STAGE.replace("[resistors] ", '[resistors]\nstock = "own.csv" '))
    folder = tables(write)
    kept = read_stage(path, tables=folder)
    assert [item.value for item in kept.stock.items] == [1e3]
    assert record(own) in kept.files and len(kept.files) == 4
    stage = read_stage(path, tables=folder, stock=other)
    assert [(item.value, item.quantity) for item in stage.stock.items] == [(1.2e3, 3), (68e3, 1)]
    assert stage.stock.file == record(other)
    assert stage.files == (
        record(path), record(folder / "series.csv"), record(folder / "OWN.csv"), record(other)
    )  # fmt: skip


def test_stock_is_added_to_a_stage_without_one(write: Write) -> None:
    path, stock = write("stage.toml", STAGE), write("drawer.csv", "value\n1k2\n")
    assert read_stage(path).stock is None
    assert read_stage(path, stock=stock).files == (record(path), record(stock))


def test_stage_is_designed_from_the_stock_that_was_added(write: Write) -> None:
    # None of these but 68 k is in E24.
    stock = write("drawer.csv", "value\n2k02\n2k15\n30k1\n33k2\n68k\n75k5\n")
    stage = read_stage(write("stage.toml", STEPPED), stock=stock)
    values = {r.value for r in design(stage).stage.resistors if r.name != "RC"}
    assert values <= {2.02e3, 2.15e3, 30.1e3, 33.2e3, 68e3, 75.5e3}


def test_faults_of_the_stock_that_was_added_are_told(write: Write) -> None:
    stock = write("drawer.csv", "value\n1kV\nx\n")
    with pytest.raises(BadlyWritten, match=r"drawer\.csv:2") as caught:
        read_stage(write("stage.toml", STAGE), stock=stock)
    assert len(caught.value.faults) == 2


# --- values to keep ------------------------------------------------------------------------------------


@pytest.mark.parametrize("text", ["2k2", "2200", "2.2 kΩ", "2.2k", "2200 ohm"])
def test_value_to_keep_is_written_as_in_a_stage_file(write: Write, text: str) -> None:
    stage = read_stage(write("stage.toml", STAGE), keep={"RE": text})
    assert (stage.resistor("RE").value, stage.resistor("RE").kept) == (2.2e3, True)
    assert not stage.resistor("RC").kept  # the file's own


def test_nothing_to_keep_is_the_file_as_it_is(write: Write) -> None:
    path = write("stage.toml", STAGE)
    assert read_stage(path, keep={}) == read_stage(path, keep=None) == read_stage(path)


def test_every_text_that_is_no_resistance_is_named(write: Write) -> None:
    with pytest.raises(UsageError, match="R1: ") as caught:
        read_stage(write("stage.toml", STAGE), keep={"R1": "3V", "R2": "68k", "RE": ""})
    assert [line.split(":")[0] for line in str(caught.value).splitlines()] == ["R1", "RE"]


def test_value_that_cannot_be_kept_is_refused(write: Write) -> None:
    with pytest.raises(UsageError, match="RC: the stage file gives it a value"):
        read_stage(write("stage.toml", STAGE), keep={"RC": "3k3"})
    with pytest.raises(UsageError, match=r"R2: 13\.1 kΩ is not in E24, the nearest there is 13 kΩ"):
        read_stage(write("stage.toml", STAGE), keep={"R2": "13k1"})


def test_value_is_kept_from_the_tables_and_the_stock_of_the_same_call(write: Write) -> None:
    own = write("own.toml", STAGE.replace('series = "E24"', 'series = "OWN"'))
    folder = tables(write)
    assert read_stage(own, tables=folder, keep={"R2": "17k"}).resistor("R2").value == 17e3
    with pytest.raises(UsageError, match="18 kΩ is not in OWN"):
        read_stage(own, tables=folder, keep={"R2": "18k"})
    stock = write("drawer.csv", "value\n18k\n1k\n")
    assert read_stage(own, tables=folder, stock=stock, keep={"R2": "18k"}).resistor("R2").value == 18e3
    with pytest.raises(UsageError, match="17 kΩ is not in stock"):
        read_stage(own, tables=folder, stock=stock, keep={"R2": "17k"})
