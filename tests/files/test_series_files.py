"""The series tables as data, and how faulty ones are refused.

"check values" is the project's shared document of outside figures, "Preferred values (IEC
60063:2015)".
"""

from __future__ import annotations

import zipfile
from decimal import Decimal
from itertools import pairwise
from pathlib import Path

import pytest

from biasband.errors import BadlyWritten, UsageError
from biasband.files.series_files import load_all, load_series, read_index, read_table, tables_folder
from biasband.files.series_rows import SeriesEntry

# E24 from memory of the trade; check values state where it leaves the formula (below).
E24 = [
    *("1.0", "1.1", "1.2", "1.3", "1.5", "1.6", "1.8", "2.0", "2.2", "2.4", "2.7", "3.0"),
    *("3.3", "3.6", "3.9", "4.3", "4.7", "5.1", "5.6", "6.2", "6.8", "7.5", "8.2", "9.1"),
]
# Check values: what stands in E24, and what the formula gives there.
E24_EXCEPTIONS = {
    "2.7": "2.6",
    "3.0": "2.9",
    "3.3": "3.2",
    "3.6": "3.5",
    "3.9": "3.8",
    "4.3": "4.2",
    "4.7": "4.6",
    "8.2": "8.3",
}


def mantissas(name: str) -> list[Decimal]:
    return list(load_series(name).mantissas)


def formula(count: int, places: str) -> list[Decimal]:
    """10^(k/n), rounded (IEC 60063)."""
    return [(Decimal(10) ** (Decimal(k) / count)).quantize(Decimal(places)) for k in range(count)]


@pytest.mark.parametrize(("name", "count"), [("E48", 48), ("E96", 96)])
def test_fine_series_follow_the_formula(name: str, count: int) -> None:
    assert mantissas(name) == formula(count, "0.01")


def test_e192_follows_the_formula_with_its_one_exception() -> None:
    expected = formula(192, "0.01")
    assert expected[185] == Decimal("9.19")  # check values: the formula's figure
    expected[185] = Decimal("9.20")  # check values: the standard's figure (memory)
    assert mantissas("E192") == expected


def test_e24_is_the_historic_list_and_leaves_the_formula_at_eight_values() -> None:
    assert [str(each) for each in mantissas("E24")] == E24
    pairs = zip(mantissas("E24"), formula(24, "0.1"), strict=True)
    assert {str(ours): str(other) for ours, other in pairs if ours != other} == E24_EXCEPTIONS


@pytest.mark.parametrize(("name", "every"), [("E12", 2), ("E6", 4), ("E3", 8)])
def test_coarse_series_are_every_nth_of_e24(name: str, every: int) -> None:
    assert [str(each) for each in mantissas(name)] == E24[::every]  # check values


def test_fine_series_contain_each_other() -> None:
    assert set(mantissas("E48")) < set(mantissas("E96")) < set(mantissas("E192"))  # check values


def test_e24_and_e96_share_six_values_and_have_114_together() -> None:
    e24, e96 = set(mantissas("E24")), set(mantissas("E96"))
    assert sorted(map(float, e24 & e96)) == [1.0, 1.1, 1.3, 1.5, 2.0, 7.5]  # check values
    assert len(e24 | e96) == 114  # check values


# Check values, nearest by difference: half a unit of the last printed figure is the room. At the midpoint of
# a gap the error is (high − low)/(high + low).
@pytest.mark.parametrize(
    ("name", "percent", "room"),
    [
        ("E3", 37.5, 0.05),
        ("E6", 20.0, 0.05),
        ("E12", 11.1, 0.05),
        ("E24", 7.14, 0.005),
        ("E48", 2.59, 0.005),
        ("E96", 1.48, 0.005),
        ("E192", 0.97, 0.005),
    ],
)
def test_worst_distance_by_difference_is_the_published_one(name: str, percent: float, room: float) -> None:
    values = [float(each) for each in mantissas(name)] + [10.0]
    gaps = [(high - low) / (high + low) for low, high in pairwise(values)]
    assert 100 * max(gaps) == pytest.approx(percent, abs=room)


def test_usual_tolerances_are_the_standards() -> None:
    # Check values; E3 is "over 20 %", no single figure.
    expected = {"E3": None, "E6": 0.2, "E12": 0.1, "E24": 0.05, "E48": 0.02, "E96": 0.01, "E192": 0.005}
    assert {name: series.usual_tolerance for name, series in load_all().items()} == expected


def test_all_series_are_loaded_by_name_in_order_and_once() -> None:
    assert list(load_all()) == ["E3", "E6", "E12", "E24", "E48", "E96", "E192"]
    assert all(series.name == name for name, series in load_all().items())
    assert load_series("E24") is load_series("E24") is load_all()["E24"]


def test_every_table_in_the_folder_is_in_the_index() -> None:
    tables = {path.name for path in tables_folder().iterdir() if path.name.endswith(".csv")}
    assert tables == {"series.csv", *(f"{name}.csv" for name in load_all())}


@pytest.mark.parametrize("name", ["E25", "e24", "", "../E24"])
def test_unknown_series_is_refused_with_the_known_ones(name: str) -> None:
    with pytest.raises(UsageError, match="allowed: E3, E6, E12, E24, E48, E96, E192"):
        load_series(name)


THREE = SeriesEntry(name="invented", values_per_decade=3, usual_tolerance=None)


def table(folder: Path, content: str | bytes, *, name: str = "invented") -> Path:
    data = content if isinstance(content, bytes) else content.encode()
    (folder / f"{name}.csv").write_bytes(data)
    return folder


@pytest.mark.parametrize(
    "content", [b"mantissa\r\n1.0\r\n2.2\r\n4.7\r\n", b"\xef\xbb\xbfmantissa\n1.0\n2.2\n4.7"]
)
def test_windows_line_ends_and_a_byte_order_mark_are_read(tmp_path: Path, content: bytes) -> None:
    series = read_table(table(tmp_path, content), THREE)
    assert series.mantissas == (Decimal("1.0"), Decimal("2.2"), Decimal("4.7"))


# Line numbers and values by eye, from the text beside them.
@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("mantissa\n1.0\n2,2\n4.7\n", r"invented\.csv:3: mantissa: 2 cells, not 1"),
        ("mantissa\n1.0\n\n4.7\n", r"invented\.csv:3: mantissa: 0 cells, not 1"),
        ("mantissa\n1.0\n2k2\n4.7\n", r"invented\.csv:3: mantissa: not a plain number.*read '2k2'"),
        ("mantissa\n1.0\nnan\n4.7\n", r"invented\.csv:3: mantissa: not a plain number.*read 'nan'"),
        ("mantissa\n1.0\n2.2000001\n4.7\n", r"invented\.csv:3: mantissa: not a plain number"),
        ("mantissa\n0.9\n2.2\n4.7\n", r"invented\.csv:2: mantissa: not at least 1 and below 10; read '0\.9'"),
        ("mantissa\n1.0\n2.2\n10\n", r"invented\.csv:4: mantissa: not at least 1 and below 10; read '10'"),
        ("mantissa\n1.0\n4.7\n2.2\n", r"invented\.csv:4: mantissa: not above the value before it, 4\.7"),
        ("mantissa\n1.0\n1.00\n2.2\n", r"invented\.csv:3: mantissa: not above the value before it, 1\.0"),
        ("mantissa\n1.0\n2.2\n", r"invented\.csv:3: invented: 2 values, not 3"),
        ("mantissa\n", r"invented\.csv:1: invented: 0 values, not 3"),
        ("", r"invented\.csv:1: wrong header; allowed: mantissa"),
        ("value\n1.0\n2.2\n4.7\n", r"invented\.csv:1: wrong header; allowed: mantissa"),
        (b"mantissa\n\xff\xfe\n", r"invented\.csv:2: not UTF-8 text; allowed: a CSV text, saved as UTF-8"),
        (b"mantissa\n\0\n", r"invented\.csv: a binary file; allowed: a CSV text"),
        ('mantissa\n1.0\n"2.2\n4.7\n', r"invented\.csv:3: not a table"),
    ],
)
def test_faulty_table_names_file_line_and_fault(tmp_path: Path, content: str | bytes, message: str) -> None:
    with pytest.raises(BadlyWritten, match=message):
        read_table(table(tmp_path, content), THREE)


def test_table_inside_a_zipped_package_is_read(tmp_path: Path) -> None:
    with zipfile.ZipFile(tmp_path / "package.zip", "w") as package:
        package.writestr("invented.csv", "mantissa\n1.0\n2.2\n4.7\n")
    with zipfile.ZipFile(tmp_path / "package.zip") as package:
        assert len(read_table(zipfile.Path(package), THREE).mantissas) == 3


def test_row_of_another_width_hides_no_other_fault(tmp_path: Path) -> None:
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read_table(table(tmp_path, "mantissa\n1.0\n2,2\nx\n"), THREE)
    assert [fault.line for fault in caught.value.faults] == [3, 4]


def test_every_faulty_row_is_reported_at_once(tmp_path: Path) -> None:
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read_table(table(tmp_path, "mantissa\n0.5\n2.2\nx\n1.5\n"), THREE)
    assert [fault.line for fault in caught.value.faults] == [2, 4, 5, 5]  # the last for 4 values, not 3


def test_missing_table_is_an_error(tmp_path: Path) -> None:
    with pytest.raises(BadlyWritten, match=r"invented\.csv: no such file"):
        read_table(tmp_path, THREE)


HEADER = "series,values_per_decade,usual_tolerance_percent\n"


def test_index_is_read_with_and_without_tolerance(tmp_path: Path) -> None:
    folder = table(tmp_path, HEADER + "coarse,3,\nfine,96,0.25\n", name="series")
    assert read_index(folder) == (
        SeriesEntry(name="coarse", values_per_decade=3, usual_tolerance=None),
        SeriesEntry(name="fine", values_per_decade=96, usual_tolerance=0.0025),
    )


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ("E3,three,20\n", r"series\.csv:2: values_per_decade: not a count; read 'three'"),
        ("E3,0,20\n", r"series\.csv:2: values_per_decade: not a count; read '0'"),
        ("E3,3,20 %\n", r"series\.csv:2: usual_tolerance_percent: not a percentage, nor empty; read '20 %'"),
        ("E3,3,100\n", r"series\.csv:2: usual_tolerance_percent: not a percentage"),
        ("E3,3,\nE3,3,\n", r"series\.csv:3: series: given in line 2 already; read 'E3'"),
        ("E3,3,\ne3,3,\n", r"series\.csv:3: series: given in line 2 already; read 'e3'"),
        (",3,\n", r"series\.csv:2: series: no name for a series"),
        ("../E3,3,\n", r"series\.csv:2: series: no name for a series; read '\.\./E3'"),
        ("series,3,\n", r"series\.csv:2: series: no name for a series; read 'series'"),
        ("", r"series\.csv:1: no series below the header"),
        ("E3,3\n", r"series\.csv:2: .*2 cells, not 3"),
    ],
)
def test_faulty_index_names_line_and_fault(tmp_path: Path, rows: str, message: str) -> None:
    with pytest.raises(BadlyWritten, match=message):
        read_index(table(tmp_path, HEADER + rows, name="series"))
