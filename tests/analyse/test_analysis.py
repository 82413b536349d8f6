"""What is written of many results: rows that can be told apart, and no silence about a lost picture."""

from __future__ import annotations

from pathlib import Path

import pytest

from analyse.analysis import analyse_sheet, write_results
from analyse.grid_options import GridOptions
from analyse.plan import Trial
from detect.errors import RequestWrong
from tests.analyse.finished import photograph, scattered, sheet_of

TRIAL = Trial(simulations=99)


def test_two_results_of_one_name_are_refused_before_anything_is_written(tmp_path: Path) -> None:
    """Two sheets of one photograph, under different file names."""
    sheets = [sheet_of(scattered(30, seed=seed)) for seed in (1, 2)]
    results = [analyse_sheet(sheet, (), None, grid=GridOptions(), trial=TRIAL) for sheet in sheets]
    message = r"2 of the sheets or tables are about one photograph \(bed.png\); leave out all but"
    with pytest.raises(RequestWrong, match=message):
        write_results(results, [], tmp_path, TRIAL)
    assert list(tmp_path.iterdir()) == []


def test_a_photograph_that_is_not_found_is_told_in_the_report(tmp_path: Path) -> None:
    lost = "The photograph itself was not found, so its spots are shown without it."
    for picture, told in ((None, True), (photograph(), False)):
        sheet = sheet_of(scattered(30))
        result = analyse_sheet(sheet, (), picture, grid=GridOptions(), trial=TRIAL)
        report = write_results([result], [], tmp_path, TRIAL)
        assert (lost in report.read_text(encoding="utf-8")) == told
