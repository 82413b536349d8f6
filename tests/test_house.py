"""The house rules that a machine can hold: who may import whom, and what help may not load."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
ROOMS = sorted([*(ROOT / "detect").rglob("*.py"), *(ROOT / "analyse").rglob("*.py")])
DRAWING = {"analyse/figures.py", "detect/overlay.py"}
# Also drawing, one question each: how a mark looks, and how a figure becomes part of a page.
DRAWING |= {"analyse/charts.py", "analyse/marks.py", "analyse/embedding.py"}
DRAWING |= {"analyse/curve_charts.py", "analyse/trust_charts.py"}
# The one chart of the first half: axes, ticks and text are not to be drawn by hand.
DRAWING |= {"detect/reliability_chart.py"}


def imports(source: str) -> Iterator[tuple[str, bool]]:
    """Every module that a room imports, and whether only a type checker does."""
    tree = ast.parse(source)
    typing_only = {
        id(node)
        for branch in ast.walk(tree)
        if isinstance(branch, ast.If) and "TYPE_CHECKING" in ast.unparse(branch.test)
        for statement in branch.body
        for node in ast.walk(statement)
    }
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, id(node) in typing_only
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are written in full, so that the arrow can be read"
            assert node.module is not None
            yield node.module, id(node) in typing_only
        elif isinstance(node, ast.Call) and ast.unparse(node.func).endswith("import_module"):
            yield ast.literal_eval(node.args[0]), False


def upward(source: str) -> list[str]:
    """Modules of the second half that a room of the first half imports."""
    return [name for name, _ in imports(source) if name.split(".")[0] == "analyse"]


def test_the_rooms_are_found() -> None:
    assert len(ROOMS) > 30


@pytest.mark.parametrize("room", ROOMS, ids=lambda room: room.relative_to(ROOT).as_posix())
def test_the_first_half_never_imports_the_second(room: Path) -> None:
    if room.is_relative_to(ROOT / "detect"):
        assert upward(room.read_text(encoding="utf-8")) == []


@pytest.mark.parametrize(
    "planted",
    [
        "import analyse",
        "import numpy, analyse.cli as cli",
        "from analyse import findings",
        "from analyse.findings import Findings",
        "def f():\n    from analyse.findings import Findings",
        "if TYPE_CHECKING:\n    import analyse.findings",
        "import importlib\nimportlib.import_module('analyse.findings')",
    ],
)
def test_a_planted_upward_import_is_seen(planted: str) -> None:
    assert len(upward(planted)) == 1


def test_a_name_that_only_begins_alike_is_no_upward_import() -> None:
    assert upward("import analysed\nfrom detect.analyse_nothing import x") == []


@pytest.mark.parametrize("room", ROOMS, ids=lambda room: room.relative_to(ROOT).as_posix())
def test_only_pictures_import_matplotlib(room: Path) -> None:
    drawing = {
        name
        for name, typing_only in imports(room.read_text(encoding="utf-8"))
        if name.split(".")[0] == "matplotlib" and not typing_only
    }
    if room.relative_to(ROOT).as_posix() not in DRAWING:
        assert drawing == set()
    assert "matplotlib.pyplot" not in drawing


@pytest.mark.parametrize("room", ROOMS, ids=lambda room: room.relative_to(ROOT).as_posix())
def test_rooms_are_small_and_finished(room: Path) -> None:
    text = room.read_text(encoding="utf-8")
    assert len(text.splitlines()) <= 400
    for word in ("TO" + "DO", "FIX" + "ME", "NotImplemented" + "Error"):
        assert word not in text
    assert room.stem != "utils"


@pytest.mark.parametrize("command", [[], ["detect"], ["analyse"], ["survey"], ["score"]])
def test_help_loads_neither_statistics_nor_drawing(command: list[str]) -> None:
    script = (
        "import sys\n"
        "from analyse.cli import app\n"
        f"app({[*command, '--help']!r}, standalone_mode=False)\n"
        "loaded = {'scipy', 'matplotlib', 'jinja2'} & set(sys.modules)\n"
        "sys.exit(f'help loads {loaded}' if loaded else 0)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert "Usage" in done.stdout


def test_the_check_of_help_can_fail() -> None:
    script = "import scipy.stats, sys; sys.exit('scipy.stats' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", script], check=False)
    assert done.returncode == 1
