"""How draws are written: in full, and as many rows as count."""

from __future__ import annotations

import csv
import io

import numpy as np
import pytest

from biasband.show.draws_formats import FORMATS, ArrayRows, CsvRows

ODD = [0.1, 1.0 / 3.0, 5e-324, 1.7976931348623157e308, -0.0, float("nan")]
"""Numbers that lose something if they are not written in full."""


def block(first):
    return {
        "board": np.arange(first, first + len(ODD)),
        "gain": np.array(ODD),
        "supply": np.broadcast_to(np.asarray(9.0), (len(ODD),)),
    }


def written(rows, count):
    stream = io.BytesIO()
    into = rows(stream)
    into.add(block(0))
    into.add(block(6))
    into.finish(count)
    stream.seek(0)
    return stream


def test_csv_has_one_line_of_names_and_a_line_per_board():
    lines = written(CsvRows, 12).getvalue().decode().splitlines()
    assert lines[:3] == ["board,gain,supply", "0,0.1,9.0", "1,0.3333333333333333,9.0"]
    assert len(lines) == 13


@pytest.mark.parametrize("count", [6, 12])
def test_numbers_read_back_as_the_same_bits(count):
    lines = written(CsvRows, count).getvalue().decode().splitlines()
    found = [float(row[1]) for row in list(csv.reader(lines))[1:]]
    np.testing.assert_array_equal(found, (ODD * 2)[:count])
    assert np.signbit(found[4])
    with np.load(written(ArrayRows, count)) as arrays:
        np.testing.assert_array_equal(arrays["gain"], (ODD * 2)[:count])
        assert arrays["board"].tolist() == list(range(count))
        assert arrays["supply"].tolist() == [9.0] * count


def test_torn_line_is_cut_off():
    stream = io.BytesIO()
    rows = CsvRows(stream)
    rows.add(block(0))
    stream.write(b"6,0.1,")  # as an interruption leaves it
    rows.finish(6)
    assert stream.getvalue() == written(CsvRows, 6).getvalue()


def test_name_with_a_comma_is_one_column():
    stream = io.BytesIO()
    CsvRows(stream).add({'group a,"b".tempco.coordinate': np.array([0.5])})
    first = stream.getvalue().decode().splitlines()[0]
    assert next(csv.reader([first])) == ['group a,"b".tempco.coordinate']


@pytest.mark.parametrize("rows", FORMATS.values())
def test_same_rows_are_the_same_bytes(rows):
    assert written(rows, 12).getvalue() == written(rows, 12).getvalue()
