"""Many photographs by one recipe: files, factors, hand edits, and any number of workers."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import pytest

from analyse.analysis import Analysed, write_results
from analyse.plan import Plan, Trial, plan_from
from analyse.survey import SurveyTask, survey, survey_photograph
from detect.batch import Failure
from detect.errors import AmendmentsPresent
from detect.sheet import Amendment, amendments_path, append_amendment, read_sheet, sheet_path
from tests.discs import DIAMETER, scattered, write_discs

VALUES = {"diameter": DIAMETER, "mm_per_pixel": 0.25}
PLACES = {"bed_1.png": scattered(40, seed=1), "bed_2.png": scattered(24, seed=4)}
TRIAL = Trial("Beds", 11, 199)


@pytest.fixture
def beds(tmp_path: Path) -> list[Path]:
    folder = tmp_path / "in"
    folder.mkdir()
    (tmp_path / "out").mkdir()
    return [write_discs(folder / name, places) for name, places in PLACES.items()]


def a_task(photo: Path, *, keep: bool = False, **values: object) -> SurveyTask:
    plan = plan_from({**VALUES, **values})
    return SurveyTask(photo, plan, photo.parents[1] / "out", TRIAL, keep)


def strike(photo: Path, *spots: str) -> Path:
    log = amendments_path(sheet_path(photo.parents[1] / "out", photo.stem))
    for spot in spots:
        time = "2026-01-02T10:00:00Z"
        append_amendment(log, Amendment(f"strike {spot}", time, "me", "strike", spot))
    return log


def test_one_photograph_is_detected_and_analysed(beds: list[Path]) -> None:
    done = survey_photograph(a_task(beds[0], factors={"block": 2}))
    assert done.findings.n == 40
    assert done.findings.name == "bed_1.png"
    assert done.findings.seed == 11
    assert done.findings.simulated.simulations == 199
    assert done.factors == {"block": "2"}
    assert "unreviewed" in done.findings.flags
    out = beds[0].parents[1] / "out"
    names = sorted(path.name for path in out.iterdir())
    assert names == ["bed_1.overlay.jpg", "bed_1.points.csv", "bed_1.sheet.json"]


def test_hand_edits_are_taken_up_without_detecting_again(
    beds: list[Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    survey_photograph(a_task(beds[1]))
    log = strike(beds[1], "3", "5")
    before = log.read_bytes(), sheet_path(log.parent, "bed_2").read_bytes()

    def never(*arguments: object) -> None:
        raise AssertionError("a checked photograph was detected again")

    monkeypatch.setattr("analyse.survey.detect_photograph", never)
    done = survey_photograph(a_task(beds[1]))
    assert done.findings.n == 22
    assert "unreviewed" not in done.findings.flags
    assert (log.read_bytes(), sheet_path(log.parent, "bed_2").read_bytes()) == before
    assert (log.parent / "bed_2.points.csv").read_text().count(",struck") == 2


def test_hand_edits_of_another_request_are_never_discarded(beds: list[Path]) -> None:
    survey_photograph(a_task(beds[1]))
    log = strike(beds[1], "3")
    before = {path.name: path.read_bytes() for path in log.parent.iterdir()}
    with pytest.raises(AmendmentsPresent, match="--keep-amendments"):
        survey_photograph(a_task(beds[1], diameter="11-24px"))
    assert {path.name: path.read_bytes() for path in log.parent.iterdir()} == before


def test_hand_edits_of_another_request_are_carried_over_when_asked(beds: list[Path]) -> None:
    survey_photograph(a_task(beds[1]))
    log = strike(beds[1], "3")
    struck = read_sheet(sheet_path(log.parent, "bed_2")).spots
    done = survey_photograph(a_task(beds[1], keep=True, diameter="11-24px"))
    assert done.findings.n == 23
    sheet = read_sheet(sheet_path(log.parent, "bed_2"))
    assert sheet.settings["request"]["diameter"] == ["11px", "24px"]
    row = sheet.spots.id.index("3")
    assert sheet.spots.x[row] == pytest.approx(struck.x[struck.id.index("3")], abs=1)


def test_another_picture_under_the_same_name_does_not_take_its_hand_edits(
    beds: list[Path],
) -> None:
    survey_photograph(a_task(beds[1]))
    strike(beds[1], "3")
    write_discs(beds[1], PLACES["bed_1.png"])
    with pytest.raises(AmendmentsPresent):
        survey_photograph(a_task(beds[1]))


def everything(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir())}


def run(beds: list[Path], out: Path, *, workers: int) -> list[Analysed | Failure]:
    out.mkdir()
    plan = plan_from(VALUES)
    bad = beds[0].with_name("bed_0.png")
    bad.write_bytes(b"no picture")
    skipped = Failure("bed_9.png", "No set matches it.", request_wrong=True)
    plans: dict[str, Plan | Failure] = {path.name: plan for path in (bad, *beds)} | {
        "bed_9.png": skipped
    }
    paths = [bad, *beds, beds[0].with_name("bed_9.png")]
    results = survey(paths, plans, out, trial=TRIAL, workers=workers)
    done = [result for result in results if isinstance(result, Analysed)]
    write_results(done, [r for r in results if isinstance(r, Failure)], out, TRIAL)
    return results


def test_results_are_the_same_bytes_for_any_number_of_workers(
    beds: list[Path], tmp_path: Path
) -> None:
    one = run(beds, tmp_path / "one", workers=1)
    two = run(beds, tmp_path / "two", workers=2)
    assert everything(tmp_path / "one") == everything(tmp_path / "two")
    kinds = [type(result) for result in one]
    assert kinds == [Failure, Analysed, Analysed, Failure]
    assert [type(result) for result in two] == kinds
    failures = [(r.name, r.request_wrong) for r in one if isinstance(r, Failure)]
    assert failures == [("bed_0.png", False), ("bed_9.png", True)]


def test_the_result_of_a_photograph_does_not_depend_on_its_company(beds: list[Path]) -> None:
    plans: dict[str, Plan | Failure] = {path.name: plan_from(VALUES) for path in beds}
    out = beds[0].parents[1] / "out"
    both = survey(beds, plans, out, trial=TRIAL)
    alone = survey(beds[1:], plans, out, trial=TRIAL)
    assert isinstance(both[1], Analysed)
    assert isinstance(alone[0], Analysed)
    assert both[1].findings.simulated == alone[0].findings.simulated


def test_factors_follow_the_fixed_columns(beds: list[Path], tmp_path: Path) -> None:
    plans: dict[str, Plan | Failure] = {
        "bed_1.png": plan_from({**VALUES, "factors": {"block": 1}}),
        "bed_2.png": plan_from({**VALUES, "factors": {"treatment": "=cmd()"}}),
    }
    out = tmp_path / "out"
    results = survey(beds, plans, out, trial=TRIAL)
    report = write_results([r for r in results if isinstance(r, Analysed)], [], out, TRIAL)
    header, *rows = csv.reader((out / "summary.csv").read_text(encoding="utf-8").splitlines())
    assert header[:2] == ["photograph", "count"]
    assert header[-2:] == ["block", "treatment"]
    assert [row[-2:] for row in rows] == [["1", ""], ["", "'=cmd()"]]
    assert "Beds" in report.read_text(encoding="utf-8")


def test_everything_written_leads_back_to_photograph_settings_and_seed(
    beds: list[Path], tmp_path: Path
) -> None:
    done = survey_photograph(a_task(beds[0]))
    sheet = read_sheet(sheet_path(tmp_path / "out", "bed_1"))
    report = write_results([done], [], tmp_path / "out", TRIAL).read_text(encoding="utf-8")
    assert sheet.photograph.sha256 in report
    assert "11" in report
    assert sheet.tool_version in report
    json.dumps(sheet.settings)
