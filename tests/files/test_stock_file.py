"""A stock list is read to the items it names, or every fault in it is told at once, with its place.

Expected figures are those written in the texts beside them, turned into SI by hand; line numbers are
counted by eye.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from biasband.errors import BadlyWritten
from biasband.files.series_files import load_series
from biasband.files.stage_file import read_stage
from biasband.files.stage_writer import frozen_text, write_new
from biasband.files.stock_file import COLUMNS, read_stock
from biasband.stage import FileRecord, Stock, StockItem

DRAWER = Path(__file__).parents[2] / "samples" / "parts" / "invented_drawer.csv"
STAGE = Path(__file__).with_name("hive_microphone.toml").read_text(encoding="utf-8")
FULL = "value,tolerance,tempco,power_rating,quantity,price,location\n"

Read = Callable[[str | bytes], Stock]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    """Reads a content as a stock list."""

    def read_content(content: str | bytes) -> Stock:
        path = tmp_path / "drawer.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return read_stock(path)

    return read_content


# --- what is read ------------------------------------------------------------------------------


def test_full_row_is_read_in_si(read: Read, tmp_path: Path) -> None:
    text = FULL + "4k7,1 %,100 ppm/K,0.25 W,12,0.03,drawer A\n"
    path = tmp_path / "drawer.csv"
    item = StockItem(
        value=4700.0,
        tolerance=0.01,
        tempco=1e-4,
        power_rating=0.25,
        quantity=12,
        price=0.03,
        location="drawer A",
    )
    record = FileRecord(path=str(path), sha256=hashlib.sha256(text.encode()).hexdigest())
    assert read(text) == Stock(items=(item,), file=record)


def test_value_alone_is_enough_and_one_is_fine(read: Read) -> None:
    assert read("value\n4k7").items == (StockItem(value=4700.0),)


def test_columns_may_stand_in_any_order_with_blanks_around(read: Read) -> None:
    assert read("location , value\n  bin  7 , 10 kΩ\n").items == (StockItem(value=1e4, location="bin 7"),)


def test_empty_cell_states_nothing(read: Read) -> None:
    assert read(FULL + "4k7,,,,,,\n").items == (StockItem(value=4700.0),)


def test_quantity_and_price_of_nothing_are_stated(read: Read) -> None:
    (item,) = read("value,quantity,price\n1k,0,0\n").items
    assert (item.quantity, item.price) == (0, 0.0)


@pytest.mark.parametrize(
    "content",
    [
        "value,quantity\n1k,3\n2k2,4\n",
        "value;quantity\n1k;3\n2k2;4\n",
        "value,quantity\r\n1k,3\r\n2k2,4\r\n",
        "value;quantity\r\n1k;3\r\n2k2;4",
        "value,quantity\r1k,3\r2k2,4\r",
        b"\xef\xbb\xbfvalue,quantity\n1k,3\n2k2,4\n",
        b"\xef\xbb\xbf" + b'"value";"quantity"\r\n"1k";"3"\r\n"2k2";"4"\r\n',
        "value,quantity\n\n1k,3\n   \n2k2,4\n\n\n",
    ],
)
def test_delimiters_line_ends_mark_and_blank_lines_change_nothing(read: Read, content: str | bytes) -> None:
    assert read(content).items == (StockItem(value=1e3, quantity=3), StockItem(value=2.2e3, quantity=4))


def test_location_in_quotes_may_hold_the_separator(read: Read) -> None:
    (item,) = read('value,location\n1k,"shelf 2, left"\n').items
    assert item.location == "shelf 2, left"


def test_same_value_may_be_there_in_two_tolerances_or_places(read: Read) -> None:
    text = "value,tolerance,location\n1k,1 %,A\n1k,5 %,A\n1k,1 %,B\n1k,,A\n"
    assert [item.value for item in read(text).items] == [1e3] * 4


def test_invented_drawer_is_read_and_of_e24() -> None:
    items = read_stock(DRAWER).items
    assert len(items) == 53  # lines of the file without its header
    e24 = load_series("E24")
    preferred = {e24.value_at(place) for place in range(2 * 24, 6 * 24)}
    assert {item.value for item in items} <= preferred
    assert {item.tolerance for item in items} == {0.01, 0.05}
    assert all(item.quantity and item.price and item.location for item in items)


# --- what is refused ---------------------------------------------------------------------------

WHOLE = [
    ("", r"drawer\.csv:1: an empty file; allowed: a first line of columns: value, tolerance"),
    ("\n \n", r"drawer\.csv:1: an empty file"),
    (b"\xef\xbb\xbf", r"drawer\.csv:1: an empty file"),
    ("value,price\n", r"drawer\.csv:1: no rows below the header; allowed: one row for each part"),
    ("value\n\n\n", r"drawer\.csv:1: no rows below the header"),
    (b"value\n\0\n", r"drawer\.csv: a binary file; allowed: a CSV text"),
    (b"value\n1k\n\xb5\n", r"drawer\.csv:3: not UTF-8 text"),
    (b"value\n" + b"1k\n" * 4_000_000, r"drawer\.csv: too large; allowed: a CSV text of 10 MB at most"),
    ('value,location\n1k,"open\n2k2,\n', r"drawer\.csv:2: not a table"),
    ("price\n3\n", r"drawer\.csv:1: value: missing column; allowed: value, tolerance"),
    ("1k,1 %\n2k,1 %\n", r"drawer\.csv:1: value: missing column.*the first line names the columns"),
    ("value,tolrance\n1k,1 %\n", r'drawer\.csv:1: tolrance: unknown column.*did you mean "tolerance"'),
    ("Value\n1k\n", r'drawer\.csv:1: Value: unknown column.*did you mean "value"'),
    ("value,maker\n1k,x\n", r"drawer\.csv:1: maker: unknown column; read 'maker'; allowed: value, tolerance"),
    ("value,\n1k,\n", r"drawer\.csv:1: unknown column; read ''"),
    ("value,\x1b[31m\n1k,\n", r"drawer\.csv:1: unknown column; read '\\x1b\[31m'"),
    ("value,value\n1k,1k\n", r"drawer\.csv:1: value: a column given twice"),
    ("value\tprice\n1k\t3\n", r"drawer\.csv:1: .*by commas or by semicolons, not by tabs"),
    ("value,price\n1k\n", r"drawer\.csv:2: 1 cells, not 2; allowed: a cell for each column$"),
    ("value,price\n4,7k,3\n", r"drawer\.csv:2: 3 cells, not 2.*write a decimal point"),
    ("value;price\n\n;\n", r'drawer\.csv:3: value: missing; allowed: a resistance, as in "4k7"'),
]


@pytest.mark.parametrize(("content", "message"), WHOLE, ids=[row[1][:50] for row in WHOLE])
def test_faulty_list_is_told_with_its_place(read: Read, content: str | bytes, message: str) -> None:
    with pytest.raises(BadlyWritten, match=message):
        read(content)


CELLS = [
    ("value", "0", "not above 0 ohm"),
    ("value", "-4k7", "not above 0 ohm"),
    ("value", "nan", "not a figure"),
    ("value", "inf", "not a figure"),
    ("value", "1e300", "no resistance that a stage can have.*from 1e-21 to 1e\\+15"),
    ("value", "1e999", "not a finite number"),
    ("value", "9" * 200, "too long"),
    ("value", "4k7 V", "not a figure|no unit"),
    ("value", "4.7 kV", "no unit of a resistance"),
    ("value", "4 m", "milli or as mega"),
    ("value", "4,7k", "write a decimal point"),
    ("tolerance", "1", "below 100 %"),
    ("tolerance", "100 %", "below 100 %"),
    ("tolerance", "-1 %", "at least 0 %"),
    ("tolerance", "1 pc", "no unit of a ratio"),
    ("tempco", "100 ppm", "no unit of a relative slope"),
    ("tempco", "-5 ppm/K", "at least 0"),
    ("tempco", "2 %/K", "below"),
    ("power_rating", "0 W", "not above 0 W"),
    ("power_rating", "0.25", "no unit"),
    ("power_rating", "nan W", "not a figure"),
    ("power_rating", "1e300 W", "no power that a stage can have"),
    ("quantity", "-1", "not a whole number from 0"),
    ("quantity", "2.5", "not a whole number from 0"),
    ("quantity", "1e300", "not a whole number from 0"),
    ("quantity", "nan", "not a whole number from 0"),
    ("quantity", "٣", "not a whole number from 0"),
    ("price", "-0.01", "at least 0.*without a currency"),
    ("price", "0.03 €", "no unit of a number.*a plain number from 0, of one piece, without a currency"),
    ("price", "0,03", "write a decimal point"),
    ("price", "inf", "not a figure.*a plain number from 0"),
    ("price", "1e300", "no number that a stage can have.*a plain number from 0"),
    ("location", "bin \x1b[31m7", "control characters"),
]


@pytest.mark.parametrize(("column", "cell", "message"), CELLS)
def test_cell_out_of_range_is_told_with_line_and_column(
    read: Read, column: str, cell: str, message: str
) -> None:
    other, beside = ("location", "A") if column == "value" else ("value", "1k")
    text = f"{column};{other}\n{cell};{beside}\n"
    with pytest.raises(BadlyWritten, match=rf"drawer\.csv:2: {column}: .*({message})") as caught:
        read(text)
    (fault,) = caught.value.faults
    assert fault.read and fault.allowed


def test_every_fault_is_told_at_once_in_the_order_of_lines(read: Read) -> None:
    text = "value,tolerance,color\n4k7,1 %,x\n0R,1 %,x\n1k,1 %\n2k2,200 %,x\nx,y,x\n4k7,1 %,x\n"
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read(text)
    assert [(fault.line, fault.key) for fault in caught.value.faults] == [
        (1, "color"),
        (3, "value"),
        (4, ""),
        (5, "tolerance"),
        (6, "value"),
        (6, "tolerance"),
        (7, "value"),
    ]


def test_after_a_thousand_faults_the_rest_is_said_to_be_unread(read: Read) -> None:
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read("value,tolerance\n" + "x,y\n" * 2000)
    *told, last = caught.value.faults
    assert len(told) == 1000
    assert (last.line, last.problem) == (502, "1000 faults so far: the rest of the list was not read")


def test_same_part_in_the_same_place_twice_names_both_lines(read: Read) -> None:
    text = "value,tolerance,quantity\n4k7,1 %,3\n1k,1 %,3\n4.7 kΩ,0.01,9\n4700,1 %,\n"
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read(text)
    assert [(fault.line, fault.problem) for fault in caught.value.faults] == [
        (4, "the same part in the same place as in line 2"),
        (5, "the same part in the same place as in line 2"),
    ]


def test_faulty_row_is_not_taken_for_the_part_it_half_says(read: Read) -> None:
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read("value,tolerance\n1k,x\n1k,\n")
    assert [fault.line for fault in caught.value.faults] == [2]


def test_row_behind_a_cell_of_two_lines_keeps_its_line(read: Read) -> None:
    with pytest.raises(BadlyWritten, match=r"drawer\.csv:4: value: not above 0"):
        read('value,location\n1k,"two\nlines"\n0R,\n')


@pytest.mark.parametrize(
    ("name", "problem"), [("nowhere.csv", "no such file"), (".", "a directory"), ("a\0b", "cannot be read")]
)
def test_path_to_no_file_is_one_clear_fault(tmp_path: Path, name: str, problem: str) -> None:
    with pytest.raises(BadlyWritten, match=problem):
        read_stock(f"{tmp_path}/{name}")


PIECES = [*COLUMNS, *',;"\n\r\t ', "4k7", "1 %", "0", "-", "e", "9", "\x85", "\u2028"]
ODD = st.lists(st.sampled_from(PIECES)).map("".join) | st.text()


@given(ODD)
@example('value\n"')
@example("value\n1k\n\x85")
# The file is written anew for each example, so that a fixture of the function's scope does no harm.
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
def test_odd_text_is_a_list_or_an_error_of_ours(read: Read, text: str) -> None:
    for content in (text, f"value,price,location\n{text}"):
        try:
            stock = read(content)
        except BadlyWritten as error:
            assert error.faults
        else:
            assert stock.items


# --- the stage file's own list -----------------------------------------------------------------

NAMED = STAGE.replace('series = "E24"', 'series = "E24"\nstock = "lists/drawer.csv"')


@pytest.fixture
def stage_path(tmp_path: Path) -> Path:
    path = tmp_path / "stage.toml"
    path.write_text(NAMED, encoding="utf-8")
    (tmp_path / "lists").mkdir()
    (tmp_path / "lists" / "drawer.csv").write_text("value,quantity\n4k7,3\n", encoding="utf-8")
    return path


def test_stage_without_a_list_has_none(stage_path: Path) -> None:
    stage_path.write_text(STAGE, encoding="utf-8")
    assert read_stage(stage_path).stock is None


def test_stage_has_the_list_beside_it_and_on_record(stage_path: Path) -> None:
    stage = read_stage(stage_path)
    assert stage.stock == read_stock(stage_path.parent / "lists" / "drawer.csv")
    assert stage.stock.items == (StockItem(value=4700.0, quantity=3),)
    assert stage.files[1] == stage.stock.file
    assert [Path(record.path).name for record in stage.files] == ["stage.toml", "drawer.csv"]


def test_faults_of_the_list_are_told_with_those_of_the_stage(stage_path: Path) -> None:
    stage_path.write_text(NAMED.replace('"npn"', '"nnp"'), encoding="utf-8")
    (stage_path.parent / "lists" / "drawer.csv").write_text("value\n0R\nx\n", encoding="utf-8")
    with pytest.raises(BadlyWritten, match="badly written") as caught:
        read_stage(stage_path)
    places = [(Path(fault.file).name, fault.line, fault.key) for fault in caught.value.faults]
    assert places == [
        ("stage.toml", 4, "stage.polarity"),
        ("drawer.csv", 2, "value"),
        ("drawer.csv", 3, "value"),
    ]


def test_missing_list_is_a_fault_of_the_key(stage_path: Path) -> None:
    (stage_path.parent / "lists" / "drawer.csv").unlink()
    message = r"stage\.toml:\d+: resistors\.stock: no such file; read .*drawer\.csv"
    with pytest.raises(BadlyWritten, match=message):
        read_stage(stage_path)


@pytest.mark.parametrize(
    ("written", "message"),
    [
        ("stock = 3", r"resistors\.stock: not a text; read 3"),
        ("stock = {}", r"resistors\.stock: not a text; read a table"),
        ('stock = ""', r"resistors\.stock: a directory"),
        ('stok = "lists/drawer.csv"', r'resistors\.stok: unknown key.*did you mean "stock"'),
    ],
)
def test_list_written_otherwise_is_told(stage_path: Path, written: str, message: str) -> None:
    stage_path.write_text(NAMED.replace('stock = "lists/drawer.csv"', written), encoding="utf-8")
    with pytest.raises(BadlyWritten, match=message):
        read_stage(stage_path)


def test_list_is_the_stages_not_one_resistors(stage_path: Path) -> None:
    stage_path.write_text(STAGE.replace('value = "3k3"', 'stock = "lists/drawer.csv"'), encoding="utf-8")
    with pytest.raises(BadlyWritten, match=r"resistors\.RC\.stock: unknown key"):
        read_stage(stage_path)


@pytest.mark.parametrize("folder", ["elsewhere", "elsewhere/deep", "lists", "."])
def test_list_is_found_from_a_frozen_stage_in_another_folder(stage_path: Path, folder: str) -> None:
    new = stage_path.parent / folder / "new.toml"
    new.parent.mkdir(parents=True, exist_ok=True)
    write_new(new, frozen_text(stage_path, {"RC": "4.7 kΩ"}, new_path=new))
    stock = read_stage(new).stock
    assert stock is not None
    assert stock.items == (StockItem(value=4700.0, quantity=3),)
