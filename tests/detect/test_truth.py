"""Hand-marked truth as a table: what is read, and what is refused with its place."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from detect.errors import RequestWrong
from detect.truth import Truth, read_truth


def test_truth_is_read_with_further_columns_left_aside(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("note,x,y,r\nbig,1,2.5,3\n,4,5,6\n")
    truth = read_truth(path)
    assert truth.xy.tolist() == [[1, 2.5], [4, 5]]
    assert truth.radius.tolist() == [3, 6]


@pytest.mark.parametrize("text", ["x,y\n1,2\n3,4\n", "x,y,r\n1,2,\n3,4, \n", "x,y,r\n1,2\n3,4\n"])
def test_truth_may_have_no_radii(tmp_path: Path, text: str) -> None:
    (tmp_path / "a.csv").write_text(text)
    truth = read_truth(tmp_path / "a.csv")
    assert truth.xy.tolist() == [[1, 2], [3, 4]]
    assert np.isnan(truth.radius).all()
    assert not truth.known.any()
    assert np.isnan(truth.usual_radius)


def test_some_radii_may_be_known(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("x,y,r\n1,2,3\n3,4,\n5,6,7\n")
    truth = read_truth(tmp_path / "a.csv")
    assert truth.known.tolist() == [True, False, True]
    assert truth.usual_radius == 5.0


def test_truth_may_hold_nothing(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("x,y,r\n")
    assert read_truth(tmp_path / "a.csv").xy.shape == (0, 2)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("x,r\n1,2\n", r"a\.csv has no column 'y'; it needs x and y, and r where radii are known"),
        ("", "has no column 'x'"),
        ("x,y,r\n1,2,3\n1,two,3\n", "Row 3 of the truth a.csv has 'two' in the column 'y'; write"),
        ("x,y,r\n1\n", "Row 2 of the truth a.csv has None in the column 'y'"),
        ("x,y,r\n1,2,0\n", "has '0' in the column 'r'; write a radius above 0 in pixels"),
        ("x,y,r\nnan,2,3\n", "has 'nan' in the column 'x'"),
        ("x,y,r\n1,2,-3\n", "has '-3' in the column 'r'"),
    ],
)
def test_a_bad_truth_says_where(tmp_path: Path, text: str, message: str) -> None:
    (tmp_path / "a.csv").write_text(text)
    with pytest.raises(RequestWrong, match=message):
        read_truth(tmp_path / "a.csv")


def test_a_missing_truth_says_so(tmp_path: Path) -> None:
    with pytest.raises(RequestWrong, match=r"The truth a\.csv cannot be read as text; save it"):
        read_truth(tmp_path / "a.csv")


def test_radii_are_as_many_as_centres() -> None:
    with pytest.raises(ValueError, match=r"1 radii for centres of shape \(2, 2\)"):
        Truth(np.zeros((2, 2)), np.ones(1))
