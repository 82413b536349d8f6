"""Finding the leaf: its outline and holes against drawn truth, and refusals."""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely
from shapely.geometry import Polygon

from detect.errors import AreaNotFound
from detect.leaf import find_leaf
from detect.photograph import Photograph, read_photograph
from tests.scenes import LEAVES, photograph_of, plain_noise, soil, text_page

OUTLINES = Path(__file__).parents[2] / "sample_images" / "truth" / "outlines"


def mask_of(outline: Polygon, photograph: Photograph) -> np.ndarray:
    y, x = np.mgrid[: photograph.height, : photograph.width]
    inside = shapely.contains_xy(outline, x.ravel(), y.ravel())
    return np.asarray(inside).reshape(y.shape)


@pytest.mark.parametrize("name", LEAVES)
def test_the_blade_is_found(name: str) -> None:
    scene = LEAVES[name]
    photograph, truth = scene.draw()
    found = find_leaf(photograph)
    mask = mask_of(found, photograph)
    assert abs(found.area / truth.sum() - 1) < 0.02
    assert (mask & truth).sum() / (mask | truth).sum() > 0.97
    assert len(found.interiors) == scene.n_holes


def test_lesions_stay_in_the_leaf() -> None:
    photograph, truth = LEAVES["no stalk, many lesions"].draw()
    mask = mask_of(find_leaf(photograph), photograph)
    assert (mask & truth).sum() / truth.sum() > 0.99


def test_the_ruler_and_the_shadow_stay_out() -> None:
    photograph, _ = LEAVES["white paper"].draw()
    mask = mask_of(find_leaf(photograph), photograph)
    assert not mask[photograph.height - 75 :, :430].any()
    dark, _ = replace(LEAVES["white paper"], shadow=0.6).draw()
    assert find_leaf(dark).area == pytest.approx(find_leaf(photograph).area, rel=0.015)


def test_the_size_of_the_photograph_makes_little_difference() -> None:
    photograph, _ = LEAVES["grey board"].draw()
    double = photograph_of(photograph.stored.repeat(2, axis=0).repeat(2, axis=1))
    assert find_leaf(double).area == pytest.approx(4 * find_leaf(photograph).area, rel=0.005)


@pytest.mark.skipif(not OUTLINES.exists(), reason="sample_images lie beside the source tree only")
@pytest.mark.parametrize("stem", ["leaf_01", "leaf_02", "leaf_03"])
def test_the_sample_leaves_agree_with_their_outlines(stem: str) -> None:
    with (OUTLINES / f"{stem}.csv").open(encoding="utf-8", newline="") as file:
        points = [(float(row["x"]), float(row["y"])) for row in csv.DictReader(file)]
    truth = Polygon(points)
    found = find_leaf(read_photograph(OUTLINES.parents[1] / f"{stem}.jpg"))
    whole = Polygon(found.exterior)
    assert abs(whole.area / truth.area - 1) < 0.02
    assert whole.intersection(truth).area / whole.union(truth).area > 0.97
    assert len(found.interiors) >= 1


def blotches(side: int) -> Photograph:
    """Many green blotches of one size on white."""
    image = np.full((400, 600, 3), 0.9)
    for row in range(40, 320, 130):
        for column in range(40, 480, 130):
            image[row : row + side, column : column + side] = (0.2, 0.5, 0.1)
    return photograph_of(image)


def block(rows: slice, columns: slice) -> Photograph:
    """One green block on white."""
    image = np.full((400, 600, 3), 0.9)
    image[rows, columns] = (0.2, 0.5, 0.1)
    return photograph_of(image)


@pytest.mark.parametrize(
    ("picture", "message"),
    [
        (soil(), r"No leaf is seen in scene\.png: \d+ % of the picture's margin differ from the"),
        (
            plain_noise(),
            r"No leaf is seen in scene\.png: nothing stands out from its background; p",
        ),
        (photograph_of(np.full((300, 400), 0.5)), "nothing stands out from its background"),
        (text_page(), r"the largest piece fills \d\.\d % of the picture, not 2 to 90 %; photo"),
        (block(slice(100, 120), slice(100, 120)), r"the largest piece fills 0\.\d % of the pict"),
        (blotches(90), r"its largest piece is only \d+ % of what stands out; photograph one leaf"),
        (
            block(slice(0, 300), slice(0, 160)),
            r"The leaf in scene\.png is cut by the frame along \d+ % of its outline; photograph it",
        ),
    ],
    ids=["soil", "noise", "blank", "text", "tiny", "many", "cut"],
)
def test_where_no_leaf_is_none_is_found(picture: Photograph, message: str) -> None:
    with pytest.raises(AreaNotFound, match=message):
        find_leaf(picture)
