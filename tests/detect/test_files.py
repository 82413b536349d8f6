"""Files are written whole or not at all; tables are plain and harmless."""

from __future__ import annotations

import csv
import errno
import io
import os
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from detect.errors import FolderNotWritable
from detect.files import csv_text, make_folder, write_bytes_atomically, write_text_atomically


def test_text_is_written_as_utf8_and_replaces_what_was_there(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("old and longer than the new one")
    write_text_atomically(path, "Ä,µ\n")
    assert path.read_bytes() == "Ä,µ\n".encode()
    assert [entry.name for entry in tmp_path.iterdir()] == ["a.csv"]


def test_a_full_disk_leaves_the_old_file_and_no_part(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "summary.csv"
    path.write_bytes(b"old")

    def full(descriptor: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(
        FolderNotWritable,
        match=r"summary\.csv cannot be written to .* \(no space left on device\); make room",
    ):
        write_bytes_atomically(path, b"new")
    assert path.read_bytes() == b"old"
    assert [entry.name for entry in tmp_path.iterdir()] == ["summary.csv"]


def test_an_interruption_leaves_no_part(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupt(descriptor: int) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_bytes_atomically(tmp_path / "a", b"new")
    assert list(tmp_path.iterdir()) == []


def test_folders_are_made_with_those_above(tmp_path: Path) -> None:
    folder = make_folder(tmp_path / "a" / "b")
    assert folder.is_dir()
    assert list(folder.iterdir()) == []
    assert make_folder(folder) == folder


def test_a_file_in_the_folders_place_is_refused(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("")
    with pytest.raises(
        FolderNotWritable, match=r"out is a file, not a folder; name another folder"
    ):
        make_folder(tmp_path / "out")


def test_a_file_above_the_folder_is_refused(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("")
    with pytest.raises(
        FolderNotWritable, match=r"Nothing can be written to the folder .*out.b \(not a directory\)"
    ):
        make_folder(tmp_path / "out" / "b")


@pytest.mark.parametrize("text", ["=1+1", "+a", "-a", "@sum", "\tx", "\nx", "-", "=", "-1;2"])
def test_text_that_looks_like_a_formula_gets_an_apostrophe(text: str) -> None:
    assert next(csv.reader(io.StringIO(csv_text(["a"], []), newline=""))) == ["a"]
    written = csv_text([text], [[text]])
    rows = list(csv.reader(io.StringIO(written, newline="")))
    assert rows == [[f"'{text}"], [f"'{text}"]]


def test_carriage_returns_do_not_split_a_cell() -> None:
    written = csv_text(["a"], [["x\ry"], ["x\r\ny"], ["\rz"]])
    rows = list(csv.reader(io.StringIO(written, newline="")))
    assert rows == [["a"], ["x\ny"], ["x\ny"], ["'\nz"]]


def test_a_name_that_is_no_proper_text_can_be_written(tmp_path: Path) -> None:
    write_text_atomically(tmp_path / "a", "dish\udcff")
    assert (tmp_path / "a").read_bytes() == b"dish\\udcff"


@pytest.mark.parametrize("text", ["-1.5", "+3", "-2e-7", "dish_01.jpg", "a=b", "1-2", ""])
def test_plain_numbers_and_plain_words_stay(text: str) -> None:
    assert list(csv.reader(io.StringIO(csv_text([text], [])))) == ([[text]] if text else [[""]])


def test_cells_are_plain() -> None:
    row = [
        None,
        float("nan"),
        True,
        np.False_,
        3,
        np.int64(4),
        0.1,
        np.float64(-0.0),
        "x,y",
        np.inf,
    ]
    header = list("abcdefghij")
    assert csv_text(header, [row]).splitlines()[1] == ',,true,false,3,4,0.1,0.0,"x,y",inf'


def test_significant_digits() -> None:
    row = [1234.56789, 1e-7 / 3, 2.0, np.float32(0.1)]
    assert csv_text(list("abcd"), [row], digits=4).splitlines()[1] == "1235.0,3.333e-08,2.0,0.1"


def test_lines_end_in_newline_alone() -> None:
    assert csv_text(["a", "b"], [[1, 2]]) == "a,b\n1,2\n"


def test_a_row_of_the_wrong_length_is_a_bug() -> None:
    with pytest.raises(ValueError, match="a row has 1 cells for 2 columns"):
        csv_text(["a", "b"], [[1]])


@given(st.lists(st.floats(allow_nan=False), min_size=1, max_size=5))
def test_floats_read_back_the_same(values: list[float]) -> None:
    text = csv_text([str(i) for i in range(len(values))], [values])
    assert [float(cell) for cell in text.splitlines()[1].split(",")] == values


@given(st.text(max_size=8))
def test_no_cell_begins_like_a_formula(text: str) -> None:
    cell = list(csv.reader(io.StringIO(csv_text(["a"], [[text]]), newline="")))[-1]
    assert cell == [] or not cell[0].startswith(("=", "@", "\t", "\r", "\n"))
    assert cell == [] or not cell[0].startswith(("+", "-")) or np.isfinite(float(cell[0]))


@pytest.mark.parametrize("digits", [1, 7, 12, 17])
def test_numbers_are_what_reads_back_at_these_digits_however_they_are_written(digits: int) -> None:
    rng = np.random.default_rng(digits)
    values = [*(rng.normal(size=400) * 10.0 ** rng.integers(-9, 20, 400)).tolist()]
    values += [0.0, -0.0, 1.0, -3.0, 1234567.8, 99999999.5, 0.0001, 0.00001, 1e15, 1e16, 1e22]
    text = csv_text(["v"], [[value] for value in values], digits=digits)
    plainly = [repr(float(f"{value:.{digits}g}") + 0.0) for value in values]
    assert text.splitlines()[1:] == plainly
