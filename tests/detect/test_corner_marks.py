"""Marks at a plot's corners: found where they were drawn, chosen well, and missed ones told."""

from __future__ import annotations

import csv
import itertools
import math
import tomllib

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray

from detect.corner_marks import (
    CornerMarks,
    _four_plates,
    find_corner_marks,
    scale_from_centres,
    scale_from_marks,
)
from detect.errors import ScaleNotFound
from detect.fiducials import read_fiducials
from detect.photograph import Photograph, read_photograph
from detect.squares import Square
from tests.conftest import SAMPLE
from tests.marked_scenes import CORNERS_MM, camera, plot_scene, seen
from tests.scenes import photograph_of, soil

Points = NDArray[np.float64]
PLOT = (1000.0, 750.0)


def square_at(
    matrix: Points, centre: tuple[float, float], *, side: float = 30.0, contrast: float = 0.5
) -> Square:
    """A square as it would be seen, exactly."""
    half = side / 2 * np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]])
    corners = seen(matrix, np.array(centre) + half)
    return Square(corners, seen(matrix, np.array([centre]))[0], 0.1, contrast)


def plates(matrix: Points, *, left_out: tuple[int, ...] = ()) -> list[Square]:
    return [square_at(matrix, (x, y)) for k, (x, y) in enumerate(CORNERS_MM) if k not in left_out]


def view(tilt: float = 12.0, towards: float = 50.0) -> Points:
    return camera(
        1500, 1150, px_per_mm=1.0, distance_mm=2000, tilt_deg=tilt, towards_deg=towards, roll_deg=4
    )


def fiducial_sheet(numbers: tuple[int, ...], places: tuple[tuple[int, int], ...]) -> Photograph:
    """A clean grey sheet with marks of 80 pixels whose centres lie at the given places."""
    page = np.full((700, 900), 200, np.uint8)
    dictionary = cv2.aruco.getPredefinedDictionary(cv2.aruco.DICT_4X4_50)
    for number, (x, y) in zip(numbers, places, strict=True):
        page[y - 60 : y + 60, x - 60 : x + 60] = 255
        page[y - 40 : y + 40, x - 40 : x + 40] = cv2.aruco.generateImageMarker(
            dictionary, number, 80
        )
    return photograph_of(page)


ROUND = ((100, 100), (800, 100), (800, 600), (100, 600))  # clockwise


def lengths_off(scale_to_mm: object, matrix: Points) -> Points:
    """Relative errors of lengths across the plot."""
    grid = np.array(list(itertools.product((-450.0, 0, 450), (-330.0, 0, 330))))
    at = scale_to_mm(seen(matrix, grid))  # type: ignore[operator]
    pairs = list(itertools.combinations(range(len(grid)), 2))
    return np.array([math.dist(at[i], at[j]) / math.dist(grid[i], grid[j]) - 1 for i, j in pairs])


@pytest.mark.parametrize(
    ("kind", "seed", "tilt"),
    [("plates", 1300, 0.0), ("plates", 1301, 25.0), ("fiducials", 1304, 20.0)],
)
def test_marks_are_found_where_they_were_drawn(kind: str, seed: int, tilt: float) -> None:
    scene, matrix = plot_scene(seed, kind, tilt_deg=tilt)
    marks = find_corner_marks(scene.draw(), kind, *PLOT)  # type: ignore[arg-type]
    side = np.mean([square.side_px for square in marks.squares])
    off = np.hypot(*(marks.centres - seen(matrix, CORNERS_MM)).T)
    assert off.max() < 0.02 * side  # a few hundredths of the black square
    scale = scale_from_marks(marks, *PLOT)
    assert np.abs(lengths_off(scale.to_mm, matrix)).max() < 0.005
    assert 0.0 < scale.relative_uncertainty < 0.002
    assert scale.source == kind
    assert "1000 x 750 mm between centres" in scale.note


@pytest.mark.parametrize("name", ["plot_01.jpg", "plot_03.jpg"])
def test_plates_of_the_sample_lie_where_a_person_reads_them(name: str) -> None:
    with (SAMPLE / "truth" / "trial.csv").open(encoding="utf-8", newline="") as file:
        (row,) = (row for row in csv.DictReader(file) if row["photograph"] == name)
    true = np.array([[float(row[f"x{k}"]), float(row[f"y{k}"])] for k in range(1, 5)])
    marks = find_corner_marks(read_photograph(SAMPLE / name), "plates", *PLOT)
    assert np.hypot(*(marks.centres - true).T).max() < 0.5
    noted = tomllib.loads((SAMPLE / "survey.toml").read_text(encoding="utf-8"))["photographs"]
    if "corners" in noted.get(name, {}):
        assert np.hypot(*(marks.centres - np.array(noted[name]["corners"])).T).max() < 1.0


@pytest.mark.parametrize(
    ("hidden", "place"),
    [(0, "top left"), (1, "top right"), (2, "bottom right"), (3, "bottom left")],
)
def test_the_missing_corner_is_named(hidden: int, place: str) -> None:
    with pytest.raises(
        ScaleNotFound,
        match=f"Only three of the four corner plates are seen in a.jpg: the one at the {place} is"
        " missing; uncover it",
    ):
        _four_plates(plates(view(), left_out=(hidden,)), *PLOT, "a.jpg")


def test_a_plate_under_a_plant_is_a_missing_corner() -> None:
    scene, _ = plot_scene(1303, "plates", hidden=(3,), tilt_deg=10)
    with pytest.raises(ScaleNotFound, match="the one at the bottom left is missing"):
        find_corner_marks(scene.draw(), "plates", *PLOT)


def test_fewer_than_three_plates_are_told_by_their_places() -> None:
    two = plates(view(0.0), left_out=(1, 2))
    with pytest.raises(ScaleNotFound, match=r"needed and 2 can be seen in a.jpg \(only at \d+,\d+"):
        _four_plates(two, *PLOT, "a.jpg")
    with pytest.raises(ScaleNotFound, match=r"needed and none can be seen in a.jpg; photo"):
        _four_plates([], *PLOT, "a.jpg")


def test_no_plates_are_seen_on_bare_ground() -> None:
    with pytest.raises(ScaleNotFound, match="corner plates"):
        find_corner_marks(soil(), "plates", *PLOT)


@pytest.mark.parametrize("tilt", [0.0, 15.0, 25.0])
def test_of_more_candidates_the_four_equal_squares_are_taken(tilt: float) -> None:
    matrix = view(tilt)
    strangers = [
        square_at(matrix, (-200, 20), side=22),
        square_at(matrix, (250, -150), side=41),
        square_at(matrix, (480, 120), side=30, contrast=0.1),
    ]
    chosen = _four_plates([*strangers, *plates(matrix)], *PLOT, "a.jpg")
    np.testing.assert_allclose(chosen.centres, seen(matrix, CORNERS_MM))


def test_two_plots_in_one_picture_are_refused() -> None:
    matrix = view(0.0)
    next_to_it = [square_at(matrix, (x + 1200, y)) for x, y in CORNERS_MM]
    with pytest.raises(
        ScaleNotFound, match=r"\d sets of four plates in a.jpg could be the corners"
    ):
        _four_plates([*plates(matrix), *next_to_it], *PLOT, "a.jpg")


def test_sides_the_wrong_way_round_are_told() -> None:
    with pytest.raises(
        ScaleNotFound, match="do not fit a plot of 750 x 1000 mm, but one of 1000 x 750 mm: give"
    ):
        _four_plates(plates(view()), 750.0, 1000.0, "a.jpg")


def test_a_plot_of_another_shape_is_told() -> None:
    with pytest.raises(
        ScaleNotFound, match=r"4 black squares are seen .* but no four .* plot of 1000 x 900 mm"
    ):
        _four_plates(plates(view()), 1000.0, 900.0, "a.jpg")


@pytest.mark.parametrize("turned", range(4))
def test_fiducials_count_from_the_lowest_id_however_the_picture_is_turned(turned: int) -> None:
    matrix = camera(1500, 1500, px_per_mm=1, distance_mm=2000, tilt_deg=9, roll_deg=90 * turned + 5)
    centres = seen(matrix, CORNERS_MM)
    scale = scale_from_centres(centres, np.full(4, 0.1), "fiducials", *PLOT)
    np.testing.assert_allclose(
        scale.to_mm(centres), [[0, 0], [1000, 0], [1000, 750], [0, 750]], atol=1e-9
    )
    points = np.random.default_rng(turned).uniform(-350, 350, (20, 2))
    np.testing.assert_allclose(scale.to_mm(seen(matrix, points)) - [500, 375], points, atol=1e-8)


def test_fiducials_are_read_with_their_ids() -> None:
    marks = find_corner_marks(fiducial_sheet((7, 8, 20, 33), ROUND), "fiducials", 700, 500)
    assert marks.ids == (7, 8, 20, 33)
    np.testing.assert_allclose(marks.centres, np.array(ROUND) - 0.5, atol=0.02)


@pytest.mark.parametrize(
    ("numbers", "places", "message"),
    [
        ((0, 1, 2), ROUND[:3], r"needed and 3 can be read in .* \(ids: 0, 1, 2\); the one seen at"
         " the bottom left of the picture is missing; clear"),
        ((0, 1), ROUND[:2], r"needed and 2 can be read in .* \(ids: 0, 1\); clear what covers"),
        ((0, 2, 1, 3), ROUND, r"\(ids: 0, 1, 2, 3\) do not run clockwise round the plot; peg"),
        ((0, 1, 2, 2), ROUND, "The fiducial mark 2 is seen twice in scene.png; use four"),
        ((0, 1, 2, 3, 4), (*ROUND, (450, 350)), r"5 fiducial marks are read in .* leave only the"),
        ((1, 2, 3, 4), ((800, 100), (800, 600), (100, 600), (100, 100)),
         "do not lie at the corners of a plot of 700 x 500 mm; check its size"),
    ],
)  # fmt: skip
def test_fiducials_that_do_not_fit_are_told(
    numbers: tuple[int, ...], places: tuple[tuple[int, int], ...], message: str
) -> None:
    with pytest.raises(ScaleNotFound, match=message):
        find_corner_marks(fiducial_sheet(numbers, places), "fiducials", 700.0, 500.0)


def test_a_fiducial_with_a_leaf_at_its_edge_is_read_all_the_same() -> None:
    scene, _ = plot_scene(1206, "fiducials")  # one of those that the library's detector misses
    assert sorted(read_fiducials(scene.draw())) == [0, 1, 2, 3]


def test_fiducial_marks_are_no_plates() -> None:
    with pytest.raises(ScaleNotFound, match="corner plates"):
        find_corner_marks(fiducial_sheet((0, 1, 2, 3), ROUND), "plates", 700.0, 500.0)


def test_the_uncertainty_of_marks_is_what_repeated_reading_shows() -> None:
    matrix = view(15.0)
    rng = np.random.default_rng(6)
    centres, u = seen(matrix, CORNERS_MM), np.array([0.2, 0.5, 0.3, 0.8])
    stated = scale_from_centres(centres, u, "plates", *PLOT).relative_uncertainty
    squares = []
    for shift in rng.normal(0, 1, (400, 4, 2)) * u[:, None]:
        moved = scale_from_centres(centres + shift, u, "plates", *PLOT)
        squares.append((lengths_off(moved.to_mm, matrix) ** 2).mean())
    assert math.sqrt(np.mean(squares)) == pytest.approx(stated, rel=0.15)


def test_marks_keep_their_order() -> None:
    marks = CornerMarks("plates", tuple(plates(view())))
    assert marks.centres.shape == (4, 2)
    assert marks.uncertainty_px.tolist() == [0.1] * 4
