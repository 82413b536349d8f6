"""Cores are shared among files without changing any result."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner

from analyse.cli import app
from analyse.grid_options import GridOptions
from analyse.inputs import Input, shared_out
from analyse.plan import Trial
from detect.errors import RequestWrong


def inputs(many: int) -> list[Input]:
    return [Input(Path(f"{k}.csv"), GridOptions(), Trial()) for k in range(many)]


def test_few_files_are_done_one_after_another_on_all_cores() -> None:
    for many in (1, 3):
        shared, workers = shared_out(inputs(many), 2)
        assert workers is None
        assert [each.processes for each in shared] == [2] * many


def test_many_files_take_a_core_each() -> None:
    shared, workers = shared_out(inputs(4), 2)
    assert workers == 2
    assert [each.processes for each in shared] == [1] * 4
    assert [each.path for each in shared] == [each.path for each in inputs(4)]


@pytest.mark.parametrize("cores", [0, -1])
def test_no_core_is_refused(cores: int) -> None:
    with pytest.raises(RequestWrong, match=rf"--workers must be 1 or more, not {cores}\."):
        shared_out(inputs(1), cores)


def test_the_command_gives_the_same_bytes_on_one_core_and_on_two(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Also where each file has a process of its own, as many files have."""
    monkeypatch.setattr("analyse.inputs._MANY", 2)
    rng = np.random.default_rng(2)
    names = []
    for k in range(2):
        points = rng.uniform(0, 100, (30, 2))
        text = "x,y\n" + "".join(f"{x:.3f},{y:.3f}\n" for x, y in points)
        names.append(tmp_path / f"bed_{k}.csv")
        names[-1].write_text(text, encoding="utf-8")
    asked = [*map(str, names), "--area", "0,0,100,100", "--simulations", "99"]
    for workers in ("1", "2"):
        call = ["analyse", *asked, "--workers", workers, "--out", str(tmp_path / workers)]
        assert CliRunner().invoke(app, call).exit_code == 0
    for path in (tmp_path / "1").iterdir():
        assert path.read_bytes() == (tmp_path / "2" / path.name).read_bytes(), path.name


def test_the_command_refuses_no_core(tmp_path: Path) -> None:
    (tmp_path / "bed.csv").write_text("x,y\n1,1\n", encoding="utf-8")
    call = ["analyse", str(tmp_path / "bed.csv"), "--area", "0,0,9,9", "--workers", "0"]
    done = CliRunner().invoke(app, [*call, "--out", str(tmp_path / "out")])
    assert done.exit_code == 2
    assert "Error: --workers must be 1 or more, not 0." in done.stderr
