"""What README.md and DEVELOPERS.md show is there, and does what they say."""

from __future__ import annotations

import doctest
import re
import shlex
import tomllib
from pathlib import Path
from typing import Any

import pytest
import typer.main
from typer.core import TyperGroup
from typer.testing import CliRunner

from analyse.cli import app
from analyse.recipe import KEYS
from detect.amendments import read_amendments
from tests.conftest import SAMPLE, Surveyed

ROOT = SAMPLE.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
GROUP = typer.main.get_command(app)
assert isinstance(GROUP, TyperGroup)
COMMANDS = GROUP.commands

POINTS = "x,y\n" + "".join(f"{37 * k % 990 + 5},{53 * k % 740 + 5}\n" for k in range(40))
COUNTS = "count\n" + "".join(f"{k * k % 7}\n" for k in range(24))


def blocks(text: str) -> list[str]:
    """Lines of the blocks of commands."""
    found = re.findall(r"```sh\n(.*?)```", text, flags=re.DOTALL)
    return [line for block in found for line in block.splitlines() if line.strip()]


def calls(line: str) -> list[list[str]]:
    """Arguments of every `strewn` in a line of a shell."""
    parts = [shlex.split(part) for part in re.split(r"&&|;|\|", line)]
    return [words[1:] for words in parts if words and Path(words[0]).name == "strewn"]


def inline(text: str) -> list[str]:
    """What stands in `backticks`, blocks left aside."""
    return re.findall(r"`([^`\n]+)`", re.sub(r"```.*?```", "", text, flags=re.DOTALL))


def wrong_words(arguments: list[str]) -> list[str]:
    """Options, or a command, that do not exist."""
    group: Any = GROUP
    if arguments and arguments[0] in COMMANDS:
        group, arguments = COMMANDS[arguments[0]], arguments[1:]
    elif arguments and not arguments[0].startswith("-") and arguments[0] != "COMMAND":
        return [arguments[0]]
    known = {"--help"} | {name for option in group.params for name in option.opts}
    given = [word.split("=")[0] for word in arguments if word.startswith("-")]
    return [word for word in given if word not in known]


SHOWN = [call for line in blocks(README) for call in calls(line)]
NAMED = [calls(text)[0] for text in inline(README) if calls(text)]


def test_exactly_two_commands_lead_from_nothing_to_verdict_and_tests() -> None:
    (block,) = re.findall(
        r"<!-- two commands -->\n```sh\n(.*?)```\n<!-- end -->", README, flags=re.DOTALL
    )
    first, second = block.splitlines()
    assert calls(first) == [["survey", "sample_images", "--out", "strewn-out"]]
    assert "-m pytest" in second
    # Nothing else stands before it that a reader would have to type.
    assert blocks(README)[:2] == [first, second]


def test_the_lines_that_strike_place_and_check_are_such(tmp_path: Path) -> None:
    (block,) = re.findall(r"```json\n(.*?)```", README, flags=re.DOTALL)
    log = tmp_path / "a.amendments.jsonl"
    log.write_text(block, encoding="utf-8")
    struck, placed, checked = read_amendments(log)
    assert (struck.what, struck.spot) == ("strike", "12")
    assert (placed.what, placed.x, placed.y, placed.radius) == ("place", 640.5, 480, 12)
    assert checked.what == "checked"


def examples() -> list[str]:
    """Blocks of Python, as a reader would type them."""
    return re.findall(r"```python\n(.*?)```", README, flags=re.DOTALL)


def test_the_python_shown_gives_what_is_shown() -> None:
    assert len(examples()) == 1
    flags = doctest.ELLIPSIS | doctest.NORMALIZE_WHITESPACE
    runner, parser = doctest.DocTestRunner(optionflags=flags), doctest.DocTestParser()
    for k, block in enumerate(examples()):
        done = runner.run(parser.get_doctest(block, {}, f"README {k}", "README.md", 0))
        assert done.failed == 0
        assert done.attempted >= 5


def test_keys_of_recipes_named_in_the_text_exist() -> None:
    named = [text.split(" = ")[0] for text in inline(README) if re.match(r"[a-z_]+ = ", text)]
    assert len(named) >= 5
    assert [name for name in named if name not in KEYS] == []


def test_every_option_that_is_a_key_too_is_named_as_the_text_says() -> None:
    told = {"dish-mm": "dish", "ruler-mm": "ruler", "line-mm": "line_length"}
    beside = {"learn", "learn-unchanged", "out", "workers", "keep-amendments", "help"}
    options = {name.removeprefix("--") for o in COMMANDS["detect"].params for name in o.opts}
    options -= {"photographs", *beside}
    assert [o for o in sorted(options) if told.get(o, o.replace("-", "_")) not in KEYS] == []


def test_the_first_command_ends_as_the_readme_says(sample_survey: Surveyed) -> None:
    assert sample_survey.exit_code == 0
    last = sample_survey.stdout.splitlines()[-1]
    assert last == f"Report: {sample_survey.out / 'report.html'}"
    assert "`strewn-out/report.html`" in README


def test_commands_are_shown() -> None:
    assert len(SHOWN) >= 5
    assert len(NAMED) >= 2


@pytest.mark.parametrize("arguments", SHOWN, ids=lambda words: " ".join(words)[:60])
def test_every_command_line_shown_can_be_typed(arguments: list[str]) -> None:
    command = COMMANDS[arguments[0]]
    context = command.make_context(arguments[0], arguments[1:])
    assert context.params
    assert wrong_words(arguments) == []


@pytest.mark.parametrize("arguments", NAMED, ids=lambda words: " ".join(words))
def test_every_command_named_in_the_text_exists(arguments: list[str]) -> None:
    assert wrong_words(arguments) == []


@pytest.mark.parametrize("invented", [["detect", "--colours", "x"], ["count", "a"], ["--verson"]])
def test_an_invented_command_or_option_is_seen(invented: list[str]) -> None:
    assert len(wrong_words(invented)) == 1


def test_every_option_named_in_the_text_exists() -> None:
    known = {name for c in COMMANDS.values() for option in c.params for name in option.opts}
    known |= {"--help", "--version"}
    named = [text.split()[0] for text in inline(README) if text.startswith("--")]
    assert [name for name in named if name not in known] == []


def test_every_command_is_told_of() -> None:
    assert {"detect", "analyse", "survey", "score"} <= set(COMMANDS)
    told = {words[0] for words in SHOWN + NAMED if words}
    assert set(COMMANDS) - told == set()


def test_every_command_line_shown_runs(
    sample_survey: Surveyed, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One after another in an empty folder that holds the sample, as a reader would do it."""
    monkeypatch.chdir(tmp_path)
    Path("sample_images").symlink_to(SAMPLE, target_is_directory=True)
    Path("points.csv").write_text(POINTS, encoding="utf-8")
    Path("counts.csv").write_text(COUNTS, encoding="utf-8")
    detected = []
    for arguments in SHOWN:
        if arguments[:2] == ["survey", "sample_images"]:
            continue  # the shared survey is this very command
        result = CliRunner().invoke(app, arguments)
        assert result.exit_code == 0, (arguments, result.stderr, result.exception)
        out = Path(arguments[arguments.index("--out") + 1])
        if arguments[0] == "detect":
            detected += list(out.glob("*.points.csv"))
        elif arguments[0] == "score":
            assert (out / "score.csv").is_file()
        elif arguments[0] == "spot-check":
            assert len(list(out.glob("*.spot_check.*"))) == 2
        else:
            assert (out / "report.html").is_file()
    # The options shown are those of the recipe: they find the same spots in the same places.
    assert len(detected) >= 3
    for points in detected:
        assert points.read_bytes() == (sample_survey.out / points.name).read_bytes(), points.name


def test_positions_shown_are_those_of_the_recipe() -> None:
    recipe = tomllib.loads((SAMPLE / "survey.toml").read_text(encoding="utf-8"))["photographs"]
    seen = 0
    for arguments in SHOWN:
        for option, key in (("--corners", "corners"), ("--line", "line")):
            if option in arguments and arguments[arguments.index(option) + 1] != "plates":
                shown = [float(v) for v in arguments[arguments.index(option) + 1].split(",")]
                noted = recipe[Path(arguments[1]).name][key]
                flat = [float(v) for pair in noted for v in (pair if key == "corners" else [pair])]
                assert shown == flat, arguments[1]
                seen += 1
    assert seen >= 2


@pytest.mark.parametrize("page", ["README.md", "DEVELOPERS.md", "CHANGELOG.md"])
def test_pages_lead_nowhere_that_does_not_exist(page: str) -> None:
    text = (ROOT / page).read_text(encoding="utf-8")
    targets = [target.split("#")[0] for target in re.findall(r"\]\(([^)\s]+)\)", text)]
    local = [target for target in targets if target and not target.startswith("http")]
    assert [target for target in local if not (ROOT / target).exists()] == []
    if page == "README.md":
        assert sum(target.endswith((".jpg", ".png", ".svg")) for target in local) >= 3


ABSOLUTE = re.compile(r"(?:^|[\s`\"'(=])(/[A-Za-z]|~/|[A-Za-z]:\\)", flags=re.MULTILINE)


@pytest.mark.parametrize("page", ["README.md", "DEVELOPERS.md", "CHANGELOG.md"])
def test_pages_hold_no_absolute_path_and_nothing_unfinished(page: str) -> None:
    text = (ROOT / page).read_text(encoding="utf-8")
    assert ABSOLUTE.findall(text) == []
    assert re.findall(r"@[A-Z]+@", text) == []


@pytest.mark.parametrize("planted", ["see `/home/me/x`", "cd ~/strewn", r"open C:\data"])
def test_an_absolute_path_is_seen(planted: str) -> None:
    assert ABSOLUTE.search(planted)


@pytest.mark.parametrize("half", ["detect", "analyse"])
def test_every_room_is_in_the_table_of_its_half(half: str) -> None:
    (section,) = re.findall(
        rf"### Rooms of `{half}`.*?\n(.*?)(?=\n#{{1,3}} |\Z)", DEVELOPERS, flags=re.DOTALL
    )
    rows = "\n".join(line for line in section.splitlines() if line.startswith("| `"))
    named = set(re.findall(r"`([\w/]+\.py)`", rows))
    rooms = {
        path.relative_to(ROOT / half).as_posix()
        for path in (ROOT / half).rglob("*.py")
        if path.name != "__init__.py"
    }
    assert named == rooms


def test_the_page_for_developers_names_no_file_that_does_not_exist() -> None:
    named = [text for text in inline(DEVELOPERS) if re.fullmatch(r"[\w.-]*[/.][\w./-]*", text)]
    files = [text for text in named if "/" in text or text.endswith((".py", ".toml", ".md"))]
    assert len(files) > 40
    homes = (ROOT, ROOT / "detect", ROOT / "analyse")
    assert [name for name in files if not any((home / name).exists() for home in homes)] == []
