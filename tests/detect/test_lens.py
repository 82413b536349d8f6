"""The lens: straightened as an independent model says, undone exactly, measured on drawn chessboards."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from typer.testing import CliRunner

from analyse.cli import app
from analyse.grid_options import GridOptions
from analyse.pattern import pattern_from_sheet
from analyse.quadrats import lay_grid
from detect.area import frame_area, plot_area
from detect.chessboard import find_chessboard, fit_lens, lens_from
from detect.dish import Dish, Ellipse
from detect.errors import OptionWrong
from detect.lens import Lens, read_lens
from detect.photograph import Photograph
from detect.readers import READERS
from detect.requests import detect_photograph, parse_request
from detect.scale import Scale, scale_from_corners
from detect.sheet import read_sheet, write_sheet
from tests import discs
from tests.discs import scattered, write_discs
from tests.scenes import photograph_of

Points = NDArray[np.float64]
WIDTH, HEIGHT, FOCAL = 1200, 900, 1000.0
CAMERA = np.array([[FOCAL, 0, (WIDTH - 1) / 2], [0, FOCAL, (HEIGHT - 1) / 2], [0, 0, 1]])
BENT = np.array([-0.16, 0.04, 0.0, 0.0])  # of the library's own model
LENS = Lens(0.09, 0.02, WIDTH, HEIGHT)


def pose(tilt: tuple[float, float, float], away: tuple[float, float, float]) -> Points:
    """Homography of a board's plane, in squares, to the camera's unit plane."""
    turn = cv2.Rodrigues(np.array(tilt))[0]
    return np.column_stack([turn[:, 0], turn[:, 1], np.array(away)])


POSES = [
    pose((0.0, 0.0, 0.02), (0.2, 0.1, 10.5)),
    pose((0.3, 0.1, 0.1), (-1.5, -1.0, 10.0)),
    pose((-0.2, 0.3, -0.1), (1.5, 1.0, 10.5)),
]


def seen_by_library(plane: Points, points: Points, bent: Points = BENT) -> Points:
    """Pixels of points on a plane through the library's camera model."""
    at = np.column_stack([points, np.ones(len(points))]) @ plane.T
    seen, _ = cv2.projectPoints(at, np.zeros(3), np.zeros(3), CAMERA, bent)
    return np.asarray(seen, dtype=np.float64).reshape(-1, 2)


def corners_of_board() -> Points:
    x, y = np.meshgrid(np.arange(-6.0, 7), np.arange(-4.0, 5))
    return np.column_stack([x.ravel(), y.ravel()])


def in_frame(see: Callable[[Points], Points]) -> tuple[Points, Points]:
    """Corners of a board, and where those within the picture are seen."""
    flat = corners_of_board()
    seen = see(flat)
    kept = (seen > 0).all(axis=1) & (seen < (WIDTH - 1, HEIGHT - 1)).all(axis=1)
    return flat[kept], seen[kept]


def drawn_board(plane: Points) -> Photograph:
    """A chessboard of 14 x 10 squares as that camera sees it."""
    y, x = np.mgrid[:HEIGHT, :WIDTH].astype(np.float64)
    total = np.zeros((HEIGHT, WIDTH))
    back = np.linalg.inv(plane)
    for dy in (-0.25, 0.25):
        for dx in (-0.25, 0.25):
            pixels = np.stack([x + dx, y + dy], axis=-1).reshape(-1, 1, 2)
            rays = cv2.undistortPoints(pixels, CAMERA, BENT, criteria=(3, 12, 1e-7)).reshape(-1, 2)
            at = np.column_stack([rays, np.ones(len(rays))]) @ back.T
            u, v = at[:, 0] / at[:, 2], at[:, 1] / at[:, 2]
            black = ((np.floor(u) + np.floor(v)) % 2 == 0) & (np.abs(u) < 7) & (np.abs(v) < 5)
            total += np.where(black, 0.1, 0.9).reshape(HEIGHT, WIDTH) / 4
    noise = np.random.default_rng(4).normal(0, 0.01, total.shape)
    return photograph_of(cv2.GaussianBlur(total, (0, 0), 0.8) + noise)


def off_straight(lens: Lens, reach: float) -> float:
    """Greatest distance, in pixels, from a plane as the library's model without distortion sees it."""
    points = np.random.default_rng(2).uniform((-5.5, -4), (5.5, 4), (400, 2)) * reach
    for plane in POSES[:1]:
        true = seen_by_library(plane, points, np.zeros(4))
        mine = lens.straighten(seen_by_library(plane, points))
        matrix = cv2.findHomography(mine, true, 0)[0]
        mapped = np.column_stack([mine, np.ones(len(mine))]) @ matrix.T
        return float(np.hypot(*(mapped[:, :2] / mapped[:, 2:] - true).T).max())
    return math.nan


def test_the_library_s_own_camera_is_straightened() -> None:
    lens = fit_lens(
        [in_frame(lambda p, plane=plane: seen_by_library(plane, p)) for plane in POSES],
        WIDTH,
        HEIGHT,
    )
    assert lens.photographs == 3
    bent = off_straight(Lens(0.0, 0.0, WIDTH, HEIGHT), 1.0)
    assert bent > 10.0  # what is to be undone
    assert off_straight(lens, 1.0) < 0.05 * bent
    assert lens.rms_px < 0.3  # its own series is another one, of as many terms


def test_a_lens_is_recovered_from_what_it_bent() -> None:
    boards = [
        in_frame(lambda p, plane=plane: LENS.bend(seen_by_library(plane, p, np.zeros(4))))
        for plane in POSES
    ]
    lens = fit_lens(boards, WIDTH, HEIGHT)
    assert (lens.k1, lens.k2) == pytest.approx((LENS.k1, LENS.k2), abs=1e-5)
    assert lens.rms_px < 0.001


def test_a_lens_is_measured_on_a_drawn_chessboard(tmp_path: Path) -> None:
    board = drawn_board(POSES[0])
    flat, seen = find_chessboard(board)
    assert len(flat) >= 100
    true = seen_by_library(POSES[0], corners_of_board())
    nearest = np.min(np.hypot(*(seen[:, None] - true[None]).transpose(2, 0, 1)), axis=1)
    assert np.median(nearest) < 0.1
    lens = fit_lens([(flat, seen)], WIDTH, HEIGHT)
    assert off_straight(lens, 0.9) < 0.4
    # From a file, and again from what the measurement wrote.
    path = tmp_path / "board.png"
    cv2.imwrite(str(path), board.stored)
    read = lens_from(path)
    assert read.k1 == pytest.approx(lens.k1, abs=1e-9)
    (tmp_path / "lens.toml").write_text(read.as_toml(), encoding="utf-8")
    assert lens_from(tmp_path / "lens.toml") == read


@settings(deadline=None)
@given(
    k1=st.floats(-0.2, 0.3),
    k2=st.floats(-0.02, 0.1),
    x=st.floats(-60, WIDTH + 60),
    y=st.floats(-60, HEIGHT + 60),
)
def test_bending_undoes_straightening_to_a_millionth_of_a_pixel(
    k1: float, k2: float, x: float, y: float
) -> None:
    lens = Lens(k1, k2, WIDTH, HEIGHT)
    np.testing.assert_allclose(lens.bend(lens.straighten([[x, y]])), [[x, y]], atol=1e-6)
    np.testing.assert_allclose(lens.straighten(lens.bend([[x, y]])), [[x, y]], atol=1e-6)


@pytest.mark.parametrize("place", [(599.5, 449.5), (10.0, 20.0), (1100.0, 300.0)])
def test_the_area_factor_is_that_of_a_small_square(place: tuple[float, float]) -> None:
    a, b, c = LENS.straighten(place + np.array([[0, 0], [0.01, 0], [0, 0.01]]))
    area = (b - a)[0] * (c - a)[1] - (b - a)[1] * (c - a)[0]
    assert LENS.area_factor([place])[0] == pytest.approx(area / 1e-4, rel=1e-4)


def test_a_scale_with_a_lens_maps_there_and_back_and_is_kept() -> None:
    corners = np.array([[110.0, 95.0], [1105.0, 120.0], [1080.0, 800.0], [140.0, 790.0]])
    plain = scale_from_corners(LENS.straighten(corners), 1000.0, 750.0)
    scale = Scale(plain.matrix, "corners", 0.001, "x", LENS)
    np.testing.assert_allclose(
        scale.to_mm(corners), [[0, 0], [1000, 0], [1000, 750], [0, 750]], atol=1e-7
    )
    points = np.random.default_rng(3).uniform((0, 0), (WIDTH, HEIGHT), (50, 2))
    np.testing.assert_allclose(scale.to_px(scale.to_mm(points)), points, atol=1e-6)
    kept = Scale.from_dict(scale.as_dict())
    np.testing.assert_array_equal(kept.to_mm(points), scale.to_mm(points))
    a, b, c = scale.to_mm([[300.0, 200.0], [300.01, 200.0], [300.0, 200.01]])
    area = (b - a)[0] * (c - a)[1] - (b - a)[1] * (c - a)[0]
    assert scale.mm_per_px([[300, 200]])[0] == pytest.approx(math.sqrt(area) / 0.01, rel=1e-3)
    assert "lens" not in plain.as_dict()  # sheets without a lens are as they were


def test_a_plot_keeps_its_size_and_its_quadrats_though_its_edges_are_curved() -> None:
    corners = np.array([[110.0, 95.0], [1105.0, 120.0], [1080.0, 800.0], [140.0, 790.0]])
    request = parse_request({"corners": corners.tolist(), "plot": "1000x750mm"}).scale
    object.__setattr__(request, "lens", LENS)
    scale = request.resolve(photograph_of(np.zeros((HEIGHT, WIDTH))), None)
    assert scale is not None
    assert scale.lens == LENS
    assert scale.note.endswith("; lens straightened")
    outline = request.plot_outline(scale)
    area = plot_area(outline)
    chord = plot_area(scale.to_px([[0, 0], [1000, 0], [1000, 750], [0, 750]]))
    assert area.polygon.hausdorff_distance(chord.polygon) > 2  # curved in pixels ...
    true = shapely.transform(area.polygon, scale.to_mm)
    assert true.area == pytest.approx(750_000, rel=1e-9)  # ... straight in millimetres
    assert true.hausdorff_distance(shapely.box(0, 0, 1000, 750)) < 1e-6


def test_an_analysis_keeps_whole_quadrats_whole_under_a_lens(tmp_path: Path) -> None:
    path = write_discs(tmp_path / "a.png", scattered(20, seed=3))
    lens = Lens(0.09, 0.02, discs.WIDTH, discs.HEIGHT)
    (tmp_path / "lens.toml").write_text(lens.as_toml(), encoding="utf-8")
    corners = "20,22,400,15,390,300,25,295"
    asked = {"corners": corners, "plot": "1000x750mm", "lens": "lens.toml", "diameter": "10-24px"}
    _, sheet = detect_photograph(path, parse_request(asked, folder=tmp_path))
    pattern = pattern_from_sheet(read_sheet(write_sheet(sheet, tmp_path)))
    assert pattern.area.area == pytest.approx(750_000, rel=1e-6)
    grid = lay_grid(pattern.area, len(pattern.points), GridOptions(shape=(3, 4)))
    assert grid.whole.all()
    assert len(grid.polygons) == 12
    np.testing.assert_allclose(grid.area, 62_500, rtol=1e-6)
    # The frame's own edges are straight in pixels, so curved in millimetres.
    frame = replace(sheet, area=frame_area(discs.WIDTH, discs.HEIGHT))
    assert sheet.scale is not None
    fine = shapely.segmentize(frame.area.polygon, 0.5)
    true = shapely.transform(fine, sheet.scale.to_mm)
    assert pattern_from_sheet(frame).area.area == pytest.approx(true.area, rel=1e-4)
    assert pattern_from_sheet(frame).area.area != pytest.approx(
        shapely.transform(frame.area.polygon, sheet.scale.to_mm).area, rel=1e-3
    )


def test_a_dish_under_a_lens_becomes_the_circle_it_is() -> None:
    lens = Lens(0.02, 0.0, WIDTH, HEIGHT)
    circle = Ellipse(450.0, 400.0, 300.0, 300.0, 0.0)
    true = lens.bend(circle.outline())
    (cx, cy), across, angle = cv2.fitEllipse(true.astype(np.float32))
    seen = Ellipse(cx, cy, max(across) / 2, min(across) / 2, angle % 180)
    request = parse_request({"dish": "90mm"}).scale
    object.__setattr__(request, "lens", lens)
    scale = request.resolve(photograph_of(np.zeros((HEIGHT, WIDTH))), Dish(seen, None, 1.0))
    assert scale is not None
    a, b = scale.to_mm(true[[0, 180]])
    assert math.dist(a, b) == pytest.approx(90.0, rel=0.003)


def test_a_lens_with_any_source_keeps_the_known_length() -> None:
    photograph = photograph_of(np.zeros((HEIGHT, WIDTH)))
    for values, ends, length in (
        ({"line": "100,80,1000,85", "line_length": "50mm"}, [[100, 80], [1000, 85]], 50.0),
        ({"mm_per_pixel": 0.2}, [[599, 449.5], [600, 449.5]], 0.2),
    ):
        request = parse_request(values).scale
        object.__setattr__(request, "lens", LENS)
        scale = request.resolve(photograph, None)
        assert scale is not None
        a, b = scale.to_mm(ends)
        assert math.dist(a, b) == pytest.approx(length, rel=1e-5)


def test_a_lens_fits_pictures_of_its_shape_at_any_size_and_turn() -> None:
    half = LENS.fitted_to(600, 450)
    np.testing.assert_allclose(
        half.straighten([[50.0, 40.0]]), (LENS.straighten([[100.5, 80.5]]) + 0.5) / 2 - 0.5
    )
    upright = LENS.fitted_to(HEIGHT, WIDTH)
    turned = upright.straighten([[100.0, 40.0]])
    assert turned[0] == pytest.approx(LENS.straighten([[40.0, 100.0]])[0, ::-1])
    with pytest.raises(
        OptionWrong, match="The lens was measured on pictures of 1200 x 900 pixels; this one has"
    ):
        LENS.fitted_to(1200, 800)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("k1 = 0.1", "lens.toml is no lens: it needs k1, k2, width and height"),
        ("not toml", "lens.toml is no lens"),
        (
            "k1 = -0.9\nk2 = 0\nwidth = 100\nheight = 80",
            r"The lens \(k1 = -0.9, k2 = 0\) folds its",
        ),
        ("k1 = nan\nk2 = 0\nwidth = 100\nheight = 80", "A lens needs finite k1 and k2"),
    ],
)
def test_files_that_are_no_lens_are_told(text: str, message: str, tmp_path: Path) -> None:
    path = tmp_path / "lens.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(OptionWrong, match=message):
        read_lens(path)


def test_what_cannot_measure_a_lens_is_told(tmp_path: Path) -> None:
    with pytest.raises(OptionWrong, match=r"The lens .* cannot be read \(no such file"):
        read_lens(tmp_path / "none.toml")
    with pytest.raises(OptionWrong, match=r"--lens names .*, which does not exist"):
        parse_request(
            {"lens": "none.toml", "mm_per_pixel": 1}, named=lambda _: "--lens", folder=tmp_path
        )
    with pytest.raises(OptionWrong, match=r"LENS must be a file such as lens\.toml"):
        READERS["lens"](3, "LENS")
    with pytest.raises(OptionWrong, match=r"No chessboard is seen in scene.png; photograph a flat"):
        find_chessboard(photograph_of(np.full((300, 400), 0.5)))
    flat, seen = corners_of_board(), seen_by_library(POSES[0], corners_of_board() * 0.4)
    with pytest.raises(OptionWrong, match=r"The chessboard reaches only \d+ % of the way"):
        fit_lens([(flat, seen)], WIDTH, HEIGHT)
    (tmp_path / "lens.toml").write_text(LENS.as_toml(), encoding="utf-8")
    with pytest.raises(OptionWrong, match="lens says more about a scale, but none is given"):
        parse_request({"lens": "lens.toml"}, folder=tmp_path)


def test_what_is_no_photograph_measures_no_lens(tmp_path: Path) -> None:
    (tmp_path / "board.jpg").write_text("no picture", encoding="utf-8")
    with pytest.raises(OptionWrong, match=r"The lens cannot be measured: board\.jpg: "):
        lens_from(tmp_path / "board.jpg")


def test_boards_of_different_shapes_are_told(tmp_path: Path) -> None:
    board = drawn_board(POSES[0]).stored
    cv2.imwrite(str(tmp_path / "1.png"), board)
    cv2.imwrite(str(tmp_path / "2.png"), board[:-100])
    with pytest.raises(
        OptionWrong,
        match=r"The chessboard in 2\.png is on a picture of 1200 x 800 pixels, the others",
    ):
        lens_from(tmp_path)


def test_detect_writes_the_lens_it_used(tmp_path: Path) -> None:
    photograph = write_discs(tmp_path / "a.png", scattered(5, seed=3))
    lens = Lens(0.02, 0.0, discs.WIDTH, discs.HEIGHT, 0.1, 3)
    (tmp_path / "mine.toml").write_text(lens.as_toml(), encoding="utf-8")
    asked = ["--mm-per-pixel", "0.2", "--diameter", discs.DIAMETER, "--lens"]
    words = ["detect", str(photograph), "--out", str(tmp_path / "out"), *asked]
    result = CliRunner().invoke(app, [*words, str(tmp_path / "mine.toml")])
    assert result.exit_code == 0, result.stderr
    assert read_lens(tmp_path / "out" / "lens.toml") == lens
    survey = ["survey", str(tmp_path), "--out", str(tmp_path / "surveyed"), *asked]
    result = CliRunner().invoke(app, [*survey, str(tmp_path / "mine.toml"), "--simulations", "99"])
    assert result.exit_code == 0, result.stderr
    assert read_lens(tmp_path / "surveyed" / "lens.toml") == lens
    result = CliRunner().invoke(app, [*words, str(tmp_path / "none.toml")])
    assert result.exit_code == 2
    assert "--lens names" in result.stderr


@pytest.mark.parametrize("command", ["detect", "survey"])
def test_a_lens_that_fits_no_photograph_is_not_written(command: str, tmp_path: Path) -> None:
    write_discs(tmp_path / "a.png", scattered(5, seed=3))
    other = Lens(0.02, 0.0, discs.HEIGHT, 2 * discs.HEIGHT, 0.1, 3)
    (tmp_path / "mine.toml").write_text(other.as_toml(), encoding="utf-8")
    asked = ["--mm-per-pixel", "0.2", "--lens", str(tmp_path / "mine.toml")]
    words = [command, str(tmp_path), "--out", str(tmp_path / "out"), *asked]
    result = CliRunner().invoke(app, words)
    assert result.exit_code == 2
    assert "another shape" in result.stderr
    assert not (tmp_path / "out" / "lens.toml").exists()


def test_a_request_remembers_its_lens(tmp_path: Path) -> None:
    (tmp_path / "lens.toml").write_text(LENS.as_toml(), encoding="utf-8")
    request = parse_request({"lens": "lens.toml", "mm_per_pixel": 1}, folder=tmp_path)
    assert request.as_dict()["lens"] == LENS.as_dict()
