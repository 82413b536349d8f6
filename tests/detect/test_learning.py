"""What reviewed sheets teach, on small drawn photographs: what is gained, and what is left alone."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from typer.testing import CliRunner, Result

from analyse.cli import app
from detect.accuracy import match_spots
from detect.doubt import GENERAL
from detect.learned_sizes import SizeOptions, in_pixels, learned_range
from detect.learning import learn, looks_at_most
from detect.requests import DetectRequest, detect_photograph, parse_request
from detect.reviewed import gather_reviewed
from detect.sheet import read_sheet
from detect.spots import Spots
from detect.taught import Taught, told
from detect.taught_file import read_taught
from tests.reviewer import review
from tests.scenes import SpotScene, scattered

RED, BLUE, PALE = (0.70, 0.30, 0.25), (0.28, 0.36, 0.68), (0.72, 0.50, 0.46)
GREY = (0.78, 0.77, 0.74)
SIZES = {"diameter": "10-24px"}


def draw(
    path: Path, seed: int, *, kept: object = RED, others: object = BLUE, n: int = 44
) -> NDArray[np.float64]:
    """Draw discs of two colours on grey; the truth is those of the first colour."""
    discs = scattered(n, radius=(6, 9), seed=seed)
    scene = SpotScene(discs=discs[::2], ground=GREY, colour=kept, seed=seed)  # type: ignore[arg-type]
    first = scene.draw().pixels()
    second = SpotScene(discs=discs[1::2], ground=GREY, colour=others, seed=seed)  # type: ignore[arg-type]
    away = second.draw().pixels()
    y, x = np.mgrid[: scene.height, : scene.width]
    near = np.hypot(x[..., None] - discs[1::2, 0], y[..., None] - discs[1::2, 1]) / discs[1::2, 2]
    picture = np.where((near.min(axis=2) < 1.3)[..., None], away, first)
    cv2.imwrite(str(path), np.round(255 * picture[..., ::-1]).astype(np.uint8))
    return discs[::2]


def f1_of(path: Path, truth: NDArray[np.float64], request: DetectRequest) -> float:
    spots = detect_photograph(path, request)[1].spots
    pairs = match_spots(spots.centres, truth[:, :2], truth[:, 2])
    return 2 * len(pairs) / (len(spots) + len(truth))


def reviewed_folder(
    folder: Path, scenes: list[tuple[Path, NDArray[np.float64]]], **told: str
) -> Path:
    sheets = folder / "sheets"
    sheets.mkdir()
    for path, truth in scenes:
        sheet = detect_photograph(path, parse_request(SIZES | told))[1]
        review(sheet, path, truth[:, :2], truth[:, 2], sheets)
    return sheets


def using(taught: Taught) -> DetectRequest:
    return DetectRequest(taught=taught)


@pytest.fixture(scope="module")
def two_colours(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path, NDArray[np.float64]]:
    """Sheets of two photographs in which blue discs were struck; and a third photograph."""
    folder = tmp_path_factory.mktemp("colours")
    scenes = [(folder / f"a_{k}.png", draw(folder / f"a_{k}.png", k)) for k in (1, 2, 3)]
    return reviewed_folder(folder, scenes[:2]), *scenes[2]


def test_of_two_colours_only_the_one_left_standing_is_found(
    two_colours: tuple[Path, Path, NDArray[np.float64]],
) -> None:
    sheets, path, truth = two_colours
    assert f1_of(path, truth, parse_request(SIZES)) < 0.75
    looks: list[tuple[int, int]] = []
    taught = learn(
        gather_reviewed(sheets)[0],
        tool_version="1",
        progress=lambda done, total: looks.append((done, total)),
    )
    assert f1_of(path, truth, using(taught)) > 0.95
    assert taught.lessons.f1_before < 0.75
    assert taught.lessons.f1_after > 0.95
    assert (taught.lessons.real, taught.lessons.struck) == (44, 44)
    assert looks[-1][0] <= looks[-1][1] == looks_at_most(2)
    assert taught == learn(gather_reviewed(sheets)[0], tool_version="1")


def test_one_photograph_is_judged_by_its_halves(tmp_path: Path) -> None:
    scenes = [(tmp_path / f"a_{k}.png", draw(tmp_path / f"a_{k}.png", k)) for k in (1, 2)]
    taught = learn(gather_reviewed(reviewed_folder(tmp_path, scenes[:1]))[0], tool_version="1")
    assert f1_of(*scenes[1], using(taught)) > 0.95


def test_of_two_shades_of_one_colour_the_own_colour_decides(tmp_path: Path) -> None:
    scenes = [
        (tmp_path / f"a_{k}.png", draw(tmp_path / f"a_{k}.png", k, others=PALE)) for k in (1, 2, 3)
    ]
    taught = learn(gather_reviewed(reviewed_folder(tmp_path, scenes[:2]))[0], tool_version="1")
    assert taught.own_colour is not None
    assert f1_of(*scenes[2], parse_request(SIZES)) < 0.75
    assert f1_of(*scenes[2], using(taught)) > 0.9


def test_what_gains_nothing_is_left_as_it_was(tmp_path: Path) -> None:
    path = tmp_path / "a.png"
    discs = scattered(40, radius=(6, 9), seed=5)
    picture = SpotScene(discs=discs).draw().pixels()
    cv2.imwrite(str(path), np.round(255 * picture[..., ::-1]).astype(np.uint8))
    sheet = detect_photograph(path, parse_request(SIZES))[1]
    truth = np.vstack([discs, [[3.0, 3.0, 6.0]]])  # placed where nothing can be seen
    review(sheet, path, truth[:, :2], truth[:, 2], tmp_path)
    taught = learn(gather_reviewed(tmp_path)[0], tool_version="1")
    assert taught.direction is None
    assert not taught.sized
    assert taught.diameter == parse_request(SIZES).options.diameter
    assert taught.lessons.f1_after >= taught.lessons.f1_before > 0.95
    assert taught.lessons.placed == 1


def test_few_spots_teach_sizes_alone(tmp_path: Path) -> None:
    scenes = [(tmp_path / "a_1.png", draw(tmp_path / "a_1.png", 1, n=24))]
    sheets = reviewed_folder(tmp_path, scenes)
    taught = learn(gather_reviewed(sheets)[0], tool_version="1")
    assert taught.lessons.spots == 24
    assert taught.model == GENERAL
    assert taught.own_colour is None
    assert taught.direction is None
    assert taught.calibration is None
    assert taught.highest_doubt is None
    assert told(taught).endswith("30 spots are needed to learn more than sizes.")


def test_the_range_of_sizes_runs_beyond_the_real_ones(
    two_colours: tuple[Path, Path, NDArray[np.float64]],
) -> None:
    reviewed, _ = gather_reviewed(two_colours[0])
    radii = np.concatenate([each.real[:, 2] for each in reviewed])
    sizes = learned_range(reviewed, SizeOptions(), in_mm=False)
    assert sizes is not None
    low, high = 2 * np.quantile(radii, [0.05, 0.95])
    assert [str(length) for length in sizes] == [f"{low / 1.2:.4g}px", f"{high * 1.2:.4g}px"]
    assert in_pixels(sizes, reviewed[0]) == pytest.approx((low / 1.2, high * 1.2), rel=1e-3)
    few = replace(reviewed[0], sheet=replace(reviewed[0].sheet, spots=Spots.none()))
    assert learned_range([few], SizeOptions(), in_mm=False) is None


def test_sizes_are_in_millimetres_where_every_sheet_has_a_scale(tmp_path: Path) -> None:
    scenes = [(tmp_path / "a_1.png", draw(tmp_path / "a_1.png", 1))]
    sheets = reviewed_folder(tmp_path, scenes, mm_per_pixel="0.5")
    reviewed, _ = gather_reviewed(sheets)
    sizes = learned_range(reviewed, SizeOptions(), in_mm=True)
    assert sizes is not None
    assert {length.unit for length in sizes} == {"mm"}
    low = 2 * np.quantile(reviewed[0].real[:, 2], 0.05)
    assert sizes[0].value == pytest.approx(0.5 * low / 1.2, rel=1e-3)
    assert in_pixels(sizes, reviewed[0])[0] == pytest.approx(low / 1.2, rel=1e-3)


def run(*arguments: object) -> Result:
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def test_the_command_learns_writes_it_down_and_does_the_same_again(
    two_colours: tuple[Path, Path, NDArray[np.float64]], tmp_path: Path
) -> None:
    sheets, path, truth = two_colours
    first = run("detect", path, "--learn", sheets, "--out", tmp_path / "a")
    assert first.exit_code == 0, first.output
    taught = read_taught(tmp_path / "a" / "taught.toml")
    assert first.stdout.startswith(f"{told(taught)}\nWhat was learned: {tmp_path / 'a'}")
    assert (
        "Learned from 2 photographs (44 real spots, 0 of them placed; 44 struck): the weights"
        in first.stdout
    )
    again = run("detect", path, "--taught", tmp_path / "a" / "taught.toml", "--out", tmp_path / "b")
    assert again.exit_code == 0, again.output
    one, other = (tmp_path / name / "a_3.sheet.json" for name in "ab")
    assert one.read_bytes() == other.read_bytes()
    assert len(read_sheet(one).spots) == pytest.approx(len(truth), abs=1)


def test_wrong_requests_to_learn_end_with_one_sentence(
    two_colours: tuple[Path, Path, NDArray[np.float64]], tmp_path: Path
) -> None:
    sheets, path, _ = two_colours
    alone = run("detect", path, "--learn-unchanged", "--out", tmp_path / "out")
    assert alone.exit_code == 2
    assert "--learn-unchanged needs --learn DIR beside it; give both." in alone.stderr
    for given, message in (
        (("--taught", "x.toml"), "--learn and --taught both say what was learned; keep one of them."),
        (("--kind", "lesions"), f"--kind lesions is asked for, but the sheets in {sheets} are of spots; leave --kind out"),
    ):  # fmt: skip
        done = run("detect", path, "--learn", sheets, *given, "--out", tmp_path / "out")
        assert done.exit_code == 2
        assert "".join(message.split()) in "".join(done.stderr.split())
    done = run("detect", path, "--learn", tmp_path / "none", "--out", tmp_path / "out")
    assert done.exit_code == 2
    assert "does not exist" in done.stderr
    assert not (tmp_path / "out").exists()
