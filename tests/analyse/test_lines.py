"""Lines on the terminal: what each says, and that notes do not drown them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from analyse.findings import Findings, analyse_points
from analyse.lines import show_findings
from analyse.unseen import planted_sentence
from detect.planted import Planted
from tests.analyse.finished import findings_of, scattered, sheet_of


def a_finding(name: str, n: int, *, twice: int = 0) -> Findings:
    points = np.random.default_rng(n).uniform(0, 100, (n, 2))
    points = np.vstack([points, points[:twice]])
    return analyse_points(points, (0, 0, 100, 100), name=name, simulations=99)


def test_a_line_per_photograph_without_rumours(capsys: pytest.CaptureFixture[str]) -> None:
    show_findings([a_finding("a.jpg", 200), a_finding("b.jpg", 0)])
    shown = capsys.readouterr()
    lines = shown.out.splitlines()
    assert lines[1].startswith("a.jpg")
    assert lines[1].split()[1:3] == ["200", "2"]
    assert lines[2].split() == ["b.jpg", "0", "0", "-", "-", "-", "too", "few", "to", "tell"]
    assert "nan" not in shown.out


def test_a_note_on_all_is_said_once_and_a_note_on_one_names_it(
    capsys: pytest.CaptureFixture[str],
) -> None:
    alike = [a_finding(name, 200, twice=1) for name in ("a.jpg", "b.jpg")]
    show_findings(alike)
    sentence = "Points at the very place of another: 1; check for double entries."
    assert capsys.readouterr().err == f"Note: {sentence}\n"
    show_findings([alike[0], a_finding("b.jpg", 200)])
    assert capsys.readouterr().err == f"Note: a.jpg: {sentence}\n"


def test_many_notes_are_told_flag_by_flag(capsys: pytest.CaptureFixture[str]) -> None:
    many = [a_finding(f"{k}.jpg", 200, twice=k) for k in range(8)]
    show_findings(many[:7])
    assert len(capsys.readouterr().err.splitlines()) == 6
    show_findings(many)
    notes = capsys.readouterr().err
    assert notes == "Note: duplicates: 1.jpg, 2.jpg, 3.jpg, 4.jpg and 3 more\n"


def test_the_seed_is_told(capsys: pytest.CaptureFixture[str]) -> None:
    show_findings([a_finding("a.jpg", 200)])
    assert capsys.readouterr().out.endswith(" Seed 1, 99 simulations.\n")


def test_what_planted_objects_say_is_told_of_few_and_pointed_to_of_many(
    capsys: pytest.CaptureFixture[str],
) -> None:
    unset = Planted(10, 1, note="Planted objects could not be set: reason.")
    each = findings_of(replace(sheet_of(scattered(40)), planted=unset))
    assert planted_sentence(each.pattern) == unset.note
    show_findings([each, a_finding("b.jpg", 200)])
    assert capsys.readouterr().out.splitlines()[-1] == f"{each.name}: {unset.note}"
    show_findings([each] * 7)
    last = capsys.readouterr().out.splitlines()[-1]
    assert last == "What planted objects say of 7 photographs stands in the report and summary.csv."
