"""Published tables of counts through the command line: every figure from the files it writes.

Where a paper gives only the frequencies, the figures were computed once from them by the published
definitions, apart from this program; sources of the series stand in data/frequencies.csv.
"""

from __future__ import annotations

import csv
import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner

from analyse.cli import app
from tests.analyse import published

SERIES = (
    "student1907_A",
    "student1907_B",
    "student1907_C",
    "student1907_D",
    "clarke1946_5plus_as_7",
    "bortkiewicz1898",
    "rutherford_geiger1910",
    "snedecor_phleum",
    "sokal_rohlf_azuki",
    "sokal_rohlf_moss",
    "bliss_fisher1953_mites",
    "greenwood_yule1920",
    "mcguire1957_cornborer",
    "bliss_fisher1953_ticks",
)


@dataclass(frozen=True)
class Tables:
    """What one run of the command wrote: rows by file and statistic."""

    summary: dict[str, dict[str, str]]
    tests: dict[tuple[str, str], dict[str, str]]
    text: str

    def value(self, series: str, statistic: str) -> float:
        return float(self.tests[f"{series}.csv", statistic]["value"])

    def row(self, series: str, statistic: str) -> dict[str, str]:
        return self.tests[f"{series}.csv", statistic]


def run(folder: Path, *arguments: object) -> Tables:
    """Run `analyse` into a folder and read its tables."""
    options = ["analyse", *arguments, "--simulations", "99", "--out", folder / "out"]
    result = CliRunner().invoke(app, [str(option) for option in options])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    assert result.exit_code == 0, result.stderr
    texts = [(folder / "out" / name).read_text("utf-8") for name in ("summary.csv", "tests.csv")]
    summary, tests = (list(csv.DictReader(text.splitlines())) for text in texts)
    return Tables(
        {row["photograph"]: row for row in summary},
        {(row["photograph"], row["statistic"]): row for row in tests},
        "".join(texts),
    )


def tables_of(folder: Path) -> list[object]:
    """Write each series as a table of frequencies, and return the options that name them."""
    rows: dict[str, list[str]] = {series: ["count,frequency"] for series in SERIES}
    for series, count, frequency in list(published.rows_of("frequencies.csv"))[1:]:
        rows[series].append(f"{count},{frequency}")
    options: list[object] = []
    for series, lines in rows.items():
        path = folder / f"{series}.csv"
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
        options += ["--counts", path]
    return options


@pytest.fixture(scope="module")
def told(tmp_path_factory: pytest.TempPathFactory) -> Tables:
    folder = tmp_path_factory.mktemp("published")
    return run(folder, *tables_of(folder))


@pytest.mark.parametrize(
    ("series", "mean", "variance", "vmr", "chi2", "df", "side", "p"),
    [
        ("student1907_A", 0.6825, 0.813728, 1.192276, 475.7179, 399, "p_clumped", 0.004908),
        ("student1907_B", 1.3225, 1.286711, 0.972938, 388.2023, 399, "p_clumped", 0.641355),
        ("student1907_C", 1.8000, 1.964912, 1.091618, 435.5556, 399, "p_clumped", 0.100282),
        ("student1907_D", 4.6800, 4.468772, 0.954866, 380.9915, 399, "p_clumped", 0.733573),
        ("student1907_A", 0.6825, 0.813728, 1.192276, 475.7179, 399, "p_two_sided", 0.009817),
        ("student1907_B", 1.3225, 1.286711, 0.972938, 388.2023, 399, "p_two_sided", 0.717290),
        ("student1907_C", 1.8000, 1.964912, 1.091618, 435.5556, 399, "p_two_sided", 0.200564),
        ("student1907_D", 4.6800, 4.468772, 0.954866, 380.9915, 399, "p_two_sided", 0.532854),
        ("clarke1946_5plus_as_7", 0.932292, 0.971060, 1.041584, 598.9106, 575, "p_clumped", 0.23726),
        ("bortkiewicz1898", 0.61, 0.610955, 1.001565, 199.3115, 199, "p_clumped", 0.48045),
        ("rutherford_geiger1910", 3.871549, 3.696, 0.954706, 2488.918, 2607, "p_even", 0.04933),
        ("rutherford_geiger1910", 3.871549, 3.696, 0.954706, 2488.918, 2607, "p_two_sided", 0.0987),
        ("snedecor_phleum", 3.0204, 3.278, 1.0853, 105.2703, 97, "p_clumped", 0.2659),
        ("sokal_rohlf_azuki", 0.464286, 0.268983, 0.579349, 64.3077, 111, "p_even", 1.16e-4),
        ("bliss_fisher1953_mites", 1.146667, 2.273647, 1.982831, 295.4419, 149, "p_even", 1.0),
    ],
)  # fmt: skip
def test_mean_variance_and_index_of_dispersion(
    told: Tables,
    series: str,
    mean: float,
    variance: float,
    vmr: float,
    chi2: float,
    df: int,
    side: str,
    p: float,
) -> None:
    """ "Student" 1907, Clarke 1946, Bortkiewicz 1898, Rutherford and Geiger 1910, and others.

    Means of Student's series, Bortkiewicz' and the bees' are printed; the weed seeds' X2 of 105.3
    and the weevils' ratio of .579 are from memory.
    """
    row = told.summary[f"{series}.csv"]
    assert float(row["mean"]) == pytest.approx(mean, abs=5e-5)
    assert float(row["variance"]) == pytest.approx(variance, rel=3e-4)
    assert float(row["vmr"]) == pytest.approx(vmr, abs=5e-5)
    assert float(row["chi2"]) == pytest.approx(chi2, abs=6e-4)
    assert (int(row["df"]), int(row["quadrats"])) == (df, df + 1)
    assert float(row[side]) == pytest.approx(p, abs=6e-6 if p < 0.01 else 6e-5)


@pytest.mark.parametrize(
    ("series", "deviate"),
    [
        ("student1907_A", 2.6142),
        ("student1907_B", -0.3672),
        ("student1907_C", 1.2834),
        ("student1907_D", -0.6272),
        ("bliss_fisher1953_mites", 7.0744),
    ],
)
def test_normal_approximation(told: Tables, series: str, deviate: float) -> None:
    """sqrt(2 X2) - sqrt(2 df - 1) (Fisher 1925), printed above 30 degrees (common practice)."""
    assert told.value(series, "normal_deviate") == pytest.approx(deviate, abs=6e-5)


@pytest.mark.parametrize(
    ("series", "statistic", "chi2", "df", "p"),
    [
        ("student1907_A", "poisson_fit", 10.1189, 3, 0.01758),
        ("student1907_C", "poisson_fit", 8.7962, 6, 0.1854),
        ("student1907_D", "poisson_fit", 8.8130, 11, 0.6391),
        ("clarke1946_5plus_as_7", "poisson_fit", 1.16915, 4, 0.88315),
        ("bortkiewicz1898", "poisson_fit", 0.32352, 2, 0.8506),
        ("bliss_fisher1953_mites", "negative_binomial_fit", 2.9202, 5, 0.71229),
    ],
)
def test_goodness_of_fit_with_classes_pooled_as_published(
    told: Tables, series: str, statistic: str, chi2: float, df: int, p: float
) -> None:
    """The rule of pooling gives the classes of these published fits; Clarke's own 1.17 and .88.

    Fits on other classes are in test_models.py, where the classes can be named.
    """
    row = told.row(series, statistic)
    assert float(row["value"]) == pytest.approx(chi2, abs=1e-4)
    assert float(row["p"]) == pytest.approx(p, abs=1e-4)
    assert row["notes"].startswith(f"df {df}; classes 0, 1,")


@pytest.mark.parametrize(
    ("series", "k", "error", "moments", "corrected", "zero"),
    [
        ("bliss_fisher1953_mites", 1.024592, 0.2759, 1.166697, 1.153248, 0.992306),
        ("greenwood_yule1920", 0.865116, None, 0.954814, None, None),
        ("student1907_A", 3.586087, 1.7496, None, None, None),
        ("mcguire1957_cornborer", 1.848650, None, 2.102529, None, 1.602637),
    ],
)
def test_negative_binomial_k(
    told: Tables,
    series: str,
    k: float,
    error: float | None,
    moments: float | None,
    corrected: float | None,
    zero: float | None,
) -> None:
    """Bliss and Fisher 1953, Greenwood and Yule 1920, "Student" 1907, McGuire and others 1957."""
    row, line = told.row(series, "negative_binomial_k"), told.summary[f"{series}.csv"]
    assert float(row["value"]) == pytest.approx(k, abs=6e-7)
    assert float(row["low"]) < k < float(row["high"])
    assert [line["k"], line["k_low"], line["k_high"]] == [row["value"], row["low"], row["high"]]
    assert line["k_note"] == ""
    for statistic, value in (
        ("k_standard_error", error),
        ("k_moments", moments),
        ("k_moments_corrected", corrected),
        ("k_zero_class", zero),
    ):
        if value is not None:
            assert told.value(series, statistic) == pytest.approx(value, abs=6e-5)


def test_ticks_on_sheep(told: Tables) -> None:
    """Bliss and Fisher (1953), after Fisher (1941): mean 3.25 and k 3.75, all from memory."""
    assert float(told.summary["bliss_fisher1953_ticks.csv"]["mean"]) == 3.25
    assert told.value("bliss_fisher1953_ticks", "negative_binomial_k") == pytest.approx(
        3.75, abs=5e-3
    )


@pytest.mark.parametrize(
    "series", ["student1907_B", "student1907_D", "sokal_rohlf_azuki", "bortkiewicz1898"]
)
def test_no_finite_k_is_said_in_words(told: Tables, series: str) -> None:
    """The variance (divisor q) does not exceed the mean: words, an empty cell and no "inf"."""
    row, line = told.row(series, "negative_binomial_k"), told.summary[f"{series}.csv"]
    assert (row["value"], row["high"]) == ("", "")
    assert float(row["low"]) > 0
    assert row["notes"].startswith("Poisson limit: no finite k")
    assert (line["k"], line["k_high"]) == ("", "")
    assert line["k_note"] == "Poisson limit: no finite k"
    assert (f"{series}.csv", "k_standard_error") not in told.tests
    assert told.value(series, "aic_weight_negative_binomial") == pytest.approx(0.268941, abs=1e-6)


def test_nowhere_is_a_cell_infinite_or_no_number(told: Tables) -> None:
    cells = [cell for row in csv.reader(told.text.splitlines()) for cell in row]
    assert not {"inf", "-inf", "nan"} & {cell.lower() for cell in cells}
    assert "inf" not in told.text


def test_likelihoods_of_the_mites(told: Tables) -> None:
    """Bliss and Fisher 1953; both log-likelihoods as statsmodels gave them beforehand."""
    mites = "bliss_fisher1953_mites"
    negative, poisson = (
        told.value(mites, f"log_likelihood_{law}") for law in ("negative_binomial", "poisson")
    )
    assert (negative, poisson) == pytest.approx((-222.43715, -242.80994), abs=6e-6)
    assert told.value(mites, "aic_negative_binomial") == pytest.approx(4 - 2 * negative)
    assert told.value(mites, "aic_poisson") == pytest.approx(2 - 2 * poisson)
    weights = [told.value(mites, f"aic_weight_{law}") for law in ("negative_binomial", "poisson")]
    assert sum(weights) == pytest.approx(1)
    assert weights[0] / weights[1] == pytest.approx(math.exp(negative - poisson - 1), rel=1e-4)


def test_indices_of_the_mites(told: Tables) -> None:
    """Bliss and Fisher 1953: computed from their frequencies."""
    for statistic, value in (
        ("morisita_index", 1.856385),
        ("mean_crowding", 2.129498),
        ("patchiness", 1.857120),
        ("greens_index", 0.005748),
        ("cluster_size_index", 0.982831),
        ("morisita_even_limit", 0.813438),
        ("morisita_clumped_limit", 1.208696),
        ("vmr_standard_error", math.sqrt(2 / 149)),
    ):
        assert told.value("bliss_fisher1953_mites", statistic) == pytest.approx(value, abs=6e-7)


@pytest.mark.parametrize(
    ("series", "standardised", "branch"),
    [
        ("bliss_fisher1953_mites", 0.502177, "a"),
        ("student1907_A", 0.500090, "a"),
        ("sokal_rohlf_moss", 0.512041, "a"),
        ("student1907_C", 0.319340, "b"),
        ("clarke1946_5plus_as_7", 0.174941, "b"),
        ("student1907_D", -0.168465, "c"),
        ("sokal_rohlf_azuki", -0.909255, "d"),
    ],
)
def test_standardised_morisita(told: Tables, series: str, standardised: float, branch: str) -> None:
    """Smith-Gill 1975, Krebs 1999: one series for each of the four branches."""
    row = told.row(series, "morisita_standardised")
    assert float(row["value"]) == pytest.approx(standardised, abs=6e-7)
    assert row["notes"].startswith(f"branch {branch};")


def test_mean_from_presence(told: Tables) -> None:
    """-ln(1 - p): near the mean at random, too low for clumped mites, impossible without zeros."""
    for series, value in (
        ("clarke1946_5plus_as_7", 0.922386),
        ("student1907_A", 0.630172),
        ("bliss_fisher1953_mites", 0.762140),
    ):
        assert told.value(series, "presence_mean") == pytest.approx(value, abs=6e-7)
    clumped = told.value("bliss_fisher1953_mites", "presence_mean_clumped")
    assert clumped == pytest.approx(1.131165, abs=1e-6)
    nothing = told.row("student1907_D", "presence_mean")
    assert (nothing["value"], nothing["high"]) == ("", "")
    assert nothing["notes"].startswith("no quadrat is empty: the mean cannot be told from")
    assert float(nothing["low"]) == pytest.approx(-math.log(1 - 0.025 ** (1 / 400)))


@pytest.mark.parametrize(
    ("counts", "low", "high"),
    [
        ((0, 0), 0.0, 3.6889),
        ((1, 0), 0.0253, 5.5716),
        ((4, 6), 4.7954, 18.3904),
        ((20, 5), 16.18, 36.90),
        ((60, 40), 81.364, 121.6268),
    ],
)
def test_limits_of_a_total(
    tmp_path: Path, counts: tuple[int, int], low: float, high: float
) -> None:
    """Garwood (1936), Biometrika 28, 437-442, also as a density over 2 cm2."""
    table = tmp_path / "total.csv"
    table.write_text("count\n{}\n{}\n".format(*counts), encoding="utf-8")
    told = run(tmp_path, "--counts", table, "--quadrat", "10mm")
    row = told.row("total", "count")
    assert (float(row["low"]), float(row["high"])) == pytest.approx((low, high), abs=5e-3)
    line = told.summary["total.csv"]
    limits = float(line["density_low"]), float(line["density_high"])
    assert limits == pytest.approx((low / 2, high / 2), abs=5e-3)
    assert "inf" not in told.text


@pytest.mark.parametrize(
    ("b", "mean", "variance", "vmr", "chi2", "upper", "two", "morisita"),
    [
        (1, 4.68, 4.468772, 0.954866, 380.9915, 0.73357, 0.53285, 0.990375),
        (2, 18.72, 19.213737, 1.026375, 101.6111, 0.40856, 0.81712, 1.001396),
        (4, 74.88, 98.36, 1.313568, 31.5256, 0.13920, 0.27840, 1.004022),
        (5, 117.0, 194.266667, 1.660399, 24.9060, 0.05122, 0.10244, 1.005294),
        (10, 468.0, 54.666667, 0.116809, 0.35043, 0.95028, 0.09944, 0.998584),
    ],
)
def test_student_map_merged_to_blocks(
    tmp_path: Path,
    b: int,
    mean: float,
    variance: float,
    vmr: float,
    chi2: float,
    upper: float,
    two: float,
    morisita: float,
) -> None:
    """ "Student" (1907), Table I, 20 x 20 squares merged to b x b: random at every scale."""
    grid = published.student_grid()
    merged = grid.reshape(20 // b, b, 20 // b, b).sum(axis=(1, 3))
    table = tmp_path / "yeast.csv"
    np.savetxt(table, merged, fmt="%d", delimiter=",")
    told = run(tmp_path, "--counts", table)
    row = told.summary["yeast.csv"]
    seen = [float(row[name]) for name in ("mean", "variance", "vmr", "chi2")]
    assert seen == pytest.approx([mean, variance, vmr, chi2], abs=6e-5)
    assert int(row["df"]) == (20 // b) ** 2 - 1
    assert float(row["p_clumped"]) == pytest.approx(upper, abs=6e-6)
    assert float(row["p_two_sided"]) == pytest.approx(two, abs=6e-6)
    assert told.value("yeast", "morisita_index") == pytest.approx(morisita, abs=6e-7)


def test_replicate_plates(tmp_path: Path) -> None:
    """Fisher, Thornton and Mackenzie (1922): plates of 12, 16 and 20 give X2 = 2, p = exp(-1)."""
    table = tmp_path / "plates.csv"
    table.write_text("plate,count\n1,12\n2,16\n3,20\n", encoding="utf-8")
    told = run(tmp_path, "--counts", table)
    row = told.summary["plates.csv"]
    assert (float(row["chi2"]), row["df"]) == (2.0, "2")
    assert float(row["p_clumped"]) == pytest.approx(math.exp(-1), abs=1e-8)
