"""What many tests share: the sample trial, surveyed once per run as a reader of the README does it."""

from __future__ import annotations

import json
import os
import time
import traceback
from dataclasses import dataclass
from pathlib import Path

import pytest
from hypothesis import settings
from typer.testing import CliRunner

from analyse.cli import app

SAMPLE = Path(__file__).resolve().parent.parent / "sample_images"
LONGEST_WAIT = 300.0  # seconds

settings.register_profile("untimed", deadline=None)  # no test fails for a busy machine
settings.load_profile("untimed")


@dataclass(frozen=True)
class Surveyed:
    """The folder that `strewn survey sample_images` wrote, its exit code, and what it printed."""

    out: Path
    exit_code: int
    stdout: str
    stderr: str


@pytest.fixture(scope="session")
def sample_survey(tmp_path_factory: pytest.TempPathFactory) -> Surveyed:
    """Survey the sample by its own recipe; of several test processes one does it for all."""
    shared = tmp_path_factory.getbasetemp()
    if "PYTEST_XDIST_WORKER" in os.environ:
        shared = shared.parent
    out, record = shared / "sample-survey", shared / "sample-survey.json"
    try:
        out.mkdir()
    except FileExistsError:
        return _awaited(out, record)
    record.with_suffix(".part").write_text(json.dumps(_survey(out)), encoding="utf-8")
    record.with_suffix(".part").rename(record)
    return _awaited(out, record)


def _survey(out: Path) -> dict[str, object]:
    """Survey in this process, where a warning is an error."""
    result = CliRunner().invoke(app, ["survey", str(SAMPLE), "--out", str(out), "--workers", "1"])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        return {"trouble": "".join(traceback.format_exception(result.exception))}
    return {key: getattr(result, key) for key in ("exit_code", "stdout", "stderr")}


def _awaited(out: Path, record: Path) -> Surveyed:
    """Read what the survey gave, once it is there."""
    until = time.monotonic() + LONGEST_WAIT
    while not record.exists():
        assert time.monotonic() < until, "the survey of the sample did not end"
        time.sleep(0.1)
    values = json.loads(record.read_text(encoding="utf-8"))
    assert "trouble" not in values, values["trouble"]
    return Surveyed(out, **values)
