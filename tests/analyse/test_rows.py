"""Rows of a plain table, and the sentence for everything that can be wrong with one."""

from __future__ import annotations

from pathlib import Path

import pytest

from analyse.errors import TableWrong
from analyse.rows import read_rows, real_in, whole_in


def table(tmp_path: Path, text: str | bytes) -> Path:
    """Write a table and return its path."""
    path = tmp_path / "bed.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


def test_comments_blank_rows_and_a_byte_order_mark_are_passed_over(tmp_path: Path) -> None:
    text = b"\xef\xbb\xbf# by hand\r\nx, y\r\n\r\n 1 ,2\r\n#,9\r\n,\r\n3,4"
    rows = read_rows(table(tmp_path, text))
    assert [row.cells for row in rows] == [("x", "y"), ("1", "2"), ("3", "4")]
    assert [row.number for row in rows] == [2, 4, 7]
    assert rows[1].where == "bed.csv, row 4"


def test_quoted_cells_may_hold_commas(tmp_path: Path) -> None:
    assert read_rows(table(tmp_path, 'note,x\n"a, b",1\n'))[1].cells == ("a, b", "1")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (b"", r"bed.csv is empty; it must hold a table"),
        (b"# nothing\n\n", r"bed.csv is empty"),
        (b"x;y\n1,5;2\n", r"separates its columns by semicolons or tabs; save it with commas"),
        (b"x\ty\n1\t2\n", r"separates its columns by semicolons or tabs"),
        (b"1 2 3\n4 5 6\n", r"separates its numbers by spaces; save it with commas"),
        (b"x,y\n\xff\xfe1,2", r"bed.csv is no text in UTF-8; save it as CSV in UTF-8"),
        (b"x,y\n1,\x00\n", r"bed.csv is not a table but some other kind of file"),
        (b'x,y\n"1,2\n', r"bed.csv, row 2, is not CSV \(unexpected end of data\)"),
    ],
)
def test_what_is_no_table_is_refused(tmp_path: Path, text: bytes, message: str) -> None:
    with pytest.raises(TableWrong, match=message):
        read_rows(table(tmp_path, text))


def test_a_missing_file_and_a_folder_are_refused(tmp_path: Path) -> None:
    with pytest.raises(TableWrong, match=r"bed.csv cannot be read \(No such file.*check the path"):
        read_rows(tmp_path / "bed.csv")
    with pytest.raises(TableWrong, match="cannot be read"):
        read_rows(tmp_path)


@pytest.mark.parametrize(
    ("cell", "message"),
    [
        ("", r"bed.csv, row 2, column y, is empty; fill it in or remove the row"),
        ("far", r"bed.csv, row 2, column y: 'far' is not a number; write it with a dot"),
        ('"1,5"', r"'1,5' is not a number; write it with a dot for decimals"),
        ("nan", r"bed.csv, row 2, column y: 'nan' is not finite; correct it or remove"),
        ("-inf", r"'-inf' is not finite"),
        ("1e999", r"'1e999' is not finite"),
        ("1_0", r"'1_0' is not a number"),
    ],
)
def test_a_cell_that_is_no_number_is_named(tmp_path: Path, cell: str, message: str) -> None:
    row = read_rows(table(tmp_path, f"x,y\n1,{cell}\n"))[1]
    with pytest.raises(TableWrong, match=message):
        real_in(row, 1, "y")


def test_a_short_row_lacks_its_cell(tmp_path: Path) -> None:
    row = read_rows(table(tmp_path, "x,y\n1\n"))[1]
    with pytest.raises(TableWrong, match="row 2, column y, is empty"):
        real_in(row, 1, "y")


@pytest.mark.parametrize(
    ("cell", "value"), [("0", 0), ("7", 7), ("+3", 3), ("12.0", 12), ("4.", 4)]
)
def test_whole_numbers(tmp_path: Path, cell: str, value: int) -> None:
    assert whole_in(read_rows(table(tmp_path, f"count\n{cell}\n"))[1], 0, "count") == value


@pytest.mark.parametrize("cell", ["1.5", "-1", "two", "nan", "1e3", "9999999999999", "٣"])
def test_what_is_no_count_is_named(tmp_path: Path, cell: str) -> None:
    row = read_rows(table(tmp_path, f"count\n{cell}\n"))[1]
    message = f"bed.csv, row 2, column count: '{cell}' is not a count; counts are whole numbers"
    with pytest.raises(TableWrong, match=message):
        whole_in(row, 0, "count")
