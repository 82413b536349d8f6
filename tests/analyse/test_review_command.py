"""The command that opens the review page: what it hands on, and what it refuses."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

import detect.review.serving
from analyse.cli import app
from tests.reviewing import write_sheet_of


@pytest.fixture
def served(monkeypatch: pytest.MonkeyPatch) -> list[dict[str, Any]]:
    """Serve nothing, and keep what would have been served."""
    calls: list[dict[str, Any]] = []

    def serve(sheets: Any, panel: Any, **more: Any) -> None:
        calls.append({"sheets": sheets, "panel": panel, **more})

    monkeypatch.setattr(detect.review.serving, "serve", serve)
    return calls


def test_a_folder_is_handed_on_in_natural_order(
    tmp_path: Path, served: list[dict[str, Any]]
) -> None:
    for name in ("b_10.png", "b_2.png"):
        write_sheet_of(tmp_path, name)
    done = CliRunner().invoke(app, ["review", str(tmp_path), "--no-open", "--port", "4000"])
    assert (done.exit_code, done.output) == (0, "")
    (call,) = served
    assert [path.name for path in call["sheets"]] == ["b_2.sheet.json", "b_10.sheet.json"]
    assert (call["port"], call["open_page"]) == (4000, False)


def test_one_sheet_is_handed_on_alone(tmp_path: Path, served: list[dict[str, Any]]) -> None:
    sheet = write_sheet_of(tmp_path)
    assert CliRunner().invoke(app, ["review", str(sheet)]).exit_code == 0
    assert (served[0]["sheets"], served[0]["port"], served[0]["open_page"]) == ([sheet], None, True)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["nowhere"], "nowhere does not exist; check the path."),
        (["."], "holds no sheets (*.sheet.json); run strewn detect first."),
        (["a.png"], "a.png is no sheet; name a file that ends in .sheet.json, or its folder."),
        (["x", "--port", "70000"], "--port must be from 0 to 65535, not 70000; 0 is any free one."),
        (["x", "--port", "web"], "--port"),
        (["x", "--quadrat", "10mm", "--grid", "5x5"], "--grid"),
    ],
)
def test_what_cannot_be_served_is_told(
    arguments: list[str],
    message: str,
    tmp_path: Path,
    served: list[dict[str, Any]],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("a.png").write_bytes(b"x")
    done = CliRunner().invoke(app, ["review", *arguments])
    assert done.exit_code == 2
    assert message in done.output
    assert served == []
