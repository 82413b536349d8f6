"""The sample trial: its truth agrees with its table, its patterns, its pictures and the script that drew it."""

from __future__ import annotations

import csv
import importlib
import math
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path
from types import ModuleType

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import chi2
from shapely import Polygon, box, contains_xy

FOLDER = Path(__file__).resolve().parent.parent / "sample_images"
NAMES = [
    *(f"dish_{k:02d}" for k in range(1, 7)),
    *(f"plot_{k:02d}" for k in range(1, 5)),
    *(f"leaf_{k:02d}" for k in range(1, 4)),
]
Points = NDArray[np.float64]


def rows() -> dict[str, dict[str, str]]:
    with (FOLDER / "truth" / "trial.csv").open(encoding="utf-8", newline="") as file:
        return {row["photograph"].removesuffix(".jpg"): row for row in csv.DictReader(file)}


def objects(name: str) -> Points:
    with (FOLDER / "truth" / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        found = [[float(row[k]) for k in ("x", "y", "r")] for row in csv.DictReader(file)]
    return np.array(found, dtype=np.float64).reshape(-1, 3)


def on_the_subject(name: str, inset_mm: float) -> tuple[Points, Polygon]:
    """Centres and study area in one flat plane: mm for dishes and plots, pixels for leaves."""
    row, xy = rows()[name], objects(name)[:, :2]
    if row["kind"] == "colonies":
        cx, cy, a, b, angle = (float(row[k]) for k in ("cx", "cy", "semi_a", "semi_b", "angle_deg"))
        turn = math.radians(angle)
        long, short = (
            np.array([math.cos(turn), math.sin(turn)]),
            np.array([-math.sin(turn), math.cos(turn)]),
        )
        away = xy - (cx, cy)
        around = np.linspace(0, 2 * np.pi, 721)[:-1]
        ring = Polygon((43 - inset_mm) * np.column_stack([np.cos(around), np.sin(around)]))
        return np.column_stack([away @ long / a * 43, away @ short / b * 43]), ring
    if row["kind"] == "seedlings":
        seen = np.array([[row[f"x{k}"], row[f"y{k}"]] for k in range(1, 5)], dtype=np.float32)
        flat = np.array([[0, 0], [1000, 0], [1000, 750], [0, 750]], dtype=np.float32)
        mapped = cv2.perspectiveTransform(xy[None], cv2.getPerspectiveTransform(seen, flat))
        return np.asarray(mapped[0], dtype=np.float64), box(0, 0, 1000, 750)
    with (FOLDER / "truth" / "outlines" / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        outline = Polygon([(float(r["x"]), float(r["y"])) for r in csv.DictReader(file)])
    return xy, outline


def tails(points: Points, area: Polygon, shift: float) -> tuple[float, float]:
    """Chances of counts at least this uneven, and at least this even, over quadrats clipped by the area."""
    side = math.sqrt(2 * area.area / len(points))
    x0, y0, x1, y1 = area.bounds
    statistic, used = 0.0, 0
    for left in np.arange(x0 - shift * side, x1, side):
        for top in np.arange(y0 - shift * side, y1, side):
            expected = (
                area.intersection(box(left, top, left + side, top + side)).area
                / area.area
                * len(points)
            )
            if expected < 1e-9:
                continue
            within = (points >= (left, top)).all(axis=1) & (points < (left + side, top + side)).all(
                axis=1
            )
            statistic += (int(within.sum()) - expected) ** 2 / expected
            used += 1
    return float(chi2.sf(statistic, used - 1)), float(chi2.cdf(statistic, used - 1))


@pytest.fixture(scope="module")
def drawing() -> Iterator[ModuleType]:
    sys.path.insert(0, str(FOLDER))
    yield importlib.import_module("draw")
    sys.path.remove(str(FOLDER))


@pytest.mark.parametrize("name", NAMES)
def test_truth_lies_in_the_study_area_and_agrees_with_the_table(name: str) -> None:
    row, found = rows()[name], objects(name)
    assert len(found) == int(row["objects"])
    points, area = on_the_subject(name, inset_mm=1.2 if name.startswith("dish") else 0.0)
    assert contains_xy(area, points[:, 0], points[:, 1]).all()
    assert (found[:, 2] >= 5).all()


@pytest.mark.parametrize("name", NAMES)
def test_no_object_hides_another(name: str) -> None:
    found = objects(name)
    apart = np.hypot(*(found[:, None, :2] - found[None, :, :2]).transpose(2, 0, 1))
    np.fill_diagonal(apart, np.inf)
    assert (apart > 0.9 * np.maximum(found[:, None, 2], found[None, :, 2])).all()


@pytest.mark.parametrize("shift", [0.0, 0.5])
@pytest.mark.parametrize("name", NAMES)
def test_patterns_are_what_the_table_says(name: str, shift: float) -> None:
    pattern = rows()[name]["pattern"]
    if pattern == "none":
        assert len(objects(name)) == 0
        return
    points, area = on_the_subject(name, inset_mm=1.0)
    clumped, even = tails(points, area, shift)
    if pattern == "random":
        assert 2 * min(clumped, even) > 0.2
    elif pattern == "clumped":
        assert clumped < 0.001
    elif pattern == "even":
        assert even < 0.001
    else:
        assert pattern == "few"
        assert len(points) < 15


def test_every_kind_has_a_random_a_clumped_and_an_even_pattern() -> None:
    seen = {(row["kind"], row["pattern"]) for row in rows().values()}
    for kind in ("colonies", "seedlings", "lesions"):
        assert {(kind, p) for p in ("random", "clumped", "even")} <= seen
    assert {("colonies", "none"), ("colonies", "few")} <= seen


def test_photographs_are_small_enough_to_ship_and_large_enough_to_look_at() -> None:
    shipped = {".jpg", ".csv", ".toml", ".md", ".py"}
    files = [p for p in FOLDER.rglob("*") if p.is_file() and p.suffix in shipped]
    assert sum(p.stat().st_size for p in files) < 8_000_000
    assert sorted(p.stem for p in FOLDER.glob("*.jpg")) == sorted(NAMES)
    for name in NAMES:
        picture = cv2.imread(str(FOLDER / f"{name}.jpg"))
        assert picture is not None
        assert 2e6 <= picture.shape[0] * picture.shape[1] <= 6e6


@pytest.mark.parametrize("name", [n for n in NAMES if n != "dish_05"])
def test_objects_stand_where_the_truth_says(name: str) -> None:
    """Colonies differ from the agar about them, seedlings are greener, lesions browner."""
    picture = cv2.imread(str(FOLDER / f"{name}.jpg"))
    assert picture is not None
    blue, green, red = (picture[..., k].astype(np.float32) for k in range(3))
    kind = rows()[name]["kind"]
    sign = {
        "colonies": red + green + blue,
        "seedlings": 2 * green - red - blue,
        "lesions": red - green,
    }[kind]
    found = objects(name)
    everything = np.zeros(sign.shape, np.uint8)
    for x, y, r in found:
        cv2.circle(everything, (round(x), round(y)), round(1.6 * r), 1, -1)
    told = 0
    for x, y, r in found:
        reach = math.ceil(3.5 * r)
        window = (
            slice(max(0, round(y) - reach), round(y) + reach),
            slice(max(0, round(x) - reach), round(x) + reach),
        )
        v, u = np.mgrid[window[0].start : window[0].stop, window[1].start : window[1].stop]
        v, u = (
            v[: sign[window].shape[0], : sign[window].shape[1]],
            u[: sign[window].shape[0], : sign[window].shape[1]],
        )
        inner = np.hypot(u - x, v - y) < 0.6 * r
        around = everything[window] == 0
        spread = float(sign[window][around].std())
        told += bool(sign[window][inner].mean() > sign[window][around].mean() + 0.5 * spread)
    assert told >= 0.97 * len(found)


def test_recipe_holds_what_a_careful_person_reads_off() -> None:
    recipe = tomllib.loads((FOLDER / "survey.toml").read_text(encoding="utf-8"))
    assert [s["kind"] for s in recipe["set"]] == ["colonies", "seedlings", "lesions"]
    assert [s.get("corners") for s in recipe["set"]] == [None, "plates", None]
    assert [s.get("ruler") for s in recipe["set"]] == [None, None, "50mm"]
    assert {"plot_03.jpg", "leaf_01.jpg"} <= set(recipe["photographs"])
    for name, row in rows().items():
        noted = recipe["photographs"].get(f"{name}.jpg", {})
        if not noted:
            continue
        if row["kind"] == "seedlings":
            true = [[float(row[f"x{k}"]), float(row[f"y{k}"])] for k in range(1, 5)]
            assert np.allclose(noted["corners"], true, atol=0.051)
        elif row["kind"] == "lesions":
            true_ends = [float(row[k]) for k in ("bar_x1", "bar_y1", "bar_x2", "bar_y2")]
            assert np.allclose(noted["line"], true_ends, atol=0.051)
            assert noted["line_length"] == "50mm"
        else:
            assert set(noted) <= {"planted"}


@pytest.mark.parametrize("name", [n for n in NAMES if not n.startswith("dish")])
def test_marks_are_drawn_where_the_table_has_them(name: str) -> None:
    """Black squares are darkest about their listed centres; the bar is dark just inside its ends, light beyond."""
    grey = cv2.imread(str(FOLDER / f"{name}.jpg"), cv2.IMREAD_GRAYSCALE)
    assert grey is not None
    row = rows()[name]
    if name.startswith("plot"):
        for k in range(1, 5):
            x, y = float(row[f"x{k}"]), float(row[f"y{k}"])
            assert 48 < x < grey.shape[1] - 48
            assert 48 < y < grey.shape[0] - 48
            v, u = np.mgrid[round(y) - 36 : round(y) + 37, round(x) - 36 : round(x) + 37]
            near = grey[v, u] < 75
            near &= np.maximum(abs(u - x), abs(v - y)) < 30
            assert abs(float(u[near].mean()) - x) < 1.5
            assert abs(float(v[near].mean()) - y) < 1.5
        return
    ends = np.array(
        [[float(row["bar_x1"]), float(row["bar_y1"])], [float(row["bar_x2"]), float(row["bar_y2"])]]
    )
    along = (ends[1] - ends[0]) / np.hypot(*(ends[1] - ends[0]))
    for end, outward in ((ends[0], -along), (ends[1], along)):
        inside, outside = (end + s * outward for s in (-8, 8))
        assert (
            grey[round(inside[1]), round(inside[0])]
            < 100
            < grey[round(outside[1]), round(outside[0])]
        )


@pytest.mark.parametrize("name", ["dish_04", "plot_02"])
def test_the_same_seed_gives_the_same_truth(name: str, drawing: ModuleType, tmp_path: Path) -> None:
    again = drawing.records.true_objects(drawing.shots()[name])
    drawing.records.write_objects(tmp_path / "again.csv", again)
    assert (tmp_path / "again.csv").read_bytes() == (FOLDER / "truth" / f"{name}.csv").read_bytes()


@pytest.mark.parametrize("name", ["dish_05", "leaf_02"])
def test_the_same_seed_gives_the_same_pixels(name: str, drawing: ModuleType) -> None:
    shot = drawing.shots()[name]
    first, second = (drawing.draw(shot, shrink=0.2) for _ in range(2))
    assert np.array_equal(first, second)
    assert first.std() > 10


def test_the_shipped_photograph_is_the_drawn_one(drawing: ModuleType) -> None:
    shot = drawing.shots()["dish_05"]
    stored = cv2.imread(str(FOLDER / "dish_05.jpg"))
    assert stored is not None
    drawn = drawing.draw(shot)[..., ::-1]
    assert np.abs(stored.astype(np.int16) - drawn).mean() < 3


def test_only_one_photograph_is_redrawn_when_asked(
    drawing: ModuleType, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    real = drawing.draw
    monkeypatch.setattr(drawing, "draw", lambda shot: real(shot, shrink=0.1))
    assert drawing.main(["--out", str(tmp_path), "--only", "dish_05"]) == 0
    assert [p.name for p in tmp_path.glob("*.jpg")] == ["dish_05.jpg"]
    assert (tmp_path / "truth" / "dish_05.csv").read_text() == "x,y,r\n"
    assert (tmp_path / "survey.toml").read_bytes() == (FOLDER / "survey.toml").read_bytes()
    assert (tmp_path / "truth" / "trial.csv").read_bytes() == (
        FOLDER / "truth" / "trial.csv"
    ).read_bytes()


def test_nonsense_is_refused(drawing: ModuleType) -> None:
    camera = importlib.import_module("camera")
    patterns = importlib.import_module("patterns")
    with pytest.raises(ValueError, match="needs a positive size, scale and distance"):
        camera.Camera(width=0, height=10, px_per_mm=1, distance_mm=100)
    with pytest.raises(ValueError, match="tilt is 50 degrees"):
        camera.Camera(width=10, height=10, px_per_mm=1, distance_mm=100, tilt_deg=50)
    with pytest.raises(ValueError, match=r"least distance is 0\.5 radii"):
        patterns.Plan(kind="random", radii_mm=np.ones(3), nearest=0.5)
    with pytest.raises(ValueError, match="rising order"):
        patterns.Ground(
            bounds=(1, 0, 0, 1), inside=lambda p: p[:, 0] > 0, study=lambda p: p[:, 0] > 0
        )


def test_the_camera_maps_circles_to_the_ellipse_it_reports(drawing: ModuleType) -> None:
    camera = importlib.import_module("camera").Camera(
        width=900, height=800, px_per_mm=8, distance_mm=300, tilt_deg=12, towards_deg=40, roll_deg=9
    )
    around = np.linspace(0, 2 * np.pi, 200)
    seen = camera.to_pixels(43 * np.column_stack([np.cos(around), np.sin(around)]), z_mm=4.0)
    (cx, cy), (d1, d2), _ = cv2.fitEllipse(seen.astype(np.float32))
    ring = camera.circle(43, z_mm=4.0)
    assert np.allclose([ring.cx, ring.cy], [cx, cy], atol=0.02)
    assert np.allclose(sorted([ring.semi_a, ring.semi_b]), sorted([d1 / 2, d2 / 2]), atol=0.02)
    assert np.allclose(camera.to_mm(seen, z_mm=4.0)[0], [43, 0], atol=1e-9)
