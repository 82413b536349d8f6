"""Every example in a docstring is run."""

from __future__ import annotations

import ast
import doctest
import importlib
import pkgutil
import re
from pathlib import Path

import pytest

import analyse
import detect

FLAGS = doctest.ELLIPSIS | doctest.NORMALIZE_WHITESPACE
MODULES = sorted(
    module.name
    for package in (analyse, detect)
    for module in pkgutil.walk_packages(package.__path__, f"{package.__name__}.")
    if not module.name.endswith("__main__")
)
ANALYSE = Path(analyse.__file__).parent
# Rooms that put findings into rows, words or pictures, and those of the command line and the page:
# not for a notebook.
WITHOUT = {
    # the command line and the page
    *("analysis", "cli", "command_options", "inputs", "lines", "panel", "plan", "recipe"),
    *("review_command", "spot_check_command", "survey"),
    # rows of tables
    *(
        "block_rows",
        "count_rows",
        "crowding_rows",
        "dispersion_rows",
        "distance_rows",
        "envelope_rows",
        "plain_rows",
        "power_rows",
    ),
    *("reviewing", "rows", "spot_check_rows", "trend_rows", "trust_rows", "unseen"),
    # words and pictures
    *("blind_pictures", "curve_words", "hand_counts", "page_words", "report", "wording"),
    "trust_words",
    *("charts", "curve_charts", "drawn", "embedding", "figures", "marks", "trust_charts"),
    "errors",
}
Public = ast.FunctionDef | ast.ClassDef


def public(source: str) -> list[Public]:
    """The functions and classes of a room whose names do not begin with an underscore."""
    return [
        each
        for each in ast.parse(source).body
        if isinstance(each, Public) and not each.name.startswith("_")
    ]


def shows(each: Public) -> bool:
    """Whether the docstring has an example."""
    return ">>>" in (ast.get_docstring(each) or "")


def used(each: Public) -> set[str]:
    """The names that stand in the examples of a function or class, and what their functions return."""
    names: set[str] = set()
    inner = [one for one in each.body if isinstance(one, ast.FunctionDef)]
    for one in [each, *inner] if isinstance(each, ast.ClassDef) else [each]:
        lines = (ast.get_docstring(one) or "").splitlines()
        typed = [line for line in lines if line.lstrip().startswith((">>>", "... "))]
        names |= set(re.findall(r"\w+", " ".join(typed)))
        if (
            (typed or of_a_sheet(one))
            and isinstance(one, ast.FunctionDef)
            and one.returns is not None
        ):
            names |= {node.id for node in ast.walk(one.returns) if isinstance(node, ast.Name)}
    return names


def of_a_sheet(each: Public) -> bool:
    """Whether a function needs a sheet, which no three lines make; nor do they what it returns."""
    if isinstance(each, ast.ClassDef):
        return False
    given = [*each.args.args, *each.args.kwonlyargs]
    return any(one.annotation and ast.unparse(one.annotation) == "Sheet" for one in given)


def lacking(sources: dict[str, str]) -> list[str]:
    """Public functions without an example, and records that no example makes or names, by room."""
    rooms = {room: public(source) for room, source in sources.items()}
    shown = {name for room in rooms.values() for each in room for name in used(each)}
    return [
        f"{room}.{each.name}"
        for room, inside in rooms.items()
        for each in inside
        if not (shows(each) or of_a_sheet(each))
        and not (isinstance(each, ast.ClassDef) and each.name in shown)
    ]


@pytest.mark.parametrize("name", MODULES)
def test_examples_give_what_they_show(name: str) -> None:
    failed, _ = doctest.testmod(importlib.import_module(name), optionflags=FLAGS)
    assert failed == 0


def test_examples_are_there_to_be_run() -> None:
    """A run that finds no example at all would prove nothing."""
    tried = [
        doctest.testmod(importlib.import_module(name), optionflags=FLAGS).attempted
        for name in ("analyse.findings", "analyse.dispersion", "analyse.quadrats", "detect.lengths")
    ]
    assert min(tried) > 0


def test_every_public_function_of_the_statistics_shows_an_example() -> None:
    sources = {
        path.stem: path.read_text(encoding="utf-8")
        for path in sorted(ANALYSE.glob("*.py"))
        if path.stem not in WITHOUT
    }
    assert len(sources) > 60
    assert lacking(sources) == []


def test_the_rooms_that_need_no_example_are_there() -> None:
    assert {path.stem for path in ANALYSE.glob("*.py")} >= WITHOUT


@pytest.mark.parametrize(
    ("source", "missing"),
    [
        ("def f():\n    pass", ["a.f"]),
        ("def _f():\n    pass", []),
        ("def f() -> int:\n    'Say.'", ["a.f"]),
        ("def f() -> int:\n    '>>> f()'", []),
        ("class A:\n    'A record.'", ["a.A"]),
        ("class A:\n    'A record.'\ndef f() -> A | None:\n    '>>> f()'", []),
        ("class A:\n    'A record.'\ndef f() -> A | None:\n    'Say.'", ["a.A", "a.f"]),
        ("class A:\n    'A record.'\n    def of(self):\n        '>>> A.of()'", []),
        ("def f(sheet: Sheet) -> int:\n    'Say.'", []),
    ],
)
def test_a_missing_example_is_seen(source: str, missing: list[str]) -> None:
    assert lacking({"a": source}) == missing
