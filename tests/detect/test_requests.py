"""What is asked of a photograph: typed values, and what becomes of them in a picture."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest

from detect.errors import AreaNotFound, AreaWrong, OptionWrong
from detect.lengths import Length
from detect.planted import PlantedOptions
from detect.requests import DetectRequest, detect_photograph, parse_request, tool_version
from detect.wanted import DetectOptions
from tests.discs import DIAMETER, HEIGHT, WIDTH, scattered, write_discs
from tests.scenes import DISHES

CORNERS = [[20, 20], [400, 25], [395, 300], [25, 295]]


def test_nothing_asked_means_the_defaults() -> None:
    assert parse_request({}) == DetectRequest()
    assert parse_request({"kind": None, "dish": None}) == DetectRequest()
    assert DetectRequest().options == DetectOptions()
    assert DetectRequest().where == "frame"


def test_texts_and_numbers_are_read() -> None:
    request = parse_request(
        {
            "kind": "seedlings",
            "diameter": "12-36mm",
            "colour": "green",
            "highest_doubt": 0.3,
            "corners": CORNERS,
            "plot": "1000x750mm",
            "inset": "5px",
        }
    )
    assert request.options.kind == "seedlings"
    assert request.options.diameter == (Length(12, "mm"), Length(36, "mm"))
    assert request.scale.plot == (Length(1000, "mm"), Length(750, "mm"))
    assert request.scale.corners == ((20, 20), (400, 25), (395, 300), (25, 295))
    assert request.area.inset == Length(5, "px")
    assert request.where == "plot"


def test_the_command_line_spells_the_same_request() -> None:
    typed = {"corners": "20,20,400,25, 395,300,25,295", "plot": "100x75cm", "highest_doubt": "0.3"}
    recipe = {"corners": CORNERS, "plot": "100x75cm", "highest_doubt": 0.3}
    assert parse_request(typed) == parse_request(recipe)


@pytest.mark.parametrize(
    ("values", "where"),
    [
        ({"dish": "86mm"}, "dish"),
        ({"corners": CORNERS, "plot": "10x7cm"}, "plot"),
        ({"dish": "86mm", "area": "frame"}, "frame"),
        ({"line": [0, 0, 10, 0], "line_length": "1cm"}, "frame"),
        ({"area": "leaf", "mm_per_pixel": 0.1}, "leaf"),
        ({"corners": "plates", "plot": "10x7cm"}, "plot"),
        ({"corners": "fiducials", "plot": "10x7cm", "area": "frame"}, "frame"),
        ({"ruler": "50mm"}, "frame"),
    ],
)
def test_the_area_goes_with_the_scale_unless_named(values: dict[str, Any], where: str) -> None:
    assert parse_request(values).where == where


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"kind": "stars"}, "KIND must be one of colonies, seedlings, lesions, spots, not 'stars'"),
        ({"colour": "pink"}, r"COLOUR must be one of auto, grey, .*, not 'pink'"),
        ({"polarity": 1}, "POLARITY must be one of auto, dark, bright, not 1"),
        ({"diameter": "6-2mm"}, "DIAMETER must run from small to large"),
        ({"diameter": "nan-2mm"}, "DIAMETER must be positive and finite"),
        ({"diameter": 5}, "DIAMETER must be two lengths with a unit such as 2-6mm, not '5'"),
        ({"highest_doubt": "1.5"}, "HIGHEST_DOUBT must be a number from 0 to 1, not '1.5'"),
        ({"highest_doubt": "nan"}, "HIGHEST_DOUBT must be a number from 0 to 1"),
        ({"mm_per_pixel": "-0.1"}, "MM_PER_PIXEL must be a positive number, not '-0.1'"),
        ({"mm_per_pixel": "nan"}, "MM_PER_PIXEL must be a positive number, not 'nan'"),
        ({"mm_per_pixel": "inf"}, "MM_PER_PIXEL must be a positive number, not 'inf'"),
        ({"mm_per_pixel": True}, "MM_PER_PIXEL must be a positive number, not True"),
        ({"dish": 86}, "DISH needs a unit"),
        ({"dish": "86px"}, "86px is in pixels, but millimetres are needed"),
        ({"dish": "-86mm"}, "DISH must be positive and finite"),
        ({"line": "1,2,3"}, "LINE must be 4 numbers with commas between, not '1,2,3'"),
        ({"line": "1,2,3,nan"}, "LINE must be 4 numbers with commas between"),
        ({"line": 5}, "LINE must be 4 numbers with commas between, not 5"),
        (
            {"corners": "found"},
            "CORNERS must be 8 numbers with commas between, or plates or fiducials",
        ),
        ({"ruler": "50px"}, "50px is in pixels, but millimetres are needed"),
        ({"ruler": "50mm", "dish": "86mm"}, "DISH and RULER both tell the scale; keep one"),
        ({"corners": "plates"}, "CORNERS needs PLOT beside it; give both"),
        (
            {"height": "30m"},
            "HEIGHT needs FOCAL_LENGTH and SENSOR_WIDTH beside it; give all three",
        ),
        ({"height": "30"}, "HEIGHT needs a unit: '30' could be px, mm, cm or m; write 30m[.]"),
        ({"sensor_width": "13mm", "focal_length": "9mm"}, "FOCAL_LENGTH needs HEIGHT beside it"),
        (
            {"scale_uncertainty": "1%"},
            "SCALE_UNCERTAINTY says more about a scale, but none is given",
        ),
        ({"scale_uncertainty": "1", "mm_per_pixel": 1}, "must be a share of a length above 0%"),
        ({"scale_uncertainty": 0.01, "mm_per_pixel": 1}, "such as 1%, not 0.01"),
        (
            {"scale_uncertainty": "100%", "mm_per_pixel": 1},
            "above 0% and below 100% such as 1%, not '100%'",
        ),
        ({"scale_uncertainty": "nan%", "mm_per_pixel": 1}, "such as 1%, not 'nan%'"),
        ({"corners": [[1, 2], [3, 4]]}, r"CORNERS must be 8 numbers with commas between, not \[\["),
        ({"plot": "1000mm"}, "PLOT must be two lengths with a unit such as 1000x750mm"),
        ({"area": "moon"}, "AREA must be one of dish, frame, plot, leaf or a GeoJSON file"),
        ({"area": "moon.geojson"}, r"AREA names the file moon\.geojson, which does not exist"),
        ({"inset": "0mm"}, "INSET must be positive and finite"),
        ({"moons": 1}, "MOONS is not known; use one of kind, diameter"),
        (
            {"dish": "86mm", "mm_per_pixel": 1},
            "MM_PER_PIXEL and DISH both tell the scale; keep one of them",
        ),
        (
            {"line": "1,2,3,4"},
            "LINE needs LINE_LENGTH beside it; give both",
        ),
        ({"line_length": "5mm"}, "LINE_LENGTH needs LINE beside it; give both"),
        (
            {"corners": CORNERS},
            "CORNERS needs PLOT beside it; give both",
        ),
        ({"plot": "10x7cm"}, "PLOT needs CORNERS beside it; give both"),
        ({"area": "plot"}, "The area plot needs the positions of its corners and its size"),
        ({"inset": "5px"}, "The inset 5px has no edge to step in from; give an area as well"),
        (
            {"cut_dish": "use", "area": "leaf"},
            r"a cut dish \(use\) is said, but no dish is looked for",
        ),
        ({"cut_dish": "perhaps", "dish": "9cm"}, "CUT_DISH must be one of refuse, use, not"),
        ({"inset": "1mm", "mm_per_pixel": 0.1}, "The inset 1mm has no edge to step in from"),
    ],
)
def test_what_cannot_be_or_apply_is_refused(values: dict[str, Any], message: str) -> None:
    with pytest.raises(OptionWrong, match=message):
        parse_request(values, named=str.upper)


def test_a_request_is_remembered_in_plain_words(tmp_path: Path) -> None:
    (tmp_path / "a.geojson").write_text("{}")
    request = parse_request(
        {"diameter": "12-36mm", "line": [1, 2, 3, 4], "line_length": "5cm", "area": "a.geojson"},
        folder=tmp_path,
    )
    asked = request.as_dict()
    assert asked["diameter"] == ["12mm", "36mm"]
    assert asked["line"] == [1, 2, 3, 4]
    assert asked["line_length"] == "5cm"
    assert asked["area"] == "a.geojson"
    assert len(asked["area_sha256"]) == 64
    assert "dish" not in asked
    assert json.loads(json.dumps(asked)) == asked


def test_another_polygon_in_the_same_file_is_another_request(tmp_path: Path) -> None:
    file = tmp_path / "a.geojson"
    file.write_text("{}")
    request = parse_request({"area": str(file)})
    first = request.as_dict()
    file.write_text("{ }")
    assert request.as_dict() != first


def test_spots_are_found_and_put_on_a_sheet(tmp_path: Path) -> None:
    places = scattered(30, seed=1)
    path = write_discs(tmp_path / "a.png", places)
    photograph, sheet = detect_photograph(
        path, parse_request({"diameter": DIAMETER, "mm_per_pixel": 0.2})
    )
    assert len(sheet.spots) == 30
    order = [int(np.argmin(np.hypot(*(sheet.spots.centres - place).T))) for place in places]
    assert sorted(order) == list(range(30))
    assert np.abs(sheet.spots.centres[order] - places).max() < 1.0
    assert sheet.photograph.sha256 == photograph.sha256
    assert (sheet.photograph.width, sheet.photograph.height) == (WIDTH, HEIGHT)
    assert sheet.area.kind == "frame"
    assert sheet.area.polygon.area == WIDTH * HEIGHT
    assert sheet.scale is not None
    assert sheet.scale.mm_per_px([[5, 5]])[0] == pytest.approx(0.2)
    assert sheet.settings["request"] == {
        "kind": "spots", "diameter": ["10px", "24px"], "colour": "auto", "polarity": "auto",
        "mm_per_pixel": 0.2, "area": "frame",
    }  # fmt: skip
    assert sheet.tool_version == tool_version()
    json.dumps(sheet.settings, allow_nan=False)


def test_an_inset_steps_in_by_the_scale_of_the_picture(tmp_path: Path) -> None:
    path = write_discs(tmp_path / "a.png", scattered(30, seed=1))
    values = {"diameter": DIAMETER, "area": "frame", "inset": "4mm", "mm_per_pixel": 0.2}
    _, sheet = detect_photograph(path, parse_request(values))
    assert sheet.area.polygon.bounds == pytest.approx((19.5, 19.5, WIDTH - 20.5, HEIGHT - 20.5))
    with pytest.raises(
        OptionWrong, match="4mm cannot be turned into pixels, for no scale is known"
    ):
        detect_photograph(path, parse_request(values | {"mm_per_pixel": None}))


def test_a_line_and_corners_give_the_scale(tmp_path: Path) -> None:
    path = write_discs(tmp_path / "a.png", scattered(30, seed=1))
    line = {"diameter": DIAMETER, "line": "10,10,210,10", "line_length": "5cm"}
    _, by_line = detect_photograph(path, parse_request(line))
    assert by_line.scale is not None
    assert by_line.scale.mm_per_px([[0, 0]])[0] == pytest.approx(0.25)
    corners = {"diameter": DIAMETER, "corners": "20,20,400,20,400,300,20,300", "plot": "190x140mm"}
    _, by_corners = detect_photograph(path, parse_request(corners))
    assert by_corners.scale is not None
    assert by_corners.scale.to_mm([[400, 300]]) == pytest.approx(np.array([[190, 140]]))
    assert by_corners.area.kind == "plot"
    assert by_corners.area.polygon.area == pytest.approx(380 * 280)


def test_a_polygon_says_where_spots_count(tmp_path: Path) -> None:
    places = scattered(30, seed=1)
    path = write_discs(tmp_path / "a.png", places)
    ring = [[0, 0], [200, 0], [200, 300], [0, 300], [0, 0]]
    (tmp_path / "a.geojson").write_text(json.dumps({"type": "Polygon", "coordinates": [ring]}))
    values = {"diameter": DIAMETER, "area": "a.geojson"}
    _, sheet = detect_photograph(path, parse_request(values, folder=tmp_path))
    inside = (places[:, 0] <= 200) & (places[:, 1] <= 300)
    assert len(sheet.spots) == inside.sum()
    crossing = [[0, 0], [200, 300], [200, 0], [0, 300], [0, 0]]
    (tmp_path / "a.geojson").write_text(json.dumps({"type": "Polygon", "coordinates": [crossing]}))
    with pytest.raises(AreaWrong):
        detect_photograph(path, parse_request(values, folder=tmp_path))


def test_no_dish_in_the_picture_fails_the_photograph(tmp_path: Path) -> None:
    path = write_discs(tmp_path / "a.png", scattered(30, seed=1))
    with pytest.raises(AreaNotFound):
        detect_photograph(path, parse_request({"dish": "86mm", "diameter": DIAMETER}))


@pytest.mark.parametrize(
    ("value", "rounds"), [(True, 8), (7, 7), ("7", 7), (False, None), (None, None)]
)
def test_planted_objects_are_asked_for_by_true_or_a_number(value: Any, rounds: int | None) -> None:
    request = parse_request({"planted": value})
    assert request.planted == (None if rounds is None else PlantedOptions(rounds=rounds))
    assert request.as_dict().get("planted") == rounds


@pytest.mark.parametrize("value", ["yes", 2.5, -3, [2], "1e3"])
def test_other_words_for_planted_objects_are_refused(value: Any) -> None:
    with pytest.raises(OptionWrong, match="planted must be a whole number of rounds such as 8"):
        parse_request({"planted": value})


def test_a_cut_dish_is_used_on_request_and_every_output_is_told(tmp_path: Path) -> None:
    path = tmp_path / "cut.png"
    scene = replace(DISHES["red agar on white"], cx=300.0, n_colonies=25)
    cv2.imwrite(str(path), scene.draw().stored[..., ::-1])
    values = {"dish": "86mm", "kind": "colonies", "cut_dish": "use"}
    _, sheet = detect_photograph(path, parse_request(values))
    assert sheet.area.kind == "polygon"
    assert "of the dish's edge lie beyond the frame" in sheet.area.note
    assert len(sheet.settings["dish"]) == 1
    assert sheet.settings["request"]["cut_dish"] == "use"
    with pytest.raises(AreaNotFound, match=r"is cut by the frame .* \(--cut-dish use\)[.]$"):
        detect_photograph(path, parse_request({**values, "cut_dish": "refuse"}))
