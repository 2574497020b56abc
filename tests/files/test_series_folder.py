"""A user's own series stand beside biasband's own, or every fault in their folder is told at once.

Expected figures are those written in the texts beside them.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable
from decimal import Decimal
from pathlib import Path

import pytest

from biasband.errors import BadlyWritten, UsageError
from biasband.files.series_files import load_all
from biasband.files.series_folder import load_tables
from biasband.files.stage_file import read_stage
from biasband.files.stage_writer import frozen_text
from biasband.parts.series import nearest

SAMPLE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
README = Path(__file__).parents[2] / "series_tables" / "README.md"
HEADER = "series,values_per_decade,usual_tolerance_percent\n"
GOOD = {"series.csv": HEADER + "house,3,2\n", "house.csv": "mantissa\n1.0\n2.2\n4.7\n"}

Folder = Callable[[dict[str, str | bytes]], Path]


@pytest.fixture
def folder(tmp_path: Path) -> Folder:
    """Writes files into a folder of tables."""

    def write(files: dict[str, str | bytes]) -> Path:
        place = tmp_path / "tables"
        place.mkdir()
        for name, content in files.items():
            (place / name).write_bytes(content if isinstance(content, bytes) else content.encode())
        return place

    return write


def told(place: Path) -> list[str]:
    """The faults of a folder, each with the bare name of its file."""
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        load_tables(place)
    return [str(fault).replace(f"{place}{os.sep}", "") for fault in caught.value.faults]


# --- what is read ------------------------------------------------------------------------------


def test_without_a_folder_the_series_are_biasbands_own() -> None:
    tables = load_tables()
    assert (tables.series, tables.files) == (load_all(), ())


def test_users_series_comes_after_biasbands_own(folder: Folder) -> None:
    tables = load_tables(folder(dict(GOOD)))
    assert list(tables.series) == [*load_all(), "house"]
    house = tables.series["house"]
    assert (house.name, house.usual_tolerance) == ("house", 0.02)
    assert house.mantissas == (Decimal("1.0"), Decimal("2.2"), Decimal("4.7"))


def test_folder_is_taken_as_text_too(folder: Folder) -> None:
    place = folder(dict(GOOD))
    assert load_tables(str(place)) == load_tables(place)


def test_users_files_are_on_record_with_their_fingerprints(folder: Folder) -> None:
    place = folder({**GOOD, "notes.txt": "not looked at"})
    files = load_tables(place).files
    assert [Path(record.path).name for record in files] == ["series.csv", "house.csv"]
    for record in files:
        assert record.sha256 == hashlib.sha256(Path(record.path).read_bytes()).hexdigest()


def test_series_that_begins_above_one_and_has_one_value_is_fine(folder: Folder) -> None:
    files = {"series.csv": HEADER + "lonely,1,\n", "lonely.csv": "mantissa\n4.7\n"}
    lonely = load_tables(folder(files)).series["lonely"]
    # Between 470 and 4700 the border is √(470 · 4700) = 1486: 1 kΩ is nearer to 470 by ratio.
    assert (nearest(lonely, 1e3).chosen, nearest(lonely, 1.5e3).chosen) == (470.0, 4700.0)


def test_byte_order_mark_and_windows_line_ends_are_read(folder: Folder) -> None:
    files = {name: b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode() for name, text in GOOD.items()}
    assert "house" in load_tables(folder(dict(files))).series


def test_example_of_the_readme_is_read(folder: Folder) -> None:
    blocks = README.read_text(encoding="utf-8").split("```text\n")[1:]
    index, table = (block.split("```")[0] for block in blocks)
    house = load_tables(folder({"series.csv": index, "house.csv": table})).series["house"]
    assert [str(mantissa) for mantissa in house.mantissas] == ["1.0", "2.2", "3.3", "4.7"]


# --- what is refused ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("changes", "fault"),
    [
        ({"series.csv": HEADER + "E24,3,2\n"}, "series.csv:2: series: the name of biasband's own E24; read"),
        ({"series.csv": HEADER + "e24,3,2\n"}, "series.csv:2: series: the name of biasband's own E24; read"),
        ({"series.csv": HEADER + "../x,3,2\n"}, "series.csv:2: series: no name for a series; read '../x'"),
        ({"series.csv": HEADER}, "series.csv:1: no series below the header"),
        ({"series.csv": ""}, "series.csv:1: wrong header"),
        ({"series.csv": b"\0"}, "series.csv: a binary file"),
        ({"house.csv": b"\x7fELF\0"}, "house.csv: a binary file; allowed: a CSV text (series.csv names it)"),
        ({"house.csv": b"#" * 1_000_001}, "house.csv: too large; allowed: a CSV text of 1 MB at most"),
        ({"house.csv": "mantissa\n" + "x\n" * 10_000}, "house.csv:10001: 10000 rows; allowed: 9999 at most"),
        ({"house.csv": "mantissa\n1.0\n2k2\n4.7\n"}, "house.csv:3: mantissa: not a plain number"),
        ({"house.csv": "mantissa\n1.0\ninf\n4.7\n"}, "house.csv:3: mantissa: not a plain number"),
        ({"house.csv": "mantissa\n0\n2.2\n4.7\n"}, "house.csv:2: mantissa: not at least 1 and below 10"),
        ({"house.csv": "mantissa\n"}, "house.csv:1: house: 0 values, not 3"),
        ({"stray.csv": "mantissa\n1.0\n"}, "stray.csv: not in series.csv"),
        ({"E24.CSV": "mantissa\n1.0\n"}, "E24.CSV: not in series.csv"),
    ],
)
def test_faulty_file_is_told_with_its_name_and_line(
    folder: Folder, changes: dict[str, str | bytes], fault: str
) -> None:
    assert [line for line in told(folder({**GOOD, **changes})) if line.startswith(fault)]


def test_table_that_the_index_names_and_no_file_holds_is_told(folder: Folder) -> None:
    assert told(folder({"series.csv": GOOD["series.csv"]})) == [
        "house.csv: no such file (series.csv names it)"
    ]


def test_tables_without_an_index_are_told(folder: Folder) -> None:
    (line,) = told(folder({"house.csv": GOOD["house.csv"]}))
    assert line == "series.csv: no such file (it says which series there are)"


def test_faults_of_all_files_are_told_at_once(folder: Folder) -> None:
    files: dict[str, str | bytes] = {
        "series.csv": HEADER + "E12,3,\nhouse,3,2\ngone,1,\nodd,three,\n",
        "house.csv": "mantissa\n1.0\nx\n0.5\n",
        "odd.csv": "mantissa\n",
        "stray.csv": "",
    }
    places = [line.split(": ")[0] for line in told(folder(files))]
    assert places == ["series.csv:2", "series.csv:5", "gone.csv", "house.csv:3", "house.csv:4", "stray.csv"]


def test_missing_folder_file_and_empty_folder_are_told(folder: Folder, tmp_path: Path) -> None:
    place = folder({"notes.txt": "no tables"})
    with pytest.raises(UsageError, match=r"nowhere: no such folder; needed: a folder with series\.csv"):
        load_tables(tmp_path / "nowhere")
    with pytest.raises(UsageError, match=r"notes\.txt: not a folder; needed"):
        load_tables(place / "notes.txt")
    with pytest.raises(UsageError, match="tables: a folder without series tables; needed"):
        load_tables(place)
    with pytest.raises(UsageError, match="cannot be read"):
        load_tables("a\0b")


def test_folder_in_the_place_of_a_table_is_told(folder: Folder) -> None:
    place = folder({"series.csv": GOOD["series.csv"]})
    (place / "house.csv").mkdir()
    assert told(place) == ["house.csv: a directory, not a file (series.csv names it)"]


# --- a stage that names such a series ----------------------------------------------------------


@pytest.fixture
def stage_path(tmp_path: Path) -> Path:
    path = tmp_path / "stage.toml"
    path.write_text(SAMPLE.replace('"E24"', '"house"'), encoding="utf-8")
    return path


def test_stage_may_name_a_series_of_the_tables_it_is_read_with(folder: Folder, stage_path: Path) -> None:
    tables = load_tables(folder(dict(GOOD)))
    stage = read_stage(stage_path, tables=tables)
    assert {resistor.series for resistor in stage.resistors} == {"house"}
    assert [Path(record.path).name for record in stage.files] == ["stage.toml", "series.csv", "house.csv"]


def test_series_of_one_reading_is_unknown_to_the_next(folder: Folder, stage_path: Path) -> None:
    read_stage(stage_path, tables=load_tables(folder(dict(GOOD))))
    with pytest.raises(BadlyWritten, match=r"resistors\.series: unknown; read 'house'; allowed: E3, E6"):
        read_stage(stage_path)


def test_unknown_series_is_told_with_the_users_among_the_allowed(folder: Folder, stage_path: Path) -> None:
    stage_path.write_text(SAMPLE.replace('"E24"', '"hous"'), encoding="utf-8")
    with pytest.raises(BadlyWritten, match=r'E192, house \(did you mean "house"\?\)'):
        read_stage(stage_path, tables=load_tables(folder(dict(GOOD))))


def test_one_resistor_may_have_a_series_of_the_users(folder: Folder, stage_path: Path) -> None:
    text = SAMPLE.replace('value = "3k3"', 'series = "house"')
    stage_path.write_text(text, encoding="utf-8")
    stage = read_stage(stage_path, tables=load_tables(folder(dict(GOOD))))
    assert [resistor.series for resistor in stage.resistors] == ["E24", "E24", "house", "E24"]


def test_stage_with_a_series_of_the_users_is_frozen_with_the_tables(folder: Folder, stage_path: Path) -> None:
    tables = load_tables(folder(dict(GOOD)))
    assert 'value = "4.7 kΩ"' in frozen_text(stage_path, {"RC": "4.7 kΩ"}, tables=tables)
