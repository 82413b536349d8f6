"""Tables of counts: a column, or a rectangle of contiguous quadrats."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from analyse.count_table import CountTable, read_counts
from analyse.errors import TableWrong
from detect.errors import OptionWrong
from detect.lengths import Length
from tests.analyse import published


def table(tmp_path: Path, text: str) -> Path:
    """Write a table and return its path."""
    path = tmp_path / "bed.csv"
    path.write_text(text, encoding="utf-8")
    return path


def test_a_column_of_counts(tmp_path: Path) -> None:
    read = read_counts(table(tmp_path, "plot,Count,note\na,3,\nb,0,x\nc,5,\n"))
    assert (read.name, read.counts.tolist(), read.rows, read.columns) == (
        "bed.csv", [3, 0, 5], None, None,
    )  # fmt: skip


def test_a_rectangle_of_counts(tmp_path: Path) -> None:
    read = read_counts(table(tmp_path, "1,2,3\n4,5,6\n"), side=Length(5, "cm"))
    assert (read.counts.tolist(), read.rows, read.columns) == ([1, 2, 3, 4, 5, 6], 2, 3)
    assert read.side == Length(5, "cm")


@pytest.mark.parametrize("often", ["frequency", "Freq", "frequencies"])
def test_a_table_of_frequencies(tmp_path: Path, often: str) -> None:
    """One row per count, in any order, with how many quadrats held it; 0 quadrats are allowed."""
    read = read_counts(table(tmp_path, f"series,count,{often}\na,2,1\na,0,3\na,1,0\na,5,2\n"))
    assert (read.counts.tolist(), read.rows, read.columns) == ([0, 0, 0, 2, 5, 5], None, None)


def test_of_two_columns_the_other_holds_the_counts(tmp_path: Path) -> None:
    read = read_counts(table(tmp_path, "colonies,frequency\n1,2\n0,3\n"))
    assert read.counts.tolist() == [0, 0, 0, 1, 1]
    with pytest.raises(TableWrong, match="row 3, column colonies: 1 stands twice"):
        read_counts(table(tmp_path, "colonies,frequency\n1,2\n1,3\n"))
    with pytest.raises(TableWrong, match="has a column 'frequency' but no column 'count'"):
        read_counts(table(tmp_path, "frequency,frequency\n1,2\n1,3\n"))


def test_frequencies_tell_no_order(tmp_path: Path) -> None:
    path = table(tmp_path, "count,frequency\n0,3\n1,2\n")
    with pytest.raises(OptionWrong, match=r"--transect cannot apply to bed.csv, a table of freq"):
        read_counts(path, transect=True)


def test_student_map(tmp_path: Path) -> None:
    """ "Student" (1907), Table I: 20 x 20 squares, 1872 cells."""
    read = read_counts(published.DATA / "student_grid.csv")
    assert (read.rows, read.columns, read.counts.sum()) == (20, 20, 1872)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("plot,number\na,3\n", r"no column 'count' \(its columns: plot, number\); name the column"),
        ("count\n3\n1.5\n", r"bed.csv, row 3, column count: '1.5' is not a count"),
        ("count\n3\n-2\n", r"bed.csv, row 3, column count: '-2' is not a count"),
        ("count\nthree\n", r"bed.csv, row 2, column count: 'three' is not a count"),
        ("1,2\n3,x\n", r"bed.csv, row 2, column 2: 'x' is not a count"),
        ("1,0.5\n3,4\n", r"bed.csv, row 1, column 2: '0.5' is not a count"),
        ("1,2\n3,\n", r"bed.csv, row 2, column 2, is empty"),
        ("1,2\n3\n", r"bed.csv, row 2 holds 1 counts, but row 1 holds 2; .* rows of one length"),
        ("1,2\n3,4,5\n", r"bed.csv, row 2 holds 3 counts, but row 1 holds 2"),
        (
            "a,value,frequency\nx,0,3\n",
            r"has a column 'frequency' but no column 'count' .*name the column of",
        ),
        ("count,frequency\n0,3\n1,-2\n", r"row 3, column frequency: '-2' is not a count"),
        ("count,frequency\n0,3\n1,0.5\n", r"row 3, column frequency: '0.5' is not a count"),
        ("count,frequency\n0,3\n1.5,2\n", r"row 3, column count: '1.5' is not a count"),
        ("count,frequency\n0,3\n1,\n", r"row 3, column frequency, is empty; fill it in"),
        (
            "count,frequency\n0,3\n1,2\n0,4\n",
            r"row 4, column count: 0 stands twice; give each count",
        ),
        (
            "count,frequency\n0,900000\n1,900000\n",
            r"stands for 1,800,000 quadrats, more than 1,000,000",
        ),
        ("count,frequency\n0,0\n1,0\n", r"bed.csv holds 0 quadrats; dispersion needs"),
        ("count,frequency\n4,1\n", r"bed.csv holds 1 quadrat; dispersion needs"),
        ("count\n", r"bed.csv holds 0 quadrats; dispersion needs counts of at least 2"),
        ("count\n7\n", r"bed.csv holds 1 quadrat; dispersion needs"),
        ("7\n", r"bed.csv holds 1 quadrat; dispersion needs"),
    ],
)
def test_what_is_no_table_of_counts_is_refused(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(TableWrong, match=message):
        read_counts(table(tmp_path, text))


def test_a_table_checks_itself() -> None:
    with pytest.raises(ValueError, match="a count is negative"):
        CountTable("t", np.array([1, -1]))
    with pytest.raises(ValueError, match="2 x 2 quadrats cannot hold 3 counts"):
        CountTable("t", np.array([1, 1, 1]), 2, 2)
    with pytest.raises(ValueError, match="read-only"):
        CountTable("t", np.array([1, 1])).counts[0] = 3


@pytest.mark.parametrize("often", ["f", "Observed", "number of quadrats"])
def test_other_names_of_frequencies(tmp_path: Path, often: str) -> None:
    """They once were passed over, so that each row counted as one quadrat."""
    read = read_counts(table(tmp_path, f"count,{often},expected\n0,2,1.5\n1,3,2.5\n"))
    assert read.counts.tolist() == [0, 0, 1, 1, 1]


@pytest.mark.parametrize(
    ("text", "doubtful"),
    [
        ("count,n\n0,20\n1,10\n2,5\n", True),
        ("0,20\n1,10\n2,5\n", True),
        ("1,20\n2,10\n3,5\n", True),
        ("count,frequency\n0,20\n1,10\n2,5\n", False),
        ("quadrat,count\n1,0\n2,1\n3,2\n", False),
        ("count\n0\n1\n2\n", False),
        ("count,note\n0,a\n1,b\n2,c\n", False),
        ("count,note\n0\n1,3\n2,4\n", False),
        ("0,20,3\n1,10,3\n2,5,3\n", False),
        ("0,20\n1,10\n", False),
        ("3,20\n1,10\n2,5\n", False),
    ],
)
def test_a_table_that_may_be_one_of_frequencies_is_told_apart(
    tmp_path: Path, text: str, doubtful: bool
) -> None:
    assert read_counts(table(tmp_path, text)).like_frequencies is doubtful
