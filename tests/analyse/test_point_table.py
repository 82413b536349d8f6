"""Tables of points that tell sizes and doubts."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import shapely

from analyse.errors import TableWrong
from analyse.pattern import Pattern
from analyse.point_table import read_points

SQUARE = shapely.box(0, 0, 100, 100)


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "bed.csv"
    path.write_text(text, encoding="utf-8")
    return path


def test_radius_and_doubt_go_with_their_points(tmp_path: Path) -> None:
    path = written(tmp_path, "x,y,radius,doubt\n1,2,0.1,0.2\n50,1,0.3,\n3,4,,0.9\n")
    pattern = read_points(path, area=SQUARE, unit="cm")
    assert pattern.outside == 1
    np.testing.assert_allclose(pattern.radius, [1.0, np.nan])
    np.testing.assert_allclose(pattern.doubt, [0.2, 0.9])
    assert pattern.width == 2.0
    assert pattern.flags == ("outside", "doubtful")


def test_radius_mm_is_in_millimetres_whatever_the_unit(tmp_path: Path) -> None:
    path = written(tmp_path, "x,y,radius_mm,radius\n1,2,0.4,9\n")
    assert read_points(path, area=SQUARE, unit="cm").radius.tolist() == [0.4]


def test_a_table_without_sizes_knows_none(tmp_path: Path) -> None:
    pattern = read_points(written(tmp_path, "x,y\n1,2\n3,4\n"), area=SQUARE)
    assert np.isnan(pattern.radius).all()
    assert np.isnan(pattern.width)
    assert pattern.doubt.tolist() == [0.0, 0.0]


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("x,y,radius\n1,2,0\n", "bed.csv, row 2: the radius 0 must be above 0."),
        ("x,y,radius_mm\n1,2,-3\n", "bed.csv, row 2: the radius_mm -3 must be above 0."),
        ("x,y,doubt\n1,2,1.5\n", "bed.csv, row 2: the doubt 1.5 must be within 0 to 1."),
        ("x,y,doubt\n1,2,-0.5\n", "bed.csv, row 2: the doubt -0.5 must be within 0 to 1."),
    ],
)
def test_an_impossible_size_or_doubt_is_refused(tmp_path: Path, text: str, said: str) -> None:
    with pytest.raises(TableWrong) as trouble:
        read_points(written(tmp_path, text), area=SQUARE)
    assert str(trouble.value) == said


def test_columns_of_a_pattern_must_fit() -> None:
    with pytest.raises(ValueError, match="radius has 1 values for 2 points"):
        Pattern.of([[1, 2], [3, 4]], SQUARE, radius=[1.0])
    with pytest.raises(ValueError, match="a radius is not above 0"):
        Pattern.of([[1, 2]], SQUARE, radius=[-1.0])
