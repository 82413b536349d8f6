"""Many photographs: each is detected and analysed by its plan, whole, in one process."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from analyse.analysis import Analysed, analyse_sheet
from analyse.errors import AnalyseError
from analyse.plan import Plan, Trial
from detect.amendments import amendments_path, read_amendments
from detect.batch import Each, Failure, Progress, do_each
from detect.errors import DetectError
from detect.outcome import Outcome, write_detection, write_views
from detect.photograph import Photograph, read_photograph
from detect.requests import DetectRequest, detect_photograph
from detect.sheet import read_sheet, sheet_path


@dataclass(frozen=True, slots=True)
class SurveyTask:
    """One photograph of a survey.

    Parameters
    ----------
    path : Path
        The photograph.
    plan : Plan
        How it is treated.
    folder : Path
        Where its results go.
    trial : Trial
        Title, seed and number of simulations.
    keep_amendments : bool
        Carry hand edits over if it must be detected anew.
    """

    path: Path
    plan: Plan
    folder: Path
    trial: Trial
    keep_amendments: bool = False


def survey(
    paths: Sequence[Path],
    plans: Mapping[str, Plan | Failure],
    folder: Path,
    *,
    trial: Trial | None = None,
    keep_amendments: bool = False,
    workers: int = 1,
    progress: Progress | None = None,
) -> list[Analysed | Failure]:
    """Detect and analyse many photographs.

    Parameters
    ----------
    paths : sequence of Path
        The photographs, whose names differ.
    plans : mapping
        What is done with each, by file name, or why it cannot be done.
    folder : Path
        Where the results go; it exists.
    trial : Trial, optional
        Title, seed and number of simulations.
    keep_amendments : bool
        Carry hand edits over to photographs that must be detected anew.
    workers : int
        Number of processes (see `detect.batch.do_each`).
    progress : callable, optional
        Called with (done, total).

    Returns
    -------
    list
        What was found in each photograph, or why it could not be done, in the order of `paths`
        and the same for any number of workers.
    """
    trial = trial or Trial()
    failed = {path: plan for path in paths if isinstance(plan := plans[path.name], Failure)}
    tasks = [
        SurveyTask(path, plan, folder, trial, keep_amendments)
        for path in paths
        if isinstance(plan := plans[path.name], Plan)
    ]
    done = do_each(SURVEY, tasks, workers=workers, progress=progress)
    results = {task.path: result for task, result in zip(tasks, done, strict=True)}
    return [failed[path] if path in failed else results[path] for path in paths]


def survey_photograph(task: SurveyTask) -> Analysed:
    """Detect one photograph, or take up what a person has checked, and analyse it.

    Parameters
    ----------
    task : SurveyTask
        The photograph and its plan.

    Returns
    -------
    Analysed

    Notes
    -----
    Where hand edits exist and their sheet is of the same photograph and was asked for in the same
    way, the sheet is analysed as the person left it, without detecting again. Where anything
    differs, hand edits are carried over if `keep_amendments` says so; else the photograph fails.
    """
    checked = _checked(task.path, task.plan.request, task.folder)
    if checked is None:
        photograph, sheet = detect_photograph(task.path, task.plan.request)
        keep = task.keep_amendments
        outcome = write_detection(photograph, sheet, task.folder, keep_amendments=keep)
    else:
        photograph, outcome = checked
        write_views(photograph, outcome.state, task.folder)
    return analyse_sheet(
        outcome.sheet,
        outcome.amendments,
        photograph,
        grid=task.plan.grid,
        trial=task.trial,
        factors=task.plan.factors,
    )


def _checked(path: Path, request: DetectRequest, folder: Path) -> tuple[Photograph, Outcome] | None:
    """Return what a person has checked, if it is what is asked for now."""
    where = sheet_path(folder, path.stem)
    amendments = read_amendments(amendments_path(where))
    if not amendments or not where.exists():
        return None
    sheet, photograph = read_sheet(where), read_photograph(path)
    same_file = sheet.photograph.sha256 == photograph.sha256
    if same_file and sheet.settings.get("request") == request.as_dict():
        return photograph, Outcome(sheet, amendments, where)
    return None


def _name_of(task: SurveyTask) -> str:
    """Return the file name that a failure is listed under."""
    return task.path.name


SURVEY = Each(survey_photograph, _name_of, (DetectError, AnalyseError))
