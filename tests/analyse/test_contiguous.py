"""Block variances together: merged blocks, the test of the order, the rows and the command."""

from __future__ import annotations

import csv
from itertools import permutations
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner

from analyse.blocks import two_term_variance
from analyse.cli import app
from analyse.contiguous import Blocks, block_variances, merged_blocks
from analyse.count_table import CountTable
from analyse.findings import analyse_counts
from tests.analyse import published

WAVE = ([5] * 4 + [0] * 4) * 4


def of(counts: object, *, simulations: int = 199, seed: int = 1) -> Blocks:
    """Return the block variances of counts."""
    rng = np.random.default_rng(seed)
    return block_variances(np.array(counts), rng=rng, simulations=simulations)


def test_merged_blocks_of_students_map() -> None:
    """ "Student" (1907), Table I, merged; computed from the published map."""
    merged = {each.size: each for each in merged_blocks(published.student_grid())}
    assert list(merged) == [1, 2, 4, 5, 8, 10]
    for size, q, vmr, chi2, upper, two, morisita in (
        (1, 400, 0.954866, 380.9915, 0.73357, 0.53285, 0.990375),
        (2, 100, 1.026375, 101.6111, 0.40856, 0.81712, 1.001396),
        (4, 25, 1.313568, 31.5256, 0.13920, 0.27840, 1.004022),
        (5, 16, 1.660399, 24.9060, 0.05122, 0.10244, 1.005294),
        (10, 4, 0.116809, 0.35043, 0.95028, 0.09944, 0.998584),
    ):
        seen = merged[size].counts
        assert (seen.q, seen.df, merged[size].left_out) == (q, q - 1, 0)
        assert seen.vmr == pytest.approx(vmr, abs=5e-7)
        assert seen.chi2 == pytest.approx(chi2, abs=5e-5)
        assert seen.p_clumped == pytest.approx(upper, abs=5e-6)
        assert seen.p_two_sided == pytest.approx(two, abs=1e-5)
        assert merged[size].morisita == pytest.approx(morisita, abs=5e-7)
    assert (merged[8].counts.q, merged[8].left_out) == (4, 400 - 256)


def test_merged_lengths_of_a_transect() -> None:
    merged = merged_blocks([1, 2, 3, 4, 5, 6, 7, 8, 9])
    assert [(each.size, each.counts.q, each.counts.n) for each in merged] == [
        (1, 9, 45), (2, 4, 36),
    ]  # fmt: skip


def test_a_wave_shows_its_scale_and_students_map_none() -> None:
    wave, student = of(WAVE, simulations=999), of(published.student_grid())
    assert wave.test is not None
    assert student.test is not None
    assert (wave.peak, wave.layout, wave.largest, wave.test.p) == (4, "transect", 8, 0.001)
    assert wave.sentence == (
        "Neighbouring blocks of 4 quadrats differ more than in random order (one p for sizes 1 to"
        " 8: 0.001, 999 random orders); patches and gaps of about that size would do that."
    )
    assert student.test.p > 0.2
    assert student.sentence.startswith(
        "The order of the counts departs from chance at no size of block (one p for sizes 1 to 5:"
    )
    assert repr(wave) == "<Blocks of a transect of 1 x 32: peak 4, p = 0.001>"
    assert repr(student).startswith("<Blocks of a grid of 20 x 20: peak 2, p = ")


def test_a_slow_change_is_not_called_patches() -> None:
    slow = of(np.arange(1, 33) ** 2)
    assert slow.test is not None
    assert slow.test.side is not None
    assert "a gradient, or patches that are as wide" in slow.sentence or "slowly" in slow.sentence


def test_patches_in_a_grid() -> None:
    chess = np.kron((np.indices((4, 4)).sum(axis=0) % 2) * 6, np.ones((3, 3), dtype=int))
    blocks = of(chess)
    assert (blocks.layout, blocks.blocked, blocks.peak) == ("grid", None, 3)
    assert blocks.test is not None
    assert blocks.test.p == pytest.approx(1 / 200)


def test_the_order_test_keeps_its_level_on_clumped_counts() -> None:
    """Negative binomial counts without any order: clumping alone is no pattern of blocks."""
    low = 0
    for seed in range(300):
        x = np.random.default_rng([5, seed]).negative_binomial(0.5, 0.2, 28)
        blocks = of(x, simulations=99, seed=seed)
        low += blocks.test is not None and blocks.test.p <= 0.05
    assert 0.02 <= low / 300 <= 0.085


def test_the_order_test_against_all_orders() -> None:
    """Of 720 orders of six counts, the share whose TTLQV at size 1 is at least as extreme."""
    x = [9, 8, 5, 1, 1, 0]
    all_orders = np.array([two_term_variance(list(order)).at(1) for order in permutations(x)])
    seen = two_term_variance(x).at(1)
    exact = min(
        1.0, 2 * min((all_orders <= seen + 1e-9).mean(), (all_orders >= seen - 1e-9).mean())
    )
    test = of(x, simulations=4999).test
    assert test is not None
    assert test.x.tolist() == [1]
    assert test.p == pytest.approx(exact, abs=0.012)


def test_equal_counts_and_too_many_are_not_tested() -> None:
    assert of([3] * 8).test is None
    assert of([3] * 8).sentence == ""
    assert repr(of([3] * 8)) == "<Blocks of a transect of 1 x 8: peak 1>"
    assert of(np.arange(10_001) % 3, simulations=99).test is None
    with pytest.raises(ValueError, match="need at least 4 quadrats"):
        of([1, 2, 3])


def test_which_tables_have_block_variances() -> None:
    x = np.array([1, 4, 0, 2, 6, 1])
    assert analyse_counts(CountTable("column", x)).blocks is None
    assert analyse_counts(CountTable("three", x[:3], 1, 3)).blocks is None
    line = analyse_counts(CountTable("line", x, 1, 6)).blocks
    grid = analyse_counts(CountTable("grid", x, 2, 3)).blocks
    assert line is not None
    assert grid is not None
    assert (line.layout, grid.layout, grid.rows, grid.columns) == ("transect", "grid", 2, 3)


# Through the command line.


def analysed(folder: Path, text: str, *options: str) -> dict[str, dict[str, str]]:
    """Analyse a table of counts; return the rows of tests.csv by statistic."""
    table = folder / "bed.csv"
    table.write_text(text, encoding="utf-8")
    asked = [
        "analyse",
        "--counts",
        str(table),
        "--out",
        str(folder / "out"),
        "--simulations",
        "199",
    ]
    result = CliRunner().invoke(app, [*asked, *options])
    assert result.exit_code == 0, result.output
    rows = csv.DictReader((folder / "out" / "tests.csv").read_text(encoding="utf-8").splitlines())
    return {row["statistic"]: row for row in rows}


def test_a_column_is_a_transect_where_the_user_says_so(tmp_path: Path) -> None:
    text = "count\n" + "".join(f"{x}\n" for x in published.student_grid()[0])
    rows = analysed(tmp_path, text, "--transect")
    for name, value in (
        ("ttlqv_2", 3.823529412),
        ("three_tlqv_3", 2.982638889),
        ("pqv_4", 3.9375),
        ("bqv_8", 22.5625),
        ("nested_mean_square_8", 22.5625),
    ):
        assert float(rows[name]["value"]) == pytest.approx(value, rel=1e-8)
    assert "4 quadrats beyond a power of two left out" in rows["bqv_1"]["notes"]
    assert rows["bqv_1"]["n"] == "16"
    assert float(rows["ttlqv_3"]["low"]) < float(rows["ttlqv_3"]["high"])
    assert "ttlqv_1" not in analysed(tmp_path, text)


def test_a_rectangle_is_a_grid(tmp_path: Path) -> None:
    rows = analysed(tmp_path, (published.DATA / "student_grid.csv").read_text(encoding="utf-8"))
    assert float(rows["nested_mean_square_64"]["value"]) == pytest.approx(11.1015625)
    assert "2 df; sum of squares 22.203125" in rows["nested_mean_square_64"]["notes"]
    assert float(rows["merged_5x5_vmr"]["value"]) == pytest.approx(1.660399, abs=5e-7)
    assert float(rows["merged_5x5_chi2_clumped"]["p"]) == pytest.approx(0.05122, abs=5e-6)
    assert float(rows["merged_10x10_morisita"]["value"]) == pytest.approx(0.998584, abs=5e-7)
    assert "global envelope" in rows["ttlqv_peak"]["method"]
    assert float(rows["ttlqv_peak"]["p"]) > 0.05
    assert "bqv_1" not in rows
    assert "merged_1x1_vmr" not in rows


@pytest.mark.parametrize(
    ("text", "counts", "said"),
    [
        ("1,2\n3,4\n", "--counts", "--transect cannot apply to bed.csv, a grid of 2 x 2"),
        ("x,y\n1,2\n", None, "--transect is for tables of counts; give them with --counts."),
    ],
)
def test_what_is_no_transect_is_refused(
    tmp_path: Path, text: str, counts: str | None, said: str
) -> None:
    table = tmp_path / "bed.csv"
    table.write_text(text, encoding="utf-8")
    given = ["--counts", str(table)] if counts else [str(table), "--area", "0,0,9,9"]
    result = CliRunner().invoke(
        app, ["analyse", *given, "--transect", "--out", str(tmp_path / "out")]
    )
    assert result.exit_code == 2, result.output
    assert said in result.output
