"""Published patterns from end to end through the command line: from tables, and from pictures of them."""

from __future__ import annotations

import csv
import json
from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from typer.testing import CliRunner

from analyse.cli import app
from detect.accuracy import match_spots
from tests.analyse import published

Array = NDArray[np.float64]
SIDE_PX, MARGIN_PX, RADIUS_PX = 1400, 60, 8.0
MM_PER_PX = 0.05


def run(*arguments: object) -> None:
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    assert result.exit_code == 0, result.stderr


def table(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def summary(out: Path) -> dict[str, str]:
    (row,) = table(out / "summary.csv")
    return row


def counts_of(out: Path) -> list[int]:
    """Counts of the quadrats, row by row from the top."""
    rows = table(out / "quadrats.csv")
    rows.sort(key=lambda row: (int(row["row"]), int(row["column"])))
    return [int(row["count"]) for row in rows]


def test_student_map_of_yeast_cells(tmp_path: Path) -> None:
    """ "Student" (1907), Biometrika 5, 351-360, Table I: 20 x 20 squares, series D, random.

    Mean 4.68 is published. VMR, X2 and p were computed once from the published map by their
    definitions, apart from this program.
    """
    run("analyse", "--counts", published.DATA / "student_grid.csv", "--out", tmp_path)
    row = summary(tmp_path)
    assert (row["count"], row["quadrats"], row["df"]) == ("1872", "400", "399")
    assert float(row["mean"]) == 4.68
    assert float(row["variance"]) == pytest.approx(4.468772, abs=1e-6)
    assert float(row["vmr"]) == pytest.approx(0.954866, abs=1e-6)
    assert float(row["chi2"]) == pytest.approx(380.9915, abs=1e-4)
    assert float(row["p_clumped"]) == pytest.approx(0.73357, abs=1e-5)
    assert float(row["p_two_sided"]) == pytest.approx(0.53285, abs=1e-5)
    assert row["verdict"] == "no departure from random found"
    # A table of counts has neither area nor density, and they stay empty.
    assert row["area_mm2"] == row["density_per_cm2"] == ""
    assert counts_of(tmp_path) == published.student_grid().ravel().tolist()


@dataclass(frozen=True)
class Pattern:
    """A published pattern in its unit square, and what 5 x 5 quadrats of it give.

    The readings (regular, clustered) are those of Ripley (1977), Journal of the Royal Statistical
    Society B 39, 172-212, for cells and of Strauss (1975), Biometrika 62, 467-475, and Ripley for
    redwood; X2, VMR and p were computed once from the published coordinates, apart from this
    program.
    """

    name: str
    top: float
    n: int
    chi2: float
    vmr: float
    p_clumped: float
    p_two_sided: float
    verdict: str

    @property
    def area(self) -> str:
        return f"0,{self.top:g},1,{self.top + 1:g}"

    @property
    def places(self) -> Array:
        """The points in pixels of the picture, whose unit square lies `MARGIN_PX` inside it."""
        return (published.points(self.name) - (0, self.top)) * SIDE_PX + MARGIN_PX - 0.5


PATTERNS = (
    Pattern("cells", 0.0, 42, 8.0, 0.33333, 0.999085, 0.00183, "evenly spaced"),
    Pattern("redwood", -1.0, 62, 54.9355, 2.28898, 0.000319, 0.000639, "clumped"),
)
every_pattern = pytest.mark.parametrize("pattern", PATTERNS, ids=lambda pattern: pattern.name)


@every_pattern
def test_published_points_from_a_table(pattern: Pattern, tmp_path: Path) -> None:
    points = published.DATA / f"{pattern.name}.csv"
    run("analyse", points, "--area", pattern.area, "--grid", "5x5", "--out", tmp_path)
    row = summary(tmp_path)
    assert (int(row["count"]), row["quadrats"], row["df"]) == (pattern.n, "25", "24")
    assert float(row["chi2"]) == pytest.approx(pattern.chi2, abs=1e-4)
    assert float(row["vmr"]) == pytest.approx(pattern.vmr, abs=1e-5)
    assert float(row["p_clumped"]) == pytest.approx(pattern.p_clumped, abs=1e-6)
    assert float(row["p_two_sided"]) == pytest.approx(pattern.p_two_sided, abs=6e-6)
    assert row["verdict"] == pattern.verdict


def write_picture(path: Path, places: Array, *, seed: int) -> None:
    """Domes of about `RADIUS_PX` on unevenly lit, noisy ground, as a JPEG."""
    rng = np.random.default_rng(seed)
    size = SIDE_PX + 2 * MARGIN_PX
    y, x = np.mgrid[:size, :size].astype(np.float32)
    picture = 0.30 + 0.08 * x / size - 0.05 * y / size
    picture += 0.02 * cv2.resize(rng.normal(size=(40, 40)).astype(np.float32), (size, size))
    for (px, py), r in zip(places, rng.uniform(0.88, 1.12, len(places)) * RADIUS_PX, strict=True):
        away = np.hypot(x - px, y - py)
        dome = np.sqrt(np.clip(1 - (away / r) ** 2, 0, 1))
        picture += (0.25 + 0.25 * dome) * np.clip(r + 0.5 - away, 0, 1)
    colour = picture[..., None] * np.array([0.80, 0.93, 1.0], dtype=np.float32)
    colour = cv2.GaussianBlur(colour, (0, 0), 1.0) + rng.normal(0, 0.02, colour.shape)
    shown = np.clip(np.round(255 * colour), 0, 255).astype(np.uint8)
    assert cv2.imwrite(str(path), shown, [cv2.IMWRITE_JPEG_QUALITY, 88])


def write_unit_square(path: Path) -> None:
    low, high = MARGIN_PX - 0.5, MARGIN_PX + SIDE_PX - 0.5
    ring = [[low, low], [high, low], [high, high], [low, high], [low, low]]
    path.write_text(json.dumps({"type": "Polygon", "coordinates": [ring]}), encoding="utf-8")


def bounds_of_counts(places: Array, *, slack_px: float) -> tuple[list[int], list[int]]:
    """Least and most that each of 5 x 5 quadrats can hold if places are off by up to `slack_px`."""
    cells = (places + 0.5 - MARGIN_PX) / SIDE_PX * 5
    slack = slack_px / SIDE_PX * 5
    least, most = [], []
    for row in range(5):
        for column in range(5):
            inner = np.abs(cells - (column + 0.5, row + 0.5)).max(axis=1)
            least.append(int((inner < 0.5 - slack).sum()))
            most.append(int((inner < 0.5 + slack).sum()))
    return least, most


@every_pattern
def test_published_points_from_a_picture(pattern: Pattern, tmp_path: Path) -> None:
    photo, square = tmp_path / f"{pattern.name}.jpg", tmp_path / "square.geojson"
    write_picture(photo, pattern.places, seed=pattern.n)
    write_unit_square(square)
    options = ("--mm-per-pixel", MM_PER_PX, "--area", square, "--diameter", "10-24px")
    run("detect", photo, *options, "--out", tmp_path / "sheets")
    run("analyse", tmp_path / "sheets", "--grid", "5x5", "--out", tmp_path / "out")
    found = table(tmp_path / "sheets" / f"{pattern.name}.points.csv")
    centres = np.array([[float(row["x_px"]), float(row["y_px"])] for row in found])
    match = match_spots(centres, pattern.places, np.full(pattern.n, RADIUS_PX))
    assert (len(found), len(match)) == (pattern.n, pattern.n)
    # The area's edge cuts one dome of redwood, which draws its centre inwards.
    middle = np.abs(pattern.places - SIDE_PX / 2 - MARGIN_PX).max(axis=1)
    cut = middle > SIDE_PX / 2 - 2 * RADIUS_PX
    assert match.distance[~cut].max() < 1.0
    assert match.distance.max() < 3.0
    # Points on a line between two quadrats may fall to either; all others are counted as published.
    least, most = bounds_of_counts(pattern.places, slack_px=3.0)
    counts = counts_of(tmp_path / "out")
    assert sum(least) < pattern.n <= sum(counts)
    assert all(a <= b <= c for a, b, c in zip(least, counts, most, strict=True))
    row = summary(tmp_path / "out")
    assert float(row["area_mm2"]) == pytest.approx((SIDE_PX * MM_PER_PX) ** 2, rel=1e-6)
    assert row["verdict"] == pattern.verdict
