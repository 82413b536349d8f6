"""What many tests share: the sample trial, surveyed once per run as a reader of the README does it."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pytest
from typer.testing import CliRunner

from analyse.cli import app

SAMPLE = Path(__file__).resolve().parent.parent / "sample_images"


@dataclass(frozen=True)
class Surveyed:
    """The folder that `strewn survey sample_images` wrote, its exit code, and what it printed."""

    out: Path
    exit_code: int
    stdout: str
    stderr: str


@pytest.fixture(scope="session")
def sample_survey(tmp_path_factory: pytest.TempPathFactory) -> Surveyed:
    """Survey the sample by its own recipe, in this process, where a warning is an error."""
    out = tmp_path_factory.mktemp("sample") / "out"
    result = CliRunner().invoke(app, ["survey", str(SAMPLE), "--out", str(out), "--workers", "1"])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return Surveyed(out, result.exit_code, result.stdout, result.stderr)
