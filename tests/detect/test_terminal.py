"""What is shown: aligned tables, and a bar only where somebody watches."""

from __future__ import annotations

import io
import sys

import pytest
import typer

from detect.batch import Failure
from detect.terminal import (
    exit_if_failed,
    number_text,
    progress_on_terminal,
    show_failures,
    show_table,
    tiles_on_terminal,
)


def test_numbers_stand_to_the_right_and_words_to_the_left(
    capsys: pytest.CaptureFixture[str],
) -> None:
    show_table(
        ("name", "n", "p"), [("a", "5", "< 0.001"), ("bed_10", "1200", "-"), ("c", "7", "0.2")]
    )
    assert capsys.readouterr().out == (
        "name       n        p\n"
        "a          5  < 0.001\n"
        "bed_10  1200        -\n"
        "c          7      0.2\n"
    )


def test_no_rows_show_nothing(capsys: pytest.CaptureFixture[str]) -> None:
    show_table(("name", "n"), [])
    assert capsys.readouterr().out == ""


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, "-"),
        (float("nan"), "-"),
        (0.0, "0"),
        (1.0, "1"),
        (0.28571, "0.286"),
        (12345.6, "12346"),
        (0.0000123, "1.23e-05"),
        (float("inf"), "inf"),
    ],
)
def test_numbers_are_short(value: float | None, text: str) -> None:
    assert number_text(value) == text


PHOTO, REQUEST = Failure("a", "It is damaged."), Failure("b", "It cannot be.", request_wrong=True)


@pytest.mark.parametrize(
    ("failures", "total", "code"),
    [
        ([], 2, None),
        ([], 0, None),
        ([PHOTO], 2, 1),
        ([REQUEST], 2, 1),
        ([PHOTO, REQUEST], 2, 1),
        ([PHOTO, PHOTO], 2, 1),
        ([REQUEST, REQUEST], 2, 2),
    ],
)
def test_exit_codes(failures: list[Failure], total: int, code: int | None) -> None:
    if code is None:
        exit_if_failed(failures, total)
        return
    with pytest.raises(typer.Exit) as end:
        exit_if_failed(failures, total)
    assert end.value.exit_code == code


def test_failures_go_to_stderr(capsys: pytest.CaptureFixture[str]) -> None:
    show_failures([PHOTO, REQUEST])
    shown = capsys.readouterr()
    assert shown.err == "a: It is damaged.\nb: It cannot be.\n"
    assert shown.out == ""


class Watched(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_a_bar_is_drawn_on_a_terminal_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    with progress_on_terminal("Detecting", 2) as progress:
        assert progress is None
    watched = Watched()
    monkeypatch.setattr(sys, "stderr", watched)
    with progress_on_terminal("Detecting", 1) as progress:
        assert progress is None
    with progress_on_terminal("Detecting", 2) as progress:
        assert progress is not None
        progress(2, 2)
    assert "2/2" in watched.getvalue()


def test_a_bar_of_tiles_is_drawn_once_there_are_some(monkeypatch: pytest.MonkeyPatch) -> None:
    with tiles_on_terminal("Detecting in tiles") as progress:
        assert progress is None
    watched = Watched()
    monkeypatch.setattr(sys, "stderr", watched)
    with tiles_on_terminal("Detecting in tiles") as progress:
        assert progress is not None
        assert watched.getvalue() == ""
        progress(1, 3)
        progress(3, 3)
    assert "3/3" in watched.getvalue()
