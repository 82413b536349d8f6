"""Every scale's uncertainty reaches the limits of the density in summary.csv."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest
from typer.testing import CliRunner

from analyse.cli import app
from analyse.density import density_per_cm2
from tests.discs import DIAMETER, HEIGHT, WIDTH, scattered, write_discs


def summary(folder: Path, *options: str) -> dict[str, str]:
    """Detect and analyse discs with some options of the scale; return their row of summary.csv."""
    photograph = write_discs(folder / "a.png", scattered(30, seed=1))
    out = str(folder / "out")
    for words in (
        ["detect", str(photograph), "--diameter", DIAMETER, *options, "--area", "frame"],
        ["analyse", out, "--simulations", "99"],
    ):
        result = CliRunner().invoke(app, [*words, "--out", out])
        assert result.exit_code == 0, (words, result.stderr)
    with (folder / "out" / "summary.csv").open(encoding="utf-8", newline="") as file:
        (row,) = csv.DictReader(file)
    return row


HEIGHT_OPTIONS = ("--height", "3m", "--focal-length", "9mm", "--sensor-width", "13mm")


@pytest.mark.parametrize(
    ("options", "mm_per_px", "stated"),
    [
        (("--mm-per-pixel", "0.2"), 0.2, 0.0),
        (("--mm-per-pixel", "0.2", "--scale-uncertainty", "10%"), 0.2, 0.1),
        (("--line", "10,10,210,10", "--line-mm", "50"), 0.25, math.sqrt(2) / 200),
        (HEIGHT_OPTIONS, 3000 * 13 / (9 * WIDTH), 0.05),
        ((*HEIGHT_OPTIONS, "--scale-uncertainty", "2%"), 3000 * 13 / (9 * WIDTH), 0.02),
    ],
)
def test_the_limits_of_the_density_know_the_scale_s_uncertainty(
    options: tuple[str, ...], mm_per_px: float, stated: float, tmp_path: Path
) -> None:
    row = summary(tmp_path, *options)
    expected = density_per_cm2(int(row["count"]), WIDTH * HEIGHT * mm_per_px**2, stated)
    assert float(row["density_per_cm2"]) == pytest.approx(expected.value, rel=1e-3)
    assert float(row["density_low"]) == pytest.approx(expected.low, rel=1e-3)
    assert float(row["density_high"]) == pytest.approx(expected.high, rel=1e-3)
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert ("The scale was given without its uncertainty" in page) == (stated == 0)
