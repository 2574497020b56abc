"""A new file that grows beside its name and takes it at the end."""

from __future__ import annotations

import errno
import os

import pytest

from biasband.errors import UsageError
from biasband.files.growing_file import GrowingFile


@pytest.fixture
def path(tmp_path):
    return str(tmp_path / "draws.csv")


def refuse_links(*_):
    raise OSError(errno.EPERM, "Operation not permitted")  # as on a FAT file system


@pytest.fixture(params=["links", "no links"])
def file_system(request, monkeypatch):
    if request.param == "no links":
        monkeypatch.setattr(os, "link", refuse_links)


def test_file_takes_its_name_at_the_end_only(path, tmp_path, file_system):
    file = GrowingFile(path)
    file.stream.write(b"half")
    assert os.listdir(tmp_path) == [os.path.basename(file.part)] and file.part.endswith(".part")
    file.finish()
    file.discard()
    assert os.listdir(tmp_path) == ["draws.csv"]
    with open(path, "rb") as found:
        assert found.read() == b"half"


def test_discarded_file_leaves_nothing(path, tmp_path):
    file = GrowingFile(path)
    file.stream.write(b"half")
    file.discard()
    assert os.listdir(tmp_path) == []


def test_what_is_at_the_name_by_the_end_stays(path, tmp_path, file_system):
    file = GrowingFile(path)
    with open(path, "w", encoding="utf-8") as other:
        other.write("mine")
    with pytest.raises(FileExistsError, match=r"draws\.csv"):
        file.finish()
    file.discard()
    with open(path, encoding="utf-8") as found:
        assert found.read() == "mine"
    assert sorted(os.listdir(tmp_path)) == ["draws.csv", os.path.basename(file.part)]


def test_file_that_cannot_be_made_is_said(tmp_path):
    with pytest.raises(UsageError, match=r"x\.csv cannot be written: File name too long"):
        GrowingFile(str(tmp_path / ("x" * 250 + "x.csv")))
